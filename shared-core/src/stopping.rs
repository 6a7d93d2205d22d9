//! When it is enough: the planned count **and** the wanted precision, up to a limit.
//!
//! The goal is a relative half-width (for a bound: its relative distance from the estimate). In
//! z·√(1/(9nĈ²) + 1/(2ν)) ≤ r the estimate stands only in the first, small term, so the number of pieces at the stop
//! is nearly fixed and the coverage stays what it was. An absolute width would stop early when the estimate happens
//! to be low, and "until the lower limit passes" would be no test at all: neither is offered as a rule.

use serde::{Deserialize, Serialize};

use crate::{
    interval::Estimate,
    quantity::{Count, Precision},
};

/// Settled at `planned` pieces or later, once the precision is reached; spent at `limit` pieces without it.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct StoppingRule {
    /// Not done before so many pieces.
    pub planned: Count,
    /// How narrow the interval must be.
    pub precision: Precision,
    /// No piece is asked for beyond so many.
    pub limit: Count,
}

/// Where a study stands.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub enum Standing {
    /// More pieces are wanted.
    Gathering,
    /// The planned count and the precision are reached.
    Settled,
    /// The limit is reached without the precision.
    Spent,
}

impl StoppingRule {
    /// Judges a study of `n` pieces. `estimate` is called only where it can matter, since it costs the device time; it
    /// gives `None` where there is no estimate (no spread yet, say), and then the precision is not reached.
    pub fn judge(&self, n: Count, estimate: impl FnOnce() -> Option<Estimate>) -> Standing {
        if n < self.planned {
            return Standing::Gathering;
        }
        if estimate().is_some_and(|e| self.precision.allows(e.half_width, e.estimate)) {
            Standing::Settled
        } else if n >= self.limit {
            Standing::Spent
        } else {
            Standing::Gathering
        }
    }
}
