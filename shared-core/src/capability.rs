//! The capability indices Cp, Cpl, Cpu, Cpk and Cpm of a sample against a specification.
//!
//! Definitions: NIST/SEMATECH e-Handbook of Statistical Methods, 6.1.6. For Cpm, Boyles (1991), The Taguchi capability
//! index, Journal of Quality Technology 23:17–26, from memory.

mod sample;

use core::fmt;
use core::str::FromStr;

use serde::{Deserialize, Serialize};

pub use sample::{IndexError, Sample, SampleError};

use crate::counts::Decimal;
use crate::sigma::Sigma;

/// The specification: a lower limit, an upper limit or both, and perhaps a target within them.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(try_from = "Fields", into = "Fields")]
pub struct Specification {
    lower: Option<Decimal>,
    upper: Option<Decimal>,
    target: Option<Decimal>,
}

/// Why limits and target contradict each other.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub enum SpecificationError {
    /// Neither limit.
    NoLimit,
    /// The lower limit is not below the upper.
    LimitsReversed,
    /// The target lies beyond a limit.
    TargetOutside,
}

impl fmt::Display for SpecificationError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Self::NoLimit => "no specification limit; give a lower limit, an upper limit or both",
            Self::LimitsReversed => "the lower limit is not below the upper limit; swap or correct them",
            Self::TargetOutside => "the target lies outside the limits; correct one of them",
        })
    }
}

impl core::error::Error for SpecificationError {}

impl Specification {
    /// Checks that there is a limit, and that all are in order.
    ///
    /// # Errors
    /// Each contradiction has its own [`SpecificationError`].
    pub fn new(
        lower: Option<Decimal>,
        upper: Option<Decimal>,
        target: Option<Decimal>,
    ) -> Result<Self, SpecificationError> {
        match (lower, upper) {
            (None, None) => return Err(SpecificationError::NoLimit),
            (Some(lower), Some(upper)) if lower >= upper => return Err(SpecificationError::LimitsReversed),
            _ => {}
        }
        let below = lower.zip(target).is_some_and(|(lower, target)| target < lower);
        let above = upper.zip(target).is_some_and(|(upper, target)| target > upper);
        if below || above {
            Err(SpecificationError::TargetOutside)
        } else {
            Ok(Self { lower, upper, target })
        }
    }

    /// The lower specification limit.
    #[must_use]
    pub const fn lower(&self) -> Option<Decimal> {
        self.lower
    }

    /// The upper specification limit.
    #[must_use]
    pub const fn upper(&self) -> Option<Decimal> {
        self.upper
    }

    /// The target.
    #[must_use]
    pub const fn target(&self) -> Option<Decimal> {
        self.target
    }
}

/// A specification as it is stored, not yet checked.
#[derive(Serialize, Deserialize)]
struct Fields {
    lower: Option<Decimal>,
    upper: Option<Decimal>,
    target: Option<Decimal>,
}

impl From<Specification> for Fields {
    fn from(Specification { lower, upper, target }: Specification) -> Self {
        Self { lower, upper, target }
    }
}

impl TryFrom<Fields> for Specification {
    type Error = SpecificationError;

    fn try_from(Fields { lower, upper, target }: Fields) -> Result<Self, SpecificationError> {
        Self::new(lower, upper, target)
    }
}

/// A capability index. Stored in plans: variants are only ever added at the end.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, Serialize, Deserialize)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
#[serde(rename_all = "lowercase")]
pub enum Index {
    /// (U − L) / (6σ): what the spread alone would allow.
    Cp,
    /// (μ − L) / (3σ).
    Cpl,
    /// (U − μ) / (3σ).
    Cpu,
    /// The smaller of Cpl and Cpu; with one limit only, that one's.
    Cpk,
    /// (U − L) / (6τ), τ² = σ² + (μ − T)²: punishes distance from the target.
    Cpm,
}

impl Index {
    const ALL: [Self; 5] = [Self::Cp, Self::Cpl, Self::Cpu, Self::Cpk, Self::Cpm];

    /// The name as it is written.
    #[must_use]
    pub const fn name(self) -> &'static str {
        match self {
            Self::Cp => "Cp",
            Self::Cpl => "Cpl",
            Self::Cpu => "Cpu",
            Self::Cpk => "Cpk",
            Self::Cpm => "Cpm",
        }
    }
}

impl Index {
    /// The name that the trade gives it with this sigma: Cp, Cpk (capability) for what lies within subgroups, Pp, Ppk
    /// (performance) for all that varies. Cpm has no other.
    ///
    /// ISO 22514-1 and -2 and AIAG's Statistical Process Control name them so (from memory).
    #[must_use]
    pub const fn trade_name(self, sigma: Sigma) -> &'static str {
        match self {
            Self::Cpm => self.name(),
            _ if sigma.is_within() => self.name(),
            Self::Cp => "Pp",
            Self::Cpl => "Ppl",
            Self::Cpu => "Ppu",
            Self::Cpk => "Ppk",
        }
    }
}

impl fmt::Display for Index {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.pad(self.name())
    }
}

/// A word that names no index.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub struct UnknownIndex;

impl fmt::Display for UnknownIndex {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str("unknown index; write cp, cpl, cpu, cpk or cpm")
    }
}

impl core::error::Error for UnknownIndex {}

impl FromStr for Index {
    type Err = UnknownIndex;

    fn from_str(text: &str) -> Result<Self, UnknownIndex> {
        Self::ALL.into_iter().find(|index| index.name().eq_ignore_ascii_case(text)).ok_or(UnknownIndex)
    }
}

#[cfg(test)]
mod tests;
