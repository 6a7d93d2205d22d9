//! Student's t distribution: tails and quantiles, for ν from 1 to 10⁶, fractions allowed.
//!
//! It is the noncentral t distribution without noncentrality, and is computed as such ([`super::noncentral_t`]).
//! Measured against values of 52 digits (ν from 1 to 10⁶, quantiles to 10⁻¹²): ACCURACY.md.

use super::{Tails, noncentral_t};

/// Both tails at `t`.
#[must_use]
pub fn tails(t: f64, nu: f64) -> Tails {
    noncentral_t::tails(t, nu, 0.0)
}

/// The t that a fraction `p` lies below. For a `p` near 1 take [`upper_quantile`] of what is missing.
///
/// For `p` from 0 to 1; infinite at the ends. Near the median its error is a few 10^-16 in itself, not of its size.
#[must_use]
pub fn quantile(p: f64, nu: f64) -> f64 {
    noncentral_t::quantile(p, nu, 0.0)
}

/// The t that a fraction `risk` lies above: the mirror image of [`quantile`].
#[must_use]
pub fn upper_quantile(risk: f64, nu: f64) -> f64 {
    -quantile(risk, nu)
}
