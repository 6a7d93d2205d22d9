//! The noncentral chi-square distribution, Σ(Zᵢ + mᵢ)² over ν terms with λ = Σmᵢ²: tails and quantiles, for ν from 1 to
//! 10⁶, fractions allowed, and λ from 0 to 10⁶; tails down to 10^-100.
//!
//! A Poisson mixture of central distributions with ν + 2k degrees of freedom, k of mean λ/2 (Johnson, Kotz & Balakrishnan
//! 1995, chapter 29, from memory), summed around its mode as Benton & Krishnamoorthy (2003) advise. Each tail is summed in
//! the direction in which the central tails grow by adding: downwards for the lower, upwards for the upper. About 18 √(λ/2)
//! terms. Measured against values of 52 digits (ν from 1 to 5000, λ to 20 000): ACCURACY.md.

use super::{Side, Tails, chi_square, gamma, halley_step};

/// Both tails at `x`.
#[must_use]
pub fn tails(x: f64, nu: f64, lambda: f64) -> Tails {
    if x.is_nan() || !in_range(nu, lambda) {
        return Tails::NAN;
    }
    if x <= 0.0 {
        return Tails::from_lower(0.0);
    }
    if x > 20.0 * (nu + lambda) + 5000.0 {
        // Less than the smallest double.
        return Tails::from_upper(0.0);
    }
    if x * (1.0 + lambda) < 1e-20 {
        // Only the first term of the mixture counts.
        return Tails::from_lower(libm::exp(-0.5 * lambda) * chi_square::tails(x, nu).lower);
    }
    if x < nu + lambda {
        Tails::from_lower(mixture(Side::Lower, x, nu, lambda).tail)
    } else {
        Tails::from_upper(mixture(Side::Upper, x, nu, lambda).tail)
    }
}

/// The x that a fraction `p` lies below. For a `p` near 1 take [`upper_quantile`] of what is missing.
///
/// For `p` from 0 to 1; 0 and infinity at the ends.
#[must_use]
pub fn quantile(p: f64, nu: f64, lambda: f64) -> f64 {
    if p > 0.5 { from_tail(Side::Upper, 1.0 - p, nu, lambda) } else { from_tail(Side::Lower, p, nu, lambda) }
}

/// The x that a fraction `risk` lies above.
///
/// For `risk` from 0 to 1; infinity and 0 at the ends.
#[must_use]
pub fn upper_quantile(risk: f64, nu: f64, lambda: f64) -> f64 {
    if risk > 0.5 {
        from_tail(Side::Lower, 1.0 - risk, nu, lambda)
    } else {
        from_tail(Side::Upper, risk, nu, lambda)
    }
}

/// A smaller tail than this is taken as this by quantiles.
const SMALLEST_TAIL: f64 = 1e-100;

fn in_range(nu: f64, lambda: f64) -> bool {
    (1.0..=1e6).contains(&nu) && (0.0..=1e6).contains(&lambda)
}

/// A tail, and x times the density.
struct Mixture {
    tail: f64,
    x_density: f64,
}

fn mixture(side: Side, x: f64, nu: f64, lambda: f64) -> Mixture {
    // A mean below 10^-30 changes no digit of any tail.
    let (a, half, mean) = (0.5 * nu, 0.5 * x, if lambda < 2e-30 { 0.0 } else { 0.5 * lambda });
    // Near the largest term, on the side where the sum ends. Lower terms fall beyond where mean · half = k (a + k), since
    // P(a + 1, x) ≤ P(a, x) x/(a + 1), term by term of the series; upper ones rise up to there, for a like reason.
    let balance = 0.5 * (libm::sqrt(a * a + 4.0 * mean * half) - a);
    let mode = match side {
        Side::Lower => libm::ceil(balance).min(libm::floor(mean)),
        Side::Upper => libm::floor(balance).max(libm::floor(mean)),
    };
    let mut k = start(side, mode, mean, a, half);
    let mut weight = gamma::poisson(k, mean);
    let mut tail = chi_square::tails(x, nu + 2.0 * k).on(side);
    let mut step = gamma::poisson(a + k, half);
    let mut sum = Mixture { tail: 0.0, x_density: 0.0 };
    loop {
        sum.tail += weight * tail;
        sum.x_density += weight * (a + k) * step;
        let past = match side {
            Side::Lower => k <= mode,
            Side::Upper => k >= mode,
        };
        let counts = weight * tail > 1e-18 * sum.tail;
        if past && !counts {
            return sum;
        }
        match side {
            Side::Lower => {
                if k <= 0.0 {
                    return sum;
                }
                weight *= k / mean;
                step *= (a + k) / half;
                k -= 1.0;
                tail += step;
            }
            Side::Upper => {
                k += 1.0;
                weight *= mean / k;
                tail += step;
                step *= half / (a + k);
            }
        }
    }
}

/// Where the sum begins: as far before the mode that the terms beyond are below 10^-18 of the one there.
fn start(side: Side, mode: f64, mean: f64, a: f64, half: f64) -> f64 {
    let (mut k, mut ratio) = (mode, 1.0);
    while ratio > 1e-18 && mean > 0.0 {
        match side {
            Side::Lower => {
                k += 1.0;
                ratio *= mean / k * (half / (a + k)).min(1.0);
            }
            Side::Upper if k > 0.0 => {
                ratio *= k / mean * ((a + k) / half).min(1.0);
                k -= 1.0;
            }
            Side::Upper => break,
        }
    }
    k
}

/// The point that leaves `tail` on its side: Newton's method on the logarithms of tail and point.
fn from_tail(side: Side, tail: f64, nu: f64, lambda: f64) -> f64 {
    if !in_range(nu, lambda) || !(0.0..=1.0).contains(&tail) {
        return f64::NAN;
    }
    if tail == 0.0 {
        return if side == Side::Lower { 0.0 } else { f64::INFINITY };
    }
    let tail = tail.max(SMALLEST_TAIL);
    let goal = libm::log(tail);
    // The chi-square of equal mean and variance: Patnaik (1949).
    let equivalent = (nu + lambda) * (nu + lambda) / (nu + 2.0 * lambda);
    let start = match side {
        Side::Lower => chi_square::quantile(tail, equivalent),
        Side::Upper => chi_square::upper_quantile(tail, equivalent),
    };
    let mut x = start * (nu + lambda) / equivalent;
    for _ in 0..60 {
        x = x.min(20.0 * (nu + lambda) + 5000.0);
        let Mixture { tail: reached, x_density } = mixture(side, x, nu, lambda);
        let reached = reached.max(f64::MIN_POSITIVE);
        let miss = libm::log(reached) - goal;
        let slope = -side.sign() * x_density.max(f64::MIN_POSITIVE) / reached;
        x *= libm::exp(halley_step(miss, slope, 0.0).clamp(-50.0, 1.0));
        if miss.abs() < 1e-9 {
            break;
        }
    }
    x
}
