//! The chi-square distribution: tails and quantiles, for ν from 0.5 to 2·10⁶, fractions allowed.
//!
//! Tails: the series of the incomplete gamma function below its mode, the continued fraction above (NIST Digital Library
//! of Mathematical Functions, 8.7.1 and 8.9.2; from memory), each times a prefactor in the saddle-point form of Loader
//! (2000). About 7 √ν terms near the mode, fewer in the tails.
//!
//! Measured against values of 52 digits (ν from 1 to 10⁶, tails to 10⁻¹²): ACCURACY.md.

use super::{Side, Tails, gamma, halley_step, normal};

/// No series or continued fraction within the stated range needs more terms.
const MOST_TERMS: u32 = 50_000;

/// Both tails at `x`.
#[must_use]
pub fn tails(x: f64, nu: f64) -> Tails {
    if x.is_nan() || !in_range(nu) {
        return Tails::NAN;
    }
    if x <= 0.0 {
        return Tails::from_lower(0.0);
    }
    if x == f64::INFINITY {
        return Tails::from_upper(0.0);
    }
    let (a, half) = (0.5 * nu, 0.5 * x);
    let prefactor = gamma::poisson(a, half);
    if half < a + 1.0 {
        Tails::from_lower(prefactor * series(a, half))
    } else {
        Tails::from_upper(prefactor * a * continued_fraction(a, half))
    }
}

/// The x that a fraction `p` lies below. For a `p` near 1 take [`upper_quantile`] of what is missing.
///
/// For `p` from 0 to 1; 0 and infinity at the ends.
#[must_use]
pub fn quantile(p: f64, nu: f64) -> f64 {
    if p > 0.5 { from_tail(Side::Upper, 1.0 - p, nu) } else { from_tail(Side::Lower, p, nu) }
}

/// The x that a fraction `risk` lies above.
///
/// For `risk` from 0 to 1; infinity and 0 at the ends.
#[must_use]
pub fn upper_quantile(risk: f64, nu: f64) -> f64 {
    if risk > 0.5 { from_tail(Side::Lower, 1.0 - risk, nu) } else { from_tail(Side::Upper, risk, nu) }
}

fn in_range(nu: f64) -> bool {
    (0.5..=2e6).contains(&nu)
}

/// 1 + x/(a + 1) + x²/((a + 1)(a + 2)) + …
fn series(a: f64, x: f64) -> f64 {
    let (mut term, mut sum, mut step) = (1.0, 1.0, a);
    for _ in 0..MOST_TERMS {
        step += 1.0;
        term *= x / step;
        sum += term;
        if term < 1e-17 * sum {
            break;
        }
    }
    sum
}

/// 1/(x + 1 − a − 1(1 − a)/(x + 3 − a − 2(2 − a)/(x + 5 − a − …))), by the method of Lentz (1976).
fn continued_fraction(a: f64, x: f64) -> f64 {
    let mut denominator = x + 1.0 - a;
    let (mut c, mut d) = (1e300, 1.0 / denominator);
    let mut value = d;
    for step in 1..MOST_TERMS {
        let step = f64::from(step);
        let numerator = -step * (step - a);
        denominator += 2.0;
        d = 1.0 / (numerator * d + denominator);
        c = denominator + numerator / c;
        value *= d * c;
        if (d * c - 1.0).abs() < 2e-16 {
            break;
        }
    }
    value
}

/// The point that leaves `tail`, at most 1/2, on its side: Halley's method on the logarithms of tail and point, where
/// both tails are concave. Within 10 steps over the stated range, 3 usually.
fn from_tail(side: Side, tail: f64, nu: f64) -> f64 {
    if !in_range(nu) || !(0.0..=1.0).contains(&tail) {
        return f64::NAN;
    }
    if tail == 0.0 {
        return if side == Side::Lower { 0.0 } else { f64::INFINITY };
    }
    let goal = libm::log(tail);
    let mut x = start(side, tail, goal, nu);
    for _ in 0..60 {
        let reached = tails(x, nu).on(side);
        let miss = libm::log(reached) - goal;
        // x times the density, over the tail.
        let hazard = 0.5 * nu * gamma::poisson(0.5 * nu, 0.5 * x) / reached;
        let slope = -side.sign() * hazard;
        let bend = slope * (0.5 * (nu - x) - slope);
        let step = halley_step(miss, slope, bend).clamp(-2.0, 2.0);
        x += x * libm::expm1(step);
        if miss.abs() < 1e-5 {
            break;
        }
    }
    x
}

/// The cube root is nearly normal (Wilson & Hilferty 1931); far below, P ≈ (x/2)^(ν/2) / Γ(ν/2 + 1), always above P.
fn start(side: Side, tail: f64, log_tail: f64, nu: f64) -> f64 {
    let z = side.sign() * normal::upper_quantile(tail);
    let spread = 2.0 / (9.0 * nu);
    let root = (1.0 - spread + z * libm::sqrt(spread)).max(0.0);
    let wilson_hilferty = nu * root * root * root;
    match side {
        Side::Upper => wilson_hilferty,
        Side::Lower => {
            let a = 0.5 * nu;
            let power = 2.0 * libm::exp((log_tail + gamma::log_factorial(a)) / a);
            wilson_hilferty.max(power)
        }
    }
}
