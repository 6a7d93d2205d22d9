//! A plan in words: as a table of facts, and what it asks of the study.

use donelight_core::capability::Index;
use donelight_core::counts::Decimal;
use donelight_core::interval::{Kind, Method};
use donelight_core::plan::{Parity, Plan};
use donelight_core::quantity::{Count, Precision};
use donelight_core::sigma::SubgroupSize;
use donelight_core::sizing::{Design, precision};
use donelight_core::stopping::Goal;
use serde_json::{Value, json};

use super::early;
use crate::level;
use crate::report::words;

/// The plan, line by line: name and value.
#[must_use]
pub fn facts(plan: &Plan) -> Vec<(String, String)> {
    let rule = &plan.rule;
    let gauge = plan.gauge;
    let mut facts = vec![("Study".to_owned(), plan.name.to_string())];
    let mut add = |name: &str, value: String| facts.push((name.to_owned(), value));
    for (name, value) in
        [("Part", plan.part.to_string()), ("Characteristic", plan.characteristic.to_string())]
    {
        if !value.is_empty() {
            add(name, value);
        }
    }
    add("Specification", specification(plan));
    add("Resolution", with_unit(plan, plan.resolution.to_string()));
    add("Question", format!("{} with its {}", plan.index, words::interval_name(plan.confidence, plan.kind)));
    add("Sigma", words::sigma_name(plan.sigma));
    if rule.precision().is_some() {
        add("Method", plan.method.name().to_owned());
    }
    match &rule.goal {
        Goal::Precision(precision) => {
            let planned = format!("{}, and never more than {}", rule.planned.get(), rule.limit.get());
            add("Planned pieces", planned);
            add("Wanted precision", wanted(plan, *precision));
        }
        Goal::Decision(early) => {
            add("Claim", early::question(plan.index, early));
            add("Looks", early::looks(early));
        }
    }
    let parity = match gauge.parity {
        Parity::None => "no parity",
        Parity::Even => "even parity",
        Parity::Odd => "odd parity",
    };
    let stop = if gauge.stop_bits == 1 { "1 stop bit" } else { "2 stop bits" };
    add("Gauge line", format!("{} baud, {} data bits, {parity}, {stop}", gauge.baud, gauge.data_bits));
    add(
        "Watch",
        match plan.same_in_a_row {
            0 => "no watch for a stuck gauge".to_owned(),
            n => format!("holds the study after {n} equal readings in a row"),
        },
    );
    facts
}

fn with_unit(plan: &Plan, number: String) -> String {
    if plan.unit.as_str().is_empty() { number } else { format!("{number} {}", plan.unit) }
}

fn specification(plan: &Plan) -> String {
    let shown = |value: Decimal| words::limit(value, Some(plan.resolution));
    let target = plan.target.map_or_else(String::new, |target| format!(", target {}", shown(target)));
    let limits = match (plan.lower, plan.upper) {
        (Some(lower), Some(upper)) => format!("{} to {}", shown(lower), shown(upper)),
        (Some(lower), None) => format!("at least {}", shown(lower)),
        (None, Some(upper)) => format!("at most {}", shown(upper)),
        (None, None) => "no limit".to_owned(),
    };
    with_unit(plan, format!("{limits}{target}"))
}

fn wanted(plan: &Plan, precision: Precision) -> String {
    let reach = match plan.kind {
        Kind::TwoSided => "the interval reaches",
        Kind::Lower | Kind::Upper => "the bound lies",
    };
    match precision {
        Precision::Relative(goal) => {
            format!("{reach} no further than {} from the estimate", level::percent(goal.0))
        }
        Precision::Absolute(goal) => {
            format!("{reach} no further than {} from the estimate", level::plain(goal.0))
        }
    }
}

/// The pieces that the plan's precision takes if the index comes out at so much; `None` beyond the core's bound.
fn needed(plan: &Plan, at: f64) -> Option<u32> {
    precision::smallest_of(plan, at).ok().map(Count::get)
}

/// Indices that the summary assumes.
const ASSUMED: [f64; 4] = [1.0, 1.33, 1.67, 2.0];

/// However large the index: a relative precision is then a matter of sigma alone, as it is for Cp.
fn floor(plan: &Plan) -> Option<u32> {
    let precision = plan.rule.precision().filter(|precision| matches!(precision, Precision::Relative(_)))?;
    let (index, method) = match plan.method {
        Method::Bissell => (Index::Cp, Method::Bissell),
        Method::NoncentralT | Method::Exact | Method::Balanced => (Index::Cp, Method::ChiSquare),
        Method::ChiSquare => (plan.index, Method::ChiSquare),
        Method::Boyles => return None,
    };
    let design = Design::new(index, method).and_then(|design| design.with_sigma(plan.sigma)).ok()?;
    let size = precision::smallest(&design, 1.0, precision, plan.confidence, plan.kind).ok()?;
    Some(size.n.get())
}

/// What the plan says and what it asks of the study.
#[must_use]
pub fn summary(plan: &Plan) -> String {
    let mut text = String::new();
    for (name, value) in facts(plan) {
        text.push_str(&format!("  {name:<16}  {value}\n"));
    }
    if let Some(early) = plan.rule.early() {
        text.push_str(&format!("\n{}", early::summary(plan, early)));
        return text.trim_end().to_owned();
    }
    text.push_str(&format!("\nPieces that this precision takes, if {} comes out at\n", plan.index));
    for at in ASSUMED {
        let n = needed(plan, at).map_or_else(|| "over a million".to_owned(), |n| n.to_string());
        text.push_str(&format!("  {at:.2}: {n}\n"));
    }
    if let Some(floor) = floor(plan) {
        text.push_str(&format!("and never fewer than {floor}.\n"));
    }
    for remark in remarks(plan) {
        text.push_str(&format!("\n{remark}\n"));
    }
    text.trim_end().to_owned()
}

/// What the writer of the plan should know.
fn remarks(plan: &Plan) -> Vec<String> {
    let rule = &plan.rule;
    let mut remarks = Vec::new();
    if let Some(likely) = needed(plan, 1.33) {
        if rule.limit.get() < likely {
            remarks.push(format!(
                "Note: at 1.33 the precision takes {likely} pieces, and the limit is {}: the study may well end without \
                 its precision.",
                rule.limit.get()
            ));
        } else if rule.planned.get() < likely {
            remarks.push(format!(
                "Note: {} pieces are planned, but at 1.33 the precision takes {likely}: expect to measure that many.",
                rule.planned.get()
            ));
        }
    }
    if plan.sigma.subgroup().is_some() {
        remarks.push(
            "The study is judged at whole subgroups only. Measure each one in a short time: what varies more slowly than \
             that is left out of the index."
                .to_owned(),
        );
    }
    let precision = plan.rule.precision();
    let stops = precision.is_some_and(|precision| words::allows_for_the_stop(precision, plan.kind));
    remarks.push(format!(
        "The interval is by {}.{}{} All of it supposes a stable process and readings near to normal.",
        words::about_method(plan.method, plan.index, plan.kind),
        if plan.method == Method::Bissell {
            format!(" {}", words::bissell_covers(plan.kind))
        } else {
            String::new()
        },
        if stops { format!(" {}", words::ALLOWS_FOR_THE_STOP) } else { String::new() }
    ));
    remarks
}

/// The plan and what it asks, for scripts.
#[must_use]
pub fn json(plan: &Plan) -> Value {
    let number = |value: Option<Decimal>| value.map(|value| value.to_string());
    let assumed: Vec<Value> = ASSUMED.iter().map(|&at| json!({ "at": at, "n": needed(plan, at) })).collect();
    let (relative, absolute) = match plan.rule.precision() {
        Some(Precision::Relative(goal)) => (Some(goal.to_f64()), None),
        Some(Precision::Absolute(goal)) => (None, Some(goal.to_f64())),
        None => (None, None),
    };
    json!({
        "name": plan.name.as_str(),
        "part": plan.part.as_str(),
        "characteristic": plan.characteristic.as_str(),
        "unit": plan.unit.as_str(),
        "resolution": plan.resolution.to_string(),
        "lower": number(plan.lower),
        "upper": number(plan.upper),
        "target": number(plan.target),
        "index": plan.index.name().to_lowercase(),
        "confidence": plan.confidence.to_f64(),
        "kind": plan.kind.name(),
        "sigma": plan.sigma.word(),
        "method": plan.method.name(),
        "subgroup_size": plan.sigma.subgroup().map(SubgroupSize::get),
        "name": plan.index.trade_name(plan.sigma),
        "planned": plan.rule.planned.get(),
        "precision": { "relative": relative, "absolute": absolute },
        "limit": plan.rule.limit.get(),
        "early": plan.rule.early().map(|early| early::json(plan, early)),
        "baud": plan.gauge.baud,
        "data_bits": plan.gauge.data_bits,
        "parity": match plan.gauge.parity {
            Parity::None => "none",
            Parity::Even => "even",
            Parity::Odd => "odd",
        },
        "stop_bits": plan.gauge.stop_bits,
        "same_in_a_row": plan.same_in_a_row,
        "needed": assumed,
        "floor": floor(plan),
    })
}
