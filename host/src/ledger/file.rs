//! The ledger's file: is it one of ours, and of which version? A file that is not ours is not even opened by SQLite.

use std::fs::File;
use std::io::{ErrorKind, Read};
use std::path::{Path, PathBuf};
use std::time::{Duration, Instant};

use etcetera::BaseStrategy;
use rusqlite::backup::Backup;
use rusqlite::{Connection, ErrorCode, OpenFlags, TransactionBehavior};

use super::LedgerError;

/// "Done" in ASCII, at the place where SQLite keeps the number of the application that a file belongs to.
const APPLICATION_ID: u32 = u32::from_be_bytes(*b"Done");

/// The tables' history: the n-th file leads to version n.
const MIGRATIONS: [&str; 2] =
    [include_str!("migrations/0001_records.sql"), include_str!("migrations/0002_chain.sql")];

/// The version that this command writes.
const VERSION: u32 = MIGRATIONS.len() as u32;

/// How long another program's transaction is waited for.
const BUSY: Duration = Duration::from_secs(5);

/// `donelight/ledger.sqlite` in the user's data folder; the folder is made if need be.
pub(super) fn default_path() -> Result<PathBuf, LedgerError> {
    let data = etcetera::choose_base_strategy().map_err(|_| LedgerError::NoDataFolder)?.data_dir();
    Ok(data.join("donelight").join("ledger.sqlite"))
}

/// What the first bytes of a file tell.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Head {
    /// There is no file, or an empty one.
    Nothing,
    Ours {
        version: u32,
    },
    Foreign,
}

/// SQLite, Database File Format, section 1.3: a magic text, the user version at byte 60, the application id at byte 68,
/// both big endian.
fn head(path: &Path) -> Result<Head, LedgerError> {
    let mut file = match File::open(path) {
        Ok(file) => file,
        Err(error) if error.kind() == ErrorKind::NotFound => return Ok(Head::Nothing),
        Err(error) => return Err(LedgerError::io(path, &error, "read")),
    };
    let mut bytes = Vec::new();
    match file.by_ref().take(100).read_to_end(&mut bytes) {
        Ok(_) => {}
        Err(error) if error.kind() == ErrorKind::IsADirectory => return Ok(Head::Foreign),
        Err(error) => return Err(LedgerError::io(path, &error, "read")),
    }
    let number =
        |at: usize| bytes.get(at..).and_then(<[u8]>::first_chunk::<4>).map(|b| u32::from_be_bytes(*b));
    Ok(match (number(60), number(68)) {
        _ if bytes.is_empty() => Head::Nothing,
        (Some(version), Some(APPLICATION_ID)) if bytes.starts_with(b"SQLite format 3\0") => {
            Head::Ours { version }
        }
        _ => Head::Foreign,
    })
}

fn refuse_unknown(path: &Path, head: Head) -> Result<(), LedgerError> {
    match head {
        Head::Foreign => Err(LedgerError::Foreign(path.to_owned())),
        Head::Ours { version } if version > VERSION => Err(newer(path, version)),
        Head::Nothing | Head::Ours { .. } => Ok(()),
    }
}

fn newer(path: &Path, version: u32) -> LedgerError {
    LedgerError::Newer { path: path.to_owned(), version, known: VERSION }
}

/// Opens the ledger to write it; makes it if there is none.
pub(super) fn open(path: &Path) -> Result<Connection, LedgerError> {
    let folder = path.parent().filter(|folder| !folder.as_os_str().is_empty());
    if folder.is_some_and(|folder| !folder.is_dir()) {
        return Err(LedgerError::NoFolder(path.to_owned()));
    }
    refuse_unknown(path, head(path)?)?;
    let failed = |error: rusqlite::Error| match error.sqlite_error_code() {
        Some(ErrorCode::CannotOpen) => LedgerError::Permission { path: path.to_owned(), wanted: "written" },
        _ => LedgerError::sqlite(path, &error),
    };
    let flags = OpenFlags::SQLITE_OPEN_READ_WRITE | OpenFlags::SQLITE_OPEN_CREATE;
    let mut connection = Connection::open_with_flags(path, flags).map_err(failed)?;
    connection.busy_timeout(BUSY).map_err(failed)?;
    if connection.is_readonly("main").map_err(failed)? {
        return Err(LedgerError::Permission { path: path.to_owned(), wanted: "written" });
    }
    connection.pragma_update(None, "synchronous", "FULL").map_err(failed)?;
    connection.pragma_update(None, "foreign_keys", "ON").map_err(failed)?;
    // Before anything is changed.
    check(path, &connection)?;
    migrate(path, &mut connection, &failed)?;
    write_ahead(&connection).map_err(failed)?;
    Ok(connection)
}

/// Opens the ledger to replace all of it; makes it if there is none. What it holds is not looked at: it may be damaged.
pub(super) fn open_to_replace(path: &Path) -> Result<Connection, LedgerError> {
    let folder = path.parent().filter(|folder| !folder.as_os_str().is_empty());
    if folder.is_some_and(|folder| !folder.is_dir()) {
        return Err(LedgerError::NoFolder(path.to_owned()));
    }
    refuse_unknown(path, head(path)?)?;
    let failed = |error: rusqlite::Error| LedgerError::sqlite(path, &error);
    let connection = Connection::open(path).map_err(failed)?;
    connection.busy_timeout(BUSY).map_err(failed)?;
    connection.pragma_update(None, "synchronous", "FULL").map_err(failed)?;
    Ok(connection)
}

/// Opens the ledger to read it; it, and the folder around it, may be read-only.
pub(super) fn open_to_read(path: &Path) -> Result<Connection, LedgerError> {
    match head(path)? {
        Head::Nothing => return Err(LedgerError::Missing(path.to_owned())),
        head => refuse_unknown(path, head)?,
    }
    let failed = |error: rusqlite::Error| LedgerError::sqlite(path, &error);
    // SQLite itself falls back to reading where it may not write; where it may, it takes its index file away at the end.
    let connection = Connection::open_with_flags(path, OpenFlags::SQLITE_OPEN_READ_WRITE).map_err(failed)?;
    connection.busy_timeout(BUSY).map_err(failed)?;
    connection.pragma_update(None, "query_only", "ON").map_err(failed)?;
    match version(&connection) {
        Ok(version) if version > VERSION => Err(newer(path, version)),
        Ok(VERSION) => Ok(connection),
        Ok(_) => brought_up(path, &connection),
        // The folder cannot take the index file that readers of a write-ahead log share. Without such a log the file
        // alone is the whole ledger.
        Err(error) if cannot_share(&error) && !has_log(path) => immutable(path).map_err(failed),
        Err(error) => Err(failed(error)),
    }
}

/// An earlier version's ledger, brought up in memory; the file stays as it is.
fn brought_up(path: &Path, connection: &Connection) -> Result<Connection, LedgerError> {
    let failed = |error: rusqlite::Error| LedgerError::sqlite(path, &error);
    let mut copy = Connection::open_in_memory().map_err(failed)?;
    let copying = Backup::new(connection, &mut copy).map_err(failed)?;
    // All pages in one step.
    copying.step(-1).map_err(failed)?;
    drop(copying);
    migrate(path, &mut copy, &failed)?;
    Ok(copy)
}

fn cannot_share(error: &rusqlite::Error) -> bool {
    matches!(error.sqlite_error_code(), Some(ErrorCode::CannotOpen | ErrorCode::ReadOnly))
}

fn has_log(path: &Path) -> bool {
    let mut log = path.as_os_str().to_owned();
    log.push("-wal");
    std::fs::metadata(log).is_ok_and(|log| log.len() > 0)
}

fn immutable(path: &Path) -> rusqlite::Result<Connection> {
    let mut uri = "file:".to_owned();
    for byte in path.as_os_str().as_encoded_bytes() {
        match byte {
            b'a'..=b'z' | b'A'..=b'Z' | b'0'..=b'9' | b'/' | b'.' | b'_' | b'-' => {
                uri.push(char::from(*byte))
            }
            _ => uri.push_str(&format!("%{byte:02x}")),
        }
    }
    uri.push_str("?immutable=1");
    let flags = OpenFlags::SQLITE_OPEN_READ_ONLY | OpenFlags::SQLITE_OPEN_URI;
    Connection::open_with_flags(uri, flags)
}

fn version(connection: &Connection) -> rusqlite::Result<u32> {
    connection.pragma_query_value(None, "user_version", |row| row.get(0))
}

/// Brings the tables to this command's version, in one transaction. Until then the file has a rollback journal, so that
/// its head, which [`head`] reads, is never behind.
fn migrate(
    path: &Path,
    connection: &mut Connection,
    failed: &impl Fn(rusqlite::Error) -> LedgerError,
) -> Result<(), LedgerError> {
    if version(connection).map_err(failed)? == VERSION {
        return Ok(());
    }
    // Read again within the transaction: another program may have done it meanwhile.
    let step = connection.transaction_with_behavior(TransactionBehavior::Immediate).map_err(failed)?;
    let from = version(&step).map_err(failed)?;
    if from > VERSION {
        return Err(newer(path, from));
    }
    for migration in MIGRATIONS.iter().skip(from as usize) {
        step.execute_batch(migration).map_err(failed)?;
    }
    step.pragma_update(None, "application_id", APPLICATION_ID).map_err(failed)?;
    step.pragma_update(None, "user_version", VERSION).map_err(failed)?;
    step.commit().map_err(failed)
}

/// Readers then do not wait for a pull. A file system that cannot do it keeps the rollback journal, which is as safe.
fn write_ahead(connection: &Connection) -> rusqlite::Result<()> {
    let end = Instant::now() + BUSY;
    loop {
        // SQLite does not wait by itself here.
        match connection.pragma_update_and_check(None, "journal_mode", "WAL", |_| Ok(())) {
            Err(error)
                if error.sqlite_error_code() == Some(ErrorCode::DatabaseBusy) && Instant::now() < end =>
            {
                std::thread::sleep(Duration::from_millis(20));
            }
            other => return other,
        }
    }
}

/// Looks through all pages, so that nothing is committed to a file that could not give it back.
pub(super) fn check(path: &Path, connection: &Connection) -> Result<(), LedgerError> {
    let first: String = connection
        .pragma_query_value(None, "quick_check", |row| row.get(0))
        .map_err(|error| LedgerError::sqlite(path, &error))?;
    if first == "ok" { Ok(()) } else { Err(LedgerError::Damaged { path: path.to_owned(), reason: first }) }
}
