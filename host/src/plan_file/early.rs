//! A claim that is decided early, in words, as a table and as JSON: for a plan, and for `donelight size power --early`.

use donelight_core::capability::Index;
use donelight_core::plan::Plan;
use donelight_core::stopping::early::{Boundary, EarlyDecision};
use serde_json::{Value, json};

use super::EXAMPLE;
use crate::design::{self, Design, DesignError, Fate, Limits, Place, Question};
use crate::level;

/// What is claimed, and with which risks.
#[must_use]
pub fn question(index: Index, early: &EarlyDecision) -> String {
    format!(
        "{index} is {}: rejected although true with a risk of at most {}; if it is {} instead, rejected with at least {}",
        level::plain(early.claim.0),
        level::percent(early.alpha.0),
        level::plain(early.against.0),
        level::percent(early.power.millionths()),
    )
}

/// After how many pieces.
#[must_use]
pub fn looks(early: &EarlyDecision) -> String {
    let looks: Vec<String> = early.looks.iter().map(|look| look.n.get().to_string()).collect();
    format!("after {} pieces; nothing is decided between them", looks.join(", "))
}

/// What each look decides.
#[must_use]
pub fn table(index: Index, early: &EarlyDecision) -> String {
    let (keep, reject) = if early.rejects_low() { ("or more", "below") } else { ("or less", "above") };
    let mut text = format!(
        "The claim is decided by the estimate of {index} at these looks\n  {:>7}  {:>16}  {:>14}\n",
        "pieces", "kept if it is", "rejected if"
    );
    let shown = |boundary: Option<Boundary>| boundary.map(|boundary| format!("{:.4}", boundary.to_f64()));
    let none = || "\u{2013}".to_owned();
    for look in &early.looks {
        let kept = shown(look.keep).map_or_else(none, |keep_at| format!("{keep_at} {keep}"));
        let rejected = shown(look.reject).map_or_else(none, |reject_at| format!("{reject} {reject_at}"));
        text.push_str(&format!("  {:>7}  {kept:>16}  {rejected:>14}\n", look.n.get()));
    }
    text
}

/// What the design does, and for how many pieces.
#[must_use]
pub fn effects(design: &Design) -> String {
    let early = &design.early;
    let (claim, against) = (level::plain(early.claim.0), level::plain(early.against.0));
    let mut text = format!("Pieces on average, if the index is          {claim:>6}  {against:>6}\n");
    for course in &design.courses {
        let place = match course.place {
            Place::Middle => "the process in the middle",
            Place::NearOneLimit => "only one limit matters",
            Place::Anywhere => "wherever the process is",
        };
        let (at_claim, at_against) = (course.at_claim.expected, course.at_against.expected);
        text.push_str(&format!("  {place:<40}  {at_claim:>6.1}  {at_against:>6.1}\n"));
    }
    text.push_str(&format!(
        "At most {} pieces; a fixed size with the same promises takes {}. On average that saves {} or more.\n",
        early.looks.last().map_or(0, |last| last.n.get()),
        design.fixed,
        percent(design.saving(), 0),
    ));
    text.push_str(&format!(
        "In the worst position of the mean a true claim is rejected with a risk of {}, and {against} is noticed with {} \
         (exact for a stable process and normal readings; integration error below {:.0e}).\n",
        percent(design.true_alpha, 3),
        percent(design.true_power, 3),
        design.error.max(1e-9) * 10.0,
    ));
    text
}

fn percent(fraction: f64, places: usize) -> String {
    format!("{:.places$} %", fraction * 100.0)
}

/// What a kept claim means and what it does not.
pub const MEANING: &str = "A claim that is kept is not proven: the study would have noticed the other value. Sigma is the \
    overall one, with n \u{2212} 1.";

/// The design of a plan's claim, computed again.
///
/// # Errors
/// The plan's looks do not keep its promises: it was not made by this command.
pub fn design(plan: &Plan, early: &EarlyDecision) -> Result<Design, DesignError> {
    let limits = if plan.lower.is_some() && plan.upper.is_some() { Limits::Two } else { Limits::One };
    let question = Question {
        index: plan.index,
        limits,
        claim: early.claim,
        against: early.against,
        alpha: early.alpha,
        power: early.power,
        spending: early.spending,
    };
    let looks: Vec<u32> = early.looks.iter().map(|look| look.n.get()).collect();
    design::with_looks(&question, &looks)
}

/// The example plan with a claim to be decided in place of its precision.
#[must_use]
pub fn example(early: &EarlyDecision) -> String {
    let looks: Vec<String> = early.looks.iter().map(|look| look.n.get().to_string()).collect();
    let table = format!(
        "[stop.early]\n\
         # The index that is claimed, and the one that shall be told from it.\n\
         claim = {}\n\
         against = {}\n\
         # The risk of rejecting a true claim, and the chance of rejecting it if the index is the other one.\n\
         # [default: 5% and 95%]\n\
         alpha = \"{}\"\n\
         power = \"{}\"\n\
         # The study is looked at after so many pieces and stops where a look decides: the done light comes on. Nothing is\n\
         # decided between looks. (donelight size power --early  names looks.)\n\
         looks = [{}]\n\
         # How the risks are spent over the looks: pocock or obrien-fleming. [default: pocock]\n\
         spending = \"{}\"\n\n",
        level::plain(early.claim.0),
        level::plain(early.against.0),
        level::percent(early.alpha.0).replace(' ', ""),
        level::percent(early.power.millionths()).replace(' ', ""),
        looks.join(", "),
        early.spending,
    );
    let (before, rest) = EXAMPLE.split_once("[stop]\n").unwrap_or((EXAMPLE, ""));
    let after = rest.split_once("[gauge]").map_or("", |(_, after)| after);
    format!("{before}{table}[gauge]{after}")
}

/// The table and what it does, for `plan check`.
pub(super) fn summary(plan: &Plan, early: &EarlyDecision) -> String {
    let effects = match design(plan, early) {
        Ok(design) => effects(&design),
        Err(error) => format!("Its boundaries are not the ones that this command computes: {error}.\n"),
    };
    format!("{}\n{effects}\n{MEANING}", table(plan.index, early))
}

/// The question and the table, for scripts; with what it does, where that is known.
pub(super) fn json(plan: &Plan, early: &EarlyDecision) -> Value {
    design(plan, early).map_or_else(|_| table_json(early), |design| design_json(&design))
}

fn table_json(early: &EarlyDecision) -> Value {
    let shown = |boundary: Option<Boundary>| boundary.map(Boundary::to_f64);
    let look = |look: &donelight_core::stopping::early::Look| json!({ "n": look.n.get(), "keep": shown(look.keep), "reject": shown(look.reject) });
    let looks: Vec<Value> = early.looks.iter().map(look).collect();
    json!({
        "claim": early.claim.to_f64(),
        "against": early.against.to_f64(),
        "alpha": early.alpha.to_f64(),
        "power": early.power.to_f64(),
        "spending": early.spending.name(),
        "rejects": if early.rejects_low() { "below" } else { "above" },
        "looks": looks,
    })
}

/// All of a design, for scripts.
#[must_use]
pub fn design_json(design: &Design) -> Value {
    let mut json = table_json(&design.early);
    let fate = |fate: &Fate| json!({ "rejected": fate.rejected, "expected": fate.expected, "stopped": fate.stopped });
    let courses: Vec<Value> = design
        .courses
        .iter()
        .map(|course| {
            json!({
                "place": match course.place {
                    Place::Middle => "middle",
                    Place::NearOneLimit => "near-one-limit",
                    Place::Anywhere => "anywhere",
                },
                "at_claim": fate(&course.at_claim),
                "at_against": fate(&course.at_against),
            })
        })
        .collect();
    if let Some(object) = json.as_object_mut() {
        object.insert("true_alpha".to_owned(), json!(design.true_alpha));
        object.insert("true_power".to_owned(), json!(design.true_power));
        object.insert("error".to_owned(), json!(design.error));
        object.insert("fixed".to_owned(), json!(design.fixed));
        object.insert("saving".to_owned(), json!(design.saving()));
        object.insert("places".to_owned(), json!(courses));
    }
    json
}
