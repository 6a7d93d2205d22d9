//! The smallest sample whose test tells a claimed index from another.
//!
//! The hypothesis is that the index equals the claim c0. It is rejected when the estimate lies beyond a critical value
//! on the side of c1, the value that the test must detect. By the normal approximation of [`crate::interval::bissell`],
//! for c1 below c0: critical value c0 − z(α) se(c0), power Φ((critical − c1) / se(c1)); mirrored for c1 above c0.

use super::{SizingError, in_range, overall, smallest as search};
use crate::capability::Index;
use crate::interval::standard_error;
use crate::quantity::{Confidence, Count, Millionths};
use crate::special::normal;

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

/// The smallest n at which the claim `claim` is rejected with probability `power` or more if the index is `against`,
/// and with probability `alpha` if the claim holds.
///
/// The search is right because a power of 50 % or more, once reached, grows with n: critical − c1 (towards c0) is then
/// not negative, and grows since se(c0) falls, while it is divided by se(c1), which falls too. Below 50 % the power need
/// not grow, but no power below 50 % can be asked for ([`Confidence`]).
///
/// # Errors
/// Index values that are equal or not above zero, an index without a method, `alpha` of 0 or above 50 %, or a demand
/// beyond [`Count::MAX`] pieces.
pub fn smallest(
    index: Index,
    claim: f64,
    against: f64,
    alpha: Millionths,
    power: Confidence,
) -> Result<PowerSize, SizingError> {
    let test = Test::new(index, claim, against, alpha)?;
    let n = search(|n| Ok(test.at(n)?.power >= power.to_f64()))?;
    let Outcome { power, critical } = test.at(n)?;
    let before = n.previous().and_then(|before| test.at(before).ok());
    Ok(PowerSize { n, achieved: power, achieved_before: before.map(|outcome| outcome.power), critical })
}

/// The probability that n pieces reject the claim if the index is `against`.
///
/// # Errors
/// As for [`smallest`]; fewer than two pieces.
pub fn power_at(
    n: Count,
    index: Index,
    claim: f64,
    against: f64,
    alpha: Millionths,
) -> Result<f64, SizingError> {
    Ok(Test::new(index, claim, against, alpha)?.at(n)?.power)
}

/// A test of a claim, checked, with its quantile.
struct Test {
    index: Index,
    claim: f64,
    against: f64,
    z: f64,
}

struct Outcome {
    power: f64,
    critical: f64,
}

impl Test {
    fn new(index: Index, claim: f64, against: f64, alpha: Millionths) -> Result<Self, SizingError> {
        let (claim, against) = (in_range(claim)?, in_range(against)?);
        if claim == against {
            return Err(SizingError::Indistinguishable);
        }
        if !(1..=500_000).contains(&alpha.0) {
            return Err(SizingError::AlphaOutOfRange);
        }
        Ok(Self { index, claim, against, z: normal::upper_quantile(alpha.to_f64()) })
    }

    fn at(&self, n: Count) -> Result<Outcome, SizingError> {
        let nu = overall(n)?;
        let towards = if self.against < self.claim { -1.0 } else { 1.0 };
        let critical = self.claim + towards * self.z * standard_error(self.index, self.claim, n, nu)?;
        let margin = towards * (self.against - critical);
        Ok(Outcome {
            power: normal::cdf(margin / standard_error(self.index, self.against, n, nu)?),
            critical,
        })
    }
}
