//! The smallest sample whose interval is narrow enough.

use super::{Design, SizingError, in_range};
use crate::interval::{self, Estimate, Interval, Kind};
use crate::plan::Plan;
use crate::quantity::{Confidence, Count, Precision};

/// A sample size by precision.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct PrecisionSize {
    /// The smallest number of pieces that meets the demand.
    pub n: Count,
    /// The half-width that n pieces give, in the demand's own terms: a fraction of the index, or a width of it.
    pub achieved: f64,
    /// The same with one piece fewer; `None` if that is too few for any interval.
    pub achieved_before: Option<f64>,
    /// The interval if the estimate came out at the assumed index.
    pub interval: Interval,
}

/// The smallest n at which the interval by the design's method is as narrow as demanded, if the estimate comes out at `at`.
///
/// The half-width of every method falls as n grows (of Bissell's, the computed one too: 1/(9n) and C²/(2ν) fall, and each
/// step is rounded correctly and so monotone); the answer is checked at the next smaller n, which misses the demand.
///
/// # Errors
/// An index value out of range, a precision of zero, or a demand beyond [`Count::MAX`] pieces.
pub fn smallest(
    design: &Design,
    at: f64,
    precision: Precision,
    confidence: Confidence,
    kind: Kind,
) -> Result<PrecisionSize, SizingError> {
    if precision.goal() <= 0.0 {
        return Err(SizingError::NoTolerance);
    }
    let width_at = |n| precision_at(n, design, at, confidence, kind).map(|estimate| estimate.half_width);
    let n = design.smallest(|n| Ok(precision.allows(width_at(n)?, at)))?;
    let estimate = precision_at(n, design, at, confidence, kind)?;
    let before = design.before(n).and_then(|before| width_at(before).ok());
    Ok(PrecisionSize {
        n,
        achieved: precision.achieved(estimate.half_width, at),
        achieved_before: before.map(|half_width| precision.achieved(half_width, at)),
        interval: estimate.interval,
    })
}

/// The estimate `at` with the interval that n pieces would give it by the design's method.
///
/// # Errors
/// An index value out of range; too few pieces.
pub fn precision_at(
    n: Count,
    design: &Design,
    at: f64,
    confidence: Confidence,
    kind: Kind,
) -> Result<Estimate, SizingError> {
    let evidence = design.evidence(in_range(at)?, n)?;
    Ok(interval::of(design.method(), &evidence, confidence, kind)?)
}

/// The pieces that a plan's precision takes if the estimate comes out at `at`: by its method, with what the interval allows
/// for the stop, however many are planned.
///
/// # Errors
/// As for [`smallest`]; [`SizingError::NoTolerance`] too for a plan with another goal.
pub fn smallest_of(plan: &Plan, at: f64) -> Result<Count, SizingError> {
    let precision = plan.rule.precision().ok_or(SizingError::NoTolerance)?;
    let design = Design::new(plan.index, plan.method)?.with_sigma(plan.sigma)?;
    design.smallest(|n| {
        let estimate = plan.estimate(&design.evidence(in_range(at)?, n)?)?;
        Ok(precision.allows(estimate.half_width, at))
    })
}
