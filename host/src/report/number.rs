//! Numbers for people: fixed decimals, a true minus sign, no negative zero.

/// Rounded to the nearest.
#[must_use]
pub fn nearest(value: f64, places: usize) -> String {
    let text = format!("{value:.places$}");
    match text.strip_prefix('-') {
        Some(digits) if digits.bytes().all(|byte| matches!(byte, b'0' | b'.')) => digits.to_owned(),
        Some(digits) => format!("\u{2212}{digits}"),
        None => text,
    }
}

/// The decimals that limits of an interval are shown with.
const PLACES: usize = 3;
const SHIFT: f64 = 1000.0;

/// A lower limit, rounded down: what is shown is never more than what holds, so 1.3299 does not read as 1.330.
#[must_use]
pub fn lower_limit(value: f64) -> String {
    nearest((value * SHIFT).floor() / SHIFT, PLACES)
}

/// An upper limit, rounded up.
#[must_use]
pub fn upper_limit(value: f64) -> String {
    nearest((value * SHIFT).ceil() / SHIFT, PLACES)
}

/// Degrees of freedom: whole ones as such, others with two decimals, rounded down.
#[must_use]
pub fn degrees_of_freedom(nu: f64) -> String {
    if nu.fract() == 0.0 { nu.to_string() } else { nearest((nu * 100.0).floor() / 100.0, 2) }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn degrees_of_freedom_are_whole_or_rounded_down() {
        assert_eq!(degrees_of_freedom(40.0), "40");
        assert_eq!(degrees_of_freedom(36.479_9), "36.47");
    }

    #[test]
    fn numbers_have_a_true_minus_and_no_negative_zero() {
        assert_eq!(nearest(-0.0001, 2), "0.00");
        assert_eq!(nearest(-1.5, 1), "\u{2212}1.5");
        assert_eq!(nearest(1.25, 2), "1.25");
    }

    #[test]
    fn limits_are_rounded_outwards() {
        assert_eq!((lower_limit(1.3299), upper_limit(1.8311)), ("1.329".to_owned(), "1.832".to_owned()));
        assert_eq!(
            (lower_limit(-0.0001), upper_limit(-0.0001)),
            ("\u{2212}0.001".to_owned(), "0.000".to_owned())
        );
        assert_eq!((lower_limit(1.5), upper_limit(1.5)), ("1.500".to_owned(), "1.500".to_owned()));
    }
}
