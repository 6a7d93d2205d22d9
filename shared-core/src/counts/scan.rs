//! Decimal text to an integer and a number of decimals, with no floating point on the way.

/// What stood in front of the rest of a text.
pub(super) struct Scanned<'a> {
    pub(super) negative: bool,
    /// Below 10^18; meaningless if `too_large`.
    pub(super) mantissa: u64,
    /// Decimals of the mantissa: trailing zeros of the fraction are not among them.
    pub(super) decimals: u8,
    /// More than 18 significant digits within the allowed decimals.
    pub(super) too_large: bool,
    /// A digit other than zero beyond the allowed decimals.
    pub(super) too_fine: bool,
    /// What follows the number, without the padding around it.
    pub(super) rest: &'a [u8],
}

/// Why there is no number at the start.
pub(super) enum Fault {
    /// Nothing but padding.
    Empty,
    /// Not one digit in the whole text.
    NoDigits,
    /// Digits somewhere, but no number at the start.
    NotANumber,
}

const MANTISSA_LIMIT: u64 = 1_000_000_000_000_000_000;

/// Reads padding, a sign, padding, digits, a point or a comma, digits, padding; keeps what follows as `rest`.
pub(super) fn scan(text: &[u8], max_decimals: u8) -> Result<Scanned<'_>, Fault> {
    let text = trim(text);
    if text.is_empty() {
        return Err(Fault::Empty);
    }
    let (negative, unsigned) = match text {
        [b'-', rest @ ..] => (true, trim(rest)),
        [b'+', rest @ ..] => (false, trim(rest)),
        _ => (false, text),
    };
    let (whole, after) = split_digits(unsigned);
    let (fraction, rest) = match after {
        [b'.' | b',', after @ ..] => split_digits(after),
        _ => (&[][..], after),
    };
    if whole.is_empty() && fraction.is_empty() {
        let any = text.iter().any(u8::is_ascii_digit);
        return Err(if any { Fault::NotANumber } else { Fault::NoDigits });
    }
    let mut number = Digits::default();
    for digit in whole {
        number.push_whole(digit - b'0');
    }
    for digit in fraction {
        number.push_fraction(digit - b'0', max_decimals);
    }
    Ok(Scanned {
        negative,
        mantissa: number.mantissa,
        decimals: number.decimals,
        too_large: number.too_large,
        too_fine: number.too_fine,
        rest: trim(rest),
    })
}

/// Digits as they come in.
#[derive(Default)]
struct Digits {
    mantissa: u64,
    decimals: u8,
    /// Zeros of the fraction not yet known to be followed by another digit.
    zeros: u8,
    too_large: bool,
    too_fine: bool,
}

impl Digits {
    fn push_whole(&mut self, digit: u8) {
        let longer = self.mantissa.checked_mul(10).and_then(|m| m.checked_add(u64::from(digit)));
        match longer {
            Some(mantissa) if mantissa < MANTISSA_LIMIT => self.mantissa = mantissa,
            _ => self.too_large = true,
        }
    }

    fn push_fraction(&mut self, digit: u8, max_decimals: u8) {
        if digit == 0 {
            // A run of zeros past 255 digits stays at 255: beyond every `max_decimals` all the same.
            self.zeros = self.zeros.saturating_add(1);
            return;
        }
        let decimals = self.decimals.saturating_add(self.zeros).saturating_add(1);
        if decimals > max_decimals {
            self.too_fine = true;
            return;
        }
        for _ in 0..self.zeros {
            self.push_whole(0);
        }
        self.push_whole(digit);
        self.zeros = 0;
        self.decimals = decimals;
    }
}

fn split_digits(text: &[u8]) -> (&[u8], &[u8]) {
    let end = text.iter().position(|byte| !byte.is_ascii_digit()).unwrap_or(text.len());
    text.split_at_checked(end).unwrap_or((text, &[]))
}

/// Without spaces and tabs at both ends.
fn trim(mut text: &[u8]) -> &[u8] {
    while let [b' ' | b'\t', rest @ ..] | [rest @ .., b' ' | b'\t'] = text {
        text = rest;
    }
    text
}
