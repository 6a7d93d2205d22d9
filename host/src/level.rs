//! Levels and widths as people type them: `95%`, `0.95`, `10 %`, `0.1`. Read exactly, to whole millionths.

use std::fmt;

use donelight_core::quantity::Millionths;

/// Whole millionths, and whether they were written with a percent sign.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Level {
    /// 95 % and 0.95 are both 950 000.
    pub millionths: u32,
    /// Written with a percent sign.
    pub percent: bool,
}

/// Why a text is no level.
#[derive(Clone, Copy, Debug, PartialEq, Eq, thiserror::Error)]
pub enum LevelError {
    /// Not digits with at most one decimal point or comma.
    #[error("not a number; write for example 95% or 0.95")]
    NotANumber,
    /// More decimals than a millionth has.
    #[error("more decimals than are kept: at most 6, or 4 with a percent sign")]
    TooFine,
    /// Above 4294.967295.
    #[error("number too large")]
    TooLarge,
}

/// Reads digits with an optional decimal point or comma and an optional percent sign; no float on the way.
///
/// # Errors
/// See [`LevelError`]; a sign is not a digit.
pub fn read(text: &str) -> Result<Level, LevelError> {
    let text = text.trim();
    let (number, percent) = match text.strip_suffix('%') {
        Some(number) => (number.trim_end(), true),
        None => (text, false),
    };
    let (whole, fraction) = number.split_once(['.', ',']).unwrap_or((number, ""));
    let digits = |part: &str| part.bytes().all(|byte| byte.is_ascii_digit());
    if whole.len() + fraction.len() == 0 || !digits(whole) || !digits(fraction) {
        return Err(LevelError::NotANumber);
    }
    let places = if percent { 4 } else { 6 };
    let fraction = fraction.trim_end_matches('0');
    if fraction.len() > places {
        return Err(LevelError::TooFine);
    }
    let padded = format!("{whole}{fraction:0<places$}");
    let millionths = padded.parse().map_err(|_| LevelError::TooLarge)?;
    Ok(Level { millionths, percent })
}

/// A risk above 0 and up to 50 %.
///
/// # Errors
/// Words that say what to write instead.
pub fn alpha(text: &str) -> Result<Millionths, String> {
    let level = read(text).map_err(|error| error.to_string())?;
    match level.millionths {
        1..=500_000 => Ok(Millionths(level.millionths)),
        _ => Err("not above 0% and up to 50%; write for example 5% or 0.05".to_owned()),
    }
}

/// An index value from 0.01 to 100.
///
/// # Errors
/// Words that say what to write instead.
pub fn index_value(text: &str) -> Result<Millionths, String> {
    let level = read(text).map_err(|error| match error {
        LevelError::NotANumber => "not a positive number such as 1.33".to_owned(),
        other => other.to_string(),
    })?;
    match level {
        Level { percent: true, .. } => Err("an index has no percent sign; write for example 1.33".to_owned()),
        Level { millionths: 10_000..=100_000_000, .. } => Ok(Millionths(level.millionths)),
        _ => Err("not between 0.01 and 100".to_owned()),
    }
}

/// Millionths as a percentage without superfluous zeros: `95 %`, `99.73 %`.
#[must_use]
pub fn percent(millionths: u32) -> String {
    format!("{} %", Plain(millionths, 10_000))
}

/// Millionths as a plain number without superfluous zeros: `1.5`, `0.15`.
#[must_use]
pub fn plain(millionths: u32) -> String {
    Plain(millionths, 1_000_000).to_string()
}

struct Plain(u32, u32);

impl fmt::Display for Plain {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let Self(value, one) = *self;
        let places = one.ilog10() as usize;
        let text = format!("{}.{:0places$}", value / one, value % one);
        f.write_str(text.trim_end_matches('0').trim_end_matches('.'))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_percentage_and_its_fraction_are_the_same_level() {
        for (percentage, fraction, millionths) in [
            ("95%", "0.95", 950_000),
            ("99,73 %", "0,9973", 997_300),
            ("2.5%", ".025", 25_000),
            ("150%", "1.5", 1_500_000),
        ] {
            assert_eq!(read(percentage), Ok(Level { millionths, percent: true }));
            assert_eq!(read(fraction), Ok(Level { millionths, percent: false }));
        }
    }

    #[test]
    fn what_is_shown_reads_back() {
        for millionths in [0, 1, 999_999, 1_000_000, 950_000, 12_345_678, u32::MAX] {
            assert_eq!(read(&plain(millionths)), Ok(Level { millionths, percent: false }));
            assert_eq!(read(&percent(millionths)), Ok(Level { millionths, percent: true }));
        }
    }

    #[test]
    fn what_is_no_level_is_refused_with_its_reason() {
        for text in ["", "%", "-1", "+1", "1.2.3", "1e3", "ninety", ".", "0x10", "９"] {
            assert_eq!(read(text), Err(LevelError::NotANumber), "{text}");
        }
        assert_eq!(read("0.1234567"), Err(LevelError::TooFine));
        assert_eq!(read("95.12345%"), Err(LevelError::TooFine));
        assert_eq!(read("95.12340%"), Ok(Level { millionths: 951_234, percent: true }));
        assert_eq!(read("4295"), Err(LevelError::TooLarge));
    }
}
