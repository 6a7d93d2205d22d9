//! A study's verdict, pictures and record, as one self-contained page ([`page`]), as CSV and as JSON ([`export`]).
//!
//! A [`Study`] is all that the report knows; it is filled from a CSV file (`assess`) or from a ledger (`report`), and
//! neither is known here. [`analysis`] asks the core for every statistic; [`words`] puts it into sentences.

pub mod analysis;
pub mod charts;
pub mod export;
pub mod number;
pub mod page;
pub mod words;

use donelight_core::capability::{Index, Specification};
use donelight_core::counts::{Counts, Resolution};
use donelight_core::interval::{Kind, Method};
use donelight_core::plan::Plan;
use donelight_core::quantity::{Confidence, Count, Millionths};
use donelight_core::sigma::Sigma;
use donelight_core::stopping::Standing;
use donelight_core::stopping::early::EarlyDecision;

/// What is reported.
#[derive(Clone, Debug)]
pub struct Study {
    /// The study's name.
    pub title: String,
    /// The part; may be empty.
    pub part: String,
    /// What was measured of it; may be empty.
    pub characteristic: String,
    /// The unit's word; may be empty.
    pub unit: String,
    /// Limits and target.
    pub specification: Specification,
    /// What was asked.
    pub question: Question,
    /// What was measured.
    pub data: Data,
    /// The plan and where the study stands by its rule; `None` for data from elsewhere.
    pub planned: Option<(Plan, Standing)>,
    /// Where the data came from, for an audit: file and its fingerprint, station, times.
    pub origin: Vec<Fact>,
    /// Refused lines, gaps, holds: whatever did not go straight.
    pub incidents: Vec<Incident>,
}

impl Study {
    /// The claim of a study that was decided early.
    #[must_use]
    pub fn decided_early(&self) -> Option<&EarlyDecision> {
        let (plan, _) = self.planned.as_ref().filter(|(_, standing)| *standing == Standing::Settled)?;
        plan.rule.early()
    }
}

/// The index, its interval, and the value required of it.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Question {
    /// The index.
    pub index: Index,
    /// The interval's confidence.
    pub confidence: Confidence,
    /// The interval's kind.
    pub kind: Kind,
    /// What the lower limit has to reach, if something is claimed.
    pub required: Option<Millionths>,
    /// Which sigma the index takes.
    pub sigma: Sigma,
    /// How its interval is computed. Other indices than the one asked for get their default method.
    pub method: Method,
}

impl Question {
    /// The method of an index's interval.
    #[must_use]
    pub fn method_of(&self, index: Index) -> Method {
        if index == self.index { self.method } else { Method::default_for(index, self.kind) }
    }
}

/// What was measured.
#[derive(Clone, Debug)]
pub enum Data {
    /// Every reading.
    Readings {
        /// What one count is.
        resolution: Resolution,
        /// In the order they came in.
        readings: Vec<Reading>,
    },
    /// Only number, mean and sigma: the standard deviation with n − 1, or what the question names.
    Summary {
        /// Number of readings.
        n: Count,
        /// Their mean, in the unit.
        mean: f64,
        /// Their sigma, in the unit.
        sd: f64,
    },
}

/// Whether a reading is part of the study.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Belonging {
    /// It counts.
    Counted,
    /// It came after the study's end.
    Surplus,
    /// The operator took it back.
    Voided,
}

/// One reading.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Reading {
    /// Its value in counts of the resolution.
    pub counts: Counts,
    /// Whether it is part of the study.
    pub belonging: Belonging,
    /// Its record's number on the station.
    pub seq: Option<u64>,
    /// When it was taken, as text with its time zone.
    pub time: Option<String>,
}

impl Reading {
    /// A reading of which nothing else is known, in the study.
    #[must_use]
    pub const fn counted(counts: Counts) -> Self {
        Self { counts, belonging: Belonging::Counted, seq: None, time: None }
    }
}

/// One line of a table of facts.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Fact {
    /// What it is.
    pub name: String,
    /// What it says.
    pub value: String,
}

impl Fact {
    /// A fact.
    #[must_use]
    pub fn new(name: impl Into<String>, value: impl Into<String>) -> Self {
        Self { name: name.into(), value: value.into() }
    }
}

/// Something that did not go straight.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Incident {
    /// Where or when: a record's number, a time.
    pub place: String,
    /// What happened.
    pub what: String,
    /// Whether readings may be missing or wrong for it.
    pub weight: Weight,
}

/// How much an incident weighs.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Weight {
    /// Good to know; every reading is there.
    Note,
    /// Readings may be missing or wrong.
    Loss,
}

#[cfg(test)]
mod tests;
