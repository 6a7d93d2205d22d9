//! The ratio of two integers, rounded once to the nearest double (ties to even).
//!
//! The quotient's 53 bits are taken one by one by comparing and subtracting: no division, which a Cortex-M0+ lacks
//! at every width, and no intermediate rounding.

/// An unsigned integer below 2^256, just wide enough for the sums of squares of [`crate::moments`].
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub(crate) struct Wide {
    // In this order: the derived comparison looks at the high half first.
    high: u128,
    low: u128,
}

impl From<u128> for Wide {
    fn from(low: u128) -> Self {
        Self { high: 0, low }
    }
}

impl Wide {
    /// a × b: any two fit.
    pub(crate) const fn product(a: u128, b: u128) -> Self {
        const HALF: u128 = u64::MAX as u128;
        let (a_high, a_low) = (a >> 64, a & HALF);
        let (b_high, b_low) = (b >> 64, b & HALF);
        let lowest = a_low * b_low;
        let (cross, other) = (a_low * b_high, a_high * b_low);
        let middle = (lowest >> 64) + (cross & HALF) + (other & HALF);
        Self {
            high: a_high * b_high + (cross >> 64) + (other >> 64) + (middle >> 64),
            low: (lowest & HALF) | (middle << 64),
        }
    }

    /// `self` + `other`, which must stay below 2^256.
    pub(crate) const fn plus(self, other: Self) -> Self {
        let (low, carry) = self.low.overflowing_add(other.low);
        Self { high: self.high + other.high + carry as u128, low }
    }

    /// `self` − `other`, which must not be the larger.
    const fn minus(self, other: Self) -> Self {
        let (low, borrow) = self.low.overflowing_sub(other.low);
        Self { high: self.high - other.high - borrow as u128, low }
    }

    /// `self` × 2^`places`, which must stay below 2^256.
    const fn shifted_left(self, places: u32) -> Self {
        match places {
            0 => self,
            1..=127 => {
                Self { high: (self.high << places) | (self.low >> (128 - places)), low: self.low << places }
            }
            _ => Self { high: self.low << (places - 128), low: 0 },
        }
    }

    /// How many bits the number takes; 0 for zero.
    const fn bits(self) -> u32 {
        if self.high == 0 { 128 - self.low.leading_zeros() } else { 256 - self.high.leading_zeros() }
    }
}

/// numerator ÷ denominator, rounded once. The denominator is not zero, both are below 2^254, and the ratio lies in the
/// range of normal doubles; so it does for all callers, whose numbers lie between 10^-36 and 10^72.
pub(crate) fn ratio(numerator: Wide, denominator: Wide) -> f64 {
    if numerator.bits() == 0 {
        return 0.0;
    }
    // Align the leading bits, then the ratio lies between 1/2 and 2; make it 1 to 2.
    let (top, bottom) = (numerator.bits(), denominator.bits());
    let mut exponent = top.cast_signed() - bottom.cast_signed();
    let mut rest = numerator.shifted_left(bottom.saturating_sub(top));
    let divisor = denominator.shifted_left(top.saturating_sub(bottom));
    if rest < divisor {
        rest = rest.shifted_left(1);
        exponent -= 1;
    }
    let mut quotient = 0_u64;
    for _ in 0..f64::MANTISSA_DIGITS {
        quotient <<= 1;
        if rest >= divisor {
            rest = rest.minus(divisor);
            quotient |= 1;
        }
        rest = rest.shifted_left(1);
    }
    // `rest` is now twice the remainder: compare it with the divisor to know which side of the half it is on.
    if rest > divisor || (rest == divisor && quotient & 1 == 1) {
        quotient += 1;
    }
    // At most 2^53: exact. So is the scaling by a power of two.
    libm::ldexp(quotient as f64, exponent + 1 - f64::MANTISSA_DIGITS.cast_signed())
}

/// The same for a signed numerator and a denominator other than zero, both below 2^127.
pub(crate) fn ratio_i128(numerator: i128, denominator: u128) -> f64 {
    let magnitude = ratio(numerator.unsigned_abs().into(), denominator.into());
    if numerator < 0 { -magnitude } else { magnitude }
}

#[cfg(test)]
pub(crate) mod tests;
