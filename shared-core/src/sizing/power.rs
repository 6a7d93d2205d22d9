//! The smallest sample whose test tells a claimed index from another.
//!
//! The hypothesis is that the index equals the claim c0. It is rejected when the estimate lies beyond a critical value
//! on the side of c1, the value that the test must detect. By the normal approximation of [`crate::interval::bissell`],
//! for c1 below c0: critical value c0 − z(α) se(c0), power Φ((critical − c1) / se(c1)); mirrored for c1 above c0.

use super::decision::{Decision, Outcome};
use super::{Design, SizingError, in_range};
use crate::quantity::{Confidence, Count, Millionths};

/// A sample size by power.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct PowerSize {
    /// The smallest number of pieces that meets the demand.
    pub n: Count,
    /// The power that n pieces give.
    pub achieved: f64,
    /// The same with one piece fewer; `None` if that is too few for any test.
    pub achieved_before: Option<f64>,
    /// The claim is rejected when the estimate from n pieces lies beyond this value.
    pub critical: f64,
}

/// The smallest n at which a test by the design's method rejects the claim `claim` with probability `power` or more if the
/// index is `against`, and with probability `alpha` (by that method) if the claim holds.
///
/// The search is right because a power of 50 % or more, once reached, grows with n: critical − c1 (towards c0) is then
/// not negative, and grows since se(c0) falls, while it is divided by se(c1), which falls too. Below 50 % the power need
/// not grow, but no power below 50 % can be asked for ([`Confidence`]). What the test really does, [`super::truth`] tells.
///
/// # Errors
/// Index values that are equal or not above zero, a method without a test, `alpha` of 0 or above 50 %, or a demand beyond
/// [`Count::MAX`] pieces.
pub fn smallest(
    design: &Design,
    claim: f64,
    against: f64,
    alpha: Millionths,
    power: Confidence,
) -> Result<PowerSize, SizingError> {
    let decision = checked(claim, against, alpha)?;
    let n = design.smallest(|n| Ok(decision.at(n, design)?.power >= power.to_f64()))?;
    let Outcome { power, critical } = decision.at(n, design)?;
    let before = design.before(n).and_then(|before| decision.at(before, design).ok());
    Ok(PowerSize { n, achieved: power, achieved_before: before.map(|outcome| outcome.power), critical })
}

/// The probability that n pieces reject the claim by the design's method if the index is `against`.
///
/// # Errors
/// As for [`smallest`]; too few pieces.
pub fn power_at(
    n: Count,
    design: &Design,
    claim: f64,
    against: f64,
    alpha: Millionths,
) -> Result<f64, SizingError> {
    Ok(checked(claim, against, alpha)?.at(n, design)?.power)
}

/// A test of a claim whose numbers make sense.
fn checked(claim: f64, against: f64, alpha: Millionths) -> Result<Decision, SizingError> {
    let (claim, against) = (in_range(claim)?, in_range(against)?);
    if claim == against {
        return Err(SizingError::Indistinguishable);
    }
    if !(1..=500_000).contains(&alpha.0) {
        return Err(SizingError::AlphaOutOfRange);
    }
    Ok(Decision { claim, against, alpha: alpha.to_f64() })
}
