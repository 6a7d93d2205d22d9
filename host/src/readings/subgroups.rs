//! Subgroups that a column names: neighbouring rows with the same name are one.

use std::collections::HashSet;
use std::fmt;

use donelight_core::sigma::SubgroupSize;

use super::{FileError, Table};

/// Why a row does not fit into subgroups of one size.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum SubgroupFault {
    /// It names no subgroup.
    Blank,
    /// Its subgroup was left for another one before.
    Scattered {
        /// Its name.
        name: String,
    },
    /// Its subgroup has another size than the first one.
    Uneven {
        /// Its name.
        name: String,
        /// How many readings it has.
        pieces: usize,
        /// How many the first one has.
        first: usize,
    },
    /// A subgroup of one reading, or of more than 25.
    Size {
        /// How many readings it has.
        pieces: usize,
    },
}

impl fmt::Display for SubgroupFault {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Blank => f.write_str("no subgroup is named"),
            Self::Scattered { name } => write!(f, "subgroup {name:?} has rows further up"),
            Self::Uneven { name, pieces, first } => {
                write!(f, "subgroup {name:?} has {pieces} readings, the first one {first}")
            }
            Self::Size { pieces } => write!(f, "a subgroup has {pieces} readings, not 2 to 25"),
        }
    }
}

/// Rows that follow each other in one subgroup.
struct Run<'t> {
    name: &'t [u8],
    line: usize,
    pieces: usize,
}

/// The size of the subgroups that a column names.
pub(super) fn size(table: &Table<'_>, column: usize) -> Result<SubgroupSize, FileError> {
    let fault = |line, fault| FileError::Subgroups { line, fault };
    let mut runs: Vec<Run<'_>> = Vec::new();
    let mut seen = HashSet::new();
    for row in &table.rows {
        let name = row.get(column).unwrap_or_default();
        if let Some(last) = runs.last_mut().filter(|last| last.name == name) {
            last.pieces += 1;
            continue;
        }
        let line = table.line(row);
        if name.is_empty() {
            return Err(fault(line, SubgroupFault::Blank));
        }
        if !seen.insert(name) {
            return Err(fault(line, SubgroupFault::Scattered { name: text(name) }));
        }
        runs.push(Run { name, line, pieces: 1 });
    }
    let Some(&Run { pieces: first, line, .. }) = runs.first() else { return Err(FileError::NoRows) };
    let last = runs.len() - 1;
    for (i, run) in runs.iter().enumerate() {
        let fits = if i == last { run.pieces <= first } else { run.pieces == first };
        if !fits {
            let uneven = SubgroupFault::Uneven { name: text(run.name), pieces: run.pieces, first };
            return Err(fault(run.line, uneven));
        }
    }
    let size = u8::try_from(first).ok().and_then(SubgroupSize::new);
    size.ok_or_else(|| fault(line, SubgroupFault::Size { pieces: first }))
}

fn text(name: &[u8]) -> String {
    String::from_utf8_lossy(name).into_owned()
}
