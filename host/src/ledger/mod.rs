//! The ledger: every record of every station, word for word, in one SQLite file; all else is derived from them on
//! reading, by the station's own state machine.
//!
//! A window of records is one transaction, synchronised to disk before it is confirmed to the station. A number is
//! never written twice: the same bytes again change nothing, other bytes are kept aside as a conflict. Each record is kept
//! with the chain's digest behind it, so that [`verify`] finds the first one that does not fit.

mod backup;
mod commit;
mod error;
mod file;
mod replay;
pub mod studies;
mod time;
pub mod verify;

use std::path::{Path, PathBuf};

use donelight_core::chain::Digest;
pub use donelight_core::record::Gap;
use donelight_core::record::{Event, Record, Seq};
use donelight_core::wire::{Hello, StationId};
use rusqlite::{Connection, TransactionBehavior, params};

pub use backup::{BackupError, Lack, Saved};
pub use error::LedgerError;
pub use studies::{Fate, Happening, Incident, Kept, Reading, SelectError, StudyKey};
pub use time::{Bounds, UnixMillis, WallTime};

/// A station is told the time anew after so long.
const CLOCK_FRESH_MS: u64 = 12 * 60 * 60 * 1_000;

/// A verified record: its number and all its bytes.
pub type Verified<'a> = (Seq, &'a [u8]);

/// Verified records in ascending order, with the chain's digest before the first of them.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Window<'a> {
    /// Before the first one.
    pub before: Digest,
    /// One behind the other, without a gap.
    pub records: Vec<Verified<'a>>,
}

/// What came of a window.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Committed {
    /// Records that were not known before.
    pub new: u32,
    /// Numbers that were left out.
    pub gaps: Vec<Gap>,
    /// Numbers under which another record is kept already. Nothing behind the first of them was taken.
    pub conflicts: Vec<Seq>,
    /// The number from which on the records do not fit the chain that is kept. It and those behind it were not taken.
    pub misfit: Option<Seq>,
}

/// An open ledger.
#[derive(Debug)]
pub struct Ledger {
    path: PathBuf,
    connection: Connection,
}

impl Ledger {
    /// The one in the user's data folder.
    ///
    /// # Errors
    /// If there is no such folder.
    pub fn default_path() -> Result<PathBuf, LedgerError> {
        file::default_path()
    }

    /// Opens the ledger, makes it if there is none, and checks its pages. `None`: the one in the user's data folder.
    ///
    /// # Errors
    /// See [`LedgerError`]; a file that is not a ledger, or a newer one, is left as it is.
    pub fn open(path: Option<&Path>) -> Result<Self, LedgerError> {
        let path = match path {
            Some(path) => path.to_owned(),
            None => {
                let path = file::default_path()?;
                if let Some(folder) = path.parent() {
                    std::fs::create_dir_all(folder)
                        .map_err(|error| LedgerError::io(folder, &error, "written"))?;
                }
                path
            }
        };
        let connection = file::open(&path)?;
        Ok(Self { path, connection })
    }

    /// Opens the ledger only to read it. `None`: the one in the user's data folder.
    ///
    /// # Errors
    /// See [`LedgerError`].
    pub fn open_to_read(path: Option<&Path>) -> Result<Self, LedgerError> {
        let path = path.map_or_else(file::default_path, |path| Ok(path.to_owned()))?;
        let connection = file::open_to_read(&path)?;
        Ok(Self { path, connection })
    }

    /// Its file.
    #[must_use]
    pub fn path(&self) -> &Path {
        &self.path
    }

    /// Enters the station, or that it was seen again.
    ///
    /// # Errors
    /// See [`LedgerError`], here and below.
    pub fn meet(&mut self, hello: &Hello, now: UnixMillis) -> Result<(), LedgerError> {
        self.connection
            .execute(
                "INSERT INTO stations (station, firmware, first_seen_ms, last_seen_ms) VALUES (?1, ?2, ?3, ?3)
                 ON CONFLICT (station) DO UPDATE SET firmware = ?2, last_seen_ms = max(last_seen_ms, ?3)",
                params![hello.station.0, hello.firmware.as_str(), now.0],
            )
            .map(|_| ())
            .map_err(|error| LedgerError::sqlite(&self.path, &error))
    }

    /// The last number of a station that is settled: its record is kept, or is known to be no longer had. 0 if there is
    /// none.
    ///
    /// # Errors
    /// See [`LedgerError`].
    pub fn last(&self, station: StationId) -> Result<Seq, LedgerError> {
        commit::last(&self.connection, station).map_err(|error| LedgerError::sqlite(&self.path, &error))
    }

    /// The last record of a station that is kept, with the chain's digest behind it.
    ///
    /// # Errors
    /// See [`LedgerError`].
    pub fn head(&self, station: StationId) -> Result<Option<(Seq, Option<Digest>)>, LedgerError> {
        commit::head(&self.connection, station).map_err(|error| LedgerError::sqlite(&self.path, &error))
    }

    /// Whether the station was told the time since its last boot, and not long ago: its clock may go wrong by some
    /// seconds a day.
    ///
    /// # Errors
    /// See [`LedgerError`].
    pub fn clock_is_set(&self, station: StationId) -> Result<bool, LedgerError> {
        let fresh = |told: u64| UnixMillis::now().to_wire().abs_diff(told) < CLOCK_FRESH_MS;
        let told = || {
            let mut query = self
                .connection
                .prepare_cached("SELECT bytes FROM records WHERE station = ?1 ORDER BY seq DESC")?;
            let mut rows = query.query([station.0])?;
            while let Some(row) = rows.next()? {
                match Record::decode(row.get_ref(0)?.as_blob()?).map(|record| record.event) {
                    Ok(Event::Clock { unix_ms }) => return Ok(fresh(unix_ms)),
                    Ok(Event::Boot { .. }) => return Ok(false),
                    _ => {}
                }
            }
            Ok(false)
        };
        told().map_err(|error: rusqlite::Error| LedgerError::sqlite(&self.path, &error))
    }

    /// Takes a window of records in one transaction; durable when this returns. What lies between [`Ledger::last`] and
    /// the first one is noted as a gap.
    ///
    /// # Errors
    /// See [`LedgerError`]; nothing of the window is kept then.
    pub fn commit(
        &mut self,
        station: StationId,
        window: &Window<'_>,
        now: UnixMillis,
    ) -> Result<Committed, LedgerError> {
        let path = &self.path;
        let entered = self
            .connection
            .transaction_with_behavior(TransactionBehavior::Immediate)
            .and_then(|transaction| commit::enter(transaction, station, window, now));
        entered.map_err(|error| LedgerError::sqlite(path, &error))
    }

    /// Notes numbers that the station no longer has.
    ///
    /// # Errors
    /// See [`LedgerError`].
    pub fn note_gap(&mut self, station: StationId, gap: Gap, now: UnixMillis) -> Result<(), LedgerError> {
        commit::note_gap(&self.connection, station, gap, now)
            .map_err(|error| LedgerError::sqlite(&self.path, &error))
    }
}
