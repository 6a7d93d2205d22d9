//! Which column of a table holds the readings.

use super::{FileError, Table};

/// The column named by the user, or the only one with numbers, `other` left aside. Several are no guess: a row number or a temperature
/// taken for the reading would give a clean and wrong answer.
pub(super) fn choose(
    table: &Table<'_>,
    wanted: Option<&str>,
    other: Option<usize>,
    is_number: impl Fn(&[u8]) -> bool,
) -> Result<usize, FileError> {
    if let Some(wanted) = wanted {
        return named(table, wanted);
    }
    if table.width == 1 {
        return Ok(0);
    }
    let columns = (0..table.width).filter(|&index| Some(index) != other);
    let numeric: Vec<usize> = columns.filter(|&index| mostly(table, index, &is_number)).collect();
    match numeric.as_slice() {
        [only] => Ok(*only),
        [] => Err(FileError::NoNumbers),
        _ if table.separator == b',' && table.titles.is_none() && looks_like_decimal_commas(table) => {
            Err(FileError::DecimalCommas)
        }
        several => {
            Err(FileError::WhichColumn { columns: several.iter().map(|&index| name(table, index)).collect() })
        }
    }
}

/// The column with this title or number.
pub(super) fn named(table: &Table<'_>, wanted: &str) -> Result<usize, FileError> {
    let wanted = wanted.trim();
    let same = |title: &String| title.eq_ignore_ascii_case(wanted);
    let matching: Vec<usize> = table
        .titles
        .iter()
        .flatten()
        .enumerate()
        .filter(|(_, title)| same(title))
        .map(|(index, _)| index)
        .collect();
    match matching.as_slice() {
        [index] => return Ok(*index),
        [] => {}
        _ => return Err(FileError::TitleTwice { title: wanted.to_owned() }),
    }
    match wanted.parse::<usize>() {
        Ok(number) if (1..=table.width).contains(&number) => Ok(number - 1),
        _ => Err(FileError::NoSuchColumn {
            wanted: wanted.to_owned(),
            columns: (0..table.width).map(|index| name(table, index)).collect(),
        }),
    }
}

/// More than half of the rows have a number there.
fn mostly(table: &Table<'_>, index: usize, is_number: &impl Fn(&[u8]) -> bool) -> bool {
    let numbers = table.rows.iter().filter(|row| row.get(index).is_some_and(is_number)).count();
    2 * numbers > table.rows.len()
}

/// `10,005` with a comma between the cells: two cells of plain digits in every row.
fn looks_like_decimal_commas(table: &Table<'_>) -> bool {
    let digits = |cell: &[u8]| !cell.is_empty() && cell.iter().all(u8::is_ascii_digit);
    let whole = |cell: &[u8]| digits(cell.strip_prefix(b"-").or(cell.strip_prefix(b"+")).unwrap_or(cell));
    table.width == 2
        && table.rows.iter().all(|row| row.get(0).is_some_and(whole) && row.get(1).is_some_and(digits))
}

fn name(table: &Table<'_>, index: usize) -> String {
    match table.titles.as_ref().and_then(|titles| titles.get(index)).filter(|title| !title.is_empty()) {
        Some(title) => format!("{} \"{title}\"", index + 1),
        None => (index + 1).to_string(),
    }
}
