use std::cell::Cell;
use std::collections::HashMap;

use donelight_core::moments::Moments;

use super::study::Studies;
use super::*;
use crate::plan_file;

const FEW: Extent = Extent { seed: 3, studies: 3_000 };

/// The example's limits 11.95 and 12.05, and a gauge so fine that rounding plays no part; for the rest as asked. Intervals
/// are Bissell's, which the reference tables are for.
pub(crate) fn plan(index: &str, kind: &str, planned: u32, precision: &str, limit: u32) -> Plan {
    let text = plan_file::EXAMPLE
        .replace("\"0.001\"", "\"0.000001\"")
        .replace("index = \"cpk\"", &format!("index = \"{index}\"\nmethod = \"bissell\""))
        .replace("kind = \"two-sided\"", &format!("kind = \"{kind}\""))
        .replace("planned = 212", &format!("planned = {planned}"))
        .replace("precision = \"10%\"", &format!("precision = \"{precision}\""))
        .replace("limit = 240", &format!("limit = {limit}"));
    plan_file::from_text(&text).unwrap()
}

/// The example with some of its text changed.
fn changed(changes: &[(&str, &str)]) -> Plan {
    let text = changes.iter().fold(plan_file::EXAMPLE.to_owned(), |text, (from, to)| {
        assert_eq!(text.matches(from).count(), 1, "{from}");
        text.replace(from, to)
    });
    plan_file::from_text(&text).unwrap()
}

fn run(plan: &Plan, true_index: f64, offset: f64, extent: Extent) -> Outcome {
    simulate(plan, Process { true_index, offset }, extent, &|_| ()).unwrap()
}

pub(crate) fn quick(plan: &Plan, true_index: f64, offset: f64) -> Outcome {
    run(plan, true_index, offset, FEW)
}

/// Rows of a reference table, each as column name to value.
fn table(name: &str) -> Vec<HashMap<String, String>> {
    let path = format!("{}/../tests/reference/{name}", env!("CARGO_MANIFEST_DIR"));
    let mut reader = csv::ReaderBuilder::new().comment(Some(b'#')).from_path(path).unwrap();
    reader.deserialize().map(Result::unwrap).collect()
}

fn number(row: &HashMap<String, String>, column: &str) -> f64 {
    row[column].parse().unwrap_or_else(|_| panic!("{column} of {row:?}"))
}

/// Two simulated figures agree: four standard errors of their difference, and what the table rounded away.
#[track_caller]
fn agree(what: &str, ours: f64, theirs: f64, spread: f64, rounded: f64) {
    let error = spread * (1.0 / f64::from(FEW.studies) + 1.0 / 40_000.0).sqrt();
    assert!((ours - theirs).abs() <= 4.0 * error + rounded, "{what}: {ours} {theirs} ± {error}");
}

/// Source: `sequential_relative.csv`, an independent simulation in Python with unrounded readings.
#[test]
fn studies_that_stop_by_precision_agree_with_an_independent_simulation() {
    let rows = table("sequential_relative.csv");
    let stopped = rows.iter().filter(|row| row["rule"] != "fixed_n0");
    let mut compared = 0;
    for row in stopped {
        let [start, limit] = ["start", "n_max"].map(|column| row[column].parse().unwrap());
        let goal = format!("{}%", 100.0 * number(row, "goal"));
        let outcome =
            quick(&plan("cpk", "two-sided", start, &goal, limit), number(row, "true_cpk"), number(row, "xi"));
        let covered = number(row, "cover_bissell_two_sided");
        agree("coverage", outcome.coverage().value, covered, (covered * (1.0 - covered)).sqrt(), 0.000_05);
        let spread = number(row, "sd_n");
        agree("mean n", outcome.n().mean(), number(row, "mean_n"), spread + 0.05, 0.05);
        // A sample quantile's standard error is √(p(1 − p)/N)/f: 1.25 σ/√N for a normal median, 2.11 σ/√N at 95 %.
        for (fraction, column, factor) in [(0.5, "median_n", 1.25), (0.95, "p95_n", 2.11)] {
            agree(column, outcome.n().quantile(fraction).into(), number(row, column), factor * spread, 1.0);
        }
        agree("bias", outcome.bias().unwrap(), number(row, "bias"), number(row, "sd_cpk_hat"), 0.000_005);
        assert_eq!(outcome.spent().value, number(row, "frac_at_n_max"));
        compared += 1;
    }
    assert_eq!(compared, 28);
}

/// Source: the rows of the same table that stop at n0.
#[test]
fn the_goal_is_met_at_the_planned_count_as_often_as_in_an_independent_simulation() {
    for row in table("sequential_relative.csv").iter().filter(|row| row["rule"] == "fixed_n0") {
        let n = row["start"].parse().unwrap();
        let goal = format!("{}%", 100.0 * number(row, "goal"));
        let plan = plan("cpk", "two-sided", n, &goal, n);
        let outcome = quick(&plan, number(row, "true_cpk"), number(row, "xi"));
        let met = number(row, "goal_met_at_n0");
        agree("met", outcome.met_at_planned().value, met, (met * (1.0 - met)).sqrt(), 0.000_05);
        assert_eq!(outcome.spent().value + outcome.met_at_planned().value, 1.0);
        let covered = number(row, "cover_bissell_two_sided");
        agree("coverage", outcome.coverage().value, covered, (covered * (1.0 - covered)).sqrt(), 0.000_05);
    }
}

/// Source: `coverage_bissell_95.csv`, by exact integration. A precision of 1000 % is there at any n: the study then ends
/// at the planned count.
#[test]
fn the_coverage_at_a_fixed_count_is_the_exact_one() {
    let mut compared = 0;
    for row in table("coverage_bissell_95.csv") {
        let n: u32 = row["n"].parse().unwrap();
        if n > 30 || !["0.8", "1.67"].contains(&row["true_index"].as_str()) {
            continue;
        }
        // Only one limit is in play once the mean is some 4/√n off.
        let offset = if row["offset"] == "inf" { 3.0 } else { number(&row, "offset") };
        let outcome = quick(&plan("cpk", &row["kind"], n, "1000%", n), number(&row, "true_index"), offset);
        let (coverage, exact) = (outcome.coverage(), number(&row, "coverage"));
        assert!((coverage.value - exact).abs() < 4.0 * coverage.standard_error, "{row:?} {coverage:?}");
        assert_eq!(outcome.met_at_planned().value, 1.0);
        compared += 1;
    }
    assert_eq!(compared, 108);
}

/// With one limit nothing but this limit is in play: the rows of an infinite offset, for any index that it allows.
#[test]
fn with_one_limit_the_coverage_is_that_of_one_limit() {
    let exact = table("coverage_bissell_95.csv")
        .iter()
        .find(|row| {
            ["n", "true_index", "offset", "kind"].map(|column| row[column].as_str())
                == ["20", "1.33", "inf", "lower"]
        })
        .map(|row| number(row, "coverage"))
        .unwrap();
    let at_20 = [
        ("planned = 212", "planned = 20"),
        ("limit = 240", "limit = 20"),
        ("precision = \"10%\"", "precision = \"1000%\""),
        ("kind = \"two-sided\"", "kind = \"lower\""),
    ];
    for (gone, index) in [("lower", "cpk"), ("lower", "cpu"), ("upper", "cpk"), ("upper", "cpl")] {
        let line = if gone == "lower" { "lower = \"11.950\"" } else { "upper = \"12.050\"" };
        let index = format!("index = \"{index}\"");
        let mut changes = at_20.to_vec();
        changes.extend([(line, ""), ("index = \"cpk\"", index.as_str())]);
        let coverage = quick(&changed(&changes), 1.33, 0.0).coverage();
        assert!(
            (coverage.value - exact).abs() < 4.0 * coverage.standard_error,
            "{gone} {coverage:?} {exact}"
        );
    }
}

/// x̄ and s are independent and E[1/s] = √(ν/2) Γ((ν − 1)/2)/Γ(ν/2)/σ: so the estimates of Cp, Cpl and Cpu are too
/// large by that factor, wherever the mean is. At ν = 9 it is 1.0942 (Kotz and Johnson 1993, Process Capability Indices,
/// from memory; the value computed from the formula).
#[test]
fn the_indices_of_an_unbiased_mean_have_their_known_bias_at_any_offset() {
    // Γ(4) = 3! and Γ(4.5) = 105 √π/16 (DLMF 5.4).
    let factor = 4.5_f64.sqrt() * 6.0 / (105.0 * std::f64::consts::PI.sqrt() / 16.0);
    assert!((factor - 1.0942).abs() < 5e-5);
    for (index, offset) in
        [("cp", 0.0), ("cp", 2.0), ("cpl", -1.0), ("cpl", 1.0), ("cpu", -1.0), ("cpu", 0.0), ("cpu", 1.0)]
    {
        let outcome = quick(&plan(index, "two-sided", 10, "1000%", 10), 1.33, offset);
        let (bias, error) = (outcome.bias().unwrap(), outcome.bias_standard_error().unwrap());
        assert!((bias - 1.33 * (factor - 1.0)).abs() < 4.0 * error, "{index} {offset}: {bias} ± {error}");
    }
}

/// The example with sigma within subgroups of so many pieces; the rest as asked.
fn within(sigma: &str, size: u32, planned: u32, precision: &str, limit: u32) -> Plan {
    let table = if size > 1 { format!("[subgroups]\nsize = {size}") } else { String::new() };
    changed(&[
        ("\"0.001\"", "\"0.000001\""),
        ("sigma = \"overall\"", &format!("sigma = \"{sigma}\"")),
        ("# [subgroups]\n# size = 5", &table),
        ("index = \"cpk\"", "index = \"cpu\""),
        ("planned = 212", &format!("planned = {planned}")),
        ("precision = \"10%\"", &format!("precision = \"{precision}\"")),
        ("limit = 240", &format!("limit = {limit}")),
    ])
}

/// The same bias, of which sigma pooled within 5 subgroups of 3 has that of ν = 10: √5 Γ(4.5)/Γ(5).
#[test]
fn a_sigma_within_subgroups_has_the_bias_of_its_own_degrees_of_freedom() {
    let factor = 5_f64.sqrt() * 105.0 * std::f64::consts::PI.sqrt() / 16.0 / 24.0;
    let outcome = quick(&within("pooled", 3, 15, "1000%", 15), 1.33, 0.0);
    let (bias, error) = (outcome.bias().unwrap(), outcome.bias_standard_error().unwrap());
    assert!((bias - 1.33 * (factor - 1.0)).abs() < 4.0 * error, "{bias} ± {error}");
    // Not that of ν = 14, which the overall sigma of 15 pieces has: 1.0579 against 1.0837.
    assert!((bias - 1.33 * 0.0579).abs() > 4.0 * error, "{bias} ± {error}");
}

/// The floor is one of ν = z²/(2r²): 21.3 at 30 %. Pooled in threes that takes 11 subgroups; moving ranges 35 (0.605 ν each).
#[test]
fn studies_within_subgroups_end_at_whole_ones_and_not_before_their_floor() {
    let pooled = quick(&within("pooled", 3, 6, "30%", 300), 3.0, 0.0);
    assert!((33..=39).contains(&pooled.n().least()), "{}", pooled.n().least());
    for n in 0..=10 {
        assert_eq!(pooled.n().quantile(f64::from(n) / 10.0) % 3, 0);
    }
    let moving = quick(&within("moving-ranges", 1, 6, "30%", 300), 3.0, 0.0);
    assert!((36..=42).contains(&moving.n().least()), "{}", moving.n().least());
}

/// z√(1/(9nĈ²) + 1/(2(n − 1))) ≤ r has no solution below n = 1 + z²/(2r²), whatever the estimate.
#[test]
fn no_study_ends_before_the_floor_that_its_precision_sets() {
    for (goal, floor) in [("10%", 194), ("20%", 50), ("30%", 23), ("50%", 9)] {
        let outcome = quick(&plan("cpk", "two-sided", 2, goal, 500), 3.0, 0.0);
        assert!(outcome.n().least() >= floor, "{goal}: {}", outcome.n().least());
        assert!(outcome.n().least() <= floor + 6, "{goal}: {}", outcome.n().least());
        assert_eq!(outcome.met_at_planned().value, 0.0);
    }
}

#[test]
fn the_same_seed_gives_the_same_figures_on_any_number_of_threads() {
    let plan = plan("cpk", "two-sided", 5, "30%", 60);
    // Not a whole number of strides.
    let extent = Extent { seed: 11, studies: 1_001 };
    let on = |threads| {
        let pool = rayon::ThreadPoolBuilder::new().num_threads(threads).build().unwrap();
        pool.install(|| run(&plan, 1.33, 0.5, extent))
    };
    let alone = on(1);
    assert_eq!(alone.studies(), 1_001);
    for threads in [2, 3, 8] {
        assert_eq!(on(threads), alone, "{threads}");
    }
    assert_ne!(run(&plan, 1.33, 0.5, Extent { seed: 12, ..extent }), alone);
}

#[test]
fn all_studies_are_told_as_they_are_done() {
    let told = std::sync::atomic::AtomicU32::new(0);
    let count = |studies| {
        told.fetch_add(studies, std::sync::atomic::Ordering::Relaxed);
    };
    let process = Process { true_index: 1.0, offset: 0.0 };
    simulate(&plan("cp", "lower", 3, "60%", 9), process, Extent { seed: 0, studies: 130 }, &count).unwrap();
    assert_eq!(told.into_inner(), 130);
}

/// Where no look is left out, the core judges every reading of every study; both ways must end alike, and the shorter
/// one must be shorter.
#[test]
fn looks_that_are_left_out_change_the_end_of_no_study() {
    let one_limit = [("lower = \"11.950\"", ""), ("planned = 212", "planned = 2")];
    let far = [
        ("lower = \"11.950\"", "lower = \"99999999.950\""),
        ("upper = \"12.050\"", "upper = \"100000000.050\""),
        ("target = \"12.000\"", ""),
        ("planned = 212", "planned = 2"),
        ("precision = \"10%\"", "precision = \"23%\""),
    ];
    let coarse = [
        ("resolution = \"0.001\"", "resolution = \"0.04\""),
        ("planned = 212", "planned = 2"),
        ("precision = \"10%\"", "precision = \"23%\""),
    ];
    let plans = [
        plan("cpk", "two-sided", 2, "10%", 300),
        plan("cpk", "two-sided", 2, "12%", 150),
        plan("cpk", "lower", 2, "20%", 300),
        plan("cpk", "upper", 40, "20%", 300),
        plan("cpl", "two-sided", 2, "25%", 300),
        plan("cpu", "lower", 2, "25%", 300),
        plan("cp", "two-sided", 2, "25%", 300),
        plan("cp", "upper", 2, "150%", 300),
        plan("cpk", "two-sided", 2, "200%", 300),
        plan("cpk", "two-sided", 2, "0.2", 300),
        plan("cpu", "upper", 5, "0.3", 300),
        plan("cp", "lower", 2, "0.25", 300),
        // By the methods that a plan takes if it names none.
        changed(&[("kind = \"two-sided\"", "kind = \"lower\""), ("planned = 212", "planned = 5")]),
        changed(&[("kind = \"two-sided\"", "kind = \"upper\""), ("planned = 212", "planned = 5")]),
        changed(&one_limit),
        changed(&far),
        changed(&coarse),
    ];
    for plan in &plans {
        for (true_index, offset) in [(0.3, 0.0), (1.33, 0.4), (2.0, -1.0)] {
            let studies = Studies::new(plan, &Process { true_index, offset }, 5).unwrap();
            let (mut looks, all) = (0, Cell::new(0));
            for study in 0..40 {
                let plain = studies.run_judged(study, |_: &Moments| {
                    all.set(all.get() + 1);
                    true
                });
                let (end, looked) = studies.run_counted(study);
                assert_eq!(end, plain, "{plan:?} {true_index} {offset}");
                looks += looked;
            }
            assert!(looks <= 40 * 4, "{looks} of {} looks: {plan:?} {true_index} {offset}", all.get());
        }
    }
}

/// Rounding to steps of h adds about h²/12 to the variance (Sheppard 1898, from memory). With σ of one step, Cp comes out
/// at 1/√(1 + 1/12) = 0.9608 of the true one.
#[test]
fn a_coarse_gauge_shows_as_the_bias_and_the_coverage_that_it_causes() {
    let coarse = changed(&[
        ("index = \"cpk\"", "index = \"cp\""),
        ("resolution = \"0.001\"", "resolution = \"0.01\""),
        ("limit = 240", "limit = 212"),
    ]);
    let true_cp = 0.1 / 6.0 / 0.01;
    let outcome = quick(&coarse, true_cp, 0.0);
    let n = 212.0;
    // E[1/s] is above 1/σ by 3/(4ν), to the first order.
    let expected = true_cp * ((1.0_f64 + 1.0 / 12.0).sqrt().recip() * (1.0 + 0.75 / (n - 1.0)) - 1.0);
    let (bias, error) = (outcome.bias().unwrap(), outcome.bias_standard_error().unwrap());
    assert!((bias - expected).abs() < 4.0 * error + 1e-4, "{bias} {expected} ± {error}");
    assert!(outcome.coverage().value < 0.92, "{:?}", outcome.coverage());

    // One step is as wide as the tolerance: σ = 1/30 of a step, and all pieces show the same reading.
    let blind =
        changed(&[("resolution = \"0.001\"", "resolution = \"0.1\""), ("limit = 240", "limit = 212")]);
    let outcome = run(&blind, 5.0, 0.0, Extent { seed: 1, studies: 100 });
    assert_eq!(outcome.without_estimate().value, 1.0);
    assert_eq!((outcome.coverage().value, outcome.spent().value, outcome.bias()), (0.0, 1.0, None));
    assert!(words::text(&blind, FEW, &[outcome]).contains("too coarse"));
}

#[test]
fn a_process_that_cannot_be_is_refused() {
    let refused = |plan: &Plan, true_index, offset| {
        simulate(plan, Process { true_index, offset }, FEW, &|_| ()).unwrap_err()
    };
    let cpu = plan("cpu", "lower", 5, "30%", 60);
    for (true_index, offset) in
        [(0.0, 0.0), (-1.0, 0.0), (f64::NAN, 0.0), (1.0, -3.0), (1.0, f64::NAN), (1.0, f64::INFINITY)]
    {
        assert_eq!(refused(&cpu, true_index, offset), ProcessError::Impossible, "{true_index} {offset}");
    }
    let wide = changed(&[
        ("resolution = \"0.001\"", "resolution = \"1\""),
        ("lower = \"11.950\"", "lower = \"-999999999999\""),
        ("upper = \"12.050\"", "upper = \"999999999999\""),
    ]);
    assert_eq!(refused(&wide, 0.5, 0.0), ProcessError::BeyondRange);
    assert!(quick(&plan("cpu", "lower", 5, "30%", 60), 1.0, -2.0).n().most() <= 60);
}

#[test]
fn longer_studies_are_tried_fewer_times() {
    let studies = |plan: &Plan| usual_studies(plan, &usual_processes(plan));
    assert_eq!(studies(&plan("cpk", "two-sided", 5, "10%", 300)), 10_000);
    let long = studies(&plan("cpk", "two-sided", 5_000, "10%", 6_000));
    assert!((100..1_000).contains(&long), "{long}");
    assert_eq!(studies(&plan("cpk", "two-sided", 1_000_000, "10%", 1_000_000)), 20);
}

#[test]
fn a_plan_is_tried_off_centre_only_where_that_matters() {
    let offsets =
        |plan: &Plan| -> Vec<f64> { usual_processes(plan).iter().map(|process| process.offset).collect() };
    assert_eq!(offsets(&plan("cpk", "lower", 5, "30%", 60)), [0.0, 1.0, 0.0, 1.0, 0.0, 1.0]);
    assert_eq!(offsets(&plan("cp", "lower", 5, "30%", 60)), [0.0; 3]);
    assert_eq!(offsets(&changed(&[("lower = \"11.950\"", "")])), [0.0; 3]);
}
