//! Why a claim cannot be decided early as it was asked for.

use std::fmt;

use donelight_core::capability::Index;
use donelight_core::stopping::early::LOOKS_MAX;

use super::{LEAST_DISTANCE, MOST_PIECES};

/// Why there is no design.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum DesignError {
    /// No law for this index.
    Index(Index),
    /// Claim and other value are equal or out of range.
    Question,
    /// Alpha is 0 or above 50 %.
    Alpha,
    /// So few or so many looks cannot be.
    LookCount,
    /// Looks must ascend and stand so many pieces apart, the first one from 0 too.
    LookDistance,
    /// A last look beyond what the integration was tried for.
    TooMany,
    /// The last look comes too early: the power there.
    PowerMissed {
        /// What is reached.
        reached: f64,
    },
    /// Everything is decided by an earlier look already.
    LooksNotNeeded {
        /// The look at which all is decided.
        enough: u32,
    },
    /// A fixed size is so small that looks within it cannot be.
    FixedIsSmall {
        /// That size.
        fixed: u32,
    },
    /// The integration is not exact enough for risks so small.
    Inexact,
}

impl fmt::Display for DesignError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Index(index) => write!(f, "{index} cannot be decided early; choose cpk, cpl, cpu or cp"),
            Self::Question => {
                f.write_str("claim and the other value must differ and lie between 0.1 and 100; set them apart")
            }
            Self::Alpha => f.write_str("alpha must be above 0 and at most 50 %; give one such as 5%"),
            Self::LookCount => write!(f, "there must be 2 to {LOOKS_MAX} looks"),
            Self::LookDistance => write!(
                f,
                "looks must ascend, at least {LEAST_DISTANCE} pieces from one to the next and from 0 to the first"
            ),
            Self::TooMany => write!(
                f,
                "more than {MOST_PIECES} pieces would be needed; set the two index values further apart, or allow \
                 larger risks"
            ),
            Self::PowerMissed { reached } => write!(
                f,
                "these looks end too early: they would notice the other value with {:.2} % only; put the last look later",
                100.0 * reached
            ),
            Self::LooksNotNeeded { enough } => write!(
                f,
                "all is decided by the look after {enough} pieces; leave out the looks behind it, or put them earlier"
            ),
            Self::FixedIsSmall { fixed } => write!(
                f,
                "{fixed} pieces are enough without any look before the end: so few that looks save nothing; plan a \
                 fixed size, or fewer looks"
            ),
            Self::Inexact => f.write_str(
                "the boundaries cannot be computed exactly enough for risks so small, or for looks so close together: \
                 allow larger risks, or put the looks further apart",
            ),
        }
    }
}

impl std::error::Error for DesignError {}
