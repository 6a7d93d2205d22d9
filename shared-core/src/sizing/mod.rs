//! How many pieces a study needs: by the precision of the interval, or by the power of a test.

pub mod power;
pub mod precision;

use core::fmt;

use crate::capability::Index;
use crate::interval::IntervalError;
use crate::quantity::{Count, DegreesOfFreedom};

/// Why there is no sample size.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub enum SizingError {
    /// An assumed, claimed or opposing index that is not above zero, or above [`MAX_INDEX`].
    IndexOutOfRange,
    /// A precision of zero.
    NoTolerance,
    /// A risk alpha of 0, or above 50 %.
    AlphaOutOfRange,
    /// The claim equals the value it is to be told from.
    Indistinguishable,
    /// Fewer than two pieces have no sigma.
    TooFew,
    /// More than [`Count::MAX`] pieces would be needed.
    AboveLimit,
    /// No method for this index yet.
    NoMethodYet(Index),
}

impl fmt::Display for SizingError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Self::IndexOutOfRange => "the index must be above zero and at most 1000; give the value you expect, such as 1.5",
            Self::NoTolerance => "no sample reaches a precision of zero; give a wider one, such as 10%",
            Self::AlphaOutOfRange => "alpha must be above 0 and at most 50 %; give one such as 5%",
            Self::Indistinguishable => "the two index values are equal, so no sample tells them apart; set them apart",
            Self::TooFew => "fewer than two pieces give no standard deviation; give at least 2",
            Self::AboveLimit => {
                "more than one million pieces would be needed; accept a wider precision, a lower confidence or power, \
                 or index values further apart"
            }
            Self::NoMethodYet(index) => {
                return write!(f, "no sample size for {index} yet; choose cpk, cpl, cpu or cp");
            }
        })
    }
}

impl core::error::Error for SizingError {}

impl From<IntervalError> for SizingError {
    fn from(error: IntervalError) -> Self {
        match error {
            IntervalError::NoMethodYet(index) => Self::NoMethodYet(index),
            IntervalError::Index(_) => Self::IndexOutOfRange,
        }
    }
}

/// Index values up to this have a size: no process is better, and nothing overflows.
pub const MAX_INDEX: f64 = 1000.0;

/// An index value that a size can be computed for.
fn in_range(index: f64) -> Result<f64, SizingError> {
    if index > 0.0 && index <= MAX_INDEX { Ok(index) } else { Err(SizingError::IndexOutOfRange) }
}

/// ν = n − 1, or too few.
fn overall(n: Count) -> Result<DegreesOfFreedom, SizingError> {
    DegreesOfFreedom::overall(n).ok_or(SizingError::TooFew)
}

/// The smallest n from 2 to [`Count::MAX`] that meets a demand which, once met, stays met as n grows.
///
/// Doubles n until the demand is met, then halves the gap: about 2 log2 n evaluations.
fn smallest(meets: impl Fn(Count) -> Result<bool, SizingError>) -> Result<Count, SizingError> {
    let mut unmet = Count::ONE;
    let mut met = Count::ONE;
    loop {
        met = match Count::new(met.get() * 2) {
            Some(doubled) => doubled,
            None if met < Count::MAX => Count::MAX,
            None => return Err(SizingError::AboveLimit),
        };
        if meets(met)? {
            break;
        }
        unmet = met;
    }
    while let Some(middle) = between(unmet, met) {
        if meets(middle)? {
            met = middle;
        } else {
            unmet = middle;
        }
    }
    Ok(met)
}

/// A count halfway between two, if one lies strictly between.
fn between(low: Count, high: Count) -> Option<Count> {
    let middle = Count::new((low.get() + high.get()) / 2)?;
    (middle > low).then_some(middle)
}

#[cfg(test)]
mod tests;
