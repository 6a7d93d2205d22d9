//! The smallest sample whose interval is narrow enough.

use super::{Design, SizingError, in_range, overall, smallest as search};
use crate::capability::Index;
use crate::interval::{self, Estimate, Interval, Kind, Quantile};
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

/// The smallest n at which the interval is as narrow as demanded, if the estimate comes out at `at`.
///
/// The half-width falls as n grows: under the root, 1/(9n) and C²/(2(n − 1)) both fall. That holds of the computed
/// doubles too, each step being correctly rounded and so monotone; hence the search misses no smaller n.
///
/// # Errors
/// An index that is not above zero or has no method yet, a precision of zero, or a demand beyond [`Count::MAX`] pieces.
pub fn smallest(
    index: Index,
    at: f64,
    precision: Precision,
    confidence: Confidence,
    kind: Kind,
) -> Result<PrecisionSize, SizingError> {
    if precision.goal() <= 0.0 {
        return Err(SizingError::NoTolerance);
    }
    let quantile = Quantile::new(confidence, kind);
    let width_at = |n| estimate_at(n, index, at, &quantile).map(|estimate| estimate.half_width);
    let n = search(|n| Ok(precision.allows(width_at(n)?, at)))?;
    let estimate = estimate_at(n, index, at, &quantile)?;
    let before = n.previous().and_then(|before| width_at(before).ok());
    Ok(PrecisionSize {
        n,
        achieved: precision.achieved(estimate.half_width, at),
        achieved_before: before.map(|half_width| precision.achieved(half_width, at)),
        interval: estimate.interval,
    })
}

/// The estimate `at` with the interval that n pieces would give it.
///
/// # Errors
/// An index that is not above zero or has no method yet; fewer than two pieces.
pub fn precision_at(
    n: Count,
    index: Index,
    at: f64,
    confidence: Confidence,
    kind: Kind,
) -> Result<Estimate, SizingError> {
    estimate_at(n, index, at, &Quantile::new(confidence, kind))
}

fn estimate_at(n: Count, index: Index, at: f64, quantile: &Quantile) -> Result<Estimate, SizingError> {
    Ok(interval::around(index, in_range(at)?, n, overall(n)?, quantile)?)
}

/// The smallest n at which the interval by the design's method is as narrow as demanded, if the estimate comes out at `at`.
///
/// The half-width of every method falls as n grows; the answer is checked at the next smaller n, which misses the demand.
///
/// # Errors
/// An index value out of range, a precision of zero, or a demand beyond [`Count::MAX`] pieces.
pub fn smallest_by(
    design: &Design,
    at: f64,
    precision: Precision,
    confidence: Confidence,
    kind: Kind,
) -> Result<PrecisionSize, SizingError> {
    if precision.goal() <= 0.0 {
        return Err(SizingError::NoTolerance);
    }
    let width_at = |n| precision_by(n, design, at, confidence, kind).map(|estimate| estimate.half_width);
    let n = design.smallest(|n| Ok(precision.allows(width_at(n)?, at)))?;
    let estimate = precision_by(n, design, at, confidence, kind)?;
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
pub fn precision_by(
    n: Count,
    design: &Design,
    at: f64,
    confidence: Confidence,
    kind: Kind,
) -> Result<Estimate, SizingError> {
    let evidence = design.evidence(in_range(at)?, n)?;
    Ok(interval::by_method(design.method(), &evidence, confidence, kind)?)
}
