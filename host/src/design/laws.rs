//! A question's laws: which process each error is about, what a table of looks does to it, and the fixed size beside it.

use donelight_core::capability::Index;
use donelight_core::quantity::{Count, Millionths};
use donelight_core::stopping::early::{Boundary, EarlyDecision, LOOKS_MAX, Look};

use super::boundaries::{Boundaries, Error, Last, Row, Scale, course, spend};
use super::estimate::{Estimate, Position};
use super::{Course, Design, DesignError, Fate, LEAST_DISTANCE, Limits, MOST_PIECES, Place, Question};

/// The laws that a question is about.
pub(super) struct Laws {
    question: Question,
    /// Under which ending low is wrong, in its worst position: the greater index.
    low: Estimate,
    /// Under which ending high is wrong, in its worst position: the smaller index.
    high: Estimate,
    low_risk: f64,
    high_risk: f64,
}

impl Laws {
    pub(super) fn new(question: &Question) -> Result<Self, DesignError> {
        let (claim, against) = (question.claim.to_f64(), question.against.to_f64());
        let in_range = |index: f64| (0.1..=100.0).contains(&index);
        if !in_range(claim) || !in_range(against) || claim == against {
            return Err(DesignError::Question);
        }
        if !(1..=500_000).contains(&question.alpha.0) {
            return Err(DesignError::Alpha);
        }
        let (low_position, high_position) = match (question.index, question.limits) {
            (Index::Cpm, _) => return Err(DesignError::Index(Index::Cpm)),
            (Index::Cp, _) => (Position::Any, Position::Any),
            (Index::Cpk, Limits::Two) => (Position::Centred, Position::OneLimit),
            (Index::Cpk | Index::Cpl | Index::Cpu, _) => (Position::OneLimit, Position::OneLimit),
        };
        let (alpha, beta) = (question.alpha.to_f64(), question.power.risk());
        let (low_risk, high_risk) = if against < claim { (alpha, beta) } else { (beta, alpha) };
        Ok(Self {
            question: *question,
            low: Estimate { index: claim.max(against), position: low_position },
            high: Estimate { index: claim.min(against), position: high_position },
            low_risk,
            high_risk,
        })
    }

    fn rejects_low(&self) -> bool {
        self.question.against < self.question.claim
    }

    pub(super) fn spend(&self, looks: &[u32]) -> Boundaries {
        spend(
            &Error { walk: &self.low, risk: self.low_risk },
            &Error { walk: &self.high, risk: self.high_risk },
            self.question.spending,
            looks,
            &TenThousandths,
            // Alpha is used up, the power gets what is left.
            if self.rejects_low() { Last::Low } else { Last::High },
        )
    }

    /// What a table spends of (alpha, 1 − power).
    pub(super) fn risks(&self, table: &Boundaries) -> (f64, f64) {
        if self.rejects_low() {
            (table.spent_low, table.spent_high)
        } else {
            (table.spent_high, table.spent_low)
        }
    }

    /// What a table leaves over for 1 − power.
    pub(super) fn left_over(&self, table: &Boundaries) -> f64 {
        self.risks(table).1
    }

    pub(super) fn meets(&self, table: &Boundaries) -> Result<(), DesignError> {
        if table.defect > 0.01 * self.low_risk.min(self.high_risk) {
            return Err(DesignError::Inexact);
        }
        let missed = self.left_over(table);
        if missed <= self.question.power.risk() {
            Ok(())
        } else {
            Err(DesignError::PowerMissed { reached: 1.0 - missed })
        }
    }

    /// The smallest fixed size that keeps both promises in the worst position: one look, at the end.
    pub(super) fn fixed(&self) -> Result<u32, DesignError> {
        let meets = |n: u32| self.meets(&self.spend(&[n]));
        let (mut short, mut enough) = (LEAST_DISTANCE, 2 * LEAST_DISTANCE);
        while meets(enough).is_err() {
            if enough >= MOST_PIECES {
                return Err(DesignError::TooMany);
            }
            (short, enough) = (enough, 2 * enough);
        }
        while enough - short > 1 {
            let middle = short.midpoint(enough);
            if meets(middle).is_ok() {
                enough = middle;
            } else {
                short = middle;
            }
        }
        Ok(enough)
    }

    pub(super) fn design(&self, table: &Boundaries) -> Result<Design, DesignError> {
        let (true_alpha, missed) = self.risks(table);
        Ok(Design {
            early: self.early(&table.rows),
            true_alpha,
            true_power: 1.0 - missed,
            error: table.defect,
            courses: self.places().into_iter().map(|place| self.course(&table.rows, place)).collect(),
            fixed: self.fixed()?,
        })
    }

    fn early(&self, rows: &[Row]) -> EarlyDecision {
        let Question { claim, against, alpha, power, spending, .. } = self.question;
        let stored = |boundary: Option<f64>| {
            boundary.and_then(|b| Boundary::from_ten_thousandths((b * TEN_THOUSAND).round() as u32))
        };
        let look = |row: &Row| {
            let (low, high) = (stored(row.low), stored(row.high));
            let (keep, reject) = if self.rejects_low() { (high, low) } else { (low, high) };
            Look { n: Count::new(row.n).unwrap_or(Count::MAX), keep, reject }
        };
        // There are at most LOOKS_MAX rows.
        let looks = rows.iter().take(LOOKS_MAX).map(look).collect();
        EarlyDecision { claim, against, alpha, power, spending, looks }
    }

    fn places(&self) -> Vec<Place> {
        match (self.low.position, self.high.position) {
            (Position::Centred, _) => vec![Place::Middle, Place::NearOneLimit],
            (Position::Any, _) => vec![Place::Anywhere],
            _ => vec![Place::NearOneLimit],
        }
    }

    fn course(&self, rows: &[Row], place: Place) -> Course {
        let position = match place {
            Place::Middle => Position::Centred,
            Place::NearOneLimit => Position::OneLimit,
            Place::Anywhere => Position::Any,
        };
        let fate = |index: Millionths| {
            let course = course(&Estimate { index: index.to_f64(), position }, rows, &TenThousandths, None);
            let mut fate = Fate { rejected: 0.0, expected: 0.0, stopped: Vec::new() };
            let mut stopped = 0.0;
            for ((low, high), row) in course.low.iter().zip(&course.high).zip(rows) {
                stopped += low + high;
                fate.rejected += if self.rejects_low() { low } else { high };
                fate.expected += (low + high) * f64::from(row.n);
                fate.stopped.push(stopped);
            }
            fate
        };
        let (at_claim, at_against) =
            rayon::join(|| fate(self.question.claim), || fate(self.question.against));
        Course { place, at_claim, at_against }
    }
}

const TEN_THOUSAND: f64 = 1e4;

/// Boundaries of the estimate, in whole ten-thousandths, rounded to the safe side.
pub(super) struct TenThousandths;

impl Scale<Estimate> for TenThousandths {
    fn low(&self, walk: &Estimate, n: u32, x: f64) -> Option<f64> {
        let rounded = (walk.unstretch(n, x) * TEN_THOUSAND).floor();
        (rounded >= 1.0).then_some(rounded / TEN_THOUSAND)
    }

    fn high(&self, walk: &Estimate, n: u32, x: f64) -> Option<f64> {
        let rounded = (walk.unstretch(n, x) * TEN_THOUSAND).ceil();
        (1.0..=f64::from(u32::MAX)).contains(&rounded).then_some(rounded / TEN_THOUSAND)
    }

    fn x(&self, walk: &Estimate, n: u32, boundary: f64) -> f64 {
        walk.stretch(n, boundary)
    }
}
