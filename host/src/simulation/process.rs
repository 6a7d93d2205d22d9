//! The process that a simulated study measures: normal, stable, with a known true index.

use donelight_core::capability::Index;
use donelight_core::counts::{Counts, Decimal, Resolution};
use donelight_core::moments::Moments;
use donelight_core::plan::Plan;

/// A true process, told by its index and by where its mean lies.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Process {
    /// The true value of the plan's index.
    pub true_index: f64,
    /// The mean lies so many standard deviations above the middle of the limits; for Cpm, above the target. Without a
    /// middle (one limit only) it says nothing.
    pub offset: f64,
}

/// Why a plan cannot be simulated with a process.
#[derive(Clone, Copy, Debug, PartialEq, Eq, thiserror::Error)]
pub enum ProcessError {
    /// No standard deviation gives this index at this offset.
    #[error("no process has this index with its mean there; give an index above zero")]
    Impossible,
    /// Readings would exceed what the resolution can count.
    #[error(
        "readings would go beyond 10^12 steps of the resolution; check resolution, limits and unit of the plan"
    )]
    BeyondRange,
}

/// With one limit only, the plan does not say how wide the process is: then the standard deviation spans so many
/// steps of the gauge, enough that rounding to its steps has no say.
const STEPS_A_SIGMA: f64 = 100.0;

/// No reading lies further from the mean, in standard deviations; see `random::Deviates::pair`.
const FARTHEST: f64 = 8.3;

/// The process as the gauge sees it: in steps of the resolution, about a whole number of steps near the mean.
#[derive(Clone, Copy, Debug)]
pub(super) struct Gauged {
    /// The whole number of steps; small numbers about it keep all digits.
    pub(super) centre: Counts,
    /// L − centre, in steps.
    pub(super) lower: Option<f64>,
    /// U − centre, in steps.
    pub(super) upper: Option<f64>,
    /// The mean − centre, in steps.
    mean: f64,
    /// The standard deviation, in steps.
    sigma: f64,
}

impl Gauged {
    /// The reading of a piece `z` standard deviations off the mean, rounded to the nearest step as a gauge does it:
    /// in steps from the centre.
    pub(super) fn reading(&self, z: f64) -> i64 {
        (self.mean + self.sigma * z).round() as i64
    }
}

impl Process {
    /// The process before the plan's gauge.
    ///
    /// # Errors
    /// [`ProcessError`].
    pub(super) fn before(&self, plan: &Plan) -> Result<Gauged, ProcessError> {
        let step = plan.resolution.to_f64();
        let about = |value: f64| Counts::new((value / step).round() as i64).ok_or(ProcessError::BeyondRange);
        let reach = 3.0 * self.true_index;
        // Around a first guess of the middle, distances to the limits are exact, and so is the middle itself.
        let guess = match (plan.lower, plan.upper) {
            (Some(lower), Some(upper)) => (lower.to_f64() + upper.to_f64()) / 2.0,
            (Some(limit), None) | (None, Some(limit)) => limit.to_f64(),
            (None, None) => return Err(ProcessError::Impossible),
        };
        let origin = about(guess)?;
        let from_origin = |limit| in_steps(limit, origin, plan.resolution);
        let (lower, upper) = (plan.lower.map(from_origin), plan.upper.map(from_origin));
        let (mean, sigma) = match (lower, upper) {
            (Some(lower), Some(upper)) => {
                let middle = match (plan.index, plan.target) {
                    (Index::Cpm, Some(target)) => from_origin(target),
                    _ => f64::midpoint(lower, upper),
                };
                // Half the tolerance is so many standard deviations wide: the definitions of the indices, solved.
                let half_width = match plan.index {
                    Index::Cp => reach,
                    Index::Cpk => reach + self.offset.abs(),
                    Index::Cpu => reach + self.offset,
                    Index::Cpl => reach - self.offset,
                    Index::Cpm => reach * self.offset.hypot(1.0),
                };
                let sigma = (upper - lower) / 2.0 / half_width;
                (middle + self.offset * sigma, sigma)
            }
            (Some(lower), None) => (lower + reach * STEPS_A_SIGMA, STEPS_A_SIGMA),
            (None, Some(upper)) => (upper - reach * STEPS_A_SIGMA, STEPS_A_SIGMA),
            (None, None) => return Err(ProcessError::Impossible),
        };
        if !(self.true_index > 0.0 && sigma > 0.0 && sigma.is_finite() && mean.is_finite()) {
            return Err(ProcessError::Impossible);
        }
        let farthest = mean.abs() + FARTHEST * sigma + 1.0;
        if farthest + (origin.get() as f64).abs() >= Counts::MAX as f64 {
            return Err(ProcessError::BeyondRange);
        }
        let shift = mean.round();
        let centre = Counts::new(origin.get() + shift as i64).ok_or(ProcessError::BeyondRange)?;
        let shifted = |limit: Option<f64>| limit.map(|limit| limit - shift);
        Ok(Gauged { centre, lower: shifted(lower), upper: shifted(upper), mean: mean - shift, sigma })
    }
}

/// `value` − `origin`, exact, then rounded once, in steps of the resolution.
fn in_steps(value: Decimal, origin: Counts, resolution: Resolution) -> f64 {
    let mut one = Moments::default();
    // One reading is never too many, and with one there is a distance.
    let distance = one.add(origin).ok().and_then(|()| one.distance_to(value, resolution));
    distance.unwrap_or(f64::NAN) / resolution.to_f64()
}
