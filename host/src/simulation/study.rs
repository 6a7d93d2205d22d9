//! One simulated study, from the first reading to the end that the plan's rule gives it, through the core's own code.

use donelight_core::counts::Counts;
use donelight_core::interval::{Estimate, Evidence};
use donelight_core::moments::Moments;
use donelight_core::plan::Plan;
use donelight_core::quantity::Count;
use donelight_core::sigma::{Sigma, Tally};
use donelight_core::stopping::Standing;
use donelight_core::stopping::early::Decision;

use super::bar::Bar;
use super::process::{Gauged, Process, ProcessError};
use super::random::Deviates;

/// How a study ended.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct End {
    /// Readings at the end.
    pub(super) n: Count,
    /// Settled or spent.
    pub(super) standing: Standing,
    /// The interval at the end; `None` if all readings were alike.
    pub(super) estimate: Option<Estimate>,
    /// What is decided about the plan's claim, if it has one.
    pub(super) decision: Option<Decision>,
}

/// What the studies of one process have in common.
pub(super) struct Studies<'a> {
    plan: &'a Plan,
    gauged: Gauged,
    deviates: Deviates,
    bar: Bar<'a>,
}

impl<'a> Studies<'a> {
    pub(super) fn new(plan: &'a Plan, process: &Process, seed: u64) -> Result<Self, ProcessError> {
        let gauged = process.before(plan)?;
        Ok(Self { plan, gauged, deviates: Deviates::new(seed), bar: Bar::new(plan) })
    }

    /// The study of this number.
    pub(super) fn run(&self, study: u32) -> End {
        self.run_judged(study, |moments| self.is_open(moments))
    }

    /// Whether the readings may settle the study. The bar is that of the overall sigma; with another one, the core is asked
    /// at every reading.
    fn is_open(&self, moments: &Moments) -> bool {
        self.plan.sigma != Sigma::Overall || !self.bar.rules_out(moments, &self.gauged)
    }

    /// The same, and at how many readings the interval was computed.
    #[cfg(test)]
    pub(super) fn run_counted(&self, study: u32) -> (End, u32) {
        let looks = std::cell::Cell::new(0);
        let end = self.run_judged(study, |moments| {
            let open = self.is_open(moments);
            looks.set(looks.get() + u32::from(open));
            open
        });
        (end, looks.get())
    }

    /// The same; the interval is computed only where `can_settle` says so.
    pub(super) fn run_judged(&self, study: u32, can_settle: impl Fn(&Moments) -> bool) -> End {
        let mut tally = Tally::new(self.plan.sigma);
        for pair in 0.. {
            for z in self.deviates.pair(study, pair) {
                // `Process::before` keeps every reading within range, and the rule ends at its limit, a `Count`.
                let counts = Counts::new(self.gauged.centre.get() + self.gauged.reading(z));
                tally.add(counts.expect("in range")).expect("below the limit");
                let n = tally.moments().n();
                let standing = self
                    .plan
                    .judge(n, || if can_settle(tally.moments()) { self.evidence(&tally) } else { None });
                if standing != Standing::Gathering {
                    let estimate =
                        self.evidence(&tally).and_then(|evidence| self.plan.estimate(&evidence).ok());
                    let decision =
                        self.plan.rule.early().and_then(|early| early.decide(n, estimate.as_ref()?.estimate));
                    return End { n, standing, estimate, decision };
                }
            }
        }
        unreachable!("every study ends at its limit, far before the pairs do")
    }

    /// As a station gets it: see `donelight_core::station::Study::evidence`.
    fn evidence(&self, tally: &Tally) -> Option<Evidence> {
        let plan = self.plan;
        let sample = tally.sample(plan.resolution, plan.specification()).ok()?;
        Evidence::of(&sample, plan.index).ok()
    }
}
