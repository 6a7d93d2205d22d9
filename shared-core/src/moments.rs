//! Exact integer sums of readings. Their order does not matter, two of them can be merged, and a reading can be taken
//! back; mean, variance and distances are rounded to a double once, from an exact ratio of integers.
//!
//! Why everything fits: |counts| ≤ 10^12 and n ≤ 10^6, so |sum| ≤ 10^18 < 2^63 and n · sum of squares ≤ 10^36 < 2^127.

use serde::{Deserialize, Serialize};

use crate::counts::{Counts, Decimal, Resolution};
use crate::quantity::Count;
use crate::ratio::{Wide, ratio, ratio_i128};

/// How many readings, their sum and the sum of their squares, in counts of a resolution.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize)]
#[serde(try_from = "(Count, i64, u128)", into = "(Count, i64, u128)")]
pub struct Moments {
    n: Count,
    sum: i64,
    sum_of_squares: u128,
}

/// Why readings cannot be put together, or taken apart.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub enum MomentsError {
    /// More than [`Count::MAX`] readings.
    Full,
    /// No readings have these sums: the one taken back was never added, or stored sums are damaged.
    Impossible,
}

impl core::fmt::Display for MomentsError {
    fn fmt(&self, f: &mut core::fmt::Formatter<'_>) -> core::fmt::Result {
        f.write_str(match self {
            Self::Full => "more than one million readings; start a new study",
            Self::Impossible => {
                "no set of readings has these sums; the reading taken back was never added, or the sums are damaged"
            }
        })
    }
}

impl core::error::Error for MomentsError {}

impl Moments {
    /// The sums of no reading.
    pub(crate) const ZERO: Self = Self { n: Count::ZERO, sum: 0, sum_of_squares: 0 };

    /// How many readings.
    #[must_use]
    pub const fn n(&self) -> Count {
        self.n
    }

    /// Adds a reading.
    ///
    /// # Errors
    /// [`MomentsError::Full`] at [`Count::MAX`]; nothing has changed then.
    pub fn add(&mut self, counts: Counts) -> Result<(), MomentsError> {
        self.merge(&Self::of(counts))
    }

    /// Takes a reading back that was added before.
    ///
    /// # Errors
    /// [`MomentsError::Impossible`] if what would remain cannot come from readings; nothing has changed then.
    pub fn take_back(&mut self, counts: Counts) -> Result<(), MomentsError> {
        *self = self.without(&Self::of(counts))?;
        Ok(())
    }

    /// Adds all readings of another.
    ///
    /// # Errors
    /// [`MomentsError::Full`] above [`Count::MAX`]; nothing has changed then.
    pub fn merge(&mut self, other: &Self) -> Result<(), MomentsError> {
        let n = Count::new(self.n.get() + other.n.get()).ok_or(MomentsError::Full)?;
        *self =
            Self { n, sum: self.sum + other.sum, sum_of_squares: self.sum_of_squares + other.sum_of_squares };
        Ok(())
    }

    /// The mean, correctly rounded; `None` without readings.
    #[must_use]
    pub fn mean(&self, resolution: Resolution) -> Option<f64> {
        (self.n > Count::ZERO).then(|| {
            let sum = i128::from(self.sum) * i128::from(resolution.step());
            ratio_i128(sum, u128::from(self.n.get()) * power_of_ten(resolution.decimals()))
        })
    }

    /// The variance s² with n − 1, correctly rounded; `None` below two readings.
    #[must_use]
    pub fn variance(&self, resolution: Resolution) -> Option<f64> {
        let before = self.n.previous().filter(|before| *before > Count::ZERO)?;
        let step = u128::from(resolution.step());
        let denominator =
            u128::from(self.n.get()) * u128::from(before.get()) * power_of_ten(2 * resolution.decimals());
        // Below 10^36 · 65535² < 2^152, over at most 10^12 · 10^18 < 2^100.
        Some(ratio(Wide::product(self.scatter(), step * step), denominator.into()))
    }

    /// The standard deviation s with n − 1: the square root of [`Moments::variance`], which is itself correctly rounded.
    #[must_use]
    pub fn standard_deviation(&self, resolution: Resolution) -> Option<f64> {
        self.variance(resolution).map(libm::sqrt)
    }

    /// `limit` − mean, exact, then rounded once; `None` without readings.
    #[must_use]
    pub fn distance_to(&self, limit: Decimal, resolution: Resolution) -> Option<f64> {
        (self.n > Count::ZERO).then(|| {
            let decimals = resolution.decimals().max(limit.decimals());
            ratio_i128(
                self.n_times_distance(limit, resolution, decimals),
                u128::from(self.n.get()) * power_of_ten(decimals),
            )
        })
    }

    /// (1/n) Σ(x − target)², exact, then rounded once; `None` without readings.
    #[must_use]
    pub fn mean_square_about(&self, target: Decimal, resolution: Resolution) -> Option<f64> {
        if self.n == Count::ZERO {
            return None;
        }
        // n Σ(x − T)² = (n Σx² − (Σx)²) + (nT − Σx)². In units of 10^−decimals the first term stays below
        // 10^36 · (65535 · 10^12)² < 2^232 and the second below (7 · 10^34)² < 2^232.
        let decimals = resolution.decimals().max(target.decimals());
        let unit = u128::from(resolution.step()) * power_of_ten(decimals - resolution.decimals());
        let off = self.n_times_distance(target, resolution, decimals).unsigned_abs();
        let numerator = Wide::product(self.scatter(), unit * unit).plus(Wide::product(off, off));
        let n = u128::from(self.n.get());
        Some(ratio(numerator, (n * n * power_of_ten(2 * decimals)).into()))
    }

    /// n · limit − sum of the readings, in units of 10^−decimals: below 10^33 + 65535 · 10^30 < 2^127.
    fn n_times_distance(&self, limit: Decimal, resolution: Resolution, decimals: u8) -> i128 {
        let missing = u32::from(decimals.saturating_sub(resolution.decimals()));
        let sum = i128::from(self.sum) * i128::from(resolution.step()) * 10_i128.pow(missing);
        limit.in_units_of(decimals) * i128::from(self.n.get()) - sum
    }

    /// Σc.
    pub(crate) const fn sum(&self) -> i64 {
        self.sum
    }

    /// Σc².
    pub(crate) const fn sum_of_squares(&self) -> u128 {
        self.sum_of_squares
    }

    /// All readings but the `part`, or an error if they cannot be among them.
    pub(crate) fn without(&self, part: &Self) -> Result<Self, MomentsError> {
        let n =
            self.n.get().checked_sub(part.n.get()).and_then(Count::new).ok_or(MomentsError::Impossible)?;
        // No overflow: both are at most 10^18 in magnitude.
        let sum = self.sum - part.sum;
        let squares = self.sum_of_squares.checked_sub(part.sum_of_squares).ok_or(MomentsError::Impossible)?;
        Self::checked(n, sum, squares)
    }

    /// n Σc² − (Σc)², which is not negative (Cauchy–Schwarz; [`Moments::checked`] holds stored sums to it).
    pub(crate) fn scatter(&self) -> u128 {
        u128::from(self.n.get()) * self.sum_of_squares - square(self.sum)
    }

    /// The sums of one reading.
    fn of(counts: Counts) -> Self {
        Self { n: Count::ONE, sum: counts.get(), sum_of_squares: square(counts.get()) }
    }

    /// Only sums that readings can have.
    fn checked(n: Count, sum: i64, sum_of_squares: u128) -> Result<Self, MomentsError> {
        let pieces = u128::from(n.get());
        let largest = u128::from(Counts::MAX.unsigned_abs());
        let possible = sum_of_squares <= pieces * largest * largest
            && square(sum) <= pieces * sum_of_squares
            && sum_of_squares % 2 == u128::from(sum.unsigned_abs() % 2);
        if possible { Ok(Self { n, sum, sum_of_squares }) } else { Err(MomentsError::Impossible) }
    }
}

fn square(number: i64) -> u128 {
    let magnitude = u128::from(number.unsigned_abs());
    magnitude * magnitude
}

/// 10^`exponent`; callers stay at or below 10^24.
fn power_of_ten(exponent: u8) -> u128 {
    10_u128.pow(exponent.into())
}

impl From<Moments> for (Count, i64, u128) {
    fn from(moments: Moments) -> Self {
        (moments.n, moments.sum, moments.sum_of_squares)
    }
}

impl TryFrom<(Count, i64, u128)> for Moments {
    type Error = MomentsError;

    fn try_from((n, sum, sum_of_squares): (Count, i64, u128)) -> Result<Self, MomentsError> {
        Self::checked(n, sum, sum_of_squares)
    }
}

#[cfg(test)]
mod tests;
