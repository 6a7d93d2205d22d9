//! Plans as TOML files: read with every fault named at once and its line, and an example to start from.

pub mod describe;
pub mod early;
mod fields;
mod nearest;
mod stop;
mod table;

use std::fmt;
use std::fs;
use std::io;
use std::path::{Path, PathBuf};

use donelight_core::plan::Plan;
use serde_json::{Value, json};

use crate::output::Explain;

/// A complete, valid, commented plan.
pub const EXAMPLE: &str = include_str!("example.toml");

/// One thing wrong with a plan file.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub struct Fault {
    /// The line, from 1 on; for something that is missing, the line of the table that it belongs in.
    pub line: usize,
    /// The key, such as `stop.planned`; empty where the text is no TOML.
    pub key: String,
    /// What is wrong, and what to do.
    pub message: String,
}

/// Why a file gives no plan.
#[derive(Debug)]
pub enum PlanFileError {
    /// It cannot be read.
    Unreadable {
        /// Which file.
        path: PathBuf,
        /// What the system says.
        error: io::Error,
    },
    /// It is read, but it is no valid plan.
    Invalid {
        /// Which file.
        path: PathBuf,
        /// All that is wrong, by line.
        faults: Vec<Fault>,
    },
}

/// Reads a plan from a file.
///
/// # Errors
/// The file cannot be read, or it is no valid plan; then every fault is named.
pub fn read(path: &Path) -> Result<Plan, PlanFileError> {
    let text = fs::read(path)
        .and_then(|bytes| String::from_utf8(bytes).map_err(|_| io::Error::other("it is not text in UTF-8")))
        .map_err(|error| PlanFileError::Unreadable { path: path.to_owned(), error })?;
    from_text(&text).map_err(|faults| PlanFileError::Invalid { path: path.to_owned(), faults })
}

/// Reads a plan from TOML text.
///
/// # Errors
/// All faults, by line.
pub fn from_text(text: &str) -> Result<Plan, Vec<Fault>> {
    fields::read(text)
}

impl fmt::Display for PlanFileError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Unreadable { path, error } => write!(f, "cannot read {}: {error}", path.display()),
            Self::Invalid { path, faults } => {
                let count =
                    if faults.len() == 1 { "1 fault".to_owned() } else { format!("{} faults", faults.len()) };
                write!(f, "{} is no valid plan: {count}", path.display())?;
                for Fault { line, key, message } in faults {
                    let place = if key.is_empty() { String::new() } else { format!("{key}: ") };
                    write!(f, "\n  line {line}: {place}{message}")?;
                }
                Ok(())
            }
        }
    }
}

impl std::error::Error for PlanFileError {}

impl Explain for PlanFileError {
    fn kind(&self) -> &'static str {
        match self {
            Self::Unreadable { error, .. } if error.kind() == io::ErrorKind::NotFound => "file-missing",
            Self::Unreadable { .. } => "file-unreadable",
            Self::Invalid { .. } => "plan-invalid",
        }
    }

    fn help(&self) -> String {
        match self {
            Self::Unreadable { error, .. } if error.kind() == io::ErrorKind::NotFound => {
                "Check the path and the spelling, or write a plan to start from: donelight plan new FILE"
            }
            Self::Unreadable { .. } => "Give a plan file, as `donelight plan new FILE` writes it.",
            Self::Invalid { .. } => {
                "Correct these lines. `donelight plan new FILE` writes an example with comments."
            }
        }
        .to_owned()
    }

    fn details(&self) -> Option<Value> {
        let Self::Invalid { faults, .. } = self else { return None };
        let faults: Vec<Value> = faults
            .iter()
            .map(|fault| json!({ "line": fault.line, "key": fault.key, "message": fault.message }))
            .collect();
        Some(json!({ "faults": faults }))
    }
}

#[cfg(test)]
mod tests;
