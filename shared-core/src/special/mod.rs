//! Distribution functions, on `libm` alone, so that device and host agree bit for bit.
//!
//! No tables beyond node lists, no heap. A small tail is always computed as such, never as 1 − a large one. Outside of
//! their stated ranges the functions give NaN; callers check their arguments first.

pub mod chi_square;
pub(crate) mod gamma;
pub mod noncentral_chi_square;
pub mod noncentral_t;
pub mod normal;
pub(crate) mod quadrature;
pub mod student_t;

/// The two tails of a distribution at a point. The smaller one is computed as such, the larger is what it leaves.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Tails {
    /// P(X ≤ x), the distribution function.
    pub lower: f64,
    /// P(X > x), the survival function.
    pub upper: f64,
}

impl Tails {
    const NAN: Self = Self { lower: f64::NAN, upper: f64::NAN };

    /// From the lower tail; the upper one is what is left.
    fn from_lower(lower: f64) -> Self {
        Self { lower, upper: 1.0 - lower }
    }

    /// From the upper tail; the lower one is what is left.
    fn from_upper(upper: f64) -> Self {
        Self { lower: 1.0 - upper, upper }
    }

    /// Those of the mirrored distribution at the mirrored point.
    const fn mirrored(self) -> Self {
        Self { lower: self.upper, upper: self.lower }
    }

    /// The tail on one side.
    #[must_use]
    pub const fn on(self, side: Side) -> f64 {
        match side {
            Side::Lower => self.lower,
            Side::Upper => self.upper,
        }
    }
}

/// A side of a distribution.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Side {
    /// What lies below.
    Lower,
    /// What lies above.
    Upper,
}

impl Side {
    /// The other side.
    #[must_use]
    pub const fn other(self) -> Self {
        match self {
            Self::Lower => Self::Upper,
            Self::Upper => Self::Lower,
        }
    }

    /// −1 below, 1 above.
    const fn sign(self) -> f64 {
        match self {
            Self::Lower => -1.0,
            Self::Upper => 1.0,
        }
    }
}

/// Halley's step towards a root of g from its value and two derivatives there: −g/g′ / (1 − g g″/(2 g′²)).
///
/// The denominator is held between 1/2 and 2, so that far from the root it remains a damped Newton step.
fn halley_step(g: f64, slope: f64, bend: f64) -> f64 {
    let newton = g / slope;
    -newton / (1.0 - 0.5 * newton * bend / slope).clamp(0.5, 2.0)
}

#[cfg(test)]
mod tests;
