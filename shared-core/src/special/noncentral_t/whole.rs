//! Tails of the noncentral t distribution for whole ν of up to some hundred: no integral, but a sum of one positive term
//! for every second degree of freedom, some ten operations each.
//!
//! With τ = t/√ν and a chi variable χ, F(ν) = P(T ≤ t) = E Φ(τχ − δ) grows by D(k) = τ E*[v^k φ(τv − δ)] from k to k + 2
//! degrees of freedom, E* being the integral over v > 0 against e^(−v²/2) / (2^(k/2) Γ(k/2 + 1)), because the
//! distribution functions of χ differ by v^k e^(−v²/2) / (2^(k/2) Γ(k/2 + 1)). So F(ν) is F(0) = Φ(−δ) or F(1) (by Owen's
//! T function) plus D(0) + D(2) + … or D(1) + D(3) + … up to D(ν − 2), and the upper tail is D(ν) + D(ν + 2) + …. These
//! are the sums of Owen (1968), A survey of properties and applications of the noncentral t-distribution, Technometrics
//! 10:445–478 (from memory; derived anew here).
//!
//! Completing the square, D(k) is a factor times J(k) = ∫ v^k e^(−(v − m)²/2) dv over v > 0, and
//! J(k + 1) = m J(k) + k J(k − 1) ([`Ladder`]). For δ ≥ 0 nothing is subtracted anywhere, so a small tail keeps its digits.
//!
//! Rounding the ladder's two constants would change D(k) by k times as much. Instead the sum is taken as the exact one of
//! a t and a δ beside those asked for, whose distance is computed, and is corrected by it with the tail's own derivatives.

use core::f64::consts::{FRAC_2_PI, PI};

use super::super::{normal, quadrature};
use super::{Side, Sums};

/// Up to here the sum is quicker than the integral.
const MOST_NU: f64 = 400.0;

/// An upper tail is what the lower leaves, if it is above this; a smaller one is summed as such.
const LARGE: f64 = 0.1;

/// An upper tail that would take more degrees of freedom than this above ν is left to the integral.
const MOST_ABOVE: f64 = 600.0;

/// A tail at t > 0 and what its derivatives are made of; `None` where the sum does not serve: fractional or large ν,
/// δ below 0, a t next to 0, a tail next to the smallest double, or one that takes too many terms.
pub(super) fn sums(side: Side, t: f64, nu: f64, delta: f64) -> Option<Sums> {
    let serves = nu <= MOST_NU && nu == libm::floor(nu) && delta >= 0.0 && t < 1e100 && t * t > 1e-4 * nu;
    if !serves {
        return None;
    }
    let at = Nearby::new(t, nu, delta);
    if at.exponent > 600.0 {
        return None;
    }
    let far = libm::exp(-at.exponent) * (1.0 - at.exponent_rest);
    let mut ladder = Ladder::start(&at, nu);
    let odd = ladder.k > 0.0;
    let scale = if odd { far * libm::sqrt(FRAC_2_PI) } else { far };
    let rise = scale * libm::sqrt(at.rest);
    let sum = rise * ladder.climb(nu);
    // F(0) and F(1), the costlier part, are below e^(−h²/2): beside a large sum they do not show.
    let (base, of_base) = if far < 1e-18 * sum {
        (0.0, 0.0)
    } else if odd {
        (at.one_degree(far), 0.0)
    } else {
        // At the very δ: its part of the correction is taken out below.
        (normal::upper_tail(delta), libm::exp(-0.5 * delta * delta) / libm::sqrt(2.0 * PI))
    };
    // E φ(x) and E tS φ(x) to E t³S³ φ(x), x = tS − δ.
    let (root, root_b) = (libm::sqrt(nu), libm::sqrt(at.b));
    let density = nu * scale * root_b * root * ladder.before;
    let along = nu * scale * (t * root_b);
    let density_ts = along * ladder.own / root;
    let second = along * t * (nu + 2.0) * ladder.other / root;
    let third = along * t * t * (nu + 2.0) * ladder.next_own() / (nu * root);
    let (t_short, delta_short) = (at.t_short / t, at.delta_short);

    let lower = base + (sum + (density_ts * t_short - (density - of_base) * delta_short));
    let tail = match side {
        Side::Lower => lower,
        Side::Upper if 1.0 - lower > LARGE => 1.0 - lower,
        Side::Upper => {
            if ladder.degrees_above(t, nu, delta) > MOST_ABOVE {
                return None;
            }
            rise * ladder.remainder() - (density_ts * t_short - density * delta_short)
        }
    };
    (tail > 1e-280).then(|| Sums {
        tail,
        density,
        density_x: density_ts - delta * density,
        density_ts,
        density_ttssx: third - delta * second,
        ..Sums::default()
    })
}

/// The ladder's constants, rounded, and the t and δ whose constants these exactly are.
struct Nearby {
    /// tδ/(ν + t²).
    a: f64,
    nu_a: f64,
    /// ν/(ν + t²).
    b: f64,
    /// 1 − b.
    rest: f64,
    /// δ²b/2 and what rounding took from it: half the square of the distance of the line tS = δ + Z from the origin.
    exponent: f64,
    exponent_rest: f64,
    /// How much the t and δ asked for lie above those of the constants.
    t_short: f64,
    delta_short: f64,
}

impl Nearby {
    fn new(t: f64, nu: f64, delta: f64) -> Self {
        let (square, square_rest) = product(t, t);
        let (total, total_rest) = sum(square, nu);
        let total_rest = total_rest + square_rest;
        let (a, b) = (t * delta / total, nu / total);

        // t² − t′² = (ν + t²) − ν/b.
        let (back, back_rest) = product(b, total);
        let t_short = ((back - nu) + back_rest + b * total_rest) / (2.0 * b * t);
        // tδ − t′δ′ = tδ − aν/b.
        let (line, line_rest) = product(t, delta);
        let (wanted, wanted_rest) = product(line, b);
        let (nu_a, nu_a_rest) = product(a, nu);
        let short = ((wanted - nu_a) + (wanted_rest - 0.5 * nu_a_rest) + line_rest * b) / b;
        let delta_short = (short - delta * t_short) / t;

        // δ′²b/2 = νa²/(2(1 − b)).
        let (rest, rest_rest) = sum(1.0, -b);
        let (top, top_rest) = product(a, 0.5 * nu_a);
        let exponent = top / rest;
        let (back, back_rest) = product(exponent, rest);
        let exponent_rest = ((top - back) - back_rest + top_rest - exponent * rest_rest) / rest;
        Self { a, nu_a, b, rest, exponent, exponent_rest, t_short, delta_short }
    }

    /// F(1) = Φ(−h) + 2 T(h, τ), with h = δ√b and Owen's T function; `far` is e^(−h²/2).
    fn one_degree(&self, far: f64) -> f64 {
        let h = libm::sqrt(2.0 * self.exponent);
        let tau = libm::sqrt(self.rest / self.b);
        let beyond = normal::upper_tail(h);
        if tau <= 1.0 {
            return beyond + 2.0 * owens_t(h, tau, far);
        }
        // T(h, τ) + T(τh, 1/τ) = (Φ(h)Φ(−τh) + Φ(τh)Φ(−h))/2: Owen (1956).
        let higher = tau * h;
        let far_beyond = normal::upper_tail(higher);
        let both = (1.0 - beyond) * far_beyond + (1.0 - far_beyond) * beyond;
        beyond + (both - 2.0 * owens_t(higher, 1.0 / tau, libm::exp(-0.5 * higher * higher)))
    }
}

/// ∫ e^(−h²(1 + x²)/2)/(1 + x²) dx / 2π from 0 to a, for a from 0 to 1; `far` is e^(−h²/2).
fn owens_t(h: f64, a: f64, far: f64) -> f64 {
    // Beyond, the integrand is below 10^-17 of what it is at 0.
    let end = if a * h > 8.9 { 8.9 / h } else { a };
    let integrand = |x: f64| libm::exp(-0.5 * (h * x) * (h * x)) / (1.0 + x * x);
    far / (2.0 * PI) * quadrature::even(end, integrand)
}

/// J(k) b^(k/2) over k!! at the degrees of freedom k that are even or odd as ν is, and of those between, in turn.
struct Ladder {
    /// a and b of [`Nearby`], and νa.
    a: f64,
    b: f64,
    nu_a: f64,
    k: f64,
    /// J(k) b^(k/2) / k!!
    own: f64,
    /// J(k + 1) b^((k+1)/2) / ((k + 2)!! √ν)
    other: f64,
    /// What `other` was before: J(k − 1) b^((k−1)/2) / (k!! √ν)
    before: f64,
    /// 1/(k + 2)
    inverse: f64,
}

impl Ladder {
    /// At k = 0 or 1, with J(0) = Φ(m) and J(1) = m Φ(m) + φ(m), a factor √(2π) left out.
    fn start(at: &Nearby, nu: f64) -> Self {
        let &Nearby { a, nu_a, b, .. } = at;
        let (root, root_b) = (libm::sqrt(nu), libm::sqrt(b));
        let m = a * root / root_b;
        let zeroth = normal::cdf(m);
        let first = m * zeroth + libm::exp(-0.5 * m * m) / libm::sqrt(2.0 * PI);
        if 0.5 * nu == libm::floor(0.5 * nu) {
            let other = 0.5 * first * root_b / root;
            Self { a, b, nu_a, k: 0.0, own: zeroth, other, before: 0.0, inverse: 0.5 }
        } else {
            let other = (m * first + zeroth) * b / (3.0 * root);
            Self { a, b, nu_a, k: 1.0, own: first * root_b, other, before: zeroth / root, inverse: 1.0 / 3.0 }
        }
    }

    fn next_own(&self) -> f64 {
        self.nu_a * self.other + self.b * ((self.k + 1.0) * self.inverse) * self.own
    }

    fn step(&mut self) {
        self.before = self.other;
        self.own = self.next_own();
        self.k += 2.0;
        self.inverse = 1.0 / (self.k + 2.0);
        self.other = (self.a * self.own + self.b * self.k * self.other) * self.inverse;
    }

    /// Up to ν; the sum of all before.
    fn climb(&mut self, nu: f64) -> f64 {
        let mut sum = 0.0;
        while self.k < nu {
            sum += self.own;
            self.step();
        }
        sum
    }

    /// About how far above ν the terms matter: where √k is 8.7 of its deviations above the line's δ/τ.
    fn degrees_above(&self, t: f64, nu: f64, delta: f64) -> f64 {
        let inverse = libm::sqrt(nu) / t;
        let reach = delta * inverse + 8.7 * libm::sqrt(inverse * inverse + 0.5);
        reach * reach - nu
    }

    /// The sum from here on; what is left out is below 10^-17 of it.
    fn remainder(mut self) -> f64 {
        let mut sum = self.own;
        // They fall ever faster, so the rest is less than a geometric series.
        for _ in 0..2000 {
            let last = self.own;
            self.step();
            sum += self.own;
            if self.own < 1e-8 * sum && self.own * (self.own / (last - self.own)) <= 1e-17 * sum {
                break;
            }
        }
        sum
    }
}

/// a + b without error: the double nearest to it and the rest (Knuth 1969, from memory).
fn sum(a: f64, b: f64) -> (f64, f64) {
    let total = a + b;
    let part = total - a;
    (total, (a - (total - part)) + (b - part))
}

/// ab without error: the double nearest to it and the rest (Dekker 1971, from memory); for factors below 10^290.
fn product(a: f64, b: f64) -> (f64, f64) {
    let halves = |x: f64| {
        let scaled = 134_217_729.0 * x;
        let high = scaled - (scaled - x);
        (high, x - high)
    };
    let total = a * b;
    let ((a_high, a_low), (b_high, b_low)) = (halves(a), halves(b));
    (total, ((a_high * b_high - total) + a_high * b_low + a_low * b_high) + a_low * b_low)
}
