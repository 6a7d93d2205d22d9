//! The incomplete gamma function near its mode for large a, by Temme's uniform expansion (1979, The asymptotic expansion of
//! the incomplete gamma functions, SIAM J. Math. Anal. 10:757–766; NIST Digital Library of Mathematical Functions, 8.12;
//! from memory).
//!
//! With η²/2 = λ − 1 − ln λ, λ = x/a, η of the sign of λ − 1: Q = erfc(η√(a/2))/2 + R, P = erfc(−η√(a/2))/2 − R, where
//! R = e^(−aη²/2)/√(2πa) · Σ c(k, η) a^−k. The c are power series in η; their coefficients follow from those of λ − 1 in
//! η by recurrences, which the compiler evaluates.

use core::f64::consts::TAU;

use super::super::gamma;
use super::Tails;

/// From here on the expansion holds to the last digits and is quicker.
const LEAST_A: f64 = 150.0;

/// Up to this |η| the power series do.
const MOST_ETA: f64 = 0.5;

/// Powers of 1/a, and of η in the first.
const ORDERS: usize = 6;
const POWERS: usize = 20;

/// Both tails at x, both of Γ's arguments halves of the chi-square's; `None` for a small a and far tails.
pub(super) fn tails(a: f64, x: f64) -> Option<Tails> {
    if a < LEAST_A || (x - a).abs() > 0.6 * a {
        return None;
    }
    let deviance = gamma::deviance(x, a);
    let eta = libm::copysign(libm::sqrt(2.0 * deviance), x - a);
    if eta.abs() > MOST_ETA {
        return None;
    }
    let (inverse, mut sum) = (1.0 / a, 0.0);
    for orders in SERIES.iter().rev() {
        let coefficient = orders.iter().rev().fold(0.0, |sum, coefficient| sum * inverse + coefficient);
        sum = sum * eta + coefficient;
    }
    let rest = libm::exp(-a * deviance) / libm::sqrt(TAU * a) * sum;
    let root = libm::sqrt(a * deviance);
    Some(if eta > 0.0 {
        Tails::from_upper(0.5 * libm::erfc(root) + rest)
    } else {
        Tails::from_lower(0.5 * libm::erfc(root) - rest)
    })
}

static SERIES: [[f64; ORDERS]; POWERS] = series();

/// The coefficients of c(k, η), by power of η and k.
#[allow(
    clippy::indexing_slicing,
    reason = "evaluated by the compiler, which refuses an index that is too high"
)]
const fn series() -> [[f64; ORDERS]; POWERS] {
    const ALL: usize = POWERS + 2 * ORDERS + 2;
    // λ − 1 = η + η²/3 + η³/36 + …, from (λ − 1) dλ/dη = λ η.
    let mut alpha = [0.0; ALL];
    alpha[1] = 1.0;
    let mut n = 2;
    while n < ALL {
        let mut sum = alpha[n - 1];
        let mut i = 2;
        while i < n {
            sum -= i as f64 * alpha[i] * alpha[n + 1 - i];
            i += 1;
        }
        alpha[n] = sum / (n as f64 + 1.0);
        n += 1;
    }
    // c(0) = 1/(λ − 1) − 1/η; c(k) = (dc(k − 1)/dη)/η + (−1)^k g(k)/(λ − 1), with Stirling's g(k) = (2k + 1)!! α(2k + 1).
    let mut first = [0.0; ALL];
    let mut n = 0;
    while n + 2 < ALL {
        first[n] = (n as f64 + 2.0) * alpha[n + 2];
        n += 1;
    }
    first[0] = -1.0 / 3.0;
    let mut result = [[0.0; ORDERS]; POWERS];
    let mut current = first;
    let (mut order, mut stirling) = (0, 1.0);
    while order < ORDERS {
        let mut n = 0;
        while n < POWERS {
            result[n][order] = current[n];
            n += 1;
        }
        order += 1;
        stirling *= -(2.0 * order as f64 + 1.0);
        let factor = stirling * alpha[2 * order + 1];
        let before = current;
        let mut n = 0;
        while n + 2 < ALL {
            current[n] = factor * first[n] + (n as f64 + 2.0) * before[n + 2];
            n += 1;
        }
    }
    result
}
