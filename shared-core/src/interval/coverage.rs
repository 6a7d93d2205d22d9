//! How often an interval really covers the true index, by the exact distribution of the estimate.
//!
//! A limit rises with the estimate. So an interval covers the true index exactly if the estimate lies between two
//! values: the one whose upper limit is the true index, and the one whose lower limit is. The coverage is the probability
//! between them.

mod boyles;

pub use boyles::of_cpm as of_cpm_by_boyles;

use super::{Evidence, Kind, Method, balanced, noncentral_t};
use crate::capability::Index;
use crate::estimator::{Position, Study};
use crate::quantity::{Confidence, Count, DegreesOfFreedom};
use crate::special::{Side, Tails, chi_square, noncentral_chi_square, normal};

/// From the least to the most.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Span {
    /// The least.
    pub from: f64,
    /// The most.
    pub to: f64,
}

/// The probability that the interval of Cpk by `method` covers the true Cpk of `study`.
///
/// `None` for a method that does not suit Cpk, for ν outside 1 to 10⁶, and for Bissell's upper limit below ν = z²/2, where
/// it does not rise with the estimate. Absolute error below 10^-10.
#[must_use]
pub fn of_cpk(method: Method, confidence: Confidence, kind: Kind, study: &Study) -> Option<f64> {
    let thresholds = Thresholds::new(method, confidence, kind, study.n, study.nu, study.cpk)?;
    Some(thresholds.coverage(study))
}

/// The least and the most, over all positions of the mean, with which an interval like that of this evidence covers, if the
/// true index is the estimate.
///
/// `None` where it is not known: for an estimate that is not above zero or beyond all reason, and where [`of_cpk`] has
/// none.
#[must_use]
pub fn range(method: Method, evidence: &Evidence, confidence: Confidence, kind: Kind) -> Option<Span> {
    let Evidence { index, estimate, n, nu, .. } = *evidence;
    let promised = Span { from: confidence.to_f64(), to: confidence.to_f64() };
    match (method, index) {
        _ if !(estimate > 0.0 && (1.0..=1e6).contains(&nu.get())) => None,
        // Beyond what the distributions are made for; see there.
        _ if noncentral_t::is_far(2.0 * estimate, n, nu) => None,
        (Method::ChiSquare, Index::Cp) | (Method::NoncentralT, Index::Cpl | Index::Cpu) => Some(promised),
        (Method::ChiSquare, Index::Cpm) => {
            // Far from the target the distribution narrows to a point, and everything is covered.
            let covered = (0..=60).map(|step| of_cpm(confidence, kind, n, 0.05 * f64::from(step)));
            let from = covered.fold(1.0, f64::min);
            Some(Span { from, to: 1.0 })
        }
        (Method::Boyles, Index::Cpm) => {
            let covered =
                [0.0, 0.25, 0.5, 1.0, 2.0].map(|offset| of_cpm_by_boyles(confidence, kind, n, offset));
            let covered = || covered.iter().flatten().copied();
            Some(Span { from: covered().fold(1.0, f64::min), to: covered().fold(0.0, f64::max) })
        }
        (Method::Bissell, Index::Cp) => of_cp_by_bissell(confidence, kind, nu),
        (Method::Bissell, Index::Cpl | Index::Cpu) => {
            let one_limit = Study { n, nu, cpk: estimate, position: Position::OneLimit };
            let covered = of_cpk(method, confidence, kind, &one_limit)?;
            Some(Span { from: covered, to: covered })
        }
        (_, Index::Cpk) => range_of_cpk(method, confidence, kind, n, nu, estimate),
        _ => None,
    }
}

/// Ĉp(1 ∓ z/√(2ν)) covers Cp where ν(Cp/Ĉp)², a chi-square, lies between ν(1 ∓ z/√(2ν))²: the same for every index.
fn of_cp_by_bissell(confidence: Confidence, kind: Kind, nu: DegreesOfFreedom) -> Option<Span> {
    let reach = normal::upper_quantile(kind.risk_on_a_side(confidence)) / libm::sqrt(2.0 * nu.get());
    let tails = |factor: f64| chi_square::tails(nu.get() * factor * factor, nu.get());
    // A lower end below zero covers every Cp.
    let missed_below = if reach < 1.0 { tails(1.0 - reach).lower } else { 0.0 };
    let missed_above = tails(1.0 + reach).upper;
    let covered = match kind {
        Kind::TwoSided => 1.0 - missed_below - missed_above,
        Kind::Lower => 1.0 - missed_below,
        Kind::Upper => 1.0 - missed_above,
    };
    Some(Span { from: covered, to: covered })
}

/// The least and the most of [`of_cpk`] over all positions of the mean.
///
/// A one-sided coverage moves one way with the offset, so its ends are the centred mean and the single limit. A two-sided
/// one is looked at in steps of 0.1 standard errors of the mean: within 10^-4 of the true ends.
#[must_use]
pub fn range_of_cpk(
    method: Method,
    confidence: Confidence,
    kind: Kind,
    n: Count,
    nu: DegreesOfFreedom,
    cpk: f64,
) -> Option<Span> {
    let thresholds = Thresholds::new(method, confidence, kind, n, nu, cpk)?;
    let at = |position| thresholds.coverage(&Study { n, nu, cpk, position });
    let one_limit = at(Position::OneLimit);
    let mut span = Span { from: one_limit, to: one_limit };
    let steps = if kind == Kind::TwoSided { 50 } else { 0 };
    for step in 0..=steps {
        let offset = 0.1 * f64::from(step) / libm::sqrt(f64::from(n.get()));
        let coverage = at(Position::Offset(offset));
        span = Span { from: span.from.min(coverage), to: span.to.max(coverage) };
    }
    Some(span)
}

/// The probability that the interval of Cpm by [`Method::ChiSquare`] covers, for a mean `offset` = |μ − T|/σ off target.
///
/// Exact: nτ̂²/σ² is noncentral chi-square with n degrees of freedom and noncentrality n · offset².
#[must_use]
pub fn of_cpm(confidence: Confidence, kind: Kind, n: Count, offset: f64) -> f64 {
    let risk = kind.risk_on_a_side(confidence);
    let (pieces, square) = (f64::from(n.get()), offset * offset);
    let beyond = |quantile: f64, side| {
        noncentral_chi_square::tails(quantile * (1.0 + square), pieces, pieces * square).on(side)
    };
    // The lower limit is missed if τ̂ comes out small, the upper one if large.
    let missed_low = beyond(chi_square::quantile(risk, pieces), Side::Lower);
    let missed_high = beyond(chi_square::upper_quantile(risk, pieces), Side::Upper);
    match kind {
        Kind::TwoSided => 1.0 - missed_low - missed_high,
        Kind::Lower => 1.0 - missed_low,
        Kind::Upper => 1.0 - missed_high,
    }
}

/// The estimates between which an interval covers a true Cpk.
struct Thresholds {
    low: Option<f64>,
    high: Option<f64>,
}

impl Thresholds {
    fn new(
        method: Method,
        confidence: Confidence,
        kind: Kind,
        n: Count,
        nu: DegreesOfFreedom,
        cpk: f64,
    ) -> Option<Self> {
        if !(1.0..=1e6).contains(&nu.get()) {
            return None;
        }
        if (method, kind) == (Method::Balanced, Kind::TwoSided) {
            let (low, high) = balanced::thresholds(n, nu, cpk, confidence.risk());
            return Some(Self { low: Some(low), high: Some(high) });
        }
        let risk = kind.risk_on_a_side(confidence);
        let one_limit = Study { n, nu, cpk, position: Position::OneLimit };
        let of = |side| match (method, side) {
            (Method::Bissell, _) => bissell(side, risk, &one_limit),
            (Method::NoncentralT | Method::Exact, Side::Lower) => Some(one_limit.upper_quantile(risk)),
            (Method::NoncentralT, Side::Upper) => Some(one_limit.quantile(risk)),
            (Method::Exact, Side::Upper) => {
                Some(Study { position: Position::CENTRED, ..one_limit }.quantile(risk))
            }
            (Method::ChiSquare | Method::Boyles | Method::Balanced, _) => None,
        };
        // The lower limit is the true index at the highest estimate that is covered.
        let high = if kind == Kind::Upper { None } else { Some(of(Side::Lower)?) };
        let low = if kind == Kind::Lower { None } else { Some(of(Side::Upper)?) };
        Some(Self { low, high })
    }

    fn coverage(&self, study: &Study) -> f64 {
        let everything = Tails { lower: 0.0, upper: 0.0 };
        let below = self.low.map_or(everything, |low| study.tails(low)).lower;
        let above = self.high.map_or(everything, |high| study.tails(high)).upper;
        1.0 - below - above
    }
}

/// The estimate whose limit on one side is the true index c: y ∓ z √(1/(9n) + y²/(2ν)) = c, a square equation.
fn bissell(side: Side, risk: f64, study: &Study) -> Option<f64> {
    let z = normal::upper_quantile(risk);
    let (of_mean, of_spread) = (z * z / (9.0 * f64::from(study.n.get())), z * z / (2.0 * study.nu.get()));
    let square = 1.0 - of_spread;
    if square <= 0.0 {
        // A lower limit below zero, whatever the estimate: it covers any c.
        return (side == Side::Lower).then_some(f64::INFINITY);
    }
    let c = study.cpk;
    let root = libm::sqrt(c * c - square * (c * c - of_mean));
    Some(match side {
        Side::Lower => (c + root) / square,
        Side::Upper => (c - root) / square,
    })
}

#[cfg(test)]
mod tests;
