//! Pulling a station's records into the ledger: nothing lost, nothing doubled, resumable at any point.
//!
//! A window of records is verified, committed, and only then confirmed to the station. Whatever breaks off in between
//! leaves the ledger with whole windows, and the next pull goes on behind the last of them. The last known record is
//! asked for once more, to see that the station is still the one that the ledger knows, and that its chain is the one that
//! the ledger keeps.

use donelight_core::chain::Digest;
use donelight_core::record::{DecodeError, Sealed, Seq};
use donelight_core::wire::{Hello, Reason, StationId};

use super::{LinkError, Session, Transport};
use crate::ledger::{Gap, Ledger, LedgerError, UnixMillis, Window};
use crate::output::Explain;

/// How often a window that does not verify is asked for.
const ATTEMPTS: u32 = 3;

/// How far a pull has come.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Progress {
    /// Records gone through.
    pub done: u32,
    /// Records to go through.
    pub total: u32,
}

/// What a pull did.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Pulled {
    /// Records that the ledger did not have before.
    pub new: u32,
    /// The last record in the ledger now, or the last missing one; 0 if there is none at all.
    pub through: Seq,
    /// Numbers that the station no longer had.
    pub gaps: Vec<Gap>,
    /// Why the station could not record the time, where it could not.
    pub clock_refused: Option<Reason>,
}

/// Why a pull broke off, and what is kept nevertheless.
#[derive(Debug, thiserror::Error)]
#[error("{cause}{}", kept_text(.kept))]
pub struct PullError {
    /// Why.
    #[source]
    pub cause: Cause,
    /// What was committed before.
    pub kept: Pulled,
}

/// See [`PullError`].
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum Cause {
    /// The link failed.
    #[error(transparent)]
    Link(#[from] LinkError),
    /// The ledger failed; what it did not commit was not confirmed to the station.
    #[error(transparent)]
    Ledger(#[from] LedgerError),
    /// The station has fewer records than the ledger has of it.
    #[error(
        "station {station} counts its records from the beginning again: its next is {next}, but the ledger has {last}"
    )]
    BegunAgain {
        /// Which.
        station: StationId,
        /// The number that its next record will get.
        next: Seq,
        /// The last one in the ledger.
        last: Seq,
    },
    /// The station gives another record under a known number.
    #[error("station {station} gives another record {seq} than the ledger has of it")]
    Conflict {
        /// Which.
        station: StationId,
        /// The number.
        seq: Seq,
    },
    /// A record does not fit the chain.
    #[error(
        "record {seq} of station {station} does not fit the chain of the records before it in the ledger"
    )]
    Misfit {
        /// Which.
        station: StationId,
        /// The first one that does not fit.
        seq: Seq,
    },
    /// A record arrived that does not verify, however often it was asked for.
    #[error("record {behind} is followed by one that does not verify: {reason}")]
    Unverified {
        /// The last good one.
        behind: Seq,
        /// What does not fit.
        reason: DecodeError,
    },
    /// Records arrived out of order, however often they were asked for.
    #[error("the station's records behind {behind} are not in order")]
    Disorder {
        /// The last good one.
        behind: Seq,
    },
}

fn kept_text(kept: &Pulled) -> String {
    match kept.new {
        0 => String::new(),
        1 => format!("\n1 new record, through {}, is kept", kept.through),
        new => format!("\n{new} new records, through {}, are kept", kept.through),
    }
}

impl Explain for PullError {
    fn kind(&self) -> &'static str {
        match &self.cause {
            Cause::Link(error) => error.kind(),
            Cause::Ledger(error) => error.kind(),
            Cause::BegunAgain { .. } => "station-begun-again",
            Cause::Conflict { .. } => "record-conflict",
            Cause::Misfit { .. } => "chain-broken",
            Cause::Unverified { .. } | Cause::Disorder { .. } => "records-damaged",
        }
    }

    fn help(&self) -> String {
        match &self.cause {
            Cause::Link(error) => error.help(),
            Cause::Ledger(error) => error.help(),
            Cause::BegunAgain { .. } => {
                "Its flash was erased, or another station has taken its number. Pull it into a ledger of its own: \
                 --ledger FILE."
                    .to_owned()
            }
            Cause::Conflict { .. } => {
                "Both are kept. The station's flash was erased meanwhile, or another station has taken its number. Pull \
                 it into a ledger of its own: --ledger FILE."
                    .to_owned()
            }
            Cause::Misfit { .. } => {
                "It was not taken, and the station keeps it. `donelight ledger verify` tells if the ledger was changed; if \
                 it was not, the station's records were. Pull it into a ledger of its own: --ledger FILE."
                    .to_owned()
            }
            Cause::Unverified { .. } | Cause::Disorder { .. } => {
                "Run the same command again. If it stays so, the station's flash is damaged: exchange the board."
                    .to_owned()
            }
        }
    }

    fn details(&self) -> Option<serde_json::Value> {
        Some(serde_json::json!({ "kept": self.kept.new, "through": self.kept.through.0 }))
    }
}

/// Pulls all records that the station has and the ledger has not, and sets the station's clock if it is not set since
/// the last boot. `progress` is told after each window.
///
/// # Errors
/// See [`PullError`]; pull again and it goes on where it broke off.
pub fn pull<T: Transport>(
    session: &mut Session<T>,
    ledger: &mut Ledger,
    progress: &mut dyn FnMut(Progress),
) -> Result<Pulled, PullError> {
    let mut kept = Pulled { new: 0, through: Seq(0), gaps: Vec::new(), clock_refused: None };
    match all(session, ledger, progress, &mut kept) {
        Ok(()) => Ok(kept),
        Err(cause) => Err(PullError { cause, kept }),
    }
}

fn all<T: Transport>(
    session: &mut Session<T>,
    ledger: &mut Ledger,
    progress: &mut dyn FnMut(Progress),
    kept: &mut Pulled,
) -> Result<(), Cause> {
    let hello = session.hello()?;
    ledger.meet(&hello, UnixMillis::now())?;
    up_to(session, ledger, &hello, progress, kept)?;
    if ledger.clock_is_set(hello.station)? {
        return Ok(());
    }
    match session.set_clock(|| UnixMillis::now().to_wire()) {
        Ok(_) => {
            let hello = session.hello()?;
            up_to(session, ledger, &hello, progress, kept)
        }
        // A journal that takes nothing more is just what a pull is for: it has done its part.
        Err(LinkError::Refused(reason @ Reason::NotRecorded(_))) => {
            kept.clock_refused = Some(reason);
            Ok(())
        }
        Err(error) => Err(error.into()),
    }
}

/// Pulls the records that the station had when it said hello.
fn up_to<T: Transport>(
    session: &mut Session<T>,
    ledger: &mut Ledger,
    hello: &Hello,
    progress: &mut dyn FnMut(Progress),
    kept: &mut Pulled,
) -> Result<(), Cause> {
    let station = hello.station;
    let begin = ledger.last(station)?;
    kept.through = begin;
    // Another host may have pulled further into the same ledger since that hello.
    let again = if hello.next <= begin { session.hello()? } else { hello.clone() };
    let Hello { next, head, .. } = again;
    if next <= begin {
        return Err(Cause::BegunAgain { station, next, last: begin });
    }
    let mut from = begin.max(Seq::FIRST);
    while from < next {
        let (before, bytes) = window(session, from)?;
        let window = verify(before, &bytes, from).map_err(|fault| fault.at(kept.through))?;
        if window.records.is_empty() {
            // The last pages cannot be read: what is left of the numbers is not to be had.
            let gap = Gap { first: ledger.last(station)?.next(), last: Seq(next.0 - 1) };
            if gap.first <= gap.last {
                ledger.note_gap(station, gap, UnixMillis::now())?;
                kept.gaps.push(gap);
            }
        } else {
            let committed = ledger.commit(station, &window, UnixMillis::now())?;
            kept.new += committed.new;
            kept.gaps.extend(committed.gaps);
            if let Some(seq) = committed.conflicts.first() {
                return Err(Cause::Conflict { station, seq: *seq });
            }
            if let Some(seq) = committed.misfit {
                return Err(Cause::Misfit { station, seq });
            }
        }
        kept.through = ledger.last(station)?;
        session.received(kept.through)?;
        from = kept.through.next();
        let done = kept.through.0.min(next.0 - 1).saturating_sub(begin.0);
        progress(Progress { done, total: next.0 - 1 - begin.0 });
    }
    // The whole chain once more, by its end.
    match ledger.head(station)? {
        Some((seq, Some(digest))) if seq.next() == next && digest != head => {
            Err(Cause::Misfit { station, seq })
        }
        _ => Ok(()),
    }
}

/// Why a window does not verify.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Fault {
    Record(DecodeError),
    Order,
}

impl Fault {
    fn at(self, behind: Seq) -> Cause {
        match self {
            Self::Record(reason) => Cause::Unverified { behind, reason },
            Self::Order => Cause::Disorder { behind },
        }
    }
}

/// A window that verifies, or the last of several that do not. An empty one is asked for again as well.
fn window<T: Transport>(session: &mut Session<T>, from: Seq) -> Result<(Digest, Vec<u8>), Cause> {
    let mut attempt = 1;
    loop {
        let (before, bytes) = session.records(from)?;
        let bytes = bytes.to_vec();
        if attempt == ATTEMPTS || verify(before, &bytes, from).is_ok_and(|window| !window.records.is_empty())
        {
            return Ok((before, bytes));
        }
        attempt += 1;
    }
}

/// Splits a window into records: each sealed, the first numbered `from` or above, one behind the other, to the exact end.
fn verify(before: Digest, mut bytes: &[u8], from: Seq) -> Result<Window<'_>, Fault> {
    let mut records = Vec::new();
    let mut due = None;
    while !bytes.is_empty() {
        let (sealed, rest) = Sealed::split(bytes).map_err(Fault::Record)?;
        let in_order = |seq: &Seq| due.map_or(*seq >= from, |due| *seq == due);
        let seq = sealed.seq().filter(in_order).ok_or(Fault::Order)?;
        records.push((seq, sealed.bytes()));
        due = Some(seq.next());
        bytes = rest;
    }
    Ok(Window { before, records })
}
