//! The estimate of an index as the pieces come in: a Markov process over looks.
//!
//! In units of sigma, let z be the mean's deviation (towards the nearer limit) and v the sum of squares about the mean
//! after n pieces. Then z is normal with variance 1/n, v is chi-square on n − 1, and m further pieces with mean e and sum
//! of squares w (normal with variance 1/m, chi-square on m − 1) lead to
//!
//! ```text
//! n′ = n + m    z′ = (n z + m e) / n′    v′ = v + w + (n m / n′) (e − z)²
//! ```
//!
//! so (z, v) is all that the past leaves to the future. With ν = n − 1 and s = √(v/ν) the estimate is
//! - one limit: (c − z/3) / s;
//! - two limits, the process centred between them: (c − |z|/3) / s;
//! - Cp: c / s, which needs v alone.

use super::quadrature::gauss_legendre;
use super::walk::{SAMPLED_AT, Walk, points};

/// Where the process stands.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Position {
    /// Only one limit matters: the other is missing, or far away.
    OneLimit,
    /// In the middle between two limits.
    Centred,
    /// The index does not look at the mean: Cp.
    Any,
}

/// The law of an index's estimate.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Estimate {
    /// The index's true value, above zero.
    pub(super) index: f64,
    /// Where the process stands.
    pub(super) position: Position,
}

/// What m further pieces need.
pub(super) struct Step {
    /// (n n′/m), what the square of z′ − z is multiplied by.
    between: f64,
    /// Half the degrees of freedom of the new sum of squares, less one.
    power: f64,
    /// The logarithm of all that is constant.
    scale: f64,
}

/// Mean and sum of squares in units of sigma, and half of v + n z², in which the exponents are additive.
#[derive(Clone, Copy)]
pub(super) struct State {
    z: f64,
    v: f64,
    energy: f64,
}

/// So many standard deviations of the mean are covered on either side: all but 10⁻¹⁰.
const REACH: f64 = 6.5;

/// Terms of less than e⁻⁴⁵ are left out.
const LEAST_EXPONENT: f64 = -45.0;

impl Estimate {
    /// The estimate in the coordinate in which its standard deviation is about 1/√(2ν) everywhere: the area hyperbolic
    /// sine stabilises a variance of 1/(9n) + y²/(2ν), the logarithm one of y²/(2ν).
    pub(super) fn stretch(&self, n: u32, estimate: f64) -> f64 {
        match self.position {
            Position::Any if estimate <= 0.0 => f64::NEG_INFINITY,
            Position::Any => estimate.ln(),
            Position::OneLimit | Position::Centred => (estimate * bend(n)).asinh(),
        }
    }

    /// Back to the estimate.
    pub(super) fn unstretch(&self, n: u32, x: f64) -> f64 {
        match self.position {
            Position::Any => x.exp(),
            Position::OneLimit | Position::Centred => x.sinh() / bend(n),
        }
    }

    /// How fast the estimate grows with the coordinate.
    fn stretched_slope(&self, n: u32, x: f64) -> f64 {
        match self.position {
            Position::Any => x.exp(),
            Position::OneLimit | Position::Centred => x.cosh() / bend(n),
        }
    }

    fn state(&self, n: u32, y: f64, s: f64) -> State {
        let z = if self.position == Position::Any { 0.0 } else { 3.0 * (self.index - y * s) };
        let v = (f64::from(n) - 1.0) * s * s;
        State { z, v, energy: 0.5 * (v + f64::from(n) * z * z) }
    }
}

fn bend(n: u32) -> f64 {
    let n = f64::from(n);
    (4.5 * n / (n - 1.0)).sqrt()
}

impl Walk for Estimate {
    type State = State;
    type Step = Step;

    fn range(&self, n: u32) -> (f64, f64) {
        let x = self.stretch(n, self.index);
        let nu = f64::from(n) - 1.0;
        // A small s makes the estimate's upper tail long when ν is small.
        (x - 8.0 * self.spread(n), x + (8.0 + 32.0 / nu.sqrt()) * self.spread(n))
    }

    fn reach(&self, before: u32, low: f64, high: f64, n: u32) -> (f64, f64) {
        let (lowest, highest) = self.range(n);
        let (old, all) = (f64::from(before), f64::from(n));
        let centre = self.stretch(n, self.index);
        // The old pieces keep their weight, the new ones come from the index itself.
        let mean = |x: f64| centre + (self.stretch(n, self.unstretch(before, x)) - centre) * old / all;
        let width = self.spread(n) * ((all - old) / all).sqrt();
        let low = mean(low) - 8.0 * width;
        let high = mean(high) + (8.0 + 32.0 / (all - old).sqrt()) * width;
        (low.max(lowest), high.min(highest))
    }

    fn spread(&self, n: u32) -> f64 {
        1.0 / (2.0 * (f64::from(n) - 1.0)).sqrt()
    }

    fn fibre(&self, n: u32, x: f64, detail: f64) -> Vec<(State, f64)> {
        let y = self.unstretch(n, x);
        let slope = self.stretched_slope(n, x);
        let nu = f64::from(n) - 1.0;
        if self.position == Position::Any {
            // v = ν c²/y²: one state for an estimate.
            let s = self.index / y;
            return vec![(self.state(n, y, s), 2.0 * nu * s * s / y * slope)];
        }
        // dz dv = 3s dy · 2νs ds. Beside the range of z, s is bounded by its own.
        let reach = REACH / f64::from(n).sqrt();
        let (mut low, mut high) = s_range(nu);
        let to_s = |z: f64| (self.index - z / 3.0) / y;
        let least_z = if self.position == Position::Centred { 0.0 } else { -reach };
        let (one, other) = if y > 0.0 { (to_s(reach), to_s(least_z)) } else { (to_s(least_z), to_s(reach)) };
        if y != 0.0 {
            (low, high) = (low.max(one), high.min(other));
        }
        if low >= high {
            return Vec::new();
        }
        // Along the fibre z runs over so many of its standard deviations; s alone runs over as many of its own.
        let along = (high - low) / (reach / (3.0 * y.abs())).min(high - low) * REACH / detail;
        let weigh = |(s, weight): (f64, f64)| (self.state(n, y, s), weight * 6.0 * nu * s * s * slope);
        if self.position == Position::Centred {
            gauss_legendre(points(along), low, high).into_iter().map(weigh).collect()
        } else {
            // Nothing lies at either end, so equal distances are best.
            let count = (along / SAMPLED_AT).ceil().max(12.0);
            let width = (high - low) / count;
            (0..count as usize).map(|i| weigh((low + (i as f64 + 0.5) * width, width))).collect()
        }
    }

    fn start(&self, n: u32, state: &State) -> f64 {
        let n = f64::from(n);
        let half_nu = 0.5 * (n - 1.0);
        if self.position == Position::Any {
            let scale = -half_nu * std::f64::consts::LN_2 - libm::lgamma(half_nu);
            return (scale + (half_nu - 1.0) * state.v.ln() - 0.5 * state.v).exp();
        }
        let scale = 0.5 * (n / TWO_PI).ln() - half_nu * std::f64::consts::LN_2 - libm::lgamma(half_nu);
        // A process in the middle leaves it to either side alike.
        let sides = if self.position == Position::Centred { 2.0 } else { 1.0 };
        sides * (scale + (half_nu - 1.0) * state.v.ln() - state.energy).exp()
    }

    fn step(&self, from: u32, to: u32) -> Step {
        let (n, after) = (f64::from(from), f64::from(to));
        let m = after - n;
        let (freedom, mean) = if self.position == Position::Any {
            (m, 0.0)
        } else {
            // The mean's density, in the mean of all.
            (m - 1.0, 0.5 * (m / TWO_PI).ln() + (after / m).ln())
        };
        let scale = mean - 0.5 * freedom * std::f64::consts::LN_2 - libm::lgamma(0.5 * freedom);
        Step { between: n * after / m, power: 0.5 * freedom - 1.0, scale }
    }

    fn density(&self, step: &Step, from: &State, to: &State) -> f64 {
        let side = |z: f64| {
            let apart = to.z - z;
            let w = to.v - from.v - step.between * apart * apart;
            if w <= 0.0 {
                return 0.0;
            }
            let exponent = step.scale + from.energy - to.energy + step.power * w.ln();
            if exponent < LEAST_EXPONENT { 0.0 } else { exponent.exp() }
        };
        match self.position {
            Position::Centred => side(from.z) + side(-from.z),
            Position::OneLimit | Position::Any => side(from.z),
        }
    }
}

const TWO_PI: f64 = 2.0 * std::f64::consts::PI;

/// Where s lies but for a chance of 10⁻¹⁰ or so: Wilson & Hilferty (1931), from memory, widened.
fn s_range(nu: f64) -> (f64, f64) {
    let variance = 2.0 / (9.0 * nu);
    let at = |z: f64| (1.0 - variance + z * variance.sqrt()).max(0.01).powf(1.5);
    (at(-REACH - 0.5), at(REACH + 0.5))
}
