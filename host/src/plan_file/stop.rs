//! The table `[stop]` of a plan file: a precision, or a claim to be decided early; and what is refused there.

use donelight_core::capability::Index;
use donelight_core::quantity::{Confidence, Count, Millionths, Precision};
use donelight_core::stopping::early::Spending;
use donelight_core::stopping::{Goal, StoppingRule};

use super::fields::{Reader, confidence, count, word};
use super::table::{Table, Taken};
use crate::design::{self, DesignError, Limits, Question};
use crate::level;

/// What the claim is about, as far as it could be read.
#[derive(Clone, Copy)]
pub(super) struct Subject {
    pub(super) index: Index,
    pub(super) limits: Limits,
}

/// Reads the table.
pub(super) fn rule(
    reader: &mut Reader<'_, '_>,
    root: &mut Table<'_>,
    subject: Option<Subject>,
) -> StoppingRule {
    let mut stop = root.table("stop", true, reader.faults);
    let asks = refuse_stopping_at_the_limit(reader, &mut stop);
    let deciding = stop.holds("early");
    let _ = reader.optional(&mut stop, "rule", |taken| named_rule(taken, deciding));
    let found = if deciding { early(reader, &mut stop, subject) } else { None };
    let rule = match found {
        Some(rule) => rule,
        None if deciding || asks => stand_in(),
        None => precise(reader, &mut stop),
    };
    stop.finish(reader.faults);
    rule
}

/// Stands in for a rule that could not be read: it has no fault of its own.
fn stand_in() -> StoppingRule {
    let goal = Goal::Precision(Precision::Relative(Millionths(1_000_000)));
    StoppingRule { planned: Count::MAX, goal, limit: Count::MAX }
}

fn precise(reader: &mut Reader<'_, '_>, stop: &mut Table<'_>) -> StoppingRule {
    let planned = reader.needed(stop, "planned", "212", count);
    let precision = reader.needed(stop, "precision", "\"10%\"", precision);
    let limit = reader.needed(stop, "limit", "240", count);
    let other = stand_in();
    StoppingRule {
        planned: planned.unwrap_or(other.planned),
        goal: precision.map_or(other.goal, Goal::Precision),
        limit: limit.unwrap_or(other.limit),
    }
}

/// The figures are of the reference simulation: 40 000 studies a line, a process exactly at the requirement and near one
/// limit, 95 %, at most 500 pieces, first look after 100 to after 5 of them; 11 % to 29 % for one in the middle.
pub(super) const NO_TEST: &str = "a study that goes on until its lower limit passes is no test, and is not offered: a \
    process exactly at the requirement would be passed in 22 % to 39 % of studies instead of 5 %. To stop early with \
    risks that hold, name the looks beforehand in [stop.early]: see `donelight size power --early --help`";

/// Keys with which one would ask to stop as soon as the lower limit passes.
const ASKING: [&str; 8] =
    ["until", "when", "require", "required", "requirement", "lower", "lower_limit", "passes"];

/// Whether the plan asks for it; then that is a fault, with the reason.
fn refuse_stopping_at_the_limit(reader: &mut Reader<'_, '_>, stop: &mut Table<'_>) -> bool {
    let mut asks = false;
    for key in ASKING {
        if stop.holds(key) {
            asks = true;
            let at = stop.value(key, reader.faults).map_or(stop.start(), |taken| taken.start());
            reader.faults.add(at, &stop.path(key), NO_TEST);
            stop.forget(key);
        }
    }
    asks
}

/// The rule's name may be written; it must say what the rest of the table does.
fn named_rule(taken: &Taken, deciding: bool) -> Result<(), String> {
    let name = taken.text.trim().to_lowercase();
    match (name.as_str(), deciding) {
        ("early", true) | ("precision", false) => Ok(()),
        ("early", false) => Err("the table [stop.early] is missing".to_owned()),
        ("precision", true) => {
            Err("there is a table [stop.early]; write early, or remove the table".to_owned())
        }
        _ if ["until", "limit", "lower", "pass", "capable", "shown", "reach"]
            .iter()
            .any(|w| name.contains(w)) =>
        {
            Err(NO_TEST.to_owned())
        }
        _ => Err("unknown rule; write precision or early, or leave this out".to_owned()),
    }
}

fn early(
    reader: &mut Reader<'_, '_>,
    stop: &mut Table<'_>,
    subject: Option<Subject>,
) -> Option<StoppingRule> {
    let mut table = stop.table("early", false, reader.faults);
    let claim = reader.needed(&mut table, "claim", "1.5", index_value);
    let against = reader.needed(&mut table, "against", "1.3", index_value);
    let alpha = reader.optional(&mut table, "alpha", alpha);
    let power = reader.optional(&mut table, "power", confidence);
    let spending = reader.optional(&mut table, "spending", word::<Spending>);
    let looks = looks(reader, &mut table);
    let unread = reader.unread.iter().any(|path| path.starts_with("stop.early."));
    let start = table.start();
    table.finish(reader.faults);
    let (claim, against, (looks_at, looks), Subject { index, limits }) = (claim?, against?, looks?, subject?);
    if unread {
        return None;
    }
    let question = Question {
        index,
        limits,
        claim,
        against,
        alpha: alpha.unwrap_or(design::ALPHA),
        power: power.unwrap_or(Confidence::NINETY_FIVE_PERCENT),
        spending: spending.unwrap_or(design::SPENDING),
    };
    match design::with_looks(&question, &looks) {
        Ok(design) => Some(StoppingRule::deciding_early(design.early)),
        Err(error) => {
            let (at, key) = match error {
                DesignError::Question => ("stop.early.claim", "stop.early.claim"),
                DesignError::Alpha => ("stop.early.alpha", "stop.early.alpha"),
                DesignError::Index(_) => ("capability.index", "capability.index"),
                _ => ("", "stop.early.looks"),
            };
            let at = if at.is_empty() { looks_at } else { reader.places.get(at).copied().unwrap_or(start) };
            reader.faults.add(at, key, error.to_string());
            None
        }
    }
}

/// Where the list stands, and the pieces after which the study is looked at.
fn looks(reader: &mut Reader<'_, '_>, table: &mut Table<'_>) -> Option<(usize, Vec<u32>)> {
    let path = table.path("looks");
    reader.places.insert(path.clone(), table.start());
    if !table.holds("looks") {
        table.needs(
            "looks",
            "[79, 158, 237, 316, 395] (`donelight size power --early` names them)",
            reader.faults,
        );
        reader.unread.push(path);
        return None;
    }
    let Some((start, items)) = table.list("looks", reader.faults) else {
        reader.unread.push(path);
        return None;
    };
    reader.places.insert(path.clone(), start);
    let mut looks = Vec::new();
    for item in &items {
        match count(item) {
            Ok(n) => looks.push(n.get()),
            Err(message) => {
                reader.faults.add(item.start(), &path, message);
                reader.unread.push(path);
                return None;
            }
        }
    }
    Some((start, looks))
}

fn precision(taken: &Taken) -> Result<Precision, String> {
    let level = level::read(&taken.text).map_err(|_| {
        "not a precision; write for example \"10%\" of the estimate, or \"0.15\" of index".to_owned()
    })?;
    let goal = Millionths(level.millionths);
    Ok(if level.percent { Precision::Relative(goal) } else { Precision::Absolute(goal) })
}

fn alpha(taken: &Taken) -> Result<Millionths, String> {
    level::alpha(&taken.text)
}

fn index_value(taken: &Taken) -> Result<Millionths, String> {
    level::index_value(&taken.text)
}
