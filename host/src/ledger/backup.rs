//! A ledger's copy, and a ledger made anew from one: whole or not at all, by SQLite's own online backup, so that a pull
//! may go on meanwhile.

use std::io;
use std::path::{Path, PathBuf};

use donelight_core::record::Seq;
use donelight_core::wire::StationId;
use rusqlite::{Connection, MAIN_DB};

use super::verify::{Misfit, Verified};
use super::{Ledger, LedgerError, file};
use crate::files::{self, WriteError};
use crate::output::{Exit, Explain};

/// A copy that was made.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Saved {
    /// What its records come to.
    pub stations: Vec<Verified>,
}

impl Saved {
    /// Records of all stations together.
    #[must_use]
    pub fn records(&self) -> u64 {
        self.stations.iter().map(|station| u64::from(station.records)).sum()
    }
}

/// Records that a ledger has and a backup has not.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Lack {
    /// Whose.
    pub station: StationId,
    /// How many.
    pub records: u32,
    /// The first of them.
    pub first: Seq,
    /// The last of them.
    pub last: Seq,
}

/// Why no copy was made, or no ledger restored. What was there before is still there.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum BackupError {
    /// A ledger cannot be used.
    #[error(transparent)]
    Ledger(#[from] LedgerError),
    /// The copy cannot be written.
    #[error(transparent)]
    Write(#[from] WriteError),
    /// The backup itself does not fit.
    #[error("{}: record {} of station {station} does not fit: {}", .path.display(), .misfit.seq, .misfit.why)]
    Misfit {
        /// The backup.
        path: PathBuf,
        /// Whose record.
        station: StationId,
        /// Which.
        misfit: Misfit,
    },
    /// The ledger has records that the backup lacks.
    #[error("the ledger {} has records that the backup lacks: {}", .path.display(), lacks_text(.lacks))]
    Lacks {
        /// The ledger.
        path: PathBuf,
        /// Which records.
        lacks: Vec<Lack>,
    },
    /// What the ledger has that the backup lacks cannot be told.
    #[error("what the ledger {} holds beyond the backup cannot be told: {cause}", .path.display())]
    Unreadable {
        /// The ledger.
        path: PathBuf,
        /// Why.
        cause: LedgerError,
    },
}

fn lacks_text(lacks: &[Lack]) -> String {
    let text = |lack: &Lack| {
        format!("{} of station {} from {} to {}", lack.records, lack.station, lack.first, lack.last)
    };
    lacks.iter().map(text).collect::<Vec<_>>().join("; ")
}

impl Explain for BackupError {
    fn kind(&self) -> &'static str {
        match self {
            Self::Ledger(error) => error.kind(),
            Self::Write(error) => error.kind(),
            Self::Misfit { .. } => "backup-damaged",
            Self::Lacks { .. } => "backup-lacks-records",
            Self::Unreadable { .. } => "ledger-damaged",
        }
    }

    fn help(&self) -> String {
        match self {
            Self::Ledger(error) => error.help(),
            Self::Write(error) => error.help(),
            Self::Misfit { .. } => "Nothing was restored. Take another backup.".to_owned(),
            Self::Lacks { .. } | Self::Unreadable { .. } => {
                "Nothing was restored. Restore into another file with --ledger FILE, or give these records up with \
                 --discard; a copy of the ledger's file first does no harm."
                    .to_owned()
            }
        }
    }

    fn exit(&self) -> Exit {
        match self {
            Self::Write(error) => error.exit(),
            _ => Exit::Refused,
        }
    }
}

impl Ledger {
    /// Copies this ledger into a new file, which is there whole or not at all. `replace`: also where there is one.
    ///
    /// # Errors
    /// See [`BackupError`].
    pub fn backup(&self, out: &Path, replace: bool) -> Result<Saved, BackupError> {
        files::keep_apart(out, &[self.path()])?;
        if !replace && out.exists() {
            return Err(WriteError::Exists { path: out.to_owned() }.into());
        }
        let refused = |error: io::Error| WriteError::Refused { path: out.to_owned(), error };
        let folder =
            tempfile::Builder::new().prefix(".donelight-").tempdir_in(folder_of(out)).map_err(refused)?;
        let copy = folder.path().join("backup.sqlite");
        let failed = |error: rusqlite::Error| LedgerError::sqlite(out, &error);
        let untold = None::<fn(rusqlite::backup::Progress)>;
        self.connection.backup(MAIN_DB, &copy, untold).map_err(failed)?;
        // One file, without a write-ahead log beside it.
        let connection = Connection::open(&copy).map_err(failed)?;
        connection.pragma_update_and_check(None, "journal_mode", "DELETE", |_| Ok(())).map_err(failed)?;
        connection.close().map_err(|(_, error)| failed(error))?;
        let stations = Self::open_to_read(Some(&copy))?.verify()?;
        files::move_whole(&copy, out, replace)?;
        Ok(Saved { stations })
    }

    /// Makes the ledger at `path` (`None`: the one in the user's data folder) what `backup` is, in one transaction.
    /// `discard`: also if it has records that the backup lacks, or cannot be read.
    ///
    /// # Errors
    /// See [`BackupError`].
    pub fn restore(
        backup: &Path,
        path: Option<&Path>,
        discard: bool,
    ) -> Result<(PathBuf, Saved), BackupError> {
        let path = path.map_or_else(Self::default_path, |path| Ok(path.to_owned()))?;
        files::keep_apart(&path, &[backup])?;
        let source = Self::open_to_read(Some(backup))?;
        file::check(backup, &source.connection)?;
        let stations = source.verify()?;
        if let Some((station, misfit)) =
            stations.iter().find_map(|s| s.misfit.map(|misfit| (s.station, misfit)))
        {
            return Err(BackupError::Misfit { path: backup.to_owned(), station, misfit });
        }
        match Self::open_to_read(Some(&path)) {
            Err(LedgerError::Missing(_)) => {}
            Err(error @ (LedgerError::Foreign(_) | LedgerError::Newer { .. })) => return Err(error.into()),
            _ if discard => {}
            Err(cause) => return Err(BackupError::Unreadable { path, cause }),
            Ok(ledger) => match ledger.lacks(&source) {
                Ok(lacks) if lacks.is_empty() => {}
                Ok(lacks) => return Err(BackupError::Lacks { path, lacks }),
                Err(cause) => return Err(BackupError::Unreadable { path, cause }),
            },
        }
        drop(source);
        let mut target = file::open_to_replace(&path)?;
        target
            .restore(MAIN_DB, backup, None::<fn(rusqlite::backup::Progress)>)
            .map_err(|error| LedgerError::sqlite(&path, &error))?;
        drop(target);
        drop(Self::open(Some(&path))?);
        Ok((path, Saved { stations }))
    }

    /// What this ledger has and `other` has not: records, and records under which the other has other bytes.
    fn lacks(&self, other: &Self) -> Result<Vec<Lack>, LedgerError> {
        let mut lacks = Vec::new();
        for (station, _) in self.stations()? {
            let mut lack: Option<Lack> = None;
            let mut theirs = other.bytes_of(station)?.into_iter().peekable();
            for (seq, bytes) in self.bytes_of(station)? {
                while theirs.next_if(|(other, _)| *other < seq).is_some() {}
                if theirs.next_if(|(other, kept)| *other == seq && *kept == bytes).is_none() {
                    let found = lack.get_or_insert(Lack { station, records: 0, first: seq, last: seq });
                    found.records += 1;
                    found.last = seq;
                }
            }
            lacks.extend(lack);
        }
        Ok(lacks)
    }

    fn bytes_of(&self, station: StationId) -> Result<Vec<(Seq, Vec<u8>)>, LedgerError> {
        self.rows("SELECT seq, bytes FROM records WHERE station = ?1 ORDER BY seq", [station.0], |row| {
            Ok((Seq(row.get(0)?), row.get(1)?))
        })
    }
}

fn folder_of(path: &Path) -> &Path {
    match path.parent() {
        Some(folder) if !folder.as_os_str().is_empty() => folder,
        _ => Path::new("."),
    }
}
