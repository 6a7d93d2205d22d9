//! What a plan really gives, by simulation: whole studies of a known process, reading by reading through the core's own
//! code until the plan's rule ends them.
//!
//! Readings are rounded to the plan's resolution before they count, as the station sees them, while the true index is
//! that of the unrounded pieces: so a gauge that is too coarse shows in the coverage. The watch for a stuck gauge is
//! left out: it holds a study, but does not end it.
//!
//! The same seed gives the same figures to the last bit, on any number of threads: a piece's deviate depends on seed,
//! study and piece alone, and sums are taken in a fixed order. Every process meets the same pieces, so two cases differ
//! by the process and not by chance.

mod bar;
mod outcome;
mod process;
mod random;
mod study;
pub mod words;

use donelight_core::capability::Index;
use donelight_core::plan::Plan;
use donelight_core::sizing::precision;
use rayon::prelude::*;

pub use outcome::{Outcome, Pieces, Share};
pub use process::{Process, ProcessError};
use study::Studies;

/// How much is simulated, and where the random numbers begin.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Extent {
    /// Another seed, other readings.
    pub seed: u64,
    /// Studies of each process, from 1 on.
    pub studies: u32,
}

/// Studies that one thread does in one go: their sums are taken in this order whatever the number of threads.
const STRIDE: u32 = 64;

/// Simulates the studies of one process. `done` is told after every few studies how many they were, on any thread.
///
/// # Errors
/// [`ProcessError`]: the plan has no such process.
pub fn simulate(
    plan: &Plan,
    process: Process,
    extent: Extent,
    done: &(impl Fn(u32) + Sync),
) -> Result<Outcome, ProcessError> {
    let studies = Studies::new(plan, &process, extent.seed)?;
    let planned = plan.rule.planned.get();
    let strides: Vec<Outcome> = (0..extent.studies.div_ceil(STRIDE))
        .into_par_iter()
        .map(|stride| {
            let first = stride * STRIDE;
            let last = extent.studies.min(first.saturating_add(STRIDE));
            let mut sum = Outcome::of(process);
            (first..last).for_each(|study| sum.add(&studies.run(study), planned));
            done(last - first);
            sum
        })
        .collect();
    Ok(strides.iter().fold(Outcome::of(process), |mut all, stride| {
        all.merge(stride);
        all
    }))
}

/// Indices that a plan is tried with, since it does not say what it was sized for.
const INDICES: [f64; 3] = [1.0, 1.33, 1.67];

/// The processes that a plan is tried with: what it claims and what it shall notice, or else a few indices; each centred and, where that makes a difference, with the
/// mean one standard deviation off. Cpk's coverage hardly changes beyond: then one limit only is in play.
#[must_use]
pub fn usual_processes(plan: &Plan) -> Vec<Process> {
    let two_limits = plan.lower.is_some() && plan.upper.is_some();
    let offsets: &[f64] =
        if two_limits && matches!(plan.index, Index::Cpk | Index::Cpm) { &[0.0, 1.0] } else { &[0.0] };
    let asked = plan.rule.early().map(|early| [early.claim.to_f64(), early.against.to_f64()]);
    let indices: &[f64] = asked.as_ref().map_or(&INDICES, |asked| asked);
    indices
        .iter()
        .flat_map(|&true_index| offsets.iter().map(move |&offset| Process { true_index, offset }))
        .collect()
}

/// Readings that take about half a second on one core.
const READINGS: f64 = 1.5e7;

/// So many studies of each process that the answer comes within two seconds: fewer, the more pieces a study takes.
#[must_use]
pub fn usual_studies(plan: &Plan, processes: &[Process]) -> u32 {
    let rule = &plan.rule;
    let expected = |process: &Process| {
        if rule.precision().is_none() {
            return f64::midpoint(rule.planned.get().into(), rule.limit.get().into());
        }
        let n = precision::smallest_of(plan, process.true_index);
        f64::from(n.map_or(rule.limit, |n| n.clamp(rule.planned, rule.limit)).get())
    };
    let pieces: f64 = processes.iter().map(expected).sum();
    (READINGS / pieces).clamp(20.0, 10_000.0) as u32
}

#[cfg(test)]
pub(crate) mod tests;
