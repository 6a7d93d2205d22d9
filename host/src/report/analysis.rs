//! What the core says about a study: sample, indices, intervals, and how they went. No statistics of its own.

use donelight_core::capability::{Index, IndexError, Sample, SampleError};
use donelight_core::counts::{Counts, Decimal, Resolution};
use donelight_core::interval::coverage::{self, Span};
use donelight_core::interval::{self, Estimate, Evidence, Interval, Method, MethodError};
use donelight_core::quantity::Count;
use donelight_core::sigma::{Sigma, Tally};
use donelight_core::stopping::early::EarlyDecision;

use super::charts::narrowing::Step;
use super::{Belonging, Data, Question, Reading, Study};
use crate::design::Limits;
use crate::design::limits::{self, Ending};

/// All numbers of a report.
#[derive(Clone, Debug)]
pub struct Analysis {
    /// Readings that count.
    pub n: u32,
    /// Readings after the study's end.
    pub surplus: u32,
    /// Readings that were taken back.
    pub voided: u32,
    /// Their mean; `None` without readings.
    pub mean: Option<f64>,
    /// Their standard deviation with n − 1, whichever sigma the indices take; `None` below two readings, and for a summary
    /// that gives another sigma.
    pub sd: Option<f64>,
    /// The sigma that the indices take; `None` where there is no sample.
    pub sigma: Option<f64>,
    /// Degrees of freedom behind it.
    pub nu: Option<f64>,
    /// The index that was asked for, or why there is none.
    pub asked: Result<Row, Trouble>,
    /// Every index that the specification allows.
    pub rows: Vec<Row>,
    /// Estimate and interval after each reading, or after some of them.
    pub steps: Vec<Step>,
    /// Readings below the lower limit and above the upper one.
    pub beyond: (u32, u32),
}

/// One index.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Row {
    /// Which.
    pub index: Index,
    /// Its estimate.
    pub estimate: f64,
    /// Its interval; `None` where it has none.
    pub interval: Option<Interval>,
    /// How the interval came about; `None` without one, and after an early decision.
    pub method: Option<Method>,
    /// How often such an interval covers, from the worst position of the mean to the best, if the true index is the
    /// estimate and the number of pieces was fixed beforehand; `None` where that is not known.
    pub coverage: Option<Span>,
}

/// Why there is no estimate.
#[derive(Clone, Copy, Debug, PartialEq, Eq, thiserror::Error)]
pub enum Trouble {
    /// The readings do not allow one.
    #[error("{0}")]
    Sample(SampleError),
    /// The specification does not allow the index.
    #[error("{0}")]
    Index(IndexError),
}

/// At most about so many steps are drawn.
const STEPS_MAX: usize = 400;

/// Works out all numbers of the report.
#[must_use]
pub fn of(study: &Study) -> Analysis {
    match &study.data {
        Data::Readings { resolution, readings } => of_readings(study, *resolution, readings),
        Data::Summary { n, mean, sd } => {
            let sample = summarised(study, *n, *mean, *sd);
            Analysis {
                n: n.get(),
                surplus: 0,
                voided: 0,
                mean: Some(*mean),
                sd: (study.question.sigma == Sigma::Overall).then_some(*sd),
                sigma: sample.as_ref().ok().map(Sample::sigma),
                nu: sample.as_ref().ok().map(|sample| sample.nu().get()),
                asked: asked(study, &sample),
                rows: rows(study, &sample),
                steps: Vec::new(),
                beyond: (0, 0),
            }
        }
    }
}

/// The sample of a summary, whose standard deviation is the sigma that was asked for.
fn summarised(study: &Study, n: Count, mean: f64, sd: f64) -> Result<Sample, SampleError> {
    let sample = Sample::from_summary(n, mean, sd, &study.specification)?;
    match study.question.sigma {
        Sigma::Overall => Ok(sample),
        sigma => {
            let nu = sigma.degrees_of_freedom(n).ok_or(SampleError::TooFewSubgroups)?;
            sample.with_sigma(sigma, sd, nu, n)
        }
    }
}

fn of_readings(study: &Study, resolution: Resolution, readings: &[Reading]) -> Analysis {
    let of = |belonging| readings.iter().filter(move |reading| reading.belonging == belonging);
    let counted: Vec<Counts> = of(Belonging::Counted).map(|reading| reading.counts).collect();
    let tally = tally(study, &counted);
    let (moments, sample) = (tally.moments(), tally.sample(resolution, &study.specification));
    Analysis {
        n: moments.n().get(),
        surplus: saturating(of(Belonging::Surplus).count()),
        voided: saturating(of(Belonging::Voided).count()),
        mean: moments.mean(resolution),
        sd: moments.standard_deviation(resolution),
        sigma: sample.as_ref().ok().map(Sample::sigma),
        nu: sample.as_ref().ok().map(|sample| sample.nu().get()),
        asked: asked(study, &sample),
        rows: rows(study, &sample),
        steps: steps(study, resolution, &counted),
        beyond: beyond(study, resolution, &counted),
    }
}

/// The sums of all readings. Whoever fills a [`Study`] keeps to [`Count::MAX`]; what lies beyond it would be left out.
fn tally(study: &Study, counted: &[Counts]) -> Tally {
    let mut tally = Tally::new(study.question.sigma);
    for &counts in counted.iter().take(Count::MAX.get() as usize) {
        let _ = tally.add(counts);
    }
    tally
}

fn asked(study: &Study, sample: &Result<Sample, SampleError>) -> Result<Row, Trouble> {
    let sample = sample.as_ref().map_err(|error| Trouble::Sample(*error))?;
    row(study, sample, study.question.index).map_err(Trouble::Index)
}

fn rows(study: &Study, sample: &Result<Sample, SampleError>) -> Vec<Row> {
    let Ok(sample) = sample else { return Vec::new() };
    [Index::Cpk, Index::Cp, Index::Cpl, Index::Cpu, Index::Cpm]
        .into_iter()
        .filter_map(|index| row(study, sample, index).ok())
        .collect()
}

fn row(study: &Study, sample: &Sample, index: Index) -> Result<Row, IndexError> {
    let estimate = sample.estimate(index)?;
    if let Some(early) = study.decided_early() {
        let interval = if index == study.question.index {
            after_early_decision(study, early, sample, estimate)
        } else {
            None
        };
        return Ok(Row { index, estimate, interval, method: None, coverage: None });
    }
    let question = study.question;
    let evidence = Evidence::of(sample, index)?;
    let found = match estimate_of(study, &evidence) {
        Ok(found) => found,
        Err(MethodError::Index(error)) => return Err(error),
        Err(_) => return Ok(Row { index, estimate, interval: None, method: None, coverage: None }),
    };
    if found.interval.low.is_none() && found.interval.high.is_none() {
        return Ok(Row { index, estimate, interval: None, method: None, coverage: None });
    }
    let method = question.method_of(index);
    Ok(Row {
        index,
        estimate,
        interval: Some(found.interval),
        method: Some(method),
        coverage: coverage::range(method, &evidence, question.confidence, question.kind),
    })
}

/// The ordinary interval leans to the side on which the study stopped, so it is not given for any index then.
fn after_early_decision(
    study: &Study,
    early: &EarlyDecision,
    sample: &Sample,
    estimate: f64,
) -> Option<Interval> {
    let Question { index, confidence, kind, .. } = study.question;
    let specification = &study.specification;
    let two = specification.lower().is_some() && specification.upper().is_some();
    let limits = if two { Limits::Two } else { Limits::One };
    limits::interval(early, index, limits, Ending { n: sample.n(), estimate }, confidence, kind)
}

/// The interval of an index: by the plan, where it is the plan's; else as for a study of fixed size.
fn estimate_of(study: &Study, evidence: &Evidence) -> Result<Estimate, MethodError> {
    let question = study.question;
    match &study.planned {
        Some((plan, _)) if evidence.index == plan.index => plan.estimate(evidence),
        _ => {
            let method = question.method_of(evidence.index);
            interval::of(method, evidence, question.confidence, question.kind)
        }
    }
}

fn steps(study: &Study, resolution: Resolution, counted: &[Counts]) -> Vec<Step> {
    let stride = counted.len().div_ceil(STEPS_MAX).max(1);
    let mut tally = Tally::new(study.question.sigma);
    let mut steps = Vec::new();
    for (i, &counts) in counted.iter().enumerate() {
        if tally.add(counts).is_err() {
            break;
        }
        let n = i + 1;
        if n % stride != 0 && n != counted.len() {
            continue;
        }
        let Ok(sample) = tally.sample(resolution, &study.specification) else { continue };
        let Ok(evidence) = Evidence::of(&sample, study.question.index) else { continue };
        if let Ok(Estimate { estimate, interval, .. }) = estimate_of(study, &evidence) {
            steps.push(Step {
                n: tally.moments().n().get(),
                estimate,
                low: interval.low,
                high: interval.high,
            });
        }
    }
    steps
}

/// A reading exactly at a limit is within it. Both sides of the comparison are the nearest doubles of short decimals.
fn beyond(study: &Study, resolution: Resolution, counted: &[Counts]) -> (u32, u32) {
    let value = |counts: Counts| value(resolution, counts);
    let (lower, upper) = (study.specification.lower(), study.specification.upper());
    let below = counted.iter().filter(|&&counts| lower.is_some_and(|limit| value(counts) < limit.to_f64()));
    let above = counted.iter().filter(|&&counts| upper.is_some_and(|limit| value(counts) > limit.to_f64()));
    (saturating(below.count()), saturating(above.count()))
}

/// A reading in the unit, for drawing and comparing: the double nearest to its decimal text.
#[must_use]
pub fn value(resolution: Resolution, counts: Counts) -> f64 {
    Decimal::parse(resolution.show(counts).to_string()).map_or(f64::NAN, Decimal::to_f64)
}

fn saturating(n: usize) -> u32 {
    u32::try_from(n).unwrap_or(u32::MAX)
}
