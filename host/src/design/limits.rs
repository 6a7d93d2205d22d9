//! Confidence limits after an early decision.
//!
//! A study that stops where its estimate is extreme has an estimate, and with it an interval, that leans to that side. These
//! limits allow for it: results are ordered by where the study ended, first those that kept on the high side, the earlier the
//! higher, then those that ended low, the later the higher, and within a look by the estimate (Fairbanks & Madsen 1982;
//! Tsiatis, Rosner & Mehta 1984; both from memory). The lower limit is the index at which a result as high or higher has
//! just the risk for its chance.
//!
//! "As high or higher" is an event that a study with nowhere lower estimates stays in; so, as in the [design](super), its
//! chance grows with the index and with the distance of the mean from the middle, and the limits hold for every position
//! of the mean: the lower one where a single limit matters, the upper one in the middle.

use donelight_core::capability::Index;
use donelight_core::interval::{Interval, Kind};
use donelight_core::quantity::{Confidence, Count};
use donelight_core::special::normal;
use donelight_core::stopping::early::{Decision, EarlyDecision, Look as TableLook};

use super::Limits;
use super::boundaries::{Row, Scale, course};
use super::estimate::{Estimate, Position};
use super::laws::TenThousandths;
use super::walk::Look;

/// Where a study ended.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Ending {
    /// After so many pieces; a look of the table.
    pub n: Count,
    /// With this estimate.
    pub estimate: f64,
}

/// The interval after an early decision; `None` if the study did not end at a look of the table, if the index has no law,
/// or if a limit lies outside of 0.01 to 100.
#[must_use]
pub fn interval(
    early: &EarlyDecision,
    index: Index,
    limits: Limits,
    ending: Ending,
    confidence: Confidence,
    kind: Kind,
) -> Option<Interval> {
    let result = Result::new(early, ending)?;
    let (for_low, for_high) = match (index, limits) {
        (Index::Cpm, _) => return None,
        (Index::Cp, _) => (Position::Any, Position::Any),
        (Index::Cpk, Limits::Two) => (Position::OneLimit, Position::Centred),
        (Index::Cpk | Index::Cpl | Index::Cpu, _) => (Position::OneLimit, Position::OneLimit),
    };
    let risk = if kind == Kind::TwoSided { confidence.risk() / 2.0 } else { confidence.risk() };
    let low =
        || index_where(ending.estimate, risk, |index| result.as_high(&Estimate { index, position: for_low }));
    let high =
        || index_where(ending.estimate, risk, |index| result.as_low(&Estimate { index, position: for_high }));
    Some(match kind {
        Kind::TwoSided => Interval { low: Some(low()?), high: Some(high()?) },
        Kind::Lower => Interval { low: Some(low()?), high: None },
        Kind::Upper => Interval { low: None, high: Some(high()?) },
    })
}

/// A result and the looks that led to it.
struct Result {
    /// The rows before the last look that was taken.
    before: Vec<Row>,
    n: u32,
    estimate: f64,
    ended_high: bool,
}

impl Result {
    fn new(early: &EarlyDecision, ending: Ending) -> Option<Self> {
        let decision = early.decide(ending.n, ending.estimate)?;
        let at = early.looks.iter().position(|look| look.n == ending.n)?;
        let to_row = |look: &TableLook| {
            let (keep, reject) = (look.keep.map(|b| b.to_f64()), look.reject.map(|b| b.to_f64()));
            let (low, high) = if early.rejects_low() { (reject, keep) } else { (keep, reject) };
            Row { n: look.n.get(), low, high }
        };
        Some(Self {
            before: early.looks.iter().take(at).map(to_row).collect(),
            n: ending.n.get(),
            estimate: ending.estimate,
            ended_high: (decision == Decision::ClaimKept) == early.rejects_low(),
        })
    }

    /// The chance of a result as high or higher.
    fn as_high(&self, law: &Estimate) -> f64 {
        let (low, high, below, above) = self.course(law);
        if self.ended_high { high + above } else { 1.0 - low - below }
    }

    /// The chance of a result as low or lower.
    fn as_low(&self, law: &Estimate) -> f64 {
        let (low, high, below, above) = self.course(law);
        if self.ended_high { 1.0 - high - above } else { low + below }
    }

    /// The chances to have left low or high before the last look, and to be below or above the estimate at it.
    fn course(&self, law: &Estimate) -> (f64, f64, f64, f64) {
        let x = TenThousandths.x(law, self.n, self.estimate);
        let course = course(law, &self.before, &TenThousandths, Some(self.n));
        let look = Look::new(law, course.going.as_ref(), self.n);
        (course.low.iter().sum(), course.high.iter().sum(), look.below(x), look.above(x))
    }
}

/// The index, between 0.01 and 100, at which a chance that changes with it in one direction is `risk`: regula falsi on the
/// normal scale, where the chance is nearly straight, with the Illinois correction (Dowell & Jarratt 1971, from memory).
fn index_where(near: f64, risk: f64, chance: impl Fn(f64) -> f64) -> Option<f64> {
    let goal = normal::upper_quantile(risk);
    let miss = |index: f64| normal::upper_quantile(chance(index).clamp(1e-14, 1.0 - 1e-14)) - goal;
    let near = near.clamp(0.02, 50.0);
    let (mut a, mut at_a) = (near, miss(near));
    let (mut b, mut at_b) = (near, at_a);
    for factor in [0.9, 1.1, 0.7, 1.4, 0.4, 2.0, 0.1, 4.0] {
        b = (near * factor).clamp(0.01, 100.0);
        at_b = miss(b);
        if at_a * at_b <= 0.0 {
            break;
        }
    }
    if at_a * at_b > 0.0 {
        return None;
    }
    for _ in 0..40 {
        if (a - b).abs() < 1e-9 * a.abs() || at_b == 0.0 {
            break;
        }
        let c = b - at_b * (b - a) / (at_b - at_a);
        let at_c = miss(c);
        if at_c * at_b < 0.0 {
            (a, at_a) = (b, at_b);
        } else {
            at_a *= 0.5;
        }
        (b, at_b) = (c, at_c);
        if at_c.abs() < 1e-9 {
            break;
        }
    }
    Some(b)
}
