//! Readings as whole counts of the gauge's resolution, and the decimal text they come from and go to.
//!
//! Nothing here touches floating point except the two `to_f64`, which round once. So a reading is the very number
//! that the gauge showed, and sums of readings are exact.

mod decimal;
mod scan;

use core::fmt;
use core::str::FromStr;

use serde::{Deserialize, Serialize};

pub use decimal::{Decimal, DecimalError};
use scan::{Fault, scan};

use crate::quantity::OutOfRange;
use crate::ratio::ratio_i128;

/// A reading: a whole number of the gauge's smallest steps, from −10^12 to 10^12.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
#[serde(try_from = "i64", into = "i64")]
pub struct Counts(i64);

impl Counts {
    /// The largest number of counts, both ways: with at most [`crate::quantity::Count::MAX`] pieces all sums fit.
    pub const MAX: i64 = 1_000_000_000_000;

    /// `None` beyond ±[`Counts::MAX`].
    #[must_use]
    pub const fn new(counts: i64) -> Option<Self> {
        if counts >= -Self::MAX && counts <= Self::MAX { Some(Self(counts)) } else { None }
    }

    /// The plain number.
    #[must_use]
    pub const fn get(self) -> i64 {
        self.0
    }
}

impl From<Counts> for i64 {
    fn from(counts: Counts) -> Self {
        counts.0
    }
}

impl TryFrom<i64> for Counts {
    type Error = OutOfRange;

    fn try_from(counts: i64) -> Result<Self, OutOfRange> {
        Self::new(counts).ok_or(OutOfRange)
    }
}

/// The gauge's smallest step: step × 10^−decimals of the unit, such as 0.001, 0.005 or 10.
///
/// A step that ends in zero has no decimals: 0.010 is 0.01, so that each resolution has one form only.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, Serialize, Deserialize)]
#[serde(try_from = "(u16, u8)", into = "(u16, u8)")]
pub struct Resolution {
    step: u16,
    decimals: u8,
}

/// Why a number is no [`Resolution`].
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub enum ResolutionError {
    /// Not even a number.
    Number(DecimalError),
    /// Zero or less.
    NotPositive,
    /// More than 9 decimals.
    TooFine,
    /// A step of more than 65 535 units of the last decimal.
    TooManyDigits,
    /// A stored step with a needless trailing zero: each resolution has one encoding only.
    NotNormalised,
}

impl fmt::Display for ResolutionError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Self::Number(error) => return error.fmt(f),
            Self::NotPositive => {
                "the resolution must be above zero; write the gauge's smallest step, such as 0.001"
            }
            Self::TooFine => "more than 9 decimals; use a smaller unit",
            Self::TooManyDigits => {
                "the step's digits exceed 65535; write the gauge's smallest step, such as 0.001"
            }
            Self::NotNormalised => "stored resolution with trailing zeros; the data is damaged or not ours",
        })
    }
}

impl core::error::Error for ResolutionError {}

/// Why a gauge line is no reading. Stored in records: variants are only ever added at the end.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, Serialize, Deserialize)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
#[repr(u8)]
pub enum ReadingError {
    /// Nothing but padding.
    Empty,
    /// Not one digit in the line.
    NoDigits,
    /// Digits, but no plain decimal number with at most a unit behind it.
    NotANumber,
    /// A digit other than zero beyond the decimals of the resolution.
    FinerThanResolution,
    /// Not a multiple of the resolution's step.
    OffGrid,
    /// Above 10^12 units of the last decimal.
    OutOfRange,
    /// A number with another unit than the plan's.
    WrongUnit,
    /// A byte beyond ASCII that is not part of the plan's unit.
    NotAscii,
}

impl fmt::Display for ReadingError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Self::Empty => "empty line; measure again",
            Self::NoDigits => "no digits in the line; check that the gauge sends its reading",
            Self::NotANumber => {
                "not a plain decimal number; check the gauge's output format and the line speed"
            }
            Self::FinerThanResolution => {
                "more digits than the plan's resolution; set the gauge or the plan to the other"
            }
            Self::OffGrid => {
                "not a multiple of the plan's resolution; set the gauge or the plan to the other"
            }
            Self::OutOfRange => "number too large; check the gauge and its unit",
            Self::WrongUnit => "another unit than the plan's; switch the gauge's unit",
            Self::NotAscii => "characters beyond ASCII; check the line speed, parity and data bits",
        })
    }
}

impl core::error::Error for ReadingError {}

impl Resolution {
    /// Decimals at most.
    pub const MAX_DECIMALS: u8 = 9;

    /// step × 10^−decimals, with needless trailing zeros dropped.
    ///
    /// # Errors
    /// [`ResolutionError::NotPositive`] for a step of 0, [`ResolutionError::TooFine`] above 9 decimals.
    pub fn new(mut step: u16, mut decimals: u8) -> Result<Self, ResolutionError> {
        if step == 0 {
            return Err(ResolutionError::NotPositive);
        }
        while decimals > 0 && step.is_multiple_of(10) {
            step /= 10;
            decimals -= 1;
        }
        if decimals > Self::MAX_DECIMALS {
            Err(ResolutionError::TooFine)
        } else {
            Ok(Self { step, decimals })
        }
    }

    /// The same number as a resolution.
    ///
    /// # Errors
    /// Each fault has its own [`ResolutionError`].
    pub fn from_decimal(number: Decimal) -> Result<Self, ResolutionError> {
        if number.mantissa() <= 0 {
            return Err(ResolutionError::NotPositive);
        }
        if number.decimals() > Self::MAX_DECIMALS {
            return Err(ResolutionError::TooFine);
        }
        let step = u16::try_from(number.mantissa()).map_err(|_| ResolutionError::TooManyDigits)?;
        Self::new(step, number.decimals())
    }

    /// The step in units of the last decimal, 1 to 65 535.
    #[must_use]
    pub const fn step(self) -> u16 {
        self.step
    }

    /// The decimals that a reading is shown with, 0 to 9.
    #[must_use]
    pub const fn decimals(self) -> u8 {
        self.decimals
    }

    /// One step as the nearest double.
    #[must_use]
    pub fn to_f64(self) -> f64 {
        ratio_i128(self.step.into(), 10_u128.pow(self.decimals.into()))
    }

    /// Reads a gauge's line (without its line end).
    ///
    /// Taken: spaces and tabs at both ends, a sign and spaces after it, leading zeros, a decimal point or comma, and
    /// spaces and the very word `unit` behind the number; a missing unit is fine. Zeros beyond the resolution are taken
    /// too: they carry no information. A comma is always a decimal comma. Exponents are rubbish.
    ///
    /// # Errors
    /// Each fault has its own [`ReadingError`]; a malformed line is named before a number out of place.
    pub fn read(self, text: &[u8], unit: &str) -> Result<Counts, ReadingError> {
        let scanned = scan(text, self.decimals).map_err(|fault| match fault {
            Fault::Empty => ReadingError::Empty,
            _ if !text.is_ascii() => ReadingError::NotAscii,
            Fault::NoDigits => ReadingError::NoDigits,
            Fault::NotANumber => ReadingError::NotANumber,
        })?;
        if !scanned.rest.is_empty() && scanned.rest != unit.as_bytes() {
            return Err(fault_behind_number(scanned.rest));
        }
        if scanned.too_large {
            return Err(ReadingError::OutOfRange);
        }
        if scanned.too_fine {
            return Err(ReadingError::FinerThanResolution);
        }
        let missing = u32::from(self.decimals.saturating_sub(scanned.decimals));
        let units = 10_u64
            .checked_pow(missing)
            .and_then(|factor| scanned.mantissa.checked_mul(factor))
            .and_then(|units| i64::try_from(units).ok())
            .filter(|units| *units <= Counts::MAX)
            .ok_or(ReadingError::OutOfRange)?;
        let step = i64::from(self.step);
        if units % step != 0 {
            return Err(ReadingError::OffGrid);
        }
        let counts = units / step;
        Counts::new(if scanned.negative { -counts } else { counts }).ok_or(ReadingError::OutOfRange)
    }

    /// The exact decimal text of a reading, with all the resolution's decimals.
    ///
    /// [`Resolution::read`] gives back the same counts, as long as counts × step stay within ±10^12 (what `read` gave does).
    #[must_use]
    pub const fn show(self, counts: Counts) -> Shown {
        Shown { resolution: self, counts }
    }
}

/// What stands behind a number although it is not the plan's unit.
fn fault_behind_number(rest: &[u8]) -> ReadingError {
    if !rest.is_ascii() {
        ReadingError::NotAscii
    } else if rest.iter().all(|byte| byte.is_ascii_alphabetic() || b"%\"'/".contains(byte)) {
        ReadingError::WrongUnit
    } else {
        ReadingError::NotANumber
    }
}

impl fmt::Display for Resolution {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write_decimal(f, self.step.into(), self.decimals)
    }
}

impl FromStr for Resolution {
    type Err = ResolutionError;

    fn from_str(text: &str) -> Result<Self, ResolutionError> {
        Self::from_decimal(Decimal::parse(text).map_err(ResolutionError::Number)?)
    }
}

impl From<Resolution> for (u16, u8) {
    fn from(resolution: Resolution) -> Self {
        (resolution.step, resolution.decimals)
    }
}

impl TryFrom<(u16, u8)> for Resolution {
    type Error = ResolutionError;

    fn try_from((step, decimals): (u16, u8)) -> Result<Self, ResolutionError> {
        let resolution = Self::new(step, decimals)?;
        if resolution.decimals == decimals { Ok(resolution) } else { Err(ResolutionError::NotNormalised) }
    }
}

/// A reading ready to be written: see [`Resolution::show`].
#[derive(Clone, Copy, Debug)]
pub struct Shown {
    resolution: Resolution,
    counts: Counts,
}

impl fmt::Display for Shown {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        // At most 65 535 × 10^12: far within i64.
        let units = self.counts.get() * i64::from(self.resolution.step);
        write_decimal(f, units, self.resolution.decimals)
    }
}

/// Writes mantissa × 10^−decimals; `decimals` is at most 12.
fn write_decimal(f: &mut fmt::Formatter<'_>, mantissa: i64, decimals: u8) -> fmt::Result {
    let sign = if mantissa < 0 { "-" } else { "" };
    let magnitude = mantissa.unsigned_abs();
    if decimals == 0 {
        return write!(f, "{sign}{magnitude}");
    }
    let one = 10_u64.pow(decimals.into());
    write!(f, "{sign}{}.{:0width$}", magnitude / one, magnitude % one, width = usize::from(decimals))
}

#[cfg(test)]
mod tests;
