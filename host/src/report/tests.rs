use std::collections::HashSet;

use super::analysis::Analysis;
use super::*;
use crate::plan_file;
use crate::report::words::Outcome;

/// Deviations in thousandths around a middle: a fixed pattern, roughly bell-shaped, standard deviation about 10.
fn deviation(i: i64) -> i64 {
    // The sum of four numbers that run through 0..17 at different speeds.
    [7, 11, 5, 3].iter().map(|step| (i * step + i / 17 * (step + 1)) % 17).sum::<i64>() - 32
}

fn readings(n: i64) -> Vec<Reading> {
    (0..n).map(|i| Reading::counted(Counts::new(12_000 + deviation(i)).unwrap())).collect()
}

/// A study by the example plan, with a bit of everything.
fn study() -> Study {
    let plan = plan_file::from_text(plan_file::EXAMPLE).unwrap();
    let mut readings = readings(216);
    readings[40].belonging = Belonging::Voided;
    readings[41].belonging = Belonging::Voided;
    for reading in &mut readings[214..] {
        reading.belonging = Belonging::Surplus;
    }
    readings[0].seq = Some(3);
    readings[0].time = Some("2026-01-05 07:10:00 UTC".to_owned());
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
            required: Some(Millionths(1_330_000)),
            sigma: plan.sigma,
            method: plan.method,
        },
        data: Data::Readings { resolution: plan.resolution, readings },
        planned: Some((plan, Standing::Settled)),
        origin: vec![Fact::new("Station", "made up")],
        incidents: vec![Incident {
            place: "record 17".to_owned(),
            what: "refused: no digits in the line".to_owned(),
            weight: Weight::Note,
        }],
    }
}

fn page_of(study: &Study) -> (Analysis, String) {
    let analysis = analysis::of(study);
    let page = page::page(study, &analysis);
    (analysis, page)
}

#[test]
fn only_counted_readings_are_counted() {
    let (analysis, _) = page_of(&study());
    assert_eq!((analysis.n, analysis.surplus, analysis.voided), (212, 2, 2));
    let mut without = study();
    let Data::Readings { readings, .. } = &mut without.data else { panic!() };
    readings.retain(|reading| reading.belonging == Belonging::Counted);
    let (alone, _) = page_of(&without);
    assert_eq!((analysis.mean, analysis.sd), (alone.mean, alone.sd));
    assert_eq!(analysis.asked, alone.asked);
}

#[test]
fn the_page_shows_the_verdict_before_all_else_and_the_safety_note_beside_it() {
    let study = study();
    let (analysis, page) = page_of(&study);
    let verdict = words::verdict(&study, &analysis);
    assert_eq!(verdict.outcome, Outcome::Shown, "{verdict:?}");
    let at = |needle: &str| page.find(needle).unwrap_or_else(|| panic!("{needle} is not in the page"));
    let safety = maud::html! { (words::SAFETY) }.into_string();
    let in_order = [
        "<h1>Wick tubes, first lot</h1>",
        verdict.headline.as_str(),
        "Doubts",
        safety.as_str(),
        "<h2>Indices</h2>",
        "<h2>Readings in order</h2>",
        "<h2>Distribution</h2>",
        "How the interval of Cpk narrowed</h2>",
        "<h2>Numbers</h2>",
        "<h2>Plan</h2>",
        "<h2>Where the data came from</h2>",
        "<h2>What did not go straight</h2>",
        "refused: no digits in the line",
    ];
    assert!(in_order.windows(2).all(|pair| at(pair[0]) < at(pair[1])));
}

#[test]
fn the_page_needs_nothing_from_outside_and_runs_nothing() {
    let (_, page) = page_of(&study());
    for forbidden in ["<script", "http:", "https:", "//", "src=", "href=", "@import", "onload"] {
        assert!(!page.contains(forbidden), "{forbidden}");
    }
}

#[test]
fn every_picture_has_a_title_a_description_and_ids_of_its_own() {
    let (_, page) = page_of(&study());
    assert_eq!(page.matches("<svg ").count(), 3);
    assert_eq!(page.matches("role=\"img\"").count(), 3);
    let ids: Vec<&str> = page.split(" id=\"").skip(1).map(|rest| rest.split('"').next().unwrap()).collect();
    assert_eq!(ids.iter().collect::<HashSet<_>>().len(), ids.len(), "{ids:?}");
    for reference in page.split("aria-labelledby=\"").skip(1) {
        for id in reference.split('"').next().unwrap().split(' ') {
            assert!(ids.contains(&id), "{id}");
        }
    }
    for reference in page.split("url(#").skip(1) {
        assert!(ids.contains(&reference.split(')').next().unwrap()));
    }
}

#[test]
fn no_number_in_a_picture_is_nan_or_infinite() {
    let mut odd = study();
    for keep in [216, 3, 2, 1, 0] {
        readings_of(&mut odd).truncate(keep);
        let (_, page) = page_of(&odd);
        assert!(!page.contains("NaN") && !page.contains("inf\"") && !page.contains(" inf"), "{keep}");
    }
}

fn readings_of(study: &mut Study) -> &mut Vec<Reading> {
    match &mut study.data {
        Data::Readings { readings, .. } => readings,
        Data::Summary { .. } => panic!("the study has readings"),
    }
}

#[test]
fn a_loss_on_the_way_is_a_doubt_of_its_own() {
    let mut study = study();
    let said =
        |study: &Study| words::doubts(study, &analysis::of(study)).join(" ").contains("may be missing");
    assert!(!said(&study));
    study.incidents[0].weight = Weight::Loss;
    assert!(said(&study));
}

#[test]
fn a_study_without_an_estimate_still_has_a_page_that_says_why() {
    for (readings, why) in [
        (Vec::new(), "fewer than two readings"),
        (readings(1), "fewer than two readings"),
        (vec![Reading::counted(Counts::new(12_000).unwrap()); 20], "all readings are alike"),
    ] {
        let mut study = study();
        *readings_of(&mut study) = readings;
        let (analysis, page) = page_of(&study);
        assert_eq!(words::verdict(&study, &analysis).outcome, Outcome::None);
        assert!(page.contains(why), "{why}");
        assert!(page.contains("This verdict does not replace"));
    }
}

#[test]
fn whatever_a_name_holds_is_text_and_never_markup() {
    let nasty = "<b>&\"'</title><script>alert(1)</script>";
    let mut study = study();
    study.title = nasty.to_owned();
    study.part = nasty.to_owned();
    study.characteristic = nasty.to_owned();
    study.unit = "<i>".to_owned();
    study.origin = vec![Fact::new(nasty, nasty)];
    study.incidents =
        vec![Incident { place: nasty.to_owned(), what: nasty.to_owned(), weight: Weight::Loss }];
    let (_, page) = page_of(&study);
    assert!(!page.contains("<b>") && !page.contains("<script") && !page.contains("<i>"));
    assert!(page.contains("&lt;b&gt;&amp;&quot;"));
    // Inside a picture's label too.
    assert!(page.contains("&lt;/title&gt;&lt;script&gt;alert(1)&lt;/script&gt; in &lt;i&gt;</text>"));
}

#[test]
fn a_claim_is_shown_exactly_when_the_lower_limit_reaches_it() {
    let mut study = study();
    let (analysis, _) = page_of(&study);
    let low = analysis.asked.as_ref().unwrap().interval.unwrap().low.unwrap();
    let below = (low * 1e6).floor() as u32;
    for (required, outcome) in [(below, Outcome::Shown), (below + 1, Outcome::NotShown)] {
        study.question.required = Some(Millionths(required));
        assert_eq!(words::verdict(&study, &analysis).outcome, outcome);
    }
    study.question.required = None;
    assert_eq!(words::verdict(&study, &analysis).outcome, Outcome::Estimate);
}

#[test]
fn a_study_that_is_not_finished_shows_nothing_however_good_it_looks() {
    let mut study = study();
    study.planned.as_mut().unwrap().1 = Standing::Gathering;
    let (analysis, page) = page_of(&study);
    let verdict = words::verdict(&study, &analysis);
    assert_eq!(verdict.outcome, Outcome::Unfinished);
    assert!(verdict.headline.starts_with("Not finished. So far, Cpk is estimated at 1.7"), "{verdict:?}");
    assert!(page.contains("at least 212 are planned"));
    let json = export::json(&study, &analysis);
    assert_eq!(json["shown"], false);
}

#[test]
fn an_index_without_an_interval_shows_nothing() {
    let mut study = study();
    study.question.index = Index::Cpm;
    let (analysis, page) = page_of(&study);
    let row = analysis.asked.unwrap();
    assert!(row.estimate > 1.0 && row.interval.is_none());
    assert_eq!(words::verdict(&study, &analysis::of(&study)).outcome, Outcome::NotShown);
    assert!(page.contains("there is no interval"));
}

#[test]
fn the_last_step_of_the_narrowing_is_the_verdicts_interval() {
    let (analysis, _) = page_of(&study());
    let asked = analysis.asked.unwrap();
    let last = analysis.steps.last().unwrap();
    assert_eq!(last.n, 212);
    assert_eq!((last.low, last.high), (asked.interval.unwrap().low, asked.interval.unwrap().high));
    assert_eq!(last.estimate, asked.estimate);
}

#[test]
fn thousands_of_readings_make_a_page_of_bounded_size() {
    let mut study = study();
    *readings_of(&mut study) = readings(50_000);
    let (analysis, page) = page_of(&study);
    assert_eq!(analysis.n, 50_000);
    assert_eq!(analysis.steps.last().unwrap().n, 50_000);
    assert!(page.len() < 400_000, "{}", page.len());
}

#[test]
fn readings_beyond_the_limits_are_counted_and_those_at_them_are_not() {
    let mut study = study();
    *readings_of(&mut study) = [11_949, 11_950, 12_000, 12_050, 12_051, 12_060]
        .map(|n| Reading::counted(Counts::new(n).unwrap()))
        .to_vec();
    let (analysis, page) = page_of(&study);
    assert_eq!(analysis.beyond, (1, 2));
    assert!(page.contains("3 readings lie beyond the limits: 1 below the lower, 2 above the upper."));
}

#[test]
fn the_csv_is_read_back_as_the_same_readings() {
    let study = study();
    let csv = export::csv(&study).unwrap();
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("study.csv");
    std::fs::write(&path, &csv).unwrap();
    let Data::Readings { resolution, readings } = &study.data else { panic!() };
    let back = crate::readings::read(&path, Some("value"), *resolution, "mm").unwrap();
    assert_eq!(back.readings, readings.iter().map(|reading| reading.counts).collect::<Vec<_>>());
    let text = String::from_utf8(csv).unwrap();
    assert_eq!(text.lines().nth(1).unwrap().rsplit(',').next(), Some("2026-01-05 07:10:00 UTC"));
    assert_eq!(text.matches(",voided,").count(), 2);
    assert_eq!(text.matches(",surplus,").count(), 2);
}

/// A study of 150 pieces whose claim was decided at its first look.
fn decided(deviations: i64, claim: &str) -> Study {
    let (before, rest) = plan_file::EXAMPLE.split_once("[stop]\n").unwrap();
    let after = &rest[rest.find("[gauge]").unwrap()..];
    let text = format!("{before}[stop.early]\n{claim}\nlooks = [150, 290, 430]\n{after}");
    let plan = plan_file::from_text(&text).unwrap();
    let mut study = study();
    let Data::Readings { readings, .. } = &mut study.data else { panic!() };
    *readings = (0..150)
        .map(|i| Reading::counted(Counts::new(12_000 + deviations * deviation(i)).unwrap()))
        .collect();
    study.question.required = None;
    study.planned = Some((plan, Standing::Settled));
    study
}

#[test]
fn an_early_decision_is_told_with_its_risk_and_with_limits_that_allow_for_the_looks() {
    let study = decided(1, "claim = 1.5\nagainst = 1.3");
    let (analysis, page) = page_of(&study);
    let verdict = words::verdict(&study, &analysis);
    assert_eq!(verdict.outcome, Outcome::Kept, "{verdict:?}");
    assert!(verdict.headline.contains("is 1.5, against 1.3, is kept at look 1 of 3"), "{verdict:?}");
    assert!(verdict.more[0].contains("Kept is not proven"), "{verdict:?}");
    let row = analysis.asked.unwrap();
    let (low, high) = (row.interval.unwrap().low.unwrap(), row.interval.unwrap().high.unwrap());
    // At a first look the limits are those of a fixed size; the exact lower one lies above Bissell's.
    let ordinary = {
        let mut other = study.clone();
        other.planned = None;
        analysis::of(&other).asked.unwrap().interval.unwrap()
    };
    assert!((low - ordinary.low.unwrap()).abs() < 0.03 && (high - ordinary.high.unwrap()).abs() < 0.03);
    assert!(low < row.estimate && row.estimate < high);
    assert!(analysis.rows.iter().all(|row| row.interval.is_some() == (row.index == study.question.index)));
    assert!(page.contains("allow for the looks") && page.contains("claim kept"));
    assert_eq!(export::json(&study, &analysis)["method"], "early-decision");
    let wide = decided(2, "claim = 1.5\nagainst = 1.3");
    let verdict = words::verdict(&wide, &analysis::of(&wide));
    assert_eq!(verdict.outcome, Outcome::Rejected, "{verdict:?}");
    assert!(verdict.more[0].contains("risk of at most 5 %"), "{verdict:?}");
    // What is required on the command line is answered first, by the same limits.
    let mut required = study;
    required.question.required = Some(Millionths(1_000_000));
    let verdict = words::verdict(&required, &analysis::of(&required));
    assert_eq!(verdict.outcome, Outcome::Shown, "{verdict:?}");
    assert!(verdict.more[0].contains("is kept"), "{verdict:?}");
}
