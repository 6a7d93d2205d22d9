//! Verifying a ledger: everything is computed anew from the stored bytes, for every station.

use donelight_core::chain::Digest;
use donelight_core::record::{DecodeError, Gap, Sealed, Seq};
use donelight_core::wire::StationId;

use super::{Ledger, LedgerError};

/// What a station's records come to.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Verified {
    /// Whose.
    pub station: StationId,
    /// Records kept.
    pub records: u32,
    /// Of these, kept before there was a chain: only their own check sums can be verified.
    pub unchained: u32,
    /// The last one that was looked at; 0 if there is none.
    pub through: Seq,
    /// The chain's digest behind it, if all fits.
    pub head: Option<Digest>,
    /// Numbers that the station no longer had. The chain goes on behind each by what the station said.
    pub gaps: Vec<Gap>,
    /// Numbers under which the station once gave another record; both are kept.
    pub conflicts: Vec<Seq>,
    /// The first record that does not fit.
    pub misfit: Option<Misfit>,
}

impl Verified {
    /// Whether all records fit.
    #[must_use]
    pub fn fits(&self) -> bool {
        self.misfit.is_none()
    }
}

/// The first record that does not fit.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Misfit {
    /// Its number.
    pub seq: Seq,
    /// In which way.
    pub why: Why,
}

/// See [`Misfit`].
#[derive(Clone, Copy, Debug, PartialEq, Eq, thiserror::Error)]
pub enum Why {
    /// Its bytes are no record, or one of another number.
    #[error("its bytes are not that record: {0}")]
    Bytes(DecodeError),
    /// It is another one than the chain was computed from, or one before it is.
    #[error("it does not fit the chain: it was changed, or what stands before it was")]
    Chain,
    /// Records before it are missing, and were there when it was taken.
    #[error("the record before it is missing, though no gap was noted when it was taken")]
    Missing,
}

/// A row of the ledger.
struct Row<'a> {
    seq: Seq,
    bytes: &'a [u8],
    digest: Option<Digest>,
    /// What the station said of the records before it.
    anchor: Option<Digest>,
}

/// Goes through a station's records.
struct Walk {
    found: Verified,
    /// The number that comes next, and the digest before it where that is known.
    due: Seq,
    digest: Option<Digest>,
}

impl Walk {
    fn new(station: StationId, gaps: Vec<Gap>, conflicts: Vec<Seq>) -> Self {
        let found = Verified {
            station,
            records: 0,
            unchained: 0,
            through: Seq(0),
            head: None,
            gaps,
            conflicts,
            misfit: None,
        };
        Self { found, due: Seq::FIRST, digest: Some(Digest::origin(station)) }
    }

    fn take(&mut self, row: &Row<'_>) {
        self.found.records += 1;
        if self.found.misfit.is_some() {
            return;
        }
        match self.judge(row) {
            Ok(digest) => {
                self.digest = digest;
                self.found.unchained += u32::from(digest.is_none());
                self.found.through = row.seq;
                self.due = row.seq.next();
            }
            Err(why) => self.found.misfit = Some(Misfit { seq: row.seq, why }),
        }
    }

    /// The digest behind this row.
    fn judge(&self, row: &Row<'_>) -> Result<Option<Digest>, Why> {
        let (sealed, rest) = Sealed::split(row.bytes).map_err(Why::Bytes)?;
        if sealed.seq() != Some(row.seq) || !rest.is_empty() {
            return Err(Why::Bytes(DecodeError::CheckSum));
        }
        let before = match Gap::between(self.due, row.seq) {
            None => match (self.digest, row.anchor) {
                (Some(digest), Some(anchor)) if digest != anchor => return Err(Why::Chain),
                (digest, anchor) => digest.or(anchor),
            },
            Some(missing) if self.is_noted(missing) => row.anchor,
            Some(_) => return Err(Why::Missing),
        };
        match (before, row.digest) {
            (Some(before), Some(digest)) if before.then(row.bytes) == digest => Ok(Some(digest)),
            // Kept before there was a chain.
            (_, None) if self.found.unchained + 1 == self.found.records => Ok(None),
            _ => Err(Why::Chain),
        }
    }

    /// Whether gaps were noted that hold all of this, with what records there are in between.
    fn is_noted(&self, missing: Gap) -> bool {
        let mut due = missing.first;
        for gap in &self.found.gaps {
            if gap.first <= due && due <= gap.last {
                due = gap.last.next();
            }
        }
        due > missing.last
    }

    fn finish(mut self) -> Verified {
        self.found.head = self.digest.filter(|_| self.found.misfit.is_none() && self.found.records > 0);
        self.found
    }
}

impl Ledger {
    /// Verifies all records of every station.
    ///
    /// # Errors
    /// See [`LedgerError`]: the file itself cannot be read. A record that does not fit is no error but an answer.
    pub fn verify(&self) -> Result<Vec<Verified>, LedgerError> {
        self.stations()?.into_iter().map(|(station, _)| self.verify_station(station)).collect()
    }

    fn verify_station(&self, station: StationId) -> Result<Verified, LedgerError> {
        let mut walk = Walk::new(station, self.gaps(station)?, self.conflicts(station)?);
        let mut rows = || {
            let mut query = self.connection.prepare_cached(
                "SELECT records.seq, bytes, digest, before FROM records
                 LEFT JOIN anchors ON anchors.station = records.station AND anchors.seq = records.seq
                 WHERE records.station = ?1 ORDER BY records.seq",
            )?;
            let mut rows = query.query([station.0])?;
            while let Some(row) = rows.next()? {
                walk.take(&Row {
                    seq: Seq(row.get(0)?),
                    bytes: row.get_ref(1)?.as_blob()?,
                    digest: row.get::<_, Option<_>>(2)?.map(Digest),
                    anchor: row.get::<_, Option<_>>(3)?.map(Digest),
                });
            }
            Ok(())
        };
        let outcome: rusqlite::Result<()> = rows();
        outcome.map_err(|error| LedgerError::sqlite(self.path(), &error))?;
        Ok(walk.finish())
    }

    /// The gaps of a station as they were noted, in order; records that came later may have filled them.
    ///
    /// # Errors
    /// See [`LedgerError`].
    pub fn gaps(&self, station: StationId) -> Result<Vec<Gap>, LedgerError> {
        self.rows("SELECT first, last FROM gaps WHERE station = ?1 ORDER BY first", [station.0], |row| {
            Ok(Gap { first: Seq(row.get(0)?), last: Seq(row.get(1)?) })
        })
    }

    /// The numbers under which a station gave two records.
    ///
    /// # Errors
    /// See [`LedgerError`].
    pub fn conflicts(&self, station: StationId) -> Result<Vec<Seq>, LedgerError> {
        self.rows("SELECT DISTINCT seq FROM conflicts WHERE station = ?1 ORDER BY seq", [station.0], |row| {
            row.get(0).map(Seq)
        })
    }
}
