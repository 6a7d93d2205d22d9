//! A simulation in words and for scripts.

use donelight_core::capability::Index;
use donelight_core::plan::Plan;
use serde_json::{Value, json};

use super::{Extent, Outcome, Share};
use crate::level;
use crate::report::words::interval_name;

/// The outcomes as a table, and what it says.
#[must_use]
pub fn text(plan: &Plan, extent: Extent, outcomes: &[Outcome]) -> String {
    if plan.rule.early().is_some() {
        return text_of_decisions(plan, extent, outcomes);
    }
    let index = plan.index.name();
    let Extent { seed, studies } = extent;
    let mut text = format!(
        "Simulated with this plan: {studies} studies of each process (normal, stable, read as the gauge reads; seed \
         {seed}).\n\n"
    );
    let header = [
        format!("true {index}"),
        "mean off".to_owned(),
        "covers".to_owned(),
        "bias".to_owned(),
        "pieces".to_owned(),
        "median".to_owned(),
        "95 %".to_owned(),
        "most".to_owned(),
        format!("met at {}", plan.rule.planned.get()),
        "spent".to_owned(),
    ];
    let widths = [8, 8, 12, 6, 8, 7, 7, 7, header[8].chars().count(), 6];
    text.push_str(&line(widths, &header));
    for outcome in outcomes {
        text.push_str(&line(widths, &row(outcome)));
    }
    let middle = middle(plan);
    text.push_str(&format!(
        "\nmean off: in standard deviations, from {middle}. covers: how often the {} at the end holds the true {index}, \
         ± one standard error of the simulation. pieces: their mean; 95 %: enough in 95 of 100 studies. met at {}: the \
         precision is there at the planned count. spent: the limit of {} comes first.\n",
        interval_name(plan.confidence, plan.kind),
        plan.rule.planned.get(),
        plan.rule.limit.get(),
    ));
    for outcome in outcomes.iter().filter(|outcome| outcome.process().offset == 0.0) {
        text.push_str(&expectation(plan, outcome));
    }
    if let Some(worst) = worst_without_estimate(outcomes) {
        text.push_str(&format!(
            "\n\nNote: in up to {} of the studies all readings were alike, so there was no interval: the gauge is too \
             coarse for these limits.",
            share(worst)
        ));
    }
    text
}

fn middle(plan: &Plan) -> &'static str {
    match (plan.index, plan.lower, plan.upper) {
        (Index::Cpm, ..) => "the target",
        (_, Some(_), Some(_)) => "the middle of the limits",
        _ => "the middle, which one limit does not have",
    }
}

/// For a plan that decides a claim: how often it is rejected, and after how many pieces.
fn text_of_decisions(plan: &Plan, extent: Extent, outcomes: &[Outcome]) -> String {
    let index = plan.index.name();
    let Extent { seed, studies } = extent;
    let mut text = format!(
        "Simulated with this plan: {studies} studies of each process (normal, stable, read as the gauge reads; seed \
         {seed}).\n\n"
    );
    let header =
        [format!("true {index}").as_str(), "mean off", "rejected", "pieces", "median", "95 %", "most"]
            .map(str::to_owned);
    let widths = [8, 8, 12, 8, 7, 7, 7];
    text.push_str(&line(widths, &header));
    for outcome in outcomes {
        let (process, n) = (outcome.process(), outcome.n());
        let row = [
            level::plain((process.true_index * 1e6).round() as u32),
            format!("{:.1}", process.offset),
            outcome.rejected().map_or_else(|| "none decided".to_owned(), share),
            format!("{:.1}", n.mean()),
            n.quantile(0.5).to_string(),
            n.quantile(0.95).to_string(),
            n.most().to_string(),
        ];
        text.push_str(&line(widths, &row));
    }
    text.push_str(&format!(
        "\nmean off: in standard deviations, from {}. rejected: how often the claim is, \u{b1} one standard error of the \
         simulation. pieces: their mean; 95 %: enough in 95 of 100 studies.",
        middle(plan)
    ));
    text
}

/// What the study will take if this process is the true one.
fn expectation(plan: &Plan, outcome: &Outcome) -> String {
    let n = outcome.n();
    let spent = outcome.spent().value;
    let beginning =
        format!("\nIf {} is {:.2}, expect {:.0} pieces", plan.index, outcome.process().true_index, n.mean());
    // What 95 of 100 studies need is known only if they came to their end.
    if spent > 0.05 {
        let limit = plan.rule.limit.get();
        format!(
            "{beginning}; {:.0} of 100 studies come to the limit of {limit} without the precision.",
            100.0 * spent
        )
    } else {
        format!("{beginning}; {} are enough in 95 of 100 studies.", n.quantile(0.95))
    }
}

fn line<const N: usize>(widths: [usize; N], cells: &[String; N]) -> String {
    let cells: Vec<String> =
        widths.into_iter().zip(cells).map(|(width, cell)| format!("{cell:>width$}")).collect();
    format!("  {}\n", cells.join("  "))
}

fn row(outcome: &Outcome) -> [String; 10] {
    let process = outcome.process();
    let n = outcome.n();
    [
        format!("{:.2}", process.true_index),
        format!("{:.1}", process.offset),
        share(outcome.coverage()),
        outcome.bias().map_or_else(|| "none".to_owned(), |bias| format!("{bias:+.3}")),
        format!("{:.1}", n.mean()),
        n.quantile(0.5).to_string(),
        n.quantile(0.95).to_string(),
        n.most().to_string(),
        format!("{:.0} %", 100.0 * outcome.met_at_planned().value),
        format!("{:.0} %", 100.0 * outcome.spent().value),
    ]
}

/// "95.0 ± 0.2 %"
fn share(share: Share) -> String {
    format!("{:.1} ± {:.1} %", 100.0 * share.value, 100.0 * share.standard_error)
}

fn worst_without_estimate(outcomes: &[Outcome]) -> Option<Share> {
    let shares = outcomes.iter().map(Outcome::without_estimate).filter(|share| share.value > 0.0);
    shares.max_by(|a, b| a.value.total_cmp(&b.value))
}

/// The same for scripts.
#[must_use]
pub fn json(extent: Extent, outcomes: &[Outcome]) -> Value {
    let cases: Vec<Value> = outcomes.iter().map(case).collect();
    json!({ "seed": extent.seed, "studies": extent.studies, "cases": cases })
}

fn case(outcome: &Outcome) -> Value {
    let n = outcome.n();
    json!({
        "true_index": outcome.process().true_index,
        "offset": outcome.process().offset,
        // After an early decision the ordinary interval is not the one that is reported.
        "coverage": outcome.rejected().is_none().then(|| outcome.coverage().value),
        "coverage_se": outcome.rejected().is_none().then(|| outcome.coverage().standard_error),
        "rejected": outcome.rejected().map(|share| share.value),
        "rejected_se": outcome.rejected().map(|share| share.standard_error),
        "bias": outcome.bias(),
        "bias_se": outcome.bias_standard_error(),
        "n_mean": n.mean(),
        "n_median": n.quantile(0.5),
        "n_p95": n.quantile(0.95),
        "n_max": n.most(),
        "met_at_planned": outcome.met_at_planned().value,
        "spent": outcome.spent().value,
        "without_estimate": outcome.without_estimate().value,
    })
}
