//! What many simulated studies of one process add up to.

use std::collections::BTreeMap;

use donelight_core::interval::Interval;
use donelight_core::stopping::Standing;
use donelight_core::stopping::early::Decision;

use super::process::Process;
use super::study::End;

/// How many pieces the studies took, each with how many studies took so many.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Pieces(BTreeMap<u32, u32>);

impl Pieces {
    /// The mean.
    #[must_use]
    pub fn mean(&self) -> f64 {
        let sum: u64 = self.0.iter().map(|(&n, &studies)| u64::from(n) * u64::from(studies)).sum();
        sum as f64 / self.studies() as f64
    }

    /// The fewest pieces that this fraction of the studies did not exceed: 0.5 for the median, 1 for the most.
    #[must_use]
    pub fn quantile(&self, fraction: f64) -> u32 {
        let wanted = fraction * self.studies() as f64;
        let mut so_far = 0_u64;
        for (&n, &studies) in &self.0 {
            so_far += u64::from(studies);
            if so_far as f64 >= wanted {
                return n;
            }
        }
        self.most()
    }

    /// The fewest; 0 without studies.
    #[must_use]
    pub fn least(&self) -> u32 {
        self.0.keys().next().copied().unwrap_or_default()
    }

    /// The most; 0 without studies.
    #[must_use]
    pub fn most(&self) -> u32 {
        self.0.keys().next_back().copied().unwrap_or_default()
    }

    fn studies(&self) -> u64 {
        self.0.values().map(|&studies| u64::from(studies)).sum()
    }
}

/// A share of the studies, with its standard error.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Share {
    /// From 0 to 1.
    pub value: f64,
    /// √(p(1 − p)/N): binomial.
    pub standard_error: f64,
}

/// Simulated studies of one process, added up.
#[derive(Clone, Debug, PartialEq)]
pub struct Outcome {
    process: Process,
    pieces: Pieces,
    studies: u32,
    covered: u32,
    met_at_planned: u32,
    spent: u32,
    with_estimate: u32,
    decided: u32,
    rejected: u32,
    errors: f64,
    squared_errors: f64,
}

impl Outcome {
    /// No study yet.
    pub(super) fn of(process: Process) -> Self {
        Self {
            process,
            pieces: Pieces::default(),
            studies: 0,
            covered: 0,
            met_at_planned: 0,
            spent: 0,
            with_estimate: 0,
            decided: 0,
            rejected: 0,
            errors: 0.0,
            squared_errors: 0.0,
        }
    }

    /// Counts a study in.
    pub(super) fn add(&mut self, end: &End, planned: u32) {
        let n = end.n.get();
        let settled = end.standing == Standing::Settled;
        *self.pieces.0.entry(n).or_default() += 1;
        self.studies += 1;
        self.met_at_planned += u32::from(settled && n == planned);
        self.spent += u32::from(!settled);
        self.decided += u32::from(end.decision.is_some());
        self.rejected += u32::from(end.decision == Some(Decision::ClaimRejected));
        if let Some(estimate) = end.estimate {
            let error = estimate.estimate - self.process.true_index;
            self.with_estimate += 1;
            self.covered += u32::from(covers(&estimate.interval, self.process.true_index));
            self.errors += error;
            self.squared_errors += error * error;
        }
    }

    /// Counts the studies of another in. Sums of errors are rounded, so the order matters to the last digits.
    pub(super) fn merge(&mut self, other: &Self) {
        for (&n, &studies) in &other.pieces.0 {
            *self.pieces.0.entry(n).or_default() += studies;
        }
        self.studies += other.studies;
        self.covered += other.covered;
        self.met_at_planned += other.met_at_planned;
        self.spent += other.spent;
        self.with_estimate += other.with_estimate;
        self.decided += other.decided;
        self.rejected += other.rejected;
        self.errors += other.errors;
        self.squared_errors += other.squared_errors;
    }

    /// The process that was measured.
    #[must_use]
    pub fn process(&self) -> Process {
        self.process
    }

    /// How many studies.
    #[must_use]
    pub fn studies(&self) -> u32 {
        self.studies
    }

    /// Pieces at the end of a study.
    #[must_use]
    pub fn n(&self) -> &Pieces {
        &self.pieces
    }

    /// In how many studies the interval at the end held the true index. A study without an interval did not hold it.
    #[must_use]
    pub fn coverage(&self) -> Share {
        self.share(self.covered)
    }

    /// How many rejected the plan's claim; `None` if nothing was claimed, or nothing decided.
    #[must_use]
    pub fn rejected(&self) -> Option<Share> {
        (self.decided > 0).then(|| self.share(self.rejected))
    }

    /// How many met the goal at the planned count.
    #[must_use]
    pub fn met_at_planned(&self) -> Share {
        self.share(self.met_at_planned)
    }

    /// How many came to the limit without the goal.
    #[must_use]
    pub fn spent(&self) -> Share {
        self.share(self.spent)
    }

    /// How many ended without an estimate, since all readings were alike.
    #[must_use]
    pub fn without_estimate(&self) -> Share {
        self.share(self.studies - self.with_estimate)
    }

    /// The mean of estimate − true index, over the studies that have an estimate; `None` if none has.
    #[must_use]
    pub fn bias(&self) -> Option<f64> {
        (self.with_estimate > 0).then(|| self.errors / f64::from(self.with_estimate))
    }

    /// The standard error of [`Outcome::bias`]; `None` below two estimates.
    #[must_use]
    pub fn bias_standard_error(&self) -> Option<f64> {
        let bias = self.bias().filter(|_| self.with_estimate > 1)?;
        let n = f64::from(self.with_estimate);
        let variance = (self.squared_errors / n - bias * bias).max(0.0) * n / (n - 1.0);
        Some((variance / n).sqrt())
    }

    fn share(&self, studies: u32) -> Share {
        let all = f64::from(self.studies);
        let value = f64::from(studies) / all;
        Share { value, standard_error: (value * (1.0 - value) / all).sqrt() }
    }
}

fn covers(interval: &Interval, value: f64) -> bool {
    interval.low.is_none_or(|low| low <= value) && interval.high.is_none_or(|high| value <= high)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_quantiles_of_the_pieces_count_studies() {
        let pieces = Pieces([(10, 5), (20, 4), (90, 1)].into());
        assert_eq!(pieces.mean(), 22.0);
        let at = |fraction| pieces.quantile(fraction);
        assert_eq!((at(0.5), at(0.51), at(0.9), at(0.95), at(1.0)), (10, 20, 20, 90, 90));
        assert_eq!((pieces.least(), pieces.most()), (10, 90));
    }

    #[test]
    fn an_end_that_an_interval_does_not_have_excludes_nothing() {
        let between = |low, high| covers(&Interval { low, high }, 1.5);
        assert!(between(Some(1.5), None) && between(None, Some(1.5)) && between(Some(1.0), Some(2.0)));
        assert!(!between(Some(1.6), None) && !between(None, Some(1.4)) && !between(Some(1.6), Some(2.0)));
    }
}
