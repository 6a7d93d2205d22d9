//! When it is enough: the planned count **and** the wanted precision, up to a limit; or a decision about a claim, at
//! looks that are named beforehand ([`early`]).
//!
//! A precision is a half-width (for a bound: its distance from the estimate), as a fraction of the estimate or of the index
//! itself. In z·√(1/(9nĈ²) + 1/(2ν)) ≤ r the estimate stands only in the first, small term, so the number of pieces at a
//! relative stop is nearly fixed. An absolute width stops early where the estimate happens to be low. What either does to
//! the interval, [`optional`] makes up for. "Until the lower limit passes" would be no test at all and is not offered.

pub mod early;
pub mod optional;

use serde::{Deserialize, Serialize};

use crate::{
    interval::Evidence,
    quantity::{Count, Millionths, Precision},
};
use early::EarlyDecision;

/// Settled at `planned` pieces or later, once the goal is reached; spent at `limit` pieces without it.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct StoppingRule {
    /// Not done before so many pieces.
    pub planned: Count,
    /// What has to be reached.
    pub goal: Goal,
    /// No piece is asked for beyond so many.
    pub limit: Count,
}

/// What a study has to reach.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(from = "StoredGoal", into = "StoredGoal")]
#[allow(clippy::large_enum_variant, reason = "no heap to box a table on; a study has one plan")]
pub enum Goal {
    /// The interval is as narrow as this.
    Precision(Precision),
    /// A claim is decided. The planned count is the first look, the limit is the last one.
    Decision(EarlyDecision),
}

/// A goal's bytes. The first two are those of [`Precision`], which stood here alone in earlier plans; variants are only
/// ever added at the end.
#[derive(Serialize, Deserialize)]
#[allow(clippy::large_enum_variant, reason = "lives only while it is read or written")]
enum StoredGoal {
    Relative(Millionths),
    Absolute(Millionths),
    Decision(EarlyDecision),
}

impl From<StoredGoal> for Goal {
    fn from(stored: StoredGoal) -> Self {
        match stored {
            StoredGoal::Relative(goal) => Self::Precision(Precision::Relative(goal)),
            StoredGoal::Absolute(goal) => Self::Precision(Precision::Absolute(goal)),
            StoredGoal::Decision(early) => Self::Decision(early),
        }
    }
}

impl From<Goal> for StoredGoal {
    fn from(goal: Goal) -> Self {
        match goal {
            Goal::Precision(Precision::Relative(goal)) => Self::Relative(goal),
            Goal::Precision(Precision::Absolute(goal)) => Self::Absolute(goal),
            Goal::Decision(early) => Self::Decision(early),
        }
    }
}

/// Where a study stands.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub enum Standing {
    /// More pieces are wanted.
    Gathering,
    /// The planned count and the goal are reached.
    Settled,
    /// The limit is reached without the goal.
    Spent,
}

impl StoppingRule {
    /// A rule that decides early: first and last look become planned count and limit.
    #[must_use]
    pub fn deciding_early(early: EarlyDecision) -> Self {
        let at = |look: Option<&early::Look>| look.map_or(Count::ZERO, |look| look.n);
        Self { planned: at(early.looks.first()), limit: at(early.looks.last()), goal: Goal::Decision(early) }
    }

    /// The wanted precision, if that is the goal.
    #[must_use]
    pub fn precision(&self) -> Option<Precision> {
        match &self.goal {
            Goal::Precision(precision) => Some(*precision),
            Goal::Decision(_) => None,
        }
    }

    /// The claim to be decided, if that is the goal.
    #[must_use]
    pub fn early(&self) -> Option<&EarlyDecision> {
        match &self.goal {
            Goal::Precision(_) => None,
            Goal::Decision(early) => Some(early),
        }
    }

    /// Judges a study of `n` pieces. `evidence` is called only where it can matter, since it costs the device time; it
    /// gives `None` where there is no estimate (no spread yet, say), and then the goal is not reached. `precise` says
    /// whether the interval of such evidence is as narrow as wanted.
    pub fn judge(
        &self,
        n: Count,
        evidence: impl FnOnce() -> Option<Evidence>,
        precise: impl FnOnce(&Evidence, Precision) -> bool,
    ) -> Standing {
        let precision = match &self.goal {
            Goal::Decision(early) => return early.judge(n, || evidence().map(|e| e.estimate)),
            Goal::Precision(precision) => *precision,
        };
        if n < self.planned {
            return Standing::Gathering;
        }
        if evidence().is_some_and(|evidence| precise(&evidence, precision)) {
            Standing::Settled
        } else if n >= self.limit {
            Standing::Spent
        } else {
            Standing::Gathering
        }
    }
}
