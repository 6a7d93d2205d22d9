//! Which readings cannot end a study: told cheaply and for certain, so that the interval is computed only at the others.
//!
//! At n pieces the relative half-width of an interval falls as the estimate grows: for Cpk, Cpl and Cpu it is about
//! z·√(1/(9nĈ²) + 1/(2ν)), for Cp it does not depend on Ĉ; an absolute one grows with it. So at each n there is a bar that the estimate must reach
//! before the rule can settle. The bar is found with the core's own interval and set a little too low, and the
//! estimate is bounded from above, by far more than rounding can matter: below the bar nothing is lost, and from the
//! bar on the core decides. A test holds the two ways to the same end of every study.

use std::sync::OnceLock;

use donelight_core::capability::Index;
use donelight_core::interval::Evidence;
use donelight_core::moments::Moments;
use donelight_core::plan::Plan;
use donelight_core::quantity::{Count, Precision};

use super::process::Gauged;

/// Far above what rounding does to a relative half-width (10^-10 of a goal of one millionth) or to an estimate.
const MARGIN: f64 = 1e-8;

/// An index that no simulated process comes near; a bar beyond it is one at it.
const MOST: f64 = 50.0;

/// The bar at each n from the planned count to the limit, found when it is first asked for.
pub(super) struct Bar<'a> {
    plan: &'a Plan,
    at: Vec<OnceLock<f64>>,
}

impl<'a> Bar<'a> {
    pub(super) fn new(plan: &'a Plan) -> Self {
        let looks = plan.rule.limit.get() - plan.rule.planned.get() + 1;
        Self { plan, at: (0..looks).map(|_| OnceLock::new()).collect() }
    }

    /// Whether the estimate is certain to lie below the bar. `gauged` is what the readings were simulated from.
    pub(super) fn rules_out(&self, moments: &Moments, gauged: &Gauged) -> bool {
        let n = moments.n();
        let look = n.get().checked_sub(self.plan.rule.planned.get());
        let Some(bar) = look.and_then(|look| self.at.get(look as usize)) else { return false };
        let bar = *bar.get_or_init(|| self.find(n));
        let (at_least, at_most) = estimate_between(self.plan.index, moments, gauged);
        match self.plan.rule.precision() {
            Some(Precision::Relative(_)) => at_most < bar,
            Some(Precision::Absolute(_)) => at_least > bar,
            // A claim that is decided early is looked at seldom, and any estimate may decide it.
            None => false,
        }
    }

    /// An estimate that is too low to settle at n pieces (too high, if the precision is absolute), and nearly the last such:
    /// by halving between one that does not settle and one that may.
    fn find(&self, n: Count) -> f64 {
        let Some(precision) = self.plan.rule.precision() else { return f64::NEG_INFINITY };
        let widened = precision.goal() * (1.0 + MARGIN);
        let Some(nu) = self.plan.sigma.degrees_of_freedom(n) else { return f64::NEG_INFINITY };
        let may_settle = |at: f64| {
            let evidence = Evidence { index: self.plan.index, estimate: at, n, nu, squared_offset: 0.0 };
            self.plan
                .estimate(&evidence)
                .map_or(true, |found| precision.achieved(found.half_width, at) <= widened)
        };
        let (mut out, mut open) = match precision {
            Precision::Relative(_) => (0.0, MOST),
            Precision::Absolute(_) => (MOST, 0.0),
        };
        if !may_settle(open) {
            return open;
        }
        for _ in 0..40 {
            let middle = f64::midpoint(out, open);
            if may_settle(middle) { open = middle } else { out = middle }
        }
        out
    }
}

/// No more and no less than the estimate that the core would give; without bounds where that is not known. Where there is
/// none, since all readings are alike, nothing settles: then it is below all and above all.
fn estimate_between(index: Index, moments: &Moments, gauged: &Gauged) -> (f64, f64) {
    let (n, sum, sum_of_squares) = (*moments).into();
    let pieces = i64::from(n.get());
    // As in the core, n Σc² − (Σc)² is not negative and fits; here it is rounded where the core's ratio is exact.
    let square = u128::from(sum.unsigned_abs()).pow(2);
    let scatter = (u128::from(n.get()) * sum_of_squares - square) as f64;
    if scatter == 0.0 {
        return (f64::INFINITY, f64::NEG_INFINITY);
    }
    let sigma = (scatter / (pieces * (pieces - 1)) as f64).sqrt();
    let mean = (sum - pieces * gauged.centre.get()) as f64 / pieces as f64;
    let above_lower = gauged.lower.map_or(f64::INFINITY, |lower| mean - lower);
    let below_upper = gauged.upper.map_or(f64::INFINITY, |upper| upper - mean);
    let distance = match index {
        Index::Cp => f64::midpoint(above_lower, below_upper),
        Index::Cpk => above_lower.min(below_upper),
        Index::Cpl => above_lower,
        Index::Cpu => below_upper,
        Index::Cpm => return (f64::NEG_INFINITY, f64::INFINITY),
    };
    // What cancels in a distance is at most of the size of the limits and the mean.
    let size = |limit: Option<f64>| limit.map_or(0.0, f64::abs);
    let lost = MARGIN / 10.0 * (mean.abs() + size(gauged.lower) + size(gauged.upper));
    // A margin outwards, whichever sign the distance has.
    let bound = |distance: f64, margin: f64| {
        let estimate = distance / (3.0 * sigma);
        estimate + margin * estimate.abs()
    };
    (bound(distance - lost, -MARGIN), bound(distance + lost, MARGIN))
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::simulation::tests::{plan, quick};

    /// The bar in closed form: z·√(1/(9nC²) + 1/(2(n − 1))) = r, solved for C (Bissell 1990, from memory).
    #[test]
    fn the_bar_is_the_estimate_whose_half_width_just_is_the_goal() {
        let plan = plan("cpk", "two-sided", 5, "10%", 1_000);
        let bar = Bar::new(&plan);
        let (z, r) = (1.959_963_984_540_054, 0.1_f64);
        for n in [194_u32, 200, 218, 300, 1_000] {
            let pieces = f64::from(n);
            let room = r * r / (z * z) - 0.5 / (pieces - 1.0);
            let exact = 1.0 / (9.0 * pieces * room).sqrt();
            let found = bar.find(Count::new(n).unwrap());
            // Too low, by the margin on the goal, which the square root of a small difference magnifies, and 10^-9.
            assert!(
                found <= exact && found > exact * (1.0 - 0.01 / (room * pieces).min(1e4)),
                "{n} {found} {exact}"
            );
        }
        // Below 1 + z²/(2r²) = 193.07 no estimate settles.
        assert_eq!(bar.find(Count::new(193).unwrap()), MOST);
        assert!(quick(&plan, 1.33, 0.0).n().least() >= 194);
    }
}
