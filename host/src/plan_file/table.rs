//! One table of a plan file: its keys taken one by one, each with its line; what is left over is unknown.

use std::collections::BTreeMap;
use std::ops::Range;

use toml::Spanned;
use toml::de::{DeTable, DeValue};

use super::Fault;
use super::nearest::nearest;

/// What is wrong, as it is found.
pub(super) struct Faults<'a> {
    text: &'a str,
    found: Vec<Fault>,
}

impl<'a> Faults<'a> {
    pub(super) const fn new(text: &'a str) -> Self {
        Self { text, found: Vec::new() }
    }

    /// The line of a byte of the text, from 1 on.
    fn line(&self, at: usize) -> usize {
        1 + self.text.bytes().take(at).filter(|&byte| byte == b'\n').count()
    }

    pub(super) fn add(&mut self, at: usize, key: &str, message: impl Into<String>) {
        let fault = Fault { line: self.line(at), key: key.to_owned(), message: message.into() };
        self.found.push(fault);
    }

    /// By line, each once.
    pub(super) fn into_sorted(mut self) -> Vec<Fault> {
        self.found.sort();
        self.found.dedup();
        self.found
    }
}

/// A value that was taken: the text that stands for it, and where.
#[derive(Clone, Debug)]
pub(super) struct Taken {
    /// A string's content, or a number as it is written.
    pub(super) text: String,
    /// Written as a number, without quotes.
    pub(super) bare: bool,
    at: Range<usize>,
}

/// A table whose keys are being taken.
pub(super) struct Table<'t> {
    /// Its name and a point, or nothing for the file itself.
    prefix: String,
    start: usize,
    entries: BTreeMap<String, (usize, &'t Spanned<DeValue<'t>>)>,
    known: Vec<&'static str>,
    missing: bool,
}

impl<'t> Table<'t> {
    /// The file itself.
    pub(super) fn root(table: &'t DeTable<'t>) -> Self {
        Self::new(String::new(), 0, table)
    }

    fn new(prefix: String, start: usize, table: &'t DeTable<'t>) -> Self {
        let entries = table.iter().map(|(key, value)| (key.get_ref().to_string(), (key.span().start, value)));
        Self { prefix, start, entries: entries.collect(), known: Vec::new(), missing: false }
    }

    fn none(prefix: String) -> Self {
        Self { prefix, start: 0, entries: BTreeMap::new(), known: Vec::new(), missing: true }
    }

    /// Takes a table in this one. If a needed one is missing, that is one fault and not one for each of its keys.
    pub(super) fn table(&mut self, name: &'static str, needed: bool, faults: &mut Faults<'_>) -> Self {
        self.known.push(name);
        let prefix = format!("{}{name}.", self.prefix);
        match self.entries.remove(name) {
            Some((at, value)) => match value.get_ref() {
                DeValue::Table(table) => Self::new(prefix, at, table),
                _ => {
                    faults.add(
                        at,
                        name,
                        format!("this is a table: write [{name}] on a line of its own, its keys below"),
                    );
                    Self::none(prefix)
                }
            },
            None => {
                if needed {
                    faults.add(0, name, format!("the table [{name}] is missing"));
                }
                Self::none(prefix)
            }
        }
    }

    /// The key's full name.
    pub(super) fn path(&self, key: &str) -> String {
        format!("{}{key}", self.prefix)
    }

    /// Whether the key is there and not yet taken.
    pub(super) fn holds(&self, key: &str) -> bool {
        self.entries.contains_key(key)
    }

    /// Whether the whole table is missing.
    pub(super) const fn is_missing(&self) -> bool {
        self.missing
    }

    /// Takes the text or number of a key; `None` if it is not there or is something else, which is then a fault.
    pub(super) fn value(&mut self, key: &'static str, faults: &mut Faults<'_>) -> Option<Taken> {
        self.known.push(key);
        let (_, value) = self.entries.remove(key)?;
        let at = value.span();
        let source = || faults.text.get(at.clone()).unwrap_or_default().to_owned();
        match value.get_ref() {
            DeValue::String(text) => Some(Taken { text: text.to_string(), bare: false, at }),
            DeValue::Integer(_) | DeValue::Float(_) => Some(Taken { text: source(), bare: true, at }),
            other => {
                let message = format!("a text or a number belongs here, not a {}", other.type_str());
                faults.add(at.start, &self.path(key), message);
                None
            }
        }
    }

    /// Takes a list of texts or numbers; `None` if it is not there or holds something else, which is then a fault.
    pub(super) fn list(&mut self, key: &'static str, faults: &mut Faults<'_>) -> Option<(usize, Vec<Taken>)> {
        self.known.push(key);
        let (_, value) = self.entries.remove(key)?;
        let start = value.span().start;
        let DeValue::Array(items) = value.get_ref() else {
            let example = format!("a list belongs here: write for example {key} = [50, 100, 150]");
            faults.add(start, &self.path(key), example);
            return None;
        };
        let mut taken = Vec::new();
        for item in items.iter() {
            let at = item.span();
            match item.get_ref() {
                DeValue::Integer(_) => {
                    let text = faults.text.get(at.clone()).unwrap_or_default().to_owned();
                    taken.push(Taken { text, bare: true, at });
                }
                other => {
                    let message = format!("a whole number belongs here, not a {}", other.type_str());
                    faults.add(at.start, &self.path(key), message);
                    return None;
                }
            }
        }
        Some((start, taken))
    }

    /// Names a key that must be there and is not.
    pub(super) fn needs(&self, key: &str, example: &str, faults: &mut Faults<'_>) {
        if !self.missing {
            faults.add(self.start, &self.path(key), format!("missing; write for example {key} = {example}"));
        }
    }

    /// Leaves a key out of what is named as known here.
    pub(super) fn forget(&mut self, key: &str) {
        self.known.retain(|known| *known != key);
    }

    /// Names whatever was not taken.
    pub(super) fn finish(self, faults: &mut Faults<'_>) {
        for (key, (at, _)) in &self.entries {
            let hint = match nearest(key, &self.known) {
                Some(near) => format!("; did you mean {near}?"),
                None => format!("; known here: {}", self.known.join(", ")),
            };
            faults.add(*at, &format!("{}{key}", self.prefix), format!("unknown key{hint}"));
        }
    }

    /// Where the table starts.
    pub(super) const fn start(&self) -> usize {
        self.start
    }
}

impl Taken {
    /// Where it stands.
    pub(super) const fn start(&self) -> usize {
        self.at.start
    }
}
