//! Limits of Cpm by a chi-square distribution with the same mean and variance.
//!
//! nτ̂²/σ² is noncentral chi-square with n degrees of freedom and noncentrality nδ², δ = (μ − T)/σ; Patnaik (1949),
//! Biometrika 36:202–232, replaces it by a chi-square with f = n(1 + δ²)²/(1 + 2δ²) degrees of freedom. Boyles (1991), The
//! Taguchi capability index, Journal of Quality Technology 23:17–26, puts the estimate δ̂ = (x̄ − T)/σ̂ₙ in δ's place. From
//! memory. An approximation.

use super::chi_square;
use crate::quantity::Count;
use crate::special::Side;

/// The confidence limit on one side. `squared_offset` is δ̂², σ̂ₙ² being the mean square about the mean.
#[must_use]
pub fn limit(estimate: f64, n: Count, squared_offset: f64, side: Side, risk: f64) -> f64 {
    chi_square::limit(estimate, degrees_of_freedom(n, squared_offset), side, risk)
}

/// f = n(1 + δ²)²/(1 + 2δ²), never below n; held to 2·10⁶, which only widens an interval that is a point to the eye.
#[must_use]
pub fn degrees_of_freedom(n: Count, squared_offset: f64) -> f64 {
    let offset = squared_offset.min(1e7);
    (f64::from(n.get()) * (1.0 + offset * offset / (1.0 + 2.0 * offset))).min(2e6)
}
