//! How many pieces a study needs: by the precision of the interval, or by the power of a test.

mod decision;
mod design;
pub mod power;
pub mod precision;

use core::fmt;

pub use decision::{Span, Truth, truth};
pub use design::Design;

use crate::capability::Index;
use crate::interval::{Method, MethodError};

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
    /// More than [`Count::MAX`](crate::quantity::Count::MAX) pieces would be needed.
    AboveLimit,
    /// The method does not suit the index, or gives no limit.
    Method(MethodError),
    /// The method has intervals only, and no test of this index.
    NoTest {
        /// The method asked for.
        method: Method,
        /// The index asked for.
        index: Index,
    },
    /// The degrees of freedom of total sigma come out with the readings.
    SigmaTotal,
    /// Cpm has the overall sigma only.
    OverallOnly,
    /// A distance from the target below zero or above 100 sigmas.
    OffsetOutOfRange,
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
            Self::Method(error) => return error.fmt(f),
            Self::NoTest { method, index } => {
                let choose = if *index == Index::Cpm { "chi-square" } else { "exact, noncentral-t or bissell" };
                return write!(f, "the method {method} has intervals of {index} and no test; choose {choose}");
            }
            Self::SigmaTotal => {
                "the degrees of freedom of total sigma show only in the readings, so it has no size beforehand; size \
                 the study with sigma overall, which is the least that total sigma takes"
            }
            Self::OverallOnly => "Cpm has the overall sigma only; choose that, or another index",
            Self::OffsetOutOfRange => {
                "the distance of the mean from the target must be 0 to 100 sigmas; give one such as 0.5"
            }
        })
    }
}

impl core::error::Error for SizingError {}

impl From<MethodError> for SizingError {
    fn from(error: MethodError) -> Self {
        match error {
            MethodError::Index(_) => Self::IndexOutOfRange,
            error => Self::Method(error),
        }
    }
}

/// Index values up to this have a size: no process is better, and nothing overflows.
pub const MAX_INDEX: f64 = 1000.0;

/// An index value that a size can be computed for.
fn in_range(index: f64) -> Result<f64, SizingError> {
    if index > 0.0 && index <= MAX_INDEX { Ok(index) } else { Err(SizingError::IndexOutOfRange) }
}

/// The smallest whole number from `first` to `most` that meets a demand which, once met, stays met.
///
/// Doubles the number until the demand is met, then halves the gap: about 2 log2 of the answer evaluations.
fn search(
    first: u32,
    most: u32,
    meets: impl Fn(u32) -> Result<bool, SizingError>,
) -> Result<u32, SizingError> {
    if meets(first)? {
        return Ok(first);
    }
    let (mut unmet, mut met) = (first, first);
    loop {
        if unmet >= most {
            return Err(SizingError::AboveLimit);
        }
        met = met.saturating_mul(2).min(most);
        if meets(met)? {
            break;
        }
        unmet = met;
    }
    while met - unmet > 1 {
        let middle = unmet + (met - unmet) / 2;
        if meets(middle)? {
            met = middle;
        } else {
            unmet = middle;
        }
    }
    Ok(met)
}

#[cfg(test)]
mod tests;
