//! The report in sentences: the verdict, what makes one doubt it, and what it is not.

use donelight_core::capability::Index;
use donelight_core::counts::{Decimal, Resolution};
use donelight_core::interval::{Interval, Kind, Method};
use donelight_core::plan::Plan;
use donelight_core::quantity::{Confidence, Count, Precision};
use donelight_core::sigma::Sigma;
use donelight_core::stopping::Standing;
use donelight_core::stopping::early::{Decision, EarlyDecision};

use super::analysis::{Analysis, Row};
use super::{Data, Question, Study, Weight, number};
use crate::level;

/// Stands wherever a verdict stands.
pub const SAFETY: &str = "This verdict does not replace the standards in force, the customer's rules or the judgement \
    of a qualified person. It does not say that a part or a machine is safe.";

/// The verdict's outcome, told by a word beside its sentences.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Outcome {
    /// The lower limit reaches what is required.
    Shown,
    /// It does not.
    NotShown,
    /// The study's claim was kept at one of its looks.
    Kept,
    /// The study's claim was rejected at one of its looks.
    Rejected,
    /// Nothing was required: an estimate only.
    Estimate,
    /// The plan asks for more readings: whatever the interval is now, it settles nothing.
    Unfinished,
    /// There is not even an estimate.
    None,
}

impl Outcome {
    /// One or two words for it.
    #[must_use]
    pub const fn name(self) -> &'static str {
        match self {
            Self::Shown => "shown",
            Self::NotShown => "not shown",
            Self::Kept => "claim kept",
            Self::Rejected => "claim rejected",
            Self::Estimate => "estimate",
            Self::Unfinished => "not finished",
            Self::None => "no estimate",
        }
    }
}

/// The verdict.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Verdict {
    /// In a word.
    pub outcome: Outcome,
    /// In a sentence.
    pub headline: String,
    /// What follows from it, and where the study stands.
    pub more: Vec<String>,
}

/// Puts the analysis into words.
#[must_use]
pub fn verdict(study: &Study, analysis: &Analysis) -> Verdict {
    let unfinished = matches!(study.planned, Some((_, Standing::Gathering)));
    let (outcome, headline) = match &analysis.asked {
        Err(trouble) => {
            (Outcome::None, format!("There is no estimate of {}: {trouble}.", study.question.index))
        }
        // No claim is judged before the plan's end: to stop at the first moment at which it holds would be no test.
        Ok(row) if unfinished => {
            let (_, so_far) = claim(&Question { required: None, ..study.question }, row);
            (Outcome::Unfinished, format!("Not finished. So far, {so_far}"))
        }
        Ok(row) => claim(&study.question, row),
    };
    let decided = analysis.asked.ok().and_then(|row| decision(study, analysis.n, &row));
    let mut more = Vec::new();
    let (outcome, headline) = match decided {
        Some(decided) => {
            more.extend(decided.more);
            match outcome {
                // What was required on the command line is answered first.
                Outcome::Shown | Outcome::NotShown => {
                    more.insert(0, decided.headline);
                    (outcome, headline)
                }
                _ => (decided.outcome, format!("{} {headline}", decided.headline)),
            }
        }
        None => (outcome, headline),
    };
    if outcome == Outcome::NotShown {
        more.push(
            "Not shown is not the same as shown to be bad: more readings narrow the interval, and may or may not lift \
             its lower limit."
                .to_owned(),
        );
    }
    if let Some((plan, standing)) = &study.planned {
        more.push(progress(plan, *standing, analysis.n));
    }
    Verdict { outcome, headline, more }
}

/// What a look decided about the plan's claim.
fn decision(study: &Study, n: u32, row: &Row) -> Option<Verdict> {
    let early = study.decided_early()?;
    let decision = early.decide(Count::new(n)?, row.estimate)?;
    let (claim, against) = (level::plain(early.claim.0), level::plain(early.against.0));
    let power = level::percent(early.power.millionths());
    let (outcome, word, meaning) = match decision {
        Decision::ClaimKept => (
            Outcome::Kept,
            "kept",
            format!(
                "Kept is not proven: it means that the study, which notices {against} with at least {power}, did not \
                 notice it."
            ),
        ),
        Decision::ClaimRejected => (
            Outcome::Rejected,
            "rejected",
            format!("A true claim is rejected with a risk of at most {}.", level::percent(early.alpha.0)),
        ),
    };
    let look = early.looks.iter().position(|look| look.n.get() == n).map_or(0, |at| at + 1);
    Some(Verdict {
        outcome,
        headline: format!(
            "The claim that {} is {claim}, against {against}, is {word} at look {look} of {}.",
            row.index,
            early.looks.len()
        ),
        more: vec![meaning],
    })
}

fn claim(question: &Question, row: &Row) -> (Outcome, String) {
    let estimate = format!("{} is estimated at {}", row.index, number::nearest(row.estimate, 3));
    let Some(interval) = row.interval else {
        let outcome = if question.required.is_some() { Outcome::NotShown } else { Outcome::Estimate };
        return (outcome, format!("{estimate}; there is no interval."));
    };
    let name = interval_name(question.confidence, question.kind);
    let shown = format!("{estimate}; its {name} is {}", interval_text(&interval));
    match (question.required, interval.low) {
        (Some(required), Some(low)) if low >= required.to_f64() => (
            Outcome::Shown,
            format!("{} is shown to be at least {}: {shown}.", row.index, level::plain(required.0)),
        ),
        (Some(required), _) => (
            Outcome::NotShown,
            format!("{} is not shown to be at least {}: {shown}.", row.index, level::plain(required.0)),
        ),
        (None, _) => (Outcome::Estimate, format!("{shown}.")),
    }
}

fn progress(plan: &Plan, standing: Standing, n: u32) -> String {
    let rule = &plan.rule;
    if let Some(early) = rule.early() {
        return progress_to_a_decision(early, standing, n);
    }
    match standing {
        Standing::Gathering => format!(
            "The study is not finished: {n} readings are in, at least {} are planned, and no more than {} are asked for.",
            rule.planned.get(),
            rule.limit.get()
        ),
        Standing::Settled => format!(
            "The study is finished: {n} readings are in ({} planned), and the interval is as narrow as planned.",
            rule.planned.get()
        ),
        Standing::Spent => format!(
            "The plan's limit of {} readings is reached, but the interval is not as narrow as planned.",
            rule.limit.get()
        ),
    }
}

fn progress_to_a_decision(early: &EarlyDecision, standing: Standing, n: u32) -> String {
    let last = early.looks.last().map_or(0, |last| last.n.get());
    match standing {
        Standing::Gathering => {
            let next = early.looks.iter().map(|look| look.n.get()).find(|&look| look > n).unwrap_or(last);
            format!(
                "The study is not finished: {n} readings are in, the next look comes after {next}, the last one after \
                 {last}."
            )
        }
        Standing::Settled => {
            format!("The study is finished: {n} readings are in; it could have taken {last}.")
        }
        Standing::Spent => format!(
            "The last look, after {last} readings, decided nothing, since there is no estimate: the readings are all alike."
        ),
    }
}

/// "two-sided 95 % interval", "lower 95 % bound".
#[must_use]
pub fn interval_name(confidence: Confidence, kind: Kind) -> String {
    let confidence = level::percent(confidence.millionths());
    match kind {
        Kind::TwoSided => format!("two-sided {confidence} interval"),
        Kind::Lower => format!("lower {confidence} bound"),
        Kind::Upper => format!("upper {confidence} bound"),
    }
}

/// "1.350 to 1.650", or the one end.
#[must_use]
pub fn interval_text(interval: &Interval) -> String {
    match (interval.low, interval.high) {
        (Some(low), Some(high)) => format!("{} to {}", number::lower_limit(low), number::upper_limit(high)),
        (Some(low), None) => number::lower_limit(low),
        (None, Some(high)) => number::upper_limit(high),
        (None, None) => "unknown".to_owned(),
    }
}

/// "pooled within subgroups of 5": fits behind "sigma".
#[must_use]
pub fn sigma_name(sigma: Sigma) -> String {
    match sigma {
        Sigma::Overall => "overall (n \u{2212} 1)".to_owned(),
        Sigma::Pooled(size) => format!("pooled within subgroups of {size}"),
        Sigma::Ranges(size) => format!("by the mean range of subgroups of {size}"),
        Sigma::MovingRanges => "by the mean moving range of neighbours".to_owned(),
        Sigma::Total(size) => format!("total, within and between subgroups of {size}"),
    }
}

/// The index with its sigma and, where that differs, the trade's name: "Cpk (overall sigma; the trade also calls it Ppk)".
#[must_use]
pub fn index_name(index: Index, sigma: Sigma) -> String {
    let trade = index.trade_name(sigma);
    let sigma = match sigma {
        Sigma::Overall => "overall sigma".to_owned(),
        sigma => format!("sigma {}", sigma_name(sigma)),
    };
    if trade == index.name() {
        format!("{index} ({sigma})")
    } else {
        format!("{index} ({sigma}; the trade also calls it {trade})")
    }
}

/// What the reader must know of sigma where it is not that of all readings: own simulation, see the core's `sigma`.
#[must_use]
pub const fn about_sigma(sigma: Sigma) -> Option<&'static str> {
    match sigma {
        Sigma::Overall | Sigma::Pooled(_) => None,
        Sigma::Ranges(_) | Sigma::MovingRanges => Some(
            "The degrees of freedom of a mean range are effective ones (Patnaik 1950): with 20 subgroups of 5, a lower \
             95 % bound covers about 0.4 points more than its method says, an upper one 0.4 points less.",
        ),
        Sigma::Total(_) => Some(
            "The degrees of freedom of total sigma are estimated (Satterthwaite 1946), and so is what the mean is worth: \
             with 25 subgroups of 5 and half of the variance between them, a two-sided 95 % interval of Cpk covers 94.4 %, \
             a lower bound 93.1 %.",
        ),
    }
}

/// A limit with at least as many decimals as the gauge shows, and a true minus sign: `11.950` at a resolution of 0.001.
#[must_use]
pub fn limit(value: Decimal, resolution: Option<Resolution>) -> String {
    let mut text = value.to_string();
    let wanted = resolution.map_or(0, Resolution::decimals);
    if value.decimals() == 0 && wanted > 0 {
        text.push('.');
    }
    text.extend((value.decimals()..wanted).map(|_| '0'));
    text.replace('-', "\u{2212}")
}

/// Why an index has no limits.
#[must_use]
pub fn no_interval(study: &Study) -> &'static str {
    if study.decided_early().is_some() {
        "no limits after an early decision"
    } else if study.planned.as_ref().is_some_and(|(plan, _)| plan.rule.early().is_some()) {
        "no limits before the decision"
    } else {
        "no interval"
    }
}

/// How the limits come about after an early decision.
pub const AFTER_EARLY_DECISION: &str = "A study that stops where its estimate is extreme would have an interval that \
    leans to that side and covers too little (a nominal two-sided 95 % some 91 %, own simulation). These limits allow \
    for the looks: results are ordered by where the study ended, and each limit is exact or covers more, wherever the \
    process is, if it is stable and normal.";

/// Where the method comes from and what it promises of an index.
#[must_use]
pub const fn about_method(method: Method, index: Index, kind: Kind) -> &'static str {
    match (method, index, kind) {
        (Method::ChiSquare, Index::Cpm, _) => {
            "chi-square as if the mean were on target: it covers with the confidence or more wherever the mean lies \
             (computed, not proven)"
        }
        (Method::ChiSquare, ..) => "chi-square, exact",
        (Method::NoncentralT, Index::Cpk, Kind::Lower) => {
            "the noncentral t: it covers with the confidence or more wherever the mean lies"
        }
        (Method::NoncentralT, Index::Cpk, _) => {
            "the noncentral t, as if one limit mattered: an upper end covers less than the confidence if the process is \
             centred"
        }
        (Method::NoncentralT, ..) => "the noncentral t, exact",
        (Method::Exact, ..) => {
            "the exact distribution, each end guarded against its worst position of the mean: it covers with the \
             confidence or more"
        }
        (Method::Balanced, ..) => {
            "the exact distribution, the risk balanced between its ends: it covers with the confidence or more wherever \
             the mean lies"
        }
        (Method::Boyles, ..) => "Boyles' approximation (1991)",
        (Method::Bissell, ..) => "Bissell's normal approximation (1990)",
    }
}

/// What Bissell's interval of Cpk really covers; own computation, see the core's `interval::bissell`.
#[must_use]
pub const fn bissell_covers(kind: Kind) -> &'static str {
    match kind {
        Kind::TwoSided => {
            "Of Cpk, a nominal two-sided 95 % covers 94.7 % to 96.1 % in truth (n from 10 to 1000, indices from 0.8 to 2.0, \
             a normal process at any place)."
        }
        Kind::Lower => {
            "Of Cpk, a nominal lower 95 % bound covers 94.7 % to 98.7 % in truth (n from 10 to 1000, indices from 0.8 to 2.0, \
             a normal process at any place)."
        }
        Kind::Upper => {
            "Of Cpk, a nominal upper 95 % bound covers 91.2 % to 95.7 % in truth (n from 10 to 1000, indices from 0.8 to 2.0, \
             a normal process at any place)."
        }
    }
}

/// "95.0 % to 96.4 %", or the one figure.
#[must_use]
pub fn span(from: f64, to: f64) -> String {
    let percent = |fraction: f64| format!("{:.1} %", 100.0 * fraction);
    let (from, to) = (percent(from), percent(to));
    if from == to { from } else { format!("{from} to {to}") }
}

/// What a span of two figures is a span of.
#[must_use]
pub fn depending(from: f64, to: f64) -> &'static str {
    if span(from, to).contains(" to ") { ", depending on where the mean lies" } else { "" }
}

/// How the interval of the index in question came about and how often such a one really covers.
#[must_use]
pub fn method(study: &Study, row: &Row) -> String {
    let Question { index, kind, .. } = study.question;
    let Some(method) = row.method else {
        let told = if study.decided_early().is_some() { AFTER_EARLY_DECISION } else { "" };
        return told.to_owned();
    };
    let mut text = format!("The interval of {index} is by {}.", about_method(method, index, kind));
    if let Some(found) = row.coverage {
        text.push_str(&format!(
            " If the true {index} is the estimate, an interval from so many pieces covers it in {} of studies{}.",
            span(found.from, found.to),
            depending(found.from, found.to)
        ));
    }
    let precision = study.planned.as_ref().and_then(|(plan, _)| plan.rule.precision());
    if precision.is_some_and(|precision| allows_for_the_stop(precision, kind)) {
        text.push(' ');
        text.push_str(ALLOWS_FOR_THE_STOP);
    }
    text
}

/// Whether the core moves an end of the interval, since the study stops by its precision.
#[must_use]
pub const fn allows_for_the_stop(precision: Precision, kind: Kind) -> bool {
    matches!(
        (precision, kind),
        (Precision::Relative(_), Kind::Lower) | (Precision::Absolute(_), Kind::TwoSided | Kind::Upper)
    )
}

/// What [`allows_for_the_stop`] means.
pub const ALLOWS_FOR_THE_STOP: &str = "One end lies a little further out than it would for a fixed number of pieces, since \
    the study stops where the estimate helps it to.";

/// Whatever should make the reader look twice. Not tested here, and therefore always said: stability and normality.
#[must_use]
pub fn doubts(study: &Study, analysis: &Analysis) -> Vec<String> {
    let mut doubts = Vec::new();
    if study.incidents.iter().any(|incident| incident.weight == Weight::Loss) {
        doubts.push("Readings may be missing or wrong: see what did not go straight.".to_owned());
    }
    // Common practice, no source.
    const FEW: u32 = 30;
    if analysis.n < FEW {
        let n = number_of(analysis.n, "reading is", "readings are");
        doubts.push(format!("Only {n} in; below {FEW} the approximation and the pictures say little."));
    }
    let (below, above) = analysis.beyond;
    if below + above > 0 {
        let n = number_of(below + above, "reading lies", "readings lie");
        doubts.push(format!("{n} beyond the limits: {below} below the lower, {above} above the upper."));
    }
    if let (Data::Readings { resolution, .. }, Some(sd)) = (&study.data, analysis.sd) {
        doubts.extend(coarse(*resolution, sd));
    }
    if analysis.voided > 0 {
        let n = number_of(analysis.voided, "reading was", "readings were");
        doubts.push(format!("{n} taken back by the operator."));
    }
    match study.incidents.len() {
        0 => {}
        1 => doubts.push("1 incident on the way; see what did not go straight.".to_owned()),
        n => doubts.push(format!("{n} incidents on the way; see what did not go straight.")),
    }
    doubts.extend(left_out(study, analysis));
    doubts.push(match study.data {
        Data::Readings { .. } => {
            "Nothing here tests that the process was stable and the readings near to normal: judge by the pictures."
                .to_owned()
        }
        Data::Summary { .. } => {
            "A summary does not tell whether the process was stable and the readings near to normal.".to_owned()
        }
    });
    doubts
}

/// What an index within subgroups does not tell.
fn left_out(study: &Study, analysis: &Analysis) -> Option<String> {
    let question = study.question;
    if !question.sigma.is_within() {
        return None;
    }
    let overall = match (analysis.sd, analysis.sigma) {
        (Some(sd), Some(sigma)) => {
            format!(" The standard deviation of all readings is {:.2} times this sigma.", sd / sigma)
        }
        _ => String::new(),
    };
    Some(format!(
        "Sigma is {}: what varies more slowly than that is left out of {}.{overall}",
        sigma_name(question.sigma),
        question.index
    ))
}

/// Rounding to steps of q adds about q²/12 to the variance (Sheppard 1898, from memory): 2 % of it at q = s/2.
fn coarse(resolution: Resolution, sd: f64) -> Option<String> {
    let steps = sd / resolution.to_f64();
    (steps > 0.0 && steps < 2.0).then(|| {
        format!(
            "The gauge's resolution is coarse: the standard deviation is only {steps:.1} steps of it, so rounding adds \
             to the spread."
        )
    })
}

fn number_of(n: u32, one: &str, several: &str) -> String {
    if n == 1 { format!("1 {one}") } else { format!("{n} {several}") }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// What the sentences claim, against exact integration (own computation; the file says how).
    #[test]
    fn the_coverage_that_is_told_is_the_coverage_that_was_computed() {
        let file = concat!(env!("CARGO_MANIFEST_DIR"), "/../tests/reference/coverage_bissell_95.csv");
        let table = std::fs::read_to_string(file).unwrap();
        for kind in [Kind::TwoSided, Kind::Lower, Kind::Upper] {
            let rows = table.lines().filter_map(|line| line.split_once(&format!(",{},", kind.name())));
            let covered: Vec<f64> = rows.map(|(_, coverage)| coverage.parse().unwrap()).collect();
            assert!(covered.len() > 200);
            let least = covered.iter().copied().fold(1.0, f64::min);
            let most = covered.iter().copied().fold(0.0, f64::max);
            let claim = format!("covers {:.1} % to {:.1} % in truth", 100.0 * least, 100.0 * most);
            let told = bissell_covers(kind);
            assert!(told.contains(&claim), "{claim} is not in {told}");
        }
    }

    #[test]
    fn a_limit_has_the_decimals_of_the_gauge_and_never_fewer_than_its_own() {
        let shown =
            |value: &str, resolution: &str| limit(value.parse().unwrap(), Some(resolution.parse().unwrap()));
        assert_eq!(shown("11.95", "0.001"), "11.950");
        assert_eq!(shown("12", "0.01"), "12.00");
        assert_eq!(shown("-12.0005", "0.01"), "\u{2212}12.0005");
        assert_eq!(shown("12", "5"), "12");
        assert_eq!(limit("12.5".parse().unwrap(), None), "12.5");
    }
}
