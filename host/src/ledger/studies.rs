//! The studies in a ledger: a station's records, replayed through its own state machine.

use std::fmt;

use donelight_core::chain::Digest;
use donelight_core::counts::Counts;
use donelight_core::record::{DecodeError, Refusal, Sealed, Seq};
use donelight_core::station::{Held, Study};
use donelight_core::wire::StationId;
use rusqlite::Params;

use super::replay::Replay;
use super::{Bounds, Gap, Ledger, LedgerError, UnixMillis};
use crate::output::Explain;

/// Which study: the station, and the record that began it. Written `0123456789abcdef:17`.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct StudyKey {
    /// Whose.
    pub station: StationId,
    /// The plan's record.
    pub began: Seq,
}

impl fmt::Display for StudyKey {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}:{}", self.station, self.began)
    }
}

/// What became of a reading.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Fate {
    /// It is part of the study.
    Counted,
    /// It came after the study was settled or spent.
    Surplus,
    /// The operator took it back.
    TakenBack,
}

/// A reading.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Reading {
    /// Its record.
    pub seq: Seq,
    /// When, if the station's clock was set in the same run.
    pub time: Option<UnixMillis>,
    /// Between which times, as far as other runs tell; equal to `time` where that is known.
    pub bounds: Bounds,
    /// Its value, in counts of the plan's resolution.
    pub counts: Counts,
    /// What became of it.
    pub fate: Fate,
}

/// Something beside the readings that a reader of the study should know.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Incident {
    /// Its record, or the first number that it is about.
    pub seq: Seq,
    /// When, if the station's clock was set.
    pub time: Option<UnixMillis>,
    /// What.
    pub what: Happening,
}

/// See [`Incident`].
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Happening {
    /// Lines or presses were not taken.
    Refused {
        /// Why.
        reason: Refusal,
        /// How often.
        times: u16,
    },
    /// The operator took this reading back.
    TakenBack(Seq),
    /// The study waited for the operator to look.
    Held(Held),
    /// The operator has looked.
    Seen,
    /// The station started again.
    Restarted {
        /// How often it had started by then.
        boot: u32,
    },
    /// Records are missing: the station no longer had them. Readings may be among them.
    Missing(Gap),
    /// The station found that it can no longer read these. The ledger may have them from before.
    Unreadable(Gap),
    /// A record of a newer kind, which this version cannot read.
    UnknownKind,
    /// The station once gave another record under this number; both are kept, this study is told by the first.
    Conflict,
}

/// A study with all that the ledger holds of it.
#[derive(Clone, Debug)]
pub struct Kept {
    /// Which one.
    pub key: StudyKey,
    /// The station's firmware, when last seen.
    pub firmware: String,
    /// Plan, sums and standing, as the station itself came to them.
    pub study: Study,
    /// In the order they came in.
    pub readings: Vec<Reading>,
    /// In the order they came in.
    pub incidents: Vec<Incident>,
    /// When the plan was loaded, if the station's clock was set.
    pub began: Option<UnixMillis>,
    /// When the plan's record came into the ledger.
    pub began_received: UnixMillis,
    /// When the latest record came into the ledger.
    pub last_received: UnixMillis,
    /// The last record before the next study, or the last one kept.
    pub through: Seq,
    /// SHA-256 of all its records' bytes one behind the other, from the plan's on, in hexadecimal.
    pub fingerprint: String,
    /// The chain's digest behind record `through`; `None` if it was kept before there was a chain.
    pub chain: Option<Digest>,
}

/// A record of the ledger.
pub(super) struct Row<'a> {
    pub(super) received: UnixMillis,
    pub(super) seq: Seq,
    pub(super) sealed: Sealed<'a>,
    pub(super) chain: Option<Digest>,
}

/// Why there is no one study to give.
#[derive(Debug, thiserror::Error)]
pub enum SelectError {
    /// The ledger cannot be read.
    #[error(transparent)]
    Ledger(#[from] LedgerError),
    /// It holds none.
    #[error("the ledger {path} holds no study")]
    NoStudy {
        /// The file.
        path: String,
    },
    /// None is called so.
    #[error("the ledger holds no study {wanted:?}; it holds {}", .held.join(", "))]
    Unknown {
        /// What was asked for.
        wanted: String,
        /// What is there.
        held: Vec<String>,
    },
    /// Several are called so.
    #[error("several studies are called {wanted:?}: {}", .candidates.join(", "))]
    Ambiguous {
        /// What was asked for.
        wanted: String,
        /// What is there.
        candidates: Vec<String>,
    },
}

impl Explain for SelectError {
    fn kind(&self) -> &'static str {
        match self {
            Self::Ledger(error) => error.kind(),
            Self::NoStudy { .. } => "no-study",
            Self::Unknown { .. } => "study-unknown",
            Self::Ambiguous { .. } => "study-ambiguous",
        }
    }

    fn help(&self) -> String {
        match self {
            Self::Ledger(error) => error.help(),
            Self::NoStudy { .. } => "Pull a station first, or name another ledger with --ledger.".to_owned(),
            Self::Unknown { .. } => "Name one of these, or none for the newest.".to_owned(),
            Self::Ambiguous { .. } => "Name one by its number, as it is written here.".to_owned(),
        }
    }
}

impl Ledger {
    /// All stations that were ever met.
    ///
    /// # Errors
    /// See [`LedgerError`], here and below.
    pub fn stations(&self) -> Result<Vec<(StationId, String)>, LedgerError> {
        self.rows("SELECT station, firmware FROM stations ORDER BY station", [], |row| {
            Ok((StationId(row.get(0)?), row.get(1)?))
        })
    }

    /// All studies, those of a station in their order.
    ///
    /// # Errors
    /// See [`LedgerError`].
    pub fn studies(&self) -> Result<Vec<Kept>, LedgerError> {
        let mut studies = Vec::new();
        for (station, firmware) in self.stations()? {
            studies.extend(self.studies_of(station, &firmware)?);
        }
        Ok(studies)
    }

    /// The study of this name or key; a number alone will do if it is the only one. `None`: the newest.
    ///
    /// # Errors
    /// See [`SelectError`].
    pub fn study(&self, selector: Option<&str>) -> Result<Kept, SelectError> {
        let mut studies = self.studies()?;
        if studies.is_empty() {
            return Err(SelectError::NoStudy { path: self.path().display().to_string() });
        }
        let Some(wanted) = selector else {
            studies.sort_by_key(|kept| (kept.began.unwrap_or(kept.began_received), kept.key));
            return Ok(studies.swap_remove(studies.len() - 1));
        };
        let named = |kept: &Kept| kept.study.plan().name.as_str() == wanted.trim();
        let keyed = |kept: &Kept| kept.key.to_string().eq_ignore_ascii_case(wanted.trim());
        let numbered = |kept: &Kept| kept.key.began.to_string() == wanted.trim();
        for matches in [&named as &dyn Fn(&Kept) -> bool, &keyed, &numbered] {
            let found: Vec<usize> =
                (0..studies.len()).filter(|i| studies.get(*i).is_some_and(matches)).collect();
            match found.as_slice() {
                [] => {}
                [one] => return Ok(studies.swap_remove(*one)),
                _ => {
                    let candidates = studies.iter().filter(|kept| matches(kept)).map(called).collect();
                    return Err(SelectError::Ambiguous { wanted: wanted.to_owned(), candidates });
                }
            }
        }
        Err(SelectError::Unknown { wanted: wanted.to_owned(), held: studies.iter().map(called).collect() })
    }

    fn studies_of(&self, station: StationId, firmware: &str) -> Result<Vec<Kept>, LedgerError> {
        let mut replay = Replay::new(station, firmware);
        self.visit(station, |row| replay.take(row))?;
        let last = self.last(station)?;
        replay.missing_until(last.next());
        Ok(replay.finish(&self.conflicts(station)?))
    }

    /// Shows all records of a station in order; each has its check sum verified.
    fn visit(&self, station: StationId, mut visitor: impl FnMut(Row<'_>)) -> Result<(), LedgerError> {
        let failed = |error: rusqlite::Error| LedgerError::sqlite(self.path(), &error);
        let mut query = self
            .connection
            .prepare_cached(
                "SELECT seq, bytes, received_ms, digest FROM records WHERE station = ?1 ORDER BY seq",
            )
            .map_err(failed)?;
        let mut rows = query.query([station.0]).map_err(failed)?;
        while let Some(row) = rows.next().map_err(failed)? {
            let seq = Seq(row.get(0).map_err(failed)?);
            let bytes = row.get_ref(1).and_then(|value| Ok(value.as_blob()?)).map_err(failed)?;
            let received = UnixMillis(row.get(2).map_err(failed)?);
            let damaged =
                |reason| LedgerError::DamagedRecord { path: self.path().to_owned(), station, seq, reason };
            let (sealed, rest) = Sealed::split(bytes).map_err(damaged)?;
            if sealed.seq() != Some(seq) || !rest.is_empty() {
                return Err(damaged(DecodeError::CheckSum));
            }
            let chain = row.get::<_, Option<_>>(3).map_err(failed)?.map(Digest);
            visitor(Row { received, seq, sealed, chain });
        }
        Ok(())
    }

    pub(super) fn rows<T>(
        &self,
        sql: &str,
        parameters: impl Params,
        read: impl FnMut(&rusqlite::Row<'_>) -> rusqlite::Result<T>,
    ) -> Result<Vec<T>, LedgerError> {
        let query =
            || self.connection.prepare(sql)?.query_map(parameters, read)?.collect::<Result<Vec<T>, _>>();
        query().map_err(|error| LedgerError::sqlite(self.path(), &error))
    }
}

fn called(kept: &Kept) -> String {
    format!("{} ({:?})", kept.key, kept.study.plan().name.as_str())
}
