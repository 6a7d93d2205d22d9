//! `donelight plan`: write a plan to start from, or say what is wrong with one.

use std::path::Path;

use serde_json::json;

use crate::cli::Plan;
use crate::files;
use crate::output::{Answer, Failure};
use crate::plan_file::{self, describe};

/// Answers `donelight plan …`.
///
/// # Errors
/// The file exists already or cannot be written; the plan cannot be read or is invalid.
pub(super) fn run(plan: &Plan) -> Result<Answer, Failure> {
    match plan {
        Plan::New { file, force } => new(file, *force),
        Plan::Check { file } => check(file),
    }
}

fn new(file: &Path, force: bool) -> Result<Answer, Failure> {
    let content = plan_file::EXAMPLE.as_bytes();
    if force {
        files::write(file, content)?
    } else {
        files::write_new(file, content)?
    }
    let name = file.display();
    Ok(Answer::done(
        format!("{name} is written. Edit it, then: donelight plan check {name}"),
        json!({ "file": file.to_string_lossy() }),
    ))
}

fn check(file: &Path) -> Result<Answer, Failure> {
    let plan = plan_file::read(file)?;
    let mut json = describe::json(&plan);
    if let Some(object) = json.as_object_mut() {
        object.insert("file".to_owned(), json!(file.to_string_lossy()));
        object.insert("valid".to_owned(), json!(true));
    }
    Ok(Answer::done(format!("{} is a valid plan.\n\n{}", file.display(), describe::summary(&plan)), json))
}
