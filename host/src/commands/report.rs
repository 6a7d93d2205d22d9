//! `donelight report`: the page, the readings and the numbers of a study that is kept in the ledger.

use std::path::Path;

use donelight_core::interval::Kind;
use donelight_core::record::{Refusal, Seq};
use donelight_core::station::Held;

use super::assess;
use crate::cli;
use crate::files;
use crate::ledger::{self, Fate, Happening, Kept, Ledger, UnixMillis};
use crate::output::{Answer, Exit, Explain, Failure};
use crate::report::words::{self, Outcome};
use crate::report::{
    Belonging, Data, Fact, Incident, Question, Reading, Study, Weight, analysis, export, page,
};

/// Answers `donelight report …`.
///
/// # Errors
/// No such ledger or study, or a file that cannot be written.
pub(super) fn run(options: &cli::Report) -> Result<Answer, Failure> {
    let ledger = Ledger::open_to_read(options.ledger.as_deref())?;
    for output in [&options.output, &options.csv].into_iter().flatten() {
        files::keep_apart(output, &[ledger.path()])?;
    }
    if let (Some(output), Some(csv)) = (&options.output, &options.csv) {
        files::keep_apart(output, &[csv])?;
    }
    let kept = ledger.study(options.study.as_deref())?;
    if options.require.is_some() && kept.study.plan().kind == Kind::Upper {
        return Err(RequireWithUpper.into());
    }
    let mut study = reported(&kept, ledger.path());
    study.question.required = options.require;
    let analysis = analysis::of(&study);
    if let Some(csv) = &options.csv {
        let content = export::csv(&study).map_err(ExportError)?;
        files::write(csv, &content)?;
    }
    if let Some(output) = &options.output {
        files::write(output, page::page(&study, &analysis).as_bytes())?;
    }
    let verdict = words::verdict(&study, &analysis);
    let shown = options.require.is_none() || verdict.outcome == Outcome::Shown;
    let exit = if shown { Exit::Done } else { Exit::Refused };
    let mut json = export::json(&study, &analysis);
    if let Some(json) = json.as_object_mut() {
        json.insert("study".to_owned(), kept.key.to_string().into());
        let name =
            |path: &Option<std::path::PathBuf>| path.as_ref().map(|path| path.to_string_lossy().into_owned());
        json.insert("report".to_owned(), name(&options.output).into());
        json.insert("csv".to_owned(), name(&options.csv).into());
    }
    let mut text = format!(
        "{} ({})\n\n{}",
        study.title,
        kept.key,
        assess::text(&study, &analysis, &verdict, options.output.as_deref())
    );
    if let Some(csv) = &options.csv {
        text.push_str(&format!("\nThe readings are in {}", csv.display()));
    }
    Ok(Answer { text, json, exit })
}

/// What is required of an index is a matter of its lower limit.
#[derive(Debug, thiserror::Error)]
#[error("--require needs a lower limit, and the study's plan asks for an upper bound only")]
struct RequireWithUpper;

impl Explain for RequireWithUpper {
    fn kind(&self) -> &'static str {
        "contradictory-options"
    }

    fn help(&self) -> String {
        "Leave --require out.".to_owned()
    }

    fn exit(&self) -> Exit {
        Exit::WrongUse
    }
}

/// The CSV writer failed, which in memory it cannot.
#[derive(Debug, thiserror::Error)]
#[error("the readings cannot be written as CSV: {0}")]
struct ExportError(csv::Error);

impl Explain for ExportError {
    fn kind(&self) -> &'static str {
        "csv-failed"
    }

    fn help(&self) -> String {
        "Please report this.".to_owned()
    }
}

/// The kept study as the report takes it; nothing is required of its index.
pub(super) fn reported(kept: &Kept, ledger: &Path) -> Study {
    let plan = kept.study.plan();
    Study {
        title: plan.name.to_string(),
        part: plan.part.to_string(),
        characteristic: plan.characteristic.to_string(),
        unit: plan.unit.to_string(),
        specification: *plan.specification(),
        question: Question {
            index: plan.index,
            confidence: plan.confidence,
            kind: plan.kind,
            required: None,
            sigma: plan.sigma,
            method: plan.method,
        },
        data: Data::Readings {
            resolution: plan.resolution,
            readings: kept.readings.iter().map(reading).collect(),
        },
        planned: Some((plan.clone(), kept.study.standing())),
        origin: origin(kept, ledger),
        incidents: kept.incidents.iter().map(incident).collect(),
    }
}

fn reading(reading: &ledger::Reading) -> Reading {
    Reading {
        counts: reading.counts,
        belonging: match reading.fate {
            Fate::Counted => Belonging::Counted,
            Fate::Surplus => Belonging::Surplus,
            Fate::TakenBack => Belonging::Voided,
        },
        seq: Some(reading.seq.0.into()),
        time: reading.time.map(|time| time.to_string()),
    }
}

fn origin(kept: &Kept, ledger: &Path) -> Vec<Fact> {
    let time = |time: Option<UnixMillis>| time.map_or_else(|| "unknown".to_owned(), |time| time.to_string());
    let path = std::fs::canonicalize(ledger).unwrap_or_else(|_| ledger.to_owned());
    let mut facts = vec![
        Fact::new("Study", kept.key.to_string()),
        Fact::new("Station", kept.key.station.to_string()),
        Fact::new("Firmware, when last pulled", kept.firmware.clone()),
        Fact::new("Plan loaded", time(kept.began)),
    ];
    if let (Some(first), Some(last)) = (kept.readings.first(), kept.readings.last()) {
        facts.push(Fact::new("First reading", first.bounds.to_string()));
        facts.push(Fact::new("Last reading", last.bounds.to_string()));
    }
    facts.extend([
        Fact::new("Ledger", path.display().to_string()),
        Fact::new("Records", format!("{} to {}", kept.key.began, kept.through)),
        Fact::new("SHA-256 of the records", kept.fingerprint.clone()),
        Fact::new(
            "Chain through the last of them",
            kept.chain
                .map_or_else(|| "none: kept before there was a chain".to_owned(), |chain| chain.to_string()),
        ),
        Fact::new("Last record came into the ledger", kept.last_received.to_string()),
    ]);
    facts
}

fn incident(incident: &ledger::Incident) -> Incident {
    let (weight, what) = match incident.what {
        Happening::Refused { reason: reason @ (Refusal::GaugeOverrun | Refusal::GaugeGarbled), times } => {
            (Weight::Loss, refused(reason, times))
        }
        Happening::Refused { reason, times } => (Weight::Note, refused(reason, times)),
        Happening::TakenBack(reading) => {
            (Weight::Note, format!("the operator took the reading of record {reading} back"))
        }
        Happening::Held(Held::GaugeStuck) => {
            (Weight::Note, "the gauge gave the same reading many times in a row; the study waited".to_owned())
        }
        Happening::Held(_) => (Weight::Note, "the study waited for the operator to look".to_owned()),
        Happening::Seen => (Weight::Note, "the operator looked and let the study go on".to_owned()),
        Happening::Restarted { boot } => (Weight::Note, format!("the station started again (start {boot})")),
        Happening::Missing(gap) => (
            Weight::Loss,
            format!("records {} to {} are missing: the station no longer had them", gap.first, gap.last),
        ),
        Happening::Unreadable(gap) => (
            Weight::Note,
            format!("the station found that it can no longer read records {} to {}", gap.first, gap.last),
        ),
        Happening::UnknownKind => {
            (Weight::Loss, "a record of a kind that this version does not know: update donelight".to_owned())
        }
        Happening::Conflict => (
            Weight::Loss,
            "the station later gave another record under this number; the first one is used here".to_owned(),
        ),
    };
    Incident { place: place(incident.seq, incident.time), what, weight }
}

fn refused(reason: Refusal, times: u16) -> String {
    match times {
        1 => format!("refused: {reason}"),
        times => format!("refused {times} times: {reason}"),
    }
}

fn place(seq: Seq, time: Option<UnixMillis>) -> String {
    match time {
        Some(time) => format!("record {seq}, {time}"),
        None => format!("record {seq}"),
    }
}
