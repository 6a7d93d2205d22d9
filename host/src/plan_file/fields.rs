//! The keys of a plan file, one by one into the core's draft, and the core's faults back to their lines.

use std::collections::BTreeMap;
use std::str::FromStr;

use donelight_core::capability::Index;
use donelight_core::counts::{Decimal, Resolution};
use donelight_core::interval::{Kind, Method};
use donelight_core::plan::{Draft, Fault as DraftFault, Field, LineSettings, Parity, Plan};
use donelight_core::quantity::{Confidence, Count};
use donelight_core::sigma::{Sigma, SigmaError, SubgroupSize};
use donelight_core::text::Text;
use toml::de::DeTable;

use super::Fault;
use super::stop::{self, Subject};
use super::table::{Faults, Table, Taken};
use crate::design::Limits;
use crate::level;

/// All faults at once, or the plan.
pub(super) fn read(text: &str) -> Result<Plan, Vec<Fault>> {
    let mut faults = Faults::new(text);
    let (document, errors) = DeTable::parse_recoverable(text);
    if !errors.is_empty() {
        // What would follow from lines that cannot be parsed (a value missing, a table cut short) would mislead.
        for error in &errors {
            let at = error.span().map_or(0, |span| span.start);
            faults.add(at, "", format!("this is not TOML: {}", error.message()));
        }
        return Err(faults.into_sorted());
    }
    let mut reader = Reader { faults: &mut faults, places: BTreeMap::new(), unread: Vec::new() };
    let draft = reader.file(Table::root(document.get_ref()));
    reader.judge(&draft);
    let found = faults.into_sorted();
    if !found.is_empty() {
        return Err(found);
    }
    Plan::try_from(draft)
        .map_err(|fault| vec![Fault { line: 1, key: String::new(), message: fault.to_string() }])
}

pub(super) struct Reader<'r, 'f> {
    pub(super) faults: &'r mut Faults<'f>,
    /// Where each key stands, or where its table does.
    pub(super) places: BTreeMap<String, usize>,
    /// Keys whose value could not be read; what the core says of them would be about our stand-in.
    pub(super) unread: Vec<String>,
}

impl Reader<'_, '_> {
    fn file(&mut self, mut root: Table<'_>) -> Draft {
        let name = self.text(&mut root, "name", Some("\"Wick tubes, first lot\""));
        let part = self.text(&mut root, "part", None);
        let characteristic = self.text(&mut root, "characteristic", None);
        let unit = self.text(&mut root, "unit", None);
        let resolution = self.needed(&mut root, "resolution", "\"0.001\"", exact::<Resolution>);
        let mut limits = root.table("specification", true, self.faults);
        let lower = self.optional(&mut limits, "lower", exact::<Decimal>);
        let upper = self.optional(&mut limits, "upper", exact::<Decimal>);
        let target = self.optional(&mut limits, "target", exact::<Decimal>);
        limits.finish(self.faults);
        let mut capability = root.table("capability", true, self.faults);
        let index = self.needed(&mut capability, "index", "\"cpk\"", word::<Index>);
        let confidence = self.optional(&mut capability, "confidence", confidence);
        let kind = self.optional(&mut capability, "kind", word::<Kind>);
        let sigma_word = self.optional(&mut capability, "sigma", sigma_word);
        let method = self.optional(&mut capability, "method", word::<Method>);
        capability.finish(self.faults);
        let sigma = self.sigma(&mut root, sigma_word);
        let subject = index.map(|index| {
            let limits = if lower.is_some() && upper.is_some() { Limits::Two } else { Limits::One };
            Subject { index, limits }
        });
        let rule = stop::rule(self, &mut root, subject);
        let gauge = self.gauge(&mut root);
        let mut watch = root.table("watch", false, self.faults);
        let same_in_a_row = self.optional(&mut watch, "same_in_a_row", whole::<u8>);
        watch.finish(self.faults);
        root.finish(self.faults);
        Draft {
            name,
            part,
            characteristic,
            unit,
            resolution: resolution.unwrap_or_else(stand_in),
            lower,
            upper,
            target,
            index: index.unwrap_or(Index::Cpk),
            confidence: confidence.unwrap_or(Confidence::NINETY_FIVE_PERCENT),
            kind: kind.unwrap_or(Kind::TwoSided),
            rule,
            gauge,
            same_in_a_row: same_in_a_row.unwrap_or(0),
            sigma,
            method: method.unwrap_or_else(|| {
                Method::default_of_plan(index.unwrap_or(Index::Cpk), kind.unwrap_or(Kind::TwoSided))
            }),
        }
    }

    /// The sigma from its word and the table of subgroups.
    fn sigma(&mut self, root: &mut Table<'_>, word: Option<&'static str>) -> Sigma {
        let there = root.holds("subgroups");
        let mut subgroups = root.table("subgroups", false, self.faults);
        let read = |taken: &Taken| taken.text.parse::<SubgroupSize>().map_err(|error| error.to_string());
        let size = if there { self.needed(&mut subgroups, "size", "5", read) } else { None };
        subgroups.finish(self.faults);
        if self.unread.iter().any(|key| key == SIGMA || key == SIZE) {
            return Sigma::Overall;
        }
        Sigma::new(word, size).unwrap_or_else(|error| {
            let key = if error == SigmaError::TakesNoSize { SIZE } else { SIGMA };
            let help = if error == SigmaError::NeedsSize { " in a table [subgroups]: size = 5" } else { "" };
            let at = self.places.get(key).copied().unwrap_or(0);
            self.faults.add(at, key, format!("{error}{help}"));
            self.unread.push(SIGMA.to_owned());
            Sigma::Overall
        })
    }

    fn gauge(&mut self, root: &mut Table<'_>) -> LineSettings {
        let default = LineSettings::default();
        let mut gauge = root.table("gauge", false, self.faults);
        let settings = LineSettings {
            baud: self.optional(&mut gauge, "baud", whole).unwrap_or(default.baud),
            data_bits: self.optional(&mut gauge, "data_bits", whole).unwrap_or(default.data_bits),
            parity: self.optional(&mut gauge, "parity", parity).unwrap_or(default.parity),
            stop_bits: self.optional(&mut gauge, "stop_bits", whole).unwrap_or(default.stop_bits),
        };
        gauge.finish(self.faults);
        settings
    }

    fn text<const N: usize>(
        &mut self,
        table: &mut Table<'_>,
        key: &'static str,
        example: Option<&str>,
    ) -> Text<N> {
        let read = |taken: &Taken| {
            Text::new(&taken.text).map_err(|error| format!("{error} (at most {N} bytes in UTF-8)"))
        };
        match example {
            Some(example) => self.needed(table, key, example, read),
            None => self.optional(table, key, read),
        }
        .unwrap_or_default()
    }

    pub(super) fn needed<T>(
        &mut self,
        table: &mut Table<'_>,
        key: &'static str,
        example: &str,
        read: impl FnOnce(&Taken) -> Result<T, String>,
    ) -> Option<T> {
        let before = self.unread.len();
        let found = self.optional(table, key, read);
        if found.is_none() && self.unread.len() == before {
            table.needs(key, example, self.faults);
            self.unread.push(table.path(key));
        }
        found
    }

    pub(super) fn optional<T>(
        &mut self,
        table: &mut Table<'_>,
        key: &'static str,
        read: impl FnOnce(&Taken) -> Result<T, String>,
    ) -> Option<T> {
        let path = table.path(key);
        self.places.insert(path.clone(), table.start());
        let there = table.holds(key);
        let Some(taken) = table.value(key, self.faults) else {
            if there || table.is_missing() {
                self.unread.push(path);
            }
            return None;
        };
        self.places.insert(path.clone(), taken.start());
        match read(&taken) {
            Ok(value) => Some(value),
            Err(message) => {
                self.faults.add(taken.start(), &path, message);
                self.unread.push(path);
                None
            }
        }
    }

    /// What the core finds wrong, except about keys that could not be read anyway.
    fn judge(&mut self, draft: &Draft) {
        for fault in draft.faults() {
            if involved(fault).iter().any(|key| self.unread.iter().any(|unread| unread == key)) {
                continue;
            }
            let key = key(fault.field());
            let at = self.places.get(key).copied().unwrap_or(0);
            self.faults.add(at, key, fault.to_string());
        }
    }
}

/// Stands in for a resolution that could not be read.
fn stand_in() -> Resolution {
    // One step of one unit is a resolution: `new` refuses only a step of 0 and more than 9 decimals.
    Resolution::new(1, 0).expect("a step of 1 is a resolution")
}

/// Which sigma.
const SIGMA: &str = "capability.sigma";
/// How many pieces a subgroup has.
const SIZE: &str = "subgroups.size";

/// The key of a draft's field.
const fn key(field: Field) -> &'static str {
    match field {
        Field::Name => "name",
        Field::Unit => "unit",
        Field::Resolution => "resolution",
        Field::Lower => "specification.lower",
        Field::Upper => "specification.upper",
        Field::Target => "specification.target",
        Field::Index => "capability.index",
        Field::Planned => "stop.planned",
        Field::Precision => "stop.precision",
        Field::Limit => "stop.limit",
        Field::Baud => "gauge.baud",
        Field::DataBits => "gauge.data_bits",
        Field::StopBits => "gauge.stop_bits",
        Field::SameInARow => "watch.same_in_a_row",
        Field::Sigma => SIGMA,
        Field::Method => "capability.method",
        Field::Claim => "stop.early.claim",
        Field::Alpha => "stop.early.alpha",
        Field::Looks => "stop.early.looks",
    }
}

/// Every key that a fault is about.
fn involved(fault: DraftFault) -> Vec<&'static str> {
    const LIMITS: [&str; 2] = ["specification.lower", "specification.upper"];
    let others: &[&str] = match fault {
        DraftFault::NoLimit | DraftFault::LimitsReversed => &LIMITS,
        DraftFault::TargetOutside => &["specification.lower", "specification.upper", "specification.target"],
        DraftFault::LimitBeyondRange => {
            &["specification.lower", "specification.upper", "specification.target", "resolution"]
        }
        DraftFault::ResolutionTooCoarse => &["specification.lower", "specification.upper", "resolution"],
        DraftFault::IndexNeedsLower | DraftFault::IndexNeedsUpper => {
            &["specification.lower", "specification.upper", "capability.index"]
        }
        DraftFault::PlannedAboveLimit => &["stop.planned", "stop.limit"],
        DraftFault::PrecisionBeyondLimit => {
            &["stop.precision", "stop.limit", "capability.confidence", "capability.kind", SIGMA]
        }
        DraftFault::PlannedNotWhole | DraftFault::LimitNotWhole => &[SIGMA, SIZE],
        DraftFault::IndexNeedsOverall => &["capability.index"],
        DraftFault::MethodUnsuited => &["capability.index", "capability.kind"],
        _ => &[],
    };
    others.iter().copied().chain([key(fault.field())]).collect()
}

/// An exact number, in quotes or not; TOML's underscores between digits are taken too.
fn exact<T>(taken: &Taken) -> Result<T, String>
where
    T: FromStr,
    T::Err: std::fmt::Display,
{
    let text = if taken.bare { taken.text.replace('_', "") } else { taken.text.clone() };
    text.parse().map_err(|error: T::Err| error.to_string())
}

pub(super) fn word<T>(taken: &Taken) -> Result<T, String>
where
    T: FromStr,
    T::Err: std::fmt::Display,
{
    taken.text.trim().parse().map_err(|error: T::Err| error.to_string())
}

/// One of the words for a sigma.
fn sigma_word(taken: &Taken) -> Result<&'static str, String> {
    let word = taken.text.trim();
    let known = Sigma::WORDS.into_iter().find(|known| known.eq_ignore_ascii_case(word));
    known.ok_or_else(|| SigmaError::Unknown.to_string())
}

fn whole<T: FromStr>(taken: &Taken) -> Result<T, String> {
    taken
        .text
        .replace('_', "")
        .parse()
        .map_err(|_| "not a whole number in range; write it in plain digits".to_owned())
}

pub(super) fn count(taken: &Taken) -> Result<Count, String> {
    Count::new(whole(taken)?).ok_or_else(|| format!("at most {} pieces", Count::MAX.get()))
}

pub(super) fn confidence(taken: &Taken) -> Result<Confidence, String> {
    let level = level::read(&taken.text).map_err(|error| error.to_string())?;
    Confidence::from_millionths(level.millionths).ok_or_else(|| "not between 50% and 99.9999%".to_owned())
}

fn parity(taken: &Taken) -> Result<Parity, String> {
    match taken.text.trim().to_lowercase().as_str() {
        "none" => Ok(Parity::None),
        "even" => Ok(Parity::Even),
        "odd" => Ok(Parity::Odd),
        _ => Err("unknown parity; write none, even or odd".to_owned()),
    }
}
