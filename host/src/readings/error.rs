//! Why a file gives no readings.

use std::fmt;
use std::io;
use std::path::PathBuf;

use donelight_core::quantity::Count;
use serde_json::{Value, json};

use super::SubgroupFault;
use crate::output::Explain;

/// Why a file gives no readings. Nothing is computed from the rest of it.
#[derive(Debug)]
pub enum FileError {
    /// It cannot be read.
    Unreadable {
        /// Which file.
        path: PathBuf,
        /// What the system says.
        error: io::Error,
    },
    /// It holds zero bytes: a spreadsheet or another binary file, or UTF-16.
    NotText,
    /// Nothing but comments, blank lines and titles.
    NoRows,
    /// No column has numbers in most of its rows.
    NoNumbers,
    /// Several columns have numbers.
    WhichColumn {
        /// Their numbers and titles.
        columns: Vec<String>,
    },
    /// Two cells of digits in each row: two columns, or decimal commas?
    DecimalCommas,
    /// The column named is not there.
    NoSuchColumn {
        /// What was named.
        wanted: String,
        /// What is there.
        columns: Vec<String>,
    },
    /// Two columns have the title named.
    TitleTwice {
        /// The title.
        title: String,
    },
    /// Rows that are no readings.
    BadRows {
        /// How many.
        count: usize,
        /// The first of them.
        shown: Vec<BadRow>,
    },
    /// The column of subgroups does not part the readings into subgroups of one size.
    Subgroups {
        /// The line of the first row that does not fit, from 1 on.
        line: usize,
        /// Why it does not.
        fault: SubgroupFault,
    },
    /// More readings than a study may have.
    TooMany {
        /// How many.
        count: usize,
    },
}

/// A row that is no reading.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct BadRow {
    /// Its line in the file, from 1 on.
    pub line: usize,
    /// What stands there.
    pub text: String,
    /// Why that is no reading, and what to do.
    pub reason: String,
}

impl FileError {
    /// So many bad rows are listed; the rest is counted.
    pub const BAD_ROWS_SHOWN: usize = 20;
}

impl fmt::Display for FileError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Unreadable { path, error } => write!(f, "cannot read {}: {error}", path.display()),
            Self::NotText => f.write_str("the file is not plain text"),
            Self::NoRows => f.write_str("the file has no rows of readings"),
            Self::NoNumbers => f.write_str("no column of the file has numbers in most of its rows"),
            Self::WhichColumn { columns } => {
                write!(f, "more than one column of the file has numbers: {}", columns.join(", "))
            }
            Self::DecimalCommas => {
                f.write_str("the commas in the file may be decimal commas or may part two columns")
            }
            Self::NoSuchColumn { wanted, columns } => {
                write!(f, "the file has no column {wanted:?}; it has: {}", columns.join(", "))
            }
            Self::TitleTwice { title } => write!(f, "more than one column of the file is titled {title:?}"),
            Self::BadRows { count, shown } => {
                let rows = if *count == 1 { "row is no reading" } else { "rows are no readings" };
                write!(f, "{count} {rows}; nothing was computed")?;
                for BadRow { line, text, reason } in shown {
                    write!(f, "\n  line {line}: {:?}: {reason}", shortened(text))?;
                }
                if *count > shown.len() {
                    write!(f, "\n  … and {} more", count - shown.len())?;
                }
                Ok(())
            }
            Self::Subgroups { line, fault } => {
                write!(f, "the subgroups cannot be taken from the file: line {line}: {fault}")
            }
            Self::TooMany { count } => {
                write!(f, "the file has {count} readings; a study has at most {}", Count::MAX.get())
            }
        }
    }
}

/// A cell as far as it helps to find it.
fn shortened(text: &str) -> String {
    const SHOWN: usize = 60;
    if text.chars().count() <= SHOWN {
        text.to_owned()
    } else {
        text.chars().take(SHOWN).chain(['…']).collect()
    }
}

impl std::error::Error for FileError {}

impl Explain for FileError {
    fn kind(&self) -> &'static str {
        match self {
            Self::Unreadable { error, .. } if error.kind() == io::ErrorKind::NotFound => "file-missing",
            Self::Unreadable { .. } => "file-unreadable",
            Self::NotText => "not-text",
            Self::NoRows => "no-rows",
            Self::NoNumbers => "no-numbers",
            Self::WhichColumn { .. } | Self::TitleTwice { .. } => "which-column",
            Self::DecimalCommas => "decimal-commas",
            Self::NoSuchColumn { .. } => "no-such-column",
            Self::BadRows { .. } => "bad-rows",
            Self::Subgroups { .. } => "bad-subgroups",
            Self::TooMany { .. } => "too-many-readings",
        }
    }

    fn help(&self) -> String {
        match self {
            Self::Unreadable { error, .. } => match error.kind() {
                io::ErrorKind::NotFound => "Check the path and the spelling.",
                io::ErrorKind::PermissionDenied => "Ask for permission to read it, or copy it to a folder of yours.",
                _ => "Check that it is a file and that the disk is in order.",
            },
            Self::NotText => "Save it as CSV, in UTF-8; a spreadsheet's own format cannot be read.",
            Self::NoRows => "Give a file with one reading a row.",
            Self::NoNumbers => {
                "Give a file with one reading a row; numbers have digits and at most one decimal point or comma."
            }
            Self::WhichColumn { .. } | Self::TitleTwice { .. } => {
                "Say which one holds the readings, by title or number: --column 2"
            }
            Self::DecimalCommas => {
                "Two columns: say which one with --column. Decimal commas: part the cells with semicolons, or write \
                 the numbers with points or in quotes."
            }
            Self::NoSuchColumn { .. } => "Name one of these, by title or number.",
            Self::BadRows { .. } => {
                "Correct the file, or remove what is no reading; a line that starts with # is passed over."
            }
            Self::Subgroups { .. } => {
                "Sort the file by subgroups, each with the same number of readings, 2 to 25; only the last may have fewer."
            }
            Self::TooMany { .. } => "Split the file.",
        }
        .to_owned()
    }

    fn details(&self) -> Option<Value> {
        let Self::BadRows { count, shown } = self else { return None };
        let rows: Vec<Value> = shown
            .iter()
            .map(|row| json!({ "line": row.line, "text": row.text, "reason": row.reason }))
            .collect();
        Some(json!({ "bad_rows": rows, "bad_row_count": count }))
    }
}
