//! The standard normal distribution: tails and quantiles.
//!
//! Nothing here subtracts a probability from 1: a small tail is computed as such, and a quantile from a small risk too.

// The coefficients stand as they were published; some have a digit more than a double holds.
#![allow(clippy::excessive_precision)]

use core::f64::consts::FRAC_1_SQRT_2;

/// P(Z > z).
///
/// Relative error below 10^-14 up to z = 8.5; beyond, about z² · 10^-16, as rounding z / √2 alone costs that much.
#[must_use]
pub fn upper_tail(z: f64) -> f64 {
    0.5 * libm::erfc(z * FRAC_1_SQRT_2)
}

/// P(Z ≤ z): the mirror image of [`upper_tail`], with the same precision.
#[must_use]
pub fn cdf(z: f64) -> f64 {
    upper_tail(-z)
}

/// The z that a fraction `risk` lies above: 1.645 for 0.05.
///
/// For `risk` from 0 to 1; infinite at the ends, not a number outside.
#[must_use]
pub fn upper_quantile(risk: f64) -> f64 {
    -quantile(risk)
}

/// The z that a fraction `p` lies below: −1.645 for 0.05.
///
/// For `p` from 0 to 1; infinite at the ends, not a number outside. For a `p` near 1 take [`upper_quantile`] of what is
/// missing. Algorithm AS 241, PPND16: Wichura (1988), The percentage points of the normal distribution, Applied
/// Statistics 37:477–484; coefficients from memory, held to a table of 20 digits by the tests.
#[must_use]
pub fn quantile(p: f64) -> f64 {
    let q = p - 0.5;
    if q.abs() <= 0.425 {
        return above_median(q);
    }
    let tail = if q < 0.0 { p } else { 1.0 - p };
    let z = if tail > 0.0 {
        let r = libm::sqrt(-libm::log(tail));
        if r <= 5.0 { rational(r - 1.6, &TAIL) } else { rational(r - 5.0, &FAR_TAIL) }
    } else if tail == 0.0 {
        f64::INFINITY
    } else {
        f64::NAN
    };
    if q < 0.0 { -z } else { z }
}

/// The z with P(0 < Z < z) = `q`, for |q| up to 0.425.
pub(super) fn above_median(q: f64) -> f64 {
    q * rational(0.180625 - q * q, &CENTRE)
}

/// The ratio of two polynomials of degree 7, coefficients from the constant upwards.
fn rational(x: f64, (numerator, denominator): &([f64; 8], [f64; 8])) -> f64 {
    let polynomial = |coefficients: &[f64; 8]| coefficients.iter().rev().fold(0.0, |sum, c| sum * x + c);
    polynomial(numerator) / polynomial(denominator)
}

/// |p − 1/2| ≤ 0.425.
const CENTRE: ([f64; 8], [f64; 8]) = (
    [
        3.3871328727963666080,
        1.3314166789178437745e2,
        1.9715909503065514427e3,
        1.3731693765509461125e4,
        4.5921953931549871457e4,
        6.7265770927008700853e4,
        3.3430575583588128105e4,
        2.5090809287301226727e3,
    ],
    [
        1.0,
        4.2313330701600911252e1,
        6.8718700749205790830e2,
        5.3941960214247511077e3,
        2.1213794301586595867e4,
        3.9307895800092710610e4,
        2.8729085735721942674e4,
        5.2264952788528545610e3,
    ],
);

/// The smaller of p and 1 − p at least e^−25.
const TAIL: ([f64; 8], [f64; 8]) = (
    [
        1.42343711074968357734,
        4.63033784615654529590,
        5.76949722146069140550,
        3.64784832476320460504,
        1.27045825245236838258,
        2.41780725177450611770e-1,
        2.27238449892691845833e-2,
        7.74545014278341407640e-4,
    ],
    [
        1.0,
        2.05319162663775882187,
        1.67638483018380384940,
        6.89767334985100004550e-1,
        1.48103976427480074590e-1,
        1.51986665636164571966e-2,
        5.47593808499534494600e-4,
        1.05075007164441684324e-9,
    ],
);

/// The smaller of p and 1 − p below e^−25.
const FAR_TAIL: ([f64; 8], [f64; 8]) = (
    [
        6.65790464350110377720,
        5.46378491116411436990,
        1.78482653991729133580,
        2.96560571828504891230e-1,
        2.65321895265761230930e-2,
        1.24266094738807843860e-3,
        2.71155556874348757815e-5,
        2.01033439929228813265e-7,
    ],
    [
        1.0,
        5.99832206555887937690e-1,
        1.36929880922735805310e-1,
        1.48753612908506148525e-2,
        7.86869131145613259100e-4,
        1.84631831751005468180e-5,
        1.42151175831644588870e-7,
        2.04426310338993978564e-15,
    ],
);
