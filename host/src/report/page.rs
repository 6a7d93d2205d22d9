//! The report as one HTML page that needs nothing else: style and pictures inside, no scripts.

use donelight_core::counts::{Decimal, Resolution};
use donelight_core::interval::Kind;
use donelight_core::plan::Plan;
use donelight_core::sigma::Sigma;
use maud::{DOCTYPE, Markup, PreEscaped, html};

use super::analysis::{Analysis, value};
use super::charts::{
    Caption, histogram,
    histogram::{Bins, Curve, Histogram},
    mark::{Mark, Meaning},
    narrowing,
    narrowing::Narrowing,
    sequence,
    sequence::Point,
};
use super::words::{self, Verdict};
use super::{Belonging, Data, Fact, Study, Weight, number};
use crate::plan_file::describe;

/// The page; `analysis` must be this study's.
#[must_use]
pub fn page(study: &Study, analysis: &Analysis) -> String {
    let verdict = words::verdict(study, analysis);
    let about = [&study.part, &study.characteristic];
    let about: Vec<&str> = about.into_iter().map(String::as_str).filter(|text| !text.is_empty()).collect();
    html! {
        (DOCTYPE)
        html lang="en" {
            head {
                meta charset="utf-8";
                meta name="viewport" content="width=device-width, initial-scale=1";
                title { (study.title) " \u{2013} capability" }
                style { (PreEscaped(include_str!("style.css"))) }
            }
            body {
                main {
                    header {
                        h1 { (study.title) }
                        @if !about.is_empty() { p { (about.join(", ")) } }
                    }
                    (verdict_panel(study, analysis, &verdict))
                    (indices(study, analysis))
                    (pictures(study, analysis))
                    (record(study, analysis))
                    footer { "Made by donelight " (env!("CARGO_PKG_VERSION")) "." }
                }
            }
        }
    }
    .into_string()
}

fn verdict_panel(study: &Study, analysis: &Analysis, verdict: &Verdict) -> Markup {
    let word = verdict.outcome.name();
    html! {
        div class={ "verdict " (word.replace(' ', "-")) } role="region" aria-label="Verdict" {
            p class="word" { (word) }
            p class="headline" { (verdict.headline) }
            @for sentence in &verdict.more { p { (sentence) } }
            h2 { "Doubts" }
            ul { @for doubt in words::doubts(study, analysis) { li { (doubt) } } }
            p class="safety" { (words::SAFETY) }
        }
    }
}

fn indices(study: &Study, analysis: &Analysis) -> Markup {
    let kind = study.question.kind;
    let end =
        |value: Option<f64>, shown: fn(f64) -> String| value.map_or_else(|| "\u{2013}".to_owned(), shown);
    html! {
        section {
            h2 { "Indices" }
            @if analysis.rows.is_empty() {
                p { "There are none: the readings do not allow an estimate." }
            } @else {
                div class="scroll" { table {
                    thead { tr {
                        th scope="col" { "Index" }
                        th scope="col" class="number" { "Estimate" }
                        @if kind != Kind::Upper { th scope="col" class="number" { "Lower limit" } }
                        @if kind != Kind::Lower { th scope="col" class="number" { "Upper limit" } }
                        th scope="col" { "Remark" }
                    } }
                    tbody { @for row in &analysis.rows {
                        tr class=[(row.index == study.question.index).then_some("asked")] {
                            th scope="row" { (row.index.name()) }
                            td class="number" { (number::nearest(row.estimate, 3)) }
                            @if kind != Kind::Upper { td class="number" { (end(row.interval.and_then(|i| i.low), number::lower_limit)) } }
                            @if kind != Kind::Lower { td class="number" { (end(row.interval.and_then(|i| i.high), number::upper_limit)) } }
                            td class="remark" {
                                @if row.interval.is_none() { (words::no_interval(study)) "." }
                                @else if row.index == study.question.index { "The study's question." }
                            }
                        }
                    } }
                } }
                p {
                    "Limits: " (words::interval_name(study.question.confidence, kind))
                    ", sigma " (words::sigma_name(study.question.sigma)) ". "
                    @if let Ok(asked) = &analysis.asked { (words::method(study, asked)) }
                    @if let Some(about) = words::about_sigma(study.question.sigma) { " " (about) }
                    " Each limit holds for its index alone."
                }
            }
        }
    }
}

/// `mean 2.00134 mm`: the mean with two decimals more than the gauge.
fn measure(study: &Study, value: f64) -> String {
    let number = match &study.data {
        Data::Readings { resolution, .. } => number::nearest(value, usize::from(resolution.decimals()) + 2),
        Data::Summary { .. } => value.to_string().replace('-', "\u{2212}"),
    };
    with_unit(study, &number)
}

fn with_unit(study: &Study, number: &str) -> String {
    format!("{number} {}", study.unit).trim_end().to_owned()
}

fn resolution(study: &Study) -> Option<Resolution> {
    match &study.data {
        Data::Readings { resolution, .. } => Some(*resolution),
        Data::Summary { .. } => None,
    }
}

fn marks(study: &Study, mean: Option<f64>) -> Vec<Mark> {
    let specification = &study.specification;
    let exact = |name: &str, value: Decimal, meaning| Mark {
        value: value.to_f64(),
        label: format!("{name} {}", words::limit(value, resolution(study))),
        meaning,
    };
    [
        specification.upper().map(|limit| exact("USL", limit, Meaning::Limit)),
        specification.lower().map(|limit| exact("LSL", limit, Meaning::Limit)),
        specification.target().map(|target| exact("target", target, Meaning::Target)),
        mean.map(|mean| Mark {
            value: mean,
            label: format!("mean {}", measure(study, mean).trim_end_matches(&study.unit).trim_end()),
            meaning: Meaning::Mean,
        }),
    ]
    .into_iter()
    .flatten()
    .collect()
}

fn axis_name(study: &Study) -> String {
    let name = if study.characteristic.is_empty() { "reading" } else { &study.characteristic };
    if study.unit.is_empty() { name.to_owned() } else { format!("{name} in {}", study.unit) }
}

fn pictures(study: &Study, analysis: &Analysis) -> Markup {
    html! {
        (in_order(study, analysis))
        (distribution(study, analysis))
        @if analysis.steps.len() > 1 { (narrowed(study, analysis)) }
    }
}

fn in_order(study: &Study, analysis: &Analysis) -> Markup {
    let Data::Readings { resolution, readings } = &study.data else { return html! {} };
    if readings.is_empty() {
        return html! {};
    }
    let points: Vec<Point> = readings
        .iter()
        .map(|reading| Point { value: value(*resolution, reading.counts), belonging: reading.belonging })
        .collect();
    let description = format!(
        "{} readings in the order they came in, with the limits. {}",
        readings.len(),
        beyond_in_words(analysis)
    );
    let caption = Caption { id: "sequence", title: "Readings in order", description: &description };
    html! {
        section {
            h2 { "Readings in order" }
            figure {
                div class="scroll" { (sequence::draw(&caption, &points, &marks(study, analysis.mean), &axis_name(study))) }
                figcaption {
                    (beyond_in_words(analysis))
                    @if analysis.surplus > 0 { " Diamonds: " (analysis.surplus) " after the study's end, not counted." }
                    @if analysis.voided > 0 { " Crosses: " (analysis.voided) " taken back, not counted." }
                    @if points.len() > sequence::DRAWN_APART_MAX {
                        " Neighbouring readings are drawn as one line from their lowest to their highest."
                    }
                }
            }
        }
    }
}

fn beyond_in_words(analysis: &Analysis) -> String {
    match analysis.beyond {
        (0, 0) => "No counted reading lies beyond a limit.".to_owned(),
        (below, 0) => format!("Below the lower limit: {below}."),
        (0, above) => format!("Above the upper limit: {above}."),
        (below, above) => format!("Below the lower limit: {below}; above the upper limit: {above}."),
    }
}

fn distribution(study: &Study, analysis: &Analysis) -> Markup {
    // The curve is that of all readings; a summary may give another sigma only.
    let spread = analysis.mean.zip(analysis.sd.or(analysis.sigma).filter(|sd| *sd > 0.0));
    let (bins, resolution) = match &study.data {
        Data::Readings { resolution, readings } => {
            let counted = readings.iter().filter(|reading| reading.belonging == Belonging::Counted);
            let counts: Vec<i64> = counted.map(|reading| reading.counts.get()).collect();
            let one = resolution.to_f64();
            (Bins::new(&counts, analysis.sd.unwrap_or(0.0) / one), one)
        }
        Data::Summary { .. } => (Bins::new(&[], 0.0), 1.0),
    };
    if bins.readings.is_empty() && spread.is_none() {
        return html! {};
    }
    let area =
        if bins.readings.is_empty() { 1.0 } else { f64::from(analysis.n) * bins.width as f64 * resolution };
    let curve = spread.map(|(mean, sd)| Curve { mean, sd, area });
    let name = axis_name(study);
    let title = if bins.readings.is_empty() {
        "Normal curve of the summary"
    } else {
        "Histogram and fitted normal curve"
    };
    let description = format!(
        "{} {}",
        if bins.readings.is_empty() {
            "The normal curve with the summary's mean and standard deviation, with the limits."
        } else {
            "How often each value came, the normal curve with the same mean and standard deviation, and the limits."
        },
        spread.map_or_else(String::new, |(mean, sd)| format!(
            "Mean {}, standard deviation {}.",
            measure(study, mean),
            measure(study, sd)
        ))
    );
    let caption = Caption { id: "histogram", title, description: &description };
    let histogram = Histogram { bins: &bins, resolution, curve, name: &name };
    html! {
        section {
            h2 { "Distribution" }
            figure {
                div class="scroll" { (histogram::draw(&caption, &histogram, &marks(study, analysis.mean))) }
                figcaption {
                    @if bins.readings.is_empty() {
                        "No readings, only their summary: the curve is what a normal distribution would look like."
                    } @else {
                        "Each bar holds " (bins.width) (if bins.width == 1 { " step" } else { " steps" })
                        " of the gauge's resolution. The curve is the normal distribution with the readings' mean and \
                         standard deviation; it is drawn, not tested."
                    }
                }
            }
        }
    }
}

fn narrowed(study: &Study, analysis: &Analysis) -> Markup {
    let planned = study.planned.as_ref().map(|(plan, _)| plan.rule.planned.get());
    let index = study.question.index;
    let (title, name) = if study.planned.as_ref().is_some_and(|(plan, _)| plan.rule.early().is_some()) {
        (format!("How the estimate of {index} went"), None)
    } else {
        let name = words::interval_name(study.question.confidence, study.question.kind);
        (format!("How the interval of {index} narrowed"), Some(name))
    };
    let description = match analysis.steps.last() {
        Some(end) => {
            let with = name.as_ref().map_or_else(String::new, |name| format!(" with its {name}"));
            format!("{index}{with} after each reading; after {}: {:.3}.", end.n, end.estimate)
        }
        None => String::new(),
    };
    let caption = Caption { id: "narrowing", title: &title, description: &description };
    let narrowing = Narrowing {
        steps: &analysis.steps,
        planned,
        required: study.question.required.map(|required| required.to_f64()),
        index: index.name(),
    };
    html! {
        section {
            h2 { (title) }
            figure {
                div class="scroll" { (narrowing::draw(&caption, &narrowing)) }
                figcaption {
                    @if let Some(name) = &name {
                        "Estimate (strong line) and " (name) " as the readings came in. Its limits are meant for the end \
                         of the study; looking for the first moment at which they please would not keep their confidence."
                    } @else {
                        "The estimate as the readings came in. It has limits once a look has decided, which allow for the \
                         looks."
                    }
                }
            }
        }
    }
}

fn record(study: &Study, analysis: &Analysis) -> Markup {
    let question = study.question;
    let mut numbers = vec![
        Fact::new("Index", words::index_name(question.index, question.sigma)),
        Fact::new("Readings counted", analysis.n.to_string()),
    ];
    if let Some(mean) = analysis.mean {
        numbers.push(Fact::new("Mean", measure(study, mean)));
    }
    if let Some(sd) = analysis.sd {
        numbers.push(Fact::new("Standard deviation (n \u{2212} 1)", measure(study, sd)));
    }
    if let Some(sigma) = analysis.sigma.filter(|_| question.sigma != Sigma::Overall) {
        let name = format!("Sigma {}", words::sigma_name(question.sigma));
        numbers.push(Fact::new(name, measure(study, sigma)));
    }
    if let Some(nu) = analysis.nu {
        numbers.push(Fact::new("Degrees of freedom", number::degrees_of_freedom(nu)));
    }
    numbers.extend(specification_facts(study));
    html! {
        section { h2 { "Numbers" } (facts(&numbers)) }
        @if let Some((plan, _)) = &study.planned { section { h2 { "Plan" } (facts(&plan_facts(plan))) } }
        @if !study.origin.is_empty() { section { h2 { "Where the data came from" } (facts(&study.origin)) } }
        @if !study.incidents.is_empty() {
            section {
                h2 { "What did not go straight" }
                div class="scroll" { table {
                    thead { tr { th scope="col" { "Where" } th scope="col" { "What" } } }
                    tbody { @for incident in &study.incidents {
                        tr { td { (incident.place) } td {
                            @if incident.weight == Weight::Loss { strong { "Readings may be missing or wrong: " } }
                            (incident.what)
                        } }
                    } }
                } }
            }
        }
    }
}

fn specification_facts(study: &Study) -> Vec<Fact> {
    let specification = &study.specification;
    let mut facts = Vec::new();
    for (name, value) in [
        ("Lower specification limit", specification.lower()),
        ("Upper specification limit", specification.upper()),
        ("Target", specification.target()),
    ] {
        let value = value.map_or_else(
            || "none".to_owned(),
            |value| with_unit(study, &words::limit(value, resolution(study))),
        );
        facts.push(Fact::new(name, value));
    }
    if let Some(resolution) = resolution(study) {
        facts.push(Fact::new("Resolution", with_unit(study, &resolution.to_string())));
    }
    facts
}

fn plan_facts(plan: &Plan) -> Vec<Fact> {
    describe::facts(plan).into_iter().map(|(name, value)| Fact::new(name, value)).collect()
}

fn facts(facts: &[Fact]) -> Markup {
    html! {
        div class="scroll" { table class="facts" { tbody { @for fact in facts {
            tr { th scope="row" { (fact.name) } td { (fact.value) } }
        } } } }
    }
}
