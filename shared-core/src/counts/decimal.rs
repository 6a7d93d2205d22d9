//! An exact decimal number, for limits and targets.

use core::cmp::Ordering;
use core::fmt;
use core::str::FromStr;

use serde::{Deserialize, Serialize};

use super::scan::{Fault, scan};
use crate::ratio::ratio_i128;

/// mantissa × 10^−decimals, exactly: up to 18 digits, 12 of them decimals; no trailing zero among the decimals.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Hash, Serialize, Deserialize)]
#[serde(try_from = "(i64, u8)", into = "(i64, u8)")]
pub struct Decimal {
    mantissa: i64,
    decimals: u8,
}

/// Why a text or a pair is no [`Decimal`].
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub enum DecimalError {
    /// Nothing but spaces.
    Empty,
    /// Not one digit.
    NoDigits,
    /// Something other than sign, digits and one point or comma.
    NotANumber,
    /// More than 18 digits.
    TooManyDigits,
    /// More than 12 decimals.
    TooManyDecimals,
    /// Trailing zeros among the decimals of a stored number: each number has one encoding only.
    NotNormalised,
}

impl fmt::Display for DecimalError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Self::Empty => "no number given; write one such as 9.95",
            Self::NoDigits => "no digits; write a number such as 9.95",
            Self::NotANumber => {
                "not a plain decimal number; write digits with one decimal point or comma, no exponent, no unit"
            }
            Self::TooManyDigits => "more than 18 digits; use a larger unit",
            Self::TooManyDecimals => "more than 12 decimals; use a smaller unit",
            Self::NotNormalised => "stored number with trailing zeros; the data is damaged or not ours",
        })
    }
}

impl core::error::Error for DecimalError {}

impl Decimal {
    /// Decimals at most.
    pub const MAX_DECIMALS: u8 = 12;
    /// Largest mantissa, both ways: 18 nines.
    pub const MAX_MANTISSA: i64 = 999_999_999_999_999_999;

    /// mantissa × 10^−decimals; trailing zeros among the decimals are dropped.
    ///
    /// # Errors
    /// [`DecimalError::TooManyDecimals`] above 12, [`DecimalError::TooManyDigits`] above 18, counted after dropping.
    pub fn new(mut mantissa: i64, mut decimals: u8) -> Result<Self, DecimalError> {
        while decimals > 0 && mantissa % 10 == 0 {
            mantissa /= 10;
            decimals -= 1;
        }
        if decimals > Self::MAX_DECIMALS {
            return Err(DecimalError::TooManyDecimals);
        }
        if mantissa.unsigned_abs() > Self::MAX_MANTISSA.unsigned_abs() {
            return Err(DecimalError::TooManyDigits);
        }
        Ok(Self { mantissa, decimals })
    }

    /// Reads digits with a sign and one decimal point or comma, spaces or tabs at both ends.
    ///
    /// # Errors
    /// Each fault has its own [`DecimalError`].
    pub fn parse(text: impl AsRef<[u8]>) -> Result<Self, DecimalError> {
        let scanned = scan(text.as_ref(), Self::MAX_DECIMALS).map_err(|fault| match fault {
            Fault::Empty => DecimalError::Empty,
            Fault::NoDigits => DecimalError::NoDigits,
            Fault::NotANumber => DecimalError::NotANumber,
        })?;
        if !scanned.rest.is_empty() {
            return Err(DecimalError::NotANumber);
        }
        if scanned.too_large {
            return Err(DecimalError::TooManyDigits);
        }
        if scanned.too_fine {
            return Err(DecimalError::TooManyDecimals);
        }
        let magnitude = i64::try_from(scanned.mantissa).map_err(|_| DecimalError::TooManyDigits)?;
        Self::new(if scanned.negative { -magnitude } else { magnitude }, scanned.decimals)
    }

    /// The digits as one whole number.
    #[must_use]
    pub const fn mantissa(self) -> i64 {
        self.mantissa
    }

    /// How many of the digits are decimals, 0 to 12.
    #[must_use]
    pub const fn decimals(self) -> u8 {
        self.decimals
    }

    /// The nearest double.
    #[must_use]
    pub fn to_f64(self) -> f64 {
        ratio_i128(i128::from(self.mantissa), 10_u128.pow(self.decimals.into()))
    }

    /// `self` − `other`, exact, then rounded once to the nearest double.
    #[must_use]
    pub fn minus(self, other: Self) -> f64 {
        // Both terms stay below 10^30.
        ratio_i128(
            self.in_units_of(Self::MAX_DECIMALS) - other.in_units_of(Self::MAX_DECIMALS),
            1_000_000_000_000,
        )
    }

    /// The number in units of 10^−`decimals`; `decimals` is at least the number's own.
    pub(crate) fn in_units_of(self, decimals: u8) -> i128 {
        i128::from(self.mantissa) * 10_i128.pow(decimals.saturating_sub(self.decimals).into())
    }
}

impl PartialOrd for Decimal {
    fn partial_cmp(&self, other: &Self) -> Option<Ordering> {
        Some(self.cmp(other))
    }
}

impl Ord for Decimal {
    fn cmp(&self, other: &Self) -> Ordering {
        self.in_units_of(Self::MAX_DECIMALS).cmp(&other.in_units_of(Self::MAX_DECIMALS))
    }
}

impl fmt::Display for Decimal {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        super::write_decimal(f, self.mantissa, self.decimals)
    }
}

impl FromStr for Decimal {
    type Err = DecimalError;

    fn from_str(text: &str) -> Result<Self, DecimalError> {
        Self::parse(text)
    }
}

impl From<Decimal> for (i64, u8) {
    fn from(number: Decimal) -> Self {
        (number.mantissa, number.decimals)
    }
}

impl TryFrom<(i64, u8)> for Decimal {
    type Error = DecimalError;

    fn try_from((mantissa, decimals): (i64, u8)) -> Result<Self, DecimalError> {
        let number = Self::new(mantissa, decimals)?;
        if number.decimals == decimals { Ok(number) } else { Err(DecimalError::NotNormalised) }
    }
}
