//! The noncentral t distribution, T = (Z + δ)/S with Z standard normal and νS² chi-square: tails, quantiles, and the
//! noncentrality that a tail asks for. ν from 1 to 10⁶, fractions allowed; δ from −1000 to 1000, and any to 10^50 with an error
//! that grows with it; tails down to 10^-300, and a smaller one that is asked for is taken as that.
//!
//! Two methods. For whole ν of up to 400 and δ of the sign of t, a finite sum ([`whole`]): the usual case, ν = n − 1.
//! Otherwise P(T > t) = E Φ(δ − tS), an integral over u = ln S by the trapezoidal rule, which converges geometrically
//! because the integrand is entire: with a strip of half-width y the error is e^(−2πy/h) times the integrand's growth in
//! that strip, which is known in closed form ([`Integrand::reach`]). The sum runs outwards from the integrand's peak, so
//! that a tail keeps its relative precision however small; what falls slowly towards s = 0 is summed at once ([`flank`]). Own derivation; the trapezoidal rule's error: Trefethen &
//! Weideman (2014), The exponentially convergent trapezoidal rule, SIAM Review 56:385–458, theorem 5.1, from memory.
//! The scale of the density is in closed form by Stirling's error (Loader 2000), so no gamma function is needed.
//!
//! Measured against values of 52 digits (ν from 1 to 10⁶, δ from −6 to 1000, tails to 10^-30): ACCURACY.md. The series
//! of Lenth (1989, AS 243) returns zero for δ > 38 and is not used.

mod flank;
mod integrand;
mod sharp;
mod whole;

use core::f64::consts::{PI, SQRT_2};

use super::{Side, Tails, gamma, halley_step, normal};
use integrand::{Integrand, Sums};

/// Both tails at `t`.
#[must_use]
pub fn tails(t: f64, nu: f64, delta: f64) -> Tails {
    if t.is_nan() || !in_range(nu, delta) {
        return Tails::NAN;
    }
    if t < 0.0 {
        return tails(-t, nu, -delta).mirrored();
    }
    if t == f64::INFINITY {
        return Tails::from_upper(0.0);
    }
    // Which tail is small: the normal approximation 26.7.10 of Abramowitz & Stegun (1964), without its scale.
    if t * (1.0 - 0.25 / nu) > delta {
        Tails::from_upper(tail(Side::Upper, t, nu, delta))
    } else {
        Tails::from_lower(tail(Side::Lower, t, nu, delta))
    }
}

/// The t that a fraction `p` lies below. For a `p` near 1 take [`upper_quantile`] of what is missing.
///
/// For `p` from 0 to 1; infinite at the ends.
#[must_use]
pub fn quantile(p: f64, nu: f64, delta: f64) -> f64 {
    if p > 0.5 { point(Side::Upper, 1.0 - p, nu, delta) } else { point(Side::Lower, p, nu, delta) }
}

/// The t that a fraction `risk` lies above.
///
/// For `risk` from 0 to 1; infinite at the ends.
#[must_use]
pub fn upper_quantile(risk: f64, nu: f64, delta: f64) -> f64 {
    if risk > 0.5 { point(Side::Lower, 1.0 - risk, nu, delta) } else { point(Side::Upper, risk, nu, delta) }
}

/// The noncentrality with which a fraction `tail` lies on `side` of `t`: a confidence limit of δ. The second number
/// tells how many integrals it took.
///
/// P(T > t) = P(tS − Z < δ): the answer is a quantile of tS − Z, which is nearly normal. Three moments give the start
/// (Cornish & Fisher 1938), Halley's method on the normal scale the rest: 1 or 2 integrals for ν ≥ 10.
#[must_use]
pub fn noncentrality(side: Side, tail: f64, t: f64, nu: f64) -> (f64, u32) {
    if !((1.0..=1e6).contains(&nu) && tail > 0.0 && tail < 1.0 && t.abs() <= LARGEST_DELTA) {
        return (f64::NAN, 0);
    }
    if tail > 0.5 {
        return noncentrality(side.other(), 1.0 - tail, t, nu);
    }
    if t < 0.0 {
        let (mirrored, integrals) = noncentrality(side.other(), tail, -t, nu);
        return (-mirrored, integrals);
    }
    let goal = normal::upper_quantile(tail.max(SMALLEST_TAIL));
    if t < SMALLEST_T {
        return (-side.sign() * goal, 0);
    }
    let settled = settled(goal);
    let mut bracket = Bracket::OPEN;
    let (centre, mut delta) = noncentrality_start(-side.sign() * goal, t, nu);
    let mut integrals = 0;
    for _ in 0..MOST_STEPS {
        let sums = sums::<true>(side, t, nu, delta);
        integrals += 1;
        // The tail above grows with δ, the tail below falls.
        let sign = side.sign();
        let at = NormalScale::new(sums.tail, sign * sums.density, sign * sums.density_x);
        let miss = at.z - goal;
        let step = at.halley(miss, centre - delta);
        if miss.abs() < settled {
            return (delta + step, integrals);
        }
        delta = bracket.step(delta, (miss > 0.0) == (side == Side::Upper), step);
    }
    (delta, integrals)
}

/// A point nearer to zero than this is zero to any digit of a tail.
const SMALLEST_T: f64 = 1e-100;

/// A miss on the normal scale so small that Halley's step, which cubes it, leaves nothing that a double could hold.
const SETTLED: f64 = 1e-5;

/// The same at a goal's z; at tails below 10^-150 steps are Newton's, as second derivatives fall below the smallest double.
fn settled(goal: f64) -> f64 {
    if goal > FAR { 1e-4 * SETTLED } else { SETTLED }
}

/// The z of such a tail.
const FAR: f64 = 26.0;

/// Far more than the solvers need (4 at ν ≥ 3, 15 for ν = 1 and tails of 10^-12), so that they end on any input.
const MOST_STEPS: u32 = 100;

fn in_range(nu: f64, delta: f64) -> bool {
    (1.0..=1e6).contains(&nu) && delta.abs() <= LARGEST_DELTA
}

/// Far beyond what any index asks for; squares of it are still finite.
const LARGEST_DELTA: f64 = 1e50;

/// A smaller tail than this is taken as this.
const SMALLEST_TAIL: f64 = 1e-300;

/// The tail on one side, for any t.
pub(super) fn tail(side: Side, t: f64, nu: f64, delta: f64) -> f64 {
    if t.abs() < SMALLEST_T {
        return normal::upper_tail(-side.sign() * delta);
    }
    let (side, t, delta) = if t < 0.0 { (side.other(), -t, -delta) } else { (side, t, delta) };
    sums::<false>(side, t, nu, delta).tail
}

/// By whichever method is the quicker; for t above zero.
fn sums<const SLOPES: bool>(side: Side, t: f64, nu: f64, delta: f64) -> Sums {
    if delta < LEAST_DELTA {
        // P(T > t) is below Φ(δ), less than the smallest double.
        let tail = if side == Side::Lower { 1.0 } else { 0.0 };
        return Sums { tail, ..Sums::default() };
    }
    if t > LARGEST_T {
        return far_out(side, t, nu, delta);
    }
    whole::sums(side, t, nu, delta)
        .or_else(|| sharp::sums(side, t, nu, delta))
        .unwrap_or_else(|| Integrand::new(side, t, nu, delta).sums::<SLOPES>())
}

/// Φ is zero to a double from here down.
const LEAST_DELTA: f64 = -39.0;

/// From here on P(T > t) goes with t^−ν to the last digit.
const LARGEST_T: f64 = 1e100;

/// For a t whose square might be infinite: from the tail where it is not.
fn far_out(side: Side, t: f64, nu: f64, delta: f64) -> Sums {
    let shrink = LARGEST_T / t;
    let at = sums::<true>(Side::Upper, LARGEST_T, nu, delta);
    let power = libm::exp(nu * libm::log(shrink));
    let tail = at.tail * power;
    Sums {
        tail: if side == Side::Lower { 1.0 - tail } else { tail },
        density: at.density * power,
        density_x: at.density_x * power,
        density_ts: at.density_ts * power,
        density_ttssx: at.density_ttssx * power,
        ..at
    }
}

/// Tail, density and derivatives by the sum and by the integral.
#[cfg(test)]
pub(super) fn both_ways(side: Side, t: f64, nu: f64, delta: f64) -> Option<([f64; 5], [f64; 5])> {
    let all = |sums: Sums| [sums.tail, sums.density, sums.density_ts, sums.density_x, sums.density_ttssx];
    let sum = whole::sums(side, t, nu, delta)?;
    Some((all(sum), all(Integrand::new(side, t, nu, delta).sums::<true>())))
}

/// How many nodes an integral takes.
#[cfg(test)]
pub(super) fn nodes(side: Side, t: f64, nu: f64, delta: f64) -> u32 {
    Integrand::new(side, t, nu, delta).sums::<true>().nodes
}

/// The point that leaves `tail`, at most 1/2, on its side: Halley's method for the normal quantile of the tail as a
/// function of √ν arsinh(t/√ν), in which it is nearly straight.
fn point(side: Side, goal_tail: f64, nu: f64, delta: f64) -> f64 {
    if !in_range(nu, delta) || !(0.0..=1.0).contains(&goal_tail) {
        return f64::NAN;
    }
    if goal_tail == 0.0 {
        return side.sign() * f64::INFINITY;
    }
    let goal = normal::upper_quantile(goal_tail.max(SMALLEST_TAIL));
    let settled = settled(goal);
    let (root, double_root) = (libm::sqrt(nu), libm::sqrt(2.0 * nu));
    // The scale of T is √(1 + t²/2ν), hence arsinh(t/√2ν) √2ν has a scale near 1.
    let centre = libm::asinh(delta / double_root);
    let y_of = |angle: f64| root * libm::asinh(double_root * libm::sinh(angle) / root);
    let mut y = y_of(centre + side.sign() * goal / double_root);
    let centre = y_of(centre);
    let mut bracket = Bracket::OPEN;
    for _ in 0..MOST_STEPS {
        let t = root * libm::sinh(y / root);
        let t = if t.abs() < SMALLEST_T { SMALLEST_T } else { t };
        let (reached, slope, bend) = tail_along_t(side, t, nu, delta);
        // dt/dy and the second derivative.
        let (stretch, curve) = (libm::hypot(1.0, t / root), t / nu);
        let mut at = NormalScale::new(reached, slope, bend).along(stretch / t, curve / t);
        if goal > FAR {
            at.bend = 0.0;
        }
        let miss = at.z - goal;
        let step = at.halley(miss, centre - y);
        if miss.abs() < settled {
            // From the very t of the tail, not from a rounded y.
            return t + step * (stretch + 0.5 * step * curve);
        }
        y = bracket.step(y, (miss < 0.0) == (side == Side::Upper), step);
    }
    root * libm::sinh(y / root)
}

/// A tail, its derivative by t, times t, and its second derivative, times t².
fn tail_along_t(side: Side, t: f64, nu: f64, delta: f64) -> (f64, f64, f64) {
    let (own_side, t, delta) = if t < 0.0 { (side.other(), -t, -delta) } else { (side, t, delta) };
    let Sums { tail, density_ts, density_ttssx, .. } = sums::<true>(own_side, t, nu, delta);
    (tail, -own_side.sign() * density_ts, own_side.sign() * density_ttssx)
}

/// The mean of tS − Z and its quantile w (on the normal scale), by Cornish & Fisher with the skewness.
fn noncentrality_start(w: f64, t: f64, nu: f64) -> (f64, f64) {
    let a = 0.5 * nu;
    let mean =
        libm::exp(a * libm::log1p(0.5 / a) - 0.5 + gamma::stirling_error(a + 0.5) - gamma::stirling_error(a));
    let variance = 1.0 - mean * mean;
    let third = mean * (1.0 + 1.0 / nu - 3.0 + 2.0 * mean * mean);
    let scale = libm::sqrt(1.0 + t * t * variance);
    let ratio = t / scale;
    // Beyond, at ν of a few, the expansion turns back.
    let skewness = (third * ratio * ratio * ratio).min(1.0 / w.abs());
    let square = w * w;
    let bent = w + skewness * (square - 1.0) / 6.0 - skewness * skewness * w * (2.0 * square - 5.0) / 36.0;
    (t * mean, t * mean + scale * bent)
}

/// A tail seen as the z that leaves it above, with derivatives by whatever the tail was derived by.
struct NormalScale {
    z: f64,
    slope: f64,
    bend: f64,
}

impl NormalScale {
    /// From q = P(Z > z): q′ = −φ(z) z′.
    fn new(tail: f64, slope: f64, bend: f64) -> Self {
        let z = normal::upper_quantile(tail);
        let density = libm::exp(-0.5 * z * z) / libm::sqrt(2.0 * PI);
        let z_slope = -slope / density;
        Self { z, slope: z_slope, bend: -bend / density + z * z_slope * z_slope }
    }

    /// The same derived by a y with these first two derivatives of the former variable.
    fn along(self, first: f64, second: f64) -> Self {
        Self { bend: self.bend * first * first + self.slope * second, slope: self.slope * first, ..self }
    }

    /// Halley's step, or, where the tail is too near 0 or 1 for it, half of the way back to where it is about 1/2.
    fn halley(&self, miss: f64, to_centre: f64) -> f64 {
        let step = halley_step(miss, self.slope, self.bend);
        if self.z > -4.0 && miss < 4.0 && step.is_finite() { step } else { 0.5 * to_centre }
    }
}

/// What is known of where a root lies.
struct Bracket {
    low: f64,
    high: f64,
}

impl Bracket {
    const OPEN: Self = Self { low: f64::NEG_INFINITY, high: f64::INFINITY };

    /// The next point: `x` + `step`, or halfway to the bound that this would cross.
    fn step(&mut self, x: f64, root_above: bool, step: f64) -> f64 {
        if root_above {
            self.low = x;
        } else {
            self.high = x;
        }
        let next = x + step;
        if next > self.high {
            0.5 * (x + self.high)
        } else if next < self.low {
            0.5 * (x + self.low)
        } else {
            next
        }
    }
}
