//! The report's readings as CSV and its numbers as JSON.

use donelight_core::counts::Decimal;
use donelight_core::interval::Method;
use donelight_core::quantity::Millionths;
use donelight_core::sigma::SubgroupSize;
use serde_json::{Value, json};

use super::analysis::{Analysis, Row};
use super::words::{self, Outcome};
use super::{Belonging, Data, Study, Weight};

/// One row a reading: its number, value as exact decimal text, whether it counts, and record number and time where they
/// are known. A summary has no rows.
///
/// # Errors
/// What the csv crate says; writing to memory, it has nothing to say.
pub fn csv(study: &Study) -> Result<Vec<u8>, csv::Error> {
    let mut writer = csv::Writer::from_writer(Vec::new());
    writer.write_record(["number", "value", "unit", "state", "seq", "time"])?;
    if let Data::Readings { resolution, readings } = &study.data {
        for (i, reading) in readings.iter().enumerate() {
            let state = match reading.belonging {
                Belonging::Counted => "counted",
                Belonging::Surplus => "surplus",
                Belonging::Voided => "voided",
            };
            writer.write_record([
                (i + 1).to_string(),
                resolution.show(reading.counts).to_string(),
                study.unit.clone(),
                state.to_owned(),
                reading.seq.map_or_else(String::new, |seq| seq.to_string()),
                reading.time.clone().unwrap_or_default(),
            ])?;
        }
    }
    writer.into_inner().map_err(|error| error.into_error().into())
}

/// All numbers, in full double precision.
#[must_use]
pub fn json(study: &Study, analysis: &Analysis) -> Value {
    let verdict = words::verdict(study, analysis);
    let asked = analysis.asked.as_ref().ok();
    let interval = asked.and_then(|row| row.interval);
    let question = study.question;
    let specification = &study.specification;
    let number = |value: Option<Decimal>| value.map(|value| value.to_string());
    json!({
        "title": study.title,
        "part": study.part,
        "characteristic": study.characteristic,
        "unit": study.unit,
        "n": analysis.n,
        "surplus": analysis.surplus,
        "voided": analysis.voided,
        "mean": analysis.mean,
        "sd": analysis.sd,
        "sigma": question.sigma.word(),
        "subgroup_size": question.sigma.subgroup().map(SubgroupSize::get),
        "sigma_estimate": analysis.sigma,
        "nu": analysis.nu,
        "index": question.index.name().to_lowercase(),
        "name": question.index.trade_name(question.sigma),
        "estimate": asked.map(|row| row.estimate),
        "low": interval.and_then(|interval| interval.low),
        "high": interval.and_then(|interval| interval.high),
        "method": asked.and_then(|row| method(study, row)),
        "coverage": asked.and_then(coverage),
        "confidence": question.confidence.to_f64(),
        "kind": question.kind.name(),
        "required": question.required.map(Millionths::to_f64),
        "shown": match verdict.outcome {
            _ if question.required.is_none() => None,
            outcome => Some(outcome == Outcome::Shown),
        },
        "indices": analysis.rows.iter().map(|found| row(study, found)).collect::<Vec<_>>(),
        "lower_limit": number(specification.lower()),
        "upper_limit": number(specification.upper()),
        "target": number(specification.target()),
        "resolution": match &study.data {
            Data::Readings { resolution, .. } => Some(resolution.to_string()),
            Data::Summary { .. } => None,
        },
        "below_lower": analysis.beyond.0,
        "above_upper": analysis.beyond.1,
        "standing": study.planned.as_ref().map(|(_, standing)| format!("{standing:?}").to_lowercase()),
        "verdict": verdict.headline,
        "doubts": words::doubts(study, analysis),
        "note": words::SAFETY,
        "origin": study.origin.iter().map(|fact| (fact.name.clone(), json!(fact.value))).collect::<serde_json::Map<_, _>>(),
        "incidents": study.incidents.iter().map(|incident| json!({ "place": incident.place, "what": incident.what, "loss": incident.weight == Weight::Loss }))
            .collect::<Vec<_>>(),
    })
}

fn method(study: &Study, row: &Row) -> Option<&'static str> {
    row.interval?;
    row.method.map(Method::name).or_else(|| study.decided_early().map(|_| "early-decision"))
}

/// From the worst position of the mean to the best.
fn coverage(row: &Row) -> Option<Value> {
    row.coverage.map(|span| json!({ "from": span.from, "to": span.to }))
}

fn row(study: &Study, row: &Row) -> Value {
    json!({
        "index": row.index.name().to_lowercase(),
        "name": row.index.trade_name(study.question.sigma),
        "estimate": row.estimate,
        "low": row.interval.and_then(|interval| interval.low),
        "high": row.interval.and_then(|interval| interval.high),
        "method": method(study, row),
        "coverage": coverage(row),
    })
}
