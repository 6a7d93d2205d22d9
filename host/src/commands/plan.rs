//! `donelight plan`: write a plan to start from, or say what is wrong with one, what it asks for and what it gives.

use std::path::Path;

use donelight_core::capability::Index;
use donelight_core::plan;
use donelight_core::quantity::Millionths;
use indicatif::{ProgressBar, ProgressStyle};
use serde_json::json;

use crate::cli::{NewPlan, Plan};
use crate::design::{self, Limits, Question};
use crate::files;
use crate::output::{Answer, Console, Failure};
use crate::plan_file::{self, describe};
use crate::simulation::{self, Extent, Outcome, Process, ProcessError, words};

/// Answers `donelight plan …`.
///
/// # Errors
/// The file exists already or cannot be written; the plan cannot be read or is invalid.
pub(super) fn run(plan: &Plan, console: &Console) -> Result<Answer, Failure> {
    match plan {
        Plan::New(options) => new(options),
        Plan::Check { file, studies, seed } => check(file, *studies, *seed, console),
    }
}

fn new(options: &NewPlan) -> Result<Answer, Failure> {
    let NewPlan { file, force, .. } = options;
    let content = match (options.early, options.claim, options.against) {
        (true, Some(claim), Some(against)) => deciding_early(options, claim, against)?,
        _ => plan_file::EXAMPLE.to_owned(),
    };
    if *force {
        files::write(file, content.as_bytes())?
    } else {
        files::write_new(file, content.as_bytes())?
    }
    let name = file.display();
    Ok(Answer::done(
        format!("{name} is written. Edit it, then: donelight plan check {name}"),
        json!({ "file": file.to_string_lossy() }),
    ))
}

/// The example with another rule to stop by.
fn deciding_early(options: &NewPlan, claim: Millionths, against: Millionths) -> Result<String, Failure> {
    let &NewPlan { alpha, power, layout, .. } = options;
    let spending = layout.spending;
    // The example has two limits and asks for Cpk.
    let question =
        Question { index: Index::Cpk, limits: Limits::Two, claim, against, alpha, power, spending };
    let design = design::smallest(&question, layout.looks.into())?;
    Ok(plan_file::early::example(&design.early))
}

fn check(file: &Path, studies: Option<u32>, seed: u64, console: &Console) -> Result<Answer, Failure> {
    let plan = plan_file::read(file)?;
    let processes = simulation::usual_processes(&plan);
    let studies = studies.unwrap_or_else(|| simulation::usual_studies(&plan, &processes));
    let extent = Extent { seed, studies };
    let (words, simulated) = match simulate(&plan, &processes, extent, console) {
        Ok(outcomes) => (words::text(&plan, extent, &outcomes), words::json(extent, &outcomes)),
        Err(error) => (format!("Not simulated: {error}."), json!({ "refused": error.to_string() })),
    };
    let mut json = describe::json(&plan);
    if let Some(object) = json.as_object_mut() {
        object.insert("file".to_owned(), json!(file.to_string_lossy()));
        object.insert("valid".to_owned(), json!(true));
        object.insert("simulation".to_owned(), simulated);
    }
    let text = format!("{} is a valid plan.\n\n{}\n\n{words}", file.display(), describe::summary(&plan));
    Ok(Answer::done(text, json))
}

fn simulate(
    plan: &plan::Plan,
    processes: &[Process],
    extent: Extent,
    console: &Console,
) -> Result<Vec<Outcome>, ProcessError> {
    let bar = if console.json() { ProgressBar::hidden() } else { progress_bar() };
    bar.set_length(u64::from(extent.studies) * processes.len() as u64);
    let done = |studies: u32| bar.inc(studies.into());
    let outcomes =
        processes.iter().map(|&process| simulation::simulate(plan, process, extent, &done)).collect();
    bar.finish_and_clear();
    outcomes
}

/// On a terminal only.
fn progress_bar() -> ProgressBar {
    let style = ProgressStyle::with_template("{bar:40} {pos} of {len} studies  {eta}");
    ProgressBar::new(0).with_style(style.unwrap_or_else(|_| ProgressStyle::default_bar()))
}
