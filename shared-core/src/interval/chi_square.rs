//! Limits by the chi-square distribution.
//!
//! Cp, exact: ν Cp²/Ĉp² is chi-square with ν degrees of freedom, so the limits are
//! Ĉp √(χ²/ν) at the two tails (NIST/SEMATECH e-Handbook 6.1.6; Kane 1986, from memory).
//!
//! Cpm, conservative: as if the mean were on target, ν = n. A mean off target only narrows the distribution of τ̂/τ:
//! at confidences of 90 % and more, the coverage computed exactly by the noncentral chi-square distribution was nowhere
//! below the promise (n from 2 to 1000, |μ − T|/σ from 0 to 5: `coverage` tests). Not proven.

use crate::special::{Side, chi_square};

/// The confidence limit on one side of an estimate whose (ν/estimate²) is chi-square: a fraction `risk` lies beyond it.
#[must_use]
pub fn limit(estimate: f64, nu: f64, side: Side, risk: f64) -> f64 {
    let quantile = match side {
        Side::Lower => chi_square::quantile(risk, nu),
        Side::Upper => chi_square::upper_quantile(risk, nu),
    };
    estimate * libm::sqrt(quantile / nu)
}
