//! Readings from a file: CSV with commas, semicolons or tabs, or text with one reading a line.
//!
//! A file is taken whole or not at all: every row that is no reading is named with its line, and then nothing is
//! computed. Lines that start with `#` are comments, blank lines are passed over, and a first row of words is a title.

mod column;
mod error;
mod subgroups;

use std::fs;
use std::path::Path;

use donelight_core::counts::{Counts, ReadingError, Resolution};
use donelight_core::quantity::Count;
use donelight_core::sigma::SubgroupSize;

pub use error::{BadRow, FileError};
pub use subgroups::SubgroupFault;

/// What a file held.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct ReadingsFile {
    /// The readings in the order of the file.
    pub readings: Vec<Counts>,
    /// The title of their column, if the file has titles.
    pub title: Option<String>,
    /// SHA-256 of the whole file, in hexadecimal.
    pub fingerprint: String,
    /// How many readings each subgroup has, if a column names them.
    pub subgroup: Option<SubgroupSize>,
}

/// Which columns to read: each by its title, or its number from 1 on.
#[derive(Clone, Copy, Debug, Default)]
pub struct Columns<'a> {
    /// The readings; `None` if only one column has numbers, the subgroups' left aside.
    pub readings: Option<&'a str>,
    /// What names each reading's subgroup, if that is to be read.
    pub subgroups: Option<&'a str>,
}

/// Reads one column of a file as counts of `resolution`; `column` is a title or a number from 1 on, or `None` if there
/// is just one column with numbers.
///
/// # Errors
/// See [`FileError`]; with bad rows there are no readings at all.
pub fn read(
    path: &Path,
    column: Option<&str>,
    resolution: Resolution,
    unit: &str,
) -> Result<ReadingsFile, FileError> {
    read_columns(path, &Columns { readings: column, subgroups: None }, resolution, unit)
}

/// The same, with subgroups if a column names them. They must follow each other and be alike in size; the last one may be
/// incomplete.
///
/// # Errors
/// See [`FileError`].
pub fn read_columns(
    path: &Path,
    columns: &Columns<'_>,
    resolution: Resolution,
    unit: &str,
) -> Result<ReadingsFile, FileError> {
    let bytes = fs::read(path).map_err(|error| FileError::Unreadable { path: path.to_owned(), error })?;
    from_bytes(&bytes, columns, resolution, unit)
}

/// The same, of bytes that are read already.
///
/// # Errors
/// See [`FileError`], `Unreadable` excepted.
pub fn from_bytes(
    bytes: &[u8],
    columns: &Columns<'_>,
    resolution: Resolution,
    unit: &str,
) -> Result<ReadingsFile, FileError> {
    let (readings, title, subgroup) = found(bytes, columns, resolution, unit)?;
    Ok(ReadingsFile { readings, title, fingerprint: fingerprint(bytes), subgroup })
}

/// SHA-256 in hexadecimal.
#[must_use]
pub fn fingerprint(bytes: &[u8]) -> String {
    use sha2::{Digest, Sha256};
    use std::fmt::Write;
    Sha256::digest(bytes).iter().fold(String::new(), |mut text, byte| {
        // Writing to a String does not fail.
        let _ = write!(text, "{byte:02x}");
        text
    })
}

type Found = (Vec<Counts>, Option<String>, Option<SubgroupSize>);

fn found(
    bytes: &[u8],
    columns: &Columns<'_>,
    resolution: Resolution,
    unit: &str,
) -> Result<Found, FileError> {
    let bytes = bytes.strip_prefix(b"\xEF\xBB\xBF").unwrap_or(bytes);
    if bytes.contains(&0) {
        return Err(FileError::NotText);
    }
    let table = Table::read(bytes)?;
    let is_number = |cell: &[u8]| {
        !matches!(
            resolution.read(cell, unit),
            Err(ReadingError::Empty
                | ReadingError::NoDigits
                | ReadingError::NotANumber
                | ReadingError::NotAscii)
        )
    };
    let grouping = columns.subgroups.map(|wanted| column::named(&table, wanted)).transpose()?;
    let index = column::choose(&table, columns.readings, grouping, is_number)?;
    let mut readings = Vec::with_capacity(table.rows.len());
    let mut bad = Vec::new();
    let mut bad_count = 0;
    for row in &table.rows {
        match reading(row, index, table.width, resolution, unit) {
            Ok(counts) => readings.push(counts),
            Err((text, reason)) => {
                bad_count += 1;
                if bad.len() < FileError::BAD_ROWS_SHOWN {
                    bad.push(BadRow { line: table.line(row), text, reason });
                }
            }
        }
    }
    if bad_count > 0 {
        return Err(FileError::BadRows { count: bad_count, shown: bad });
    }
    if readings.len() > Count::MAX.get() as usize {
        return Err(FileError::TooMany { count: readings.len() });
    }
    let title = table.titles.as_ref().and_then(|titles| titles.get(index).cloned());
    let subgroup = grouping.map(|grouping| subgroups::size(&table, grouping)).transpose()?;
    Ok((readings, title, subgroup))
}

/// The reading of a row, or the offending text and why it is none.
fn reading(
    row: &csv::ByteRecord,
    index: usize,
    width: usize,
    resolution: Resolution,
    unit: &str,
) -> Result<Counts, (String, String)> {
    if row.len() != width {
        let all = row.iter().map(String::from_utf8_lossy).collect::<Vec<_>>().join(" | ");
        return Err((all, format!("{} where the first row has {width}", cells(row.len()))));
    }
    let cell = row.get(index).unwrap_or_default();
    resolution.read(cell, unit).map_err(|error| {
        let reason = match error {
            ReadingError::Empty => "empty cell".to_owned(),
            other => other.to_string(),
        };
        (String::from_utf8_lossy(cell).into_owned(), reason)
    })
}

fn cells(n: usize) -> String {
    if n == 1 { "1 cell".to_owned() } else { format!("{n} cells") }
}

/// The file's rows, without comments, blank lines and titles.
struct Table<'a> {
    bytes: &'a [u8],
    separator: u8,
    titles: Option<Vec<String>>,
    rows: Vec<csv::ByteRecord>,
    width: usize,
}

impl<'a> Table<'a> {
    fn read(bytes: &'a [u8]) -> Result<Self, FileError> {
        let separator = separator(bytes);
        let mut reader = csv::ReaderBuilder::new()
            .delimiter(separator)
            .comment(Some(b'#'))
            .has_headers(false)
            .flexible(true)
            .trim(csv::Trim::All)
            .from_reader(bytes);
        // Reading bytes from memory into records of any length has no error left to give.
        let mut rows: Vec<csv::ByteRecord> = reader.byte_records().filter_map(Result::ok).collect();
        // A line of nothing but blanks is one empty cell.
        rows.retain(|row| row.iter().any(|cell| !cell.is_empty()) || row.len() > 1);
        let width = rows.first().ok_or(FileError::NoRows)?.len();
        let titles = rows
            .first()
            .filter(|row| is_title(row))
            .map(|row| row.iter().map(|cell| String::from_utf8_lossy(cell).into_owned()).collect::<Vec<_>>());
        if titles.is_some() {
            rows.remove(0);
        }
        if rows.is_empty() {
            return Err(FileError::NoRows);
        }
        Ok(Self { bytes, separator, titles, rows, width })
    }

    /// The line that a row starts on, from 1 on. The csv crate's position may be that of comments and blank lines before
    /// the row, so they are passed over here.
    fn line(&self, row: &csv::ByteRecord) -> usize {
        let from = row.position().map_or(0, |position| usize::try_from(position.byte()).unwrap_or(0));
        let before = self.bytes.get(..from).unwrap_or_default();
        let after = self.bytes.get(from..).unwrap_or_default();
        let newlines = |bytes: &[u8]| bytes.iter().filter(|&&byte| byte == b'\n').count();
        let passed = after
            .split(|&byte| byte == b'\n')
            .take_while(|line| line.first() == Some(&b'#') || line.iter().all(u8::is_ascii_whitespace))
            .count();
        1 + newlines(before) + passed
    }
}

/// Semicolons or tabs, if the first line that is no comment has any; else commas.
fn separator(bytes: &[u8]) -> u8 {
    let mut lines = bytes.split(|&byte| byte == b'\n');
    let first = lines.find(|line| line.first() != Some(&b'#') && !line.iter().all(u8::is_ascii_whitespace));
    let has = |separator: u8| first.is_some_and(|line| line.contains(&separator));
    if has(b';') {
        b';'
    } else if has(b'\t') {
        b'\t'
    } else {
        b','
    }
}

/// Titles start like words: no cell of them starts like a number, and at least one is not empty.
fn is_title(row: &csv::ByteRecord) -> bool {
    let like_a_number =
        |cell: &[u8]| cell.first().is_some_and(|byte| byte.is_ascii_digit() || b"+-.,".contains(byte));
    row.iter().any(|cell| !cell.is_empty()) && !row.iter().any(like_a_number)
}

#[cfg(test)]
mod tests;
