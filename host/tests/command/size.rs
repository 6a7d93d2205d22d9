//! `donelight size`, as a script and as a person see it.

use crate::driver::donelight;

#[test]
fn cpk_of_1_5_within_ten_percent_takes_212_pieces() {
    // Common practice, no source.
    let answer = donelight("size precision --index cpk --at 1.5 --within 10% --json").ends_with(0).json();
    assert_eq!(answer["n"], 212);
    let close = |name: &str, value: f64| {
        let given = answer[name].as_f64().unwrap();
        assert!((given - value).abs() < 5e-6, "{name} {given}");
    };
    close("achieved", 0.099989);
    close("achieved_before", 0.100227);
    close("low", 1.350016);
    close("high", 1.649984);
    assert_eq!(answer["kind"], "two-sided");
    assert_eq!(answer["confidence"], 0.95);
    assert_eq!(answer["method"], "bissell");
}

#[test]
fn a_claim_of_1_5_against_1_3_takes_297_pieces() {
    // Common practice, no source.
    let answer = donelight("size power --index cpk --claim 1.5 --against 1.3 --json").ends_with(0).json();
    assert_eq!(answer["n"], 297);
    let achieved = answer["achieved"].as_f64().unwrap();
    assert!((achieved - 0.950464).abs() < 5e-7, "{achieved}");
    assert!(answer["achieved_before"].as_f64().unwrap() < 0.95);
    assert!((answer["critical"].as_f64().unwrap() - 1.3937).abs() < 5e-5);
    // What it really does, by exact integration (own computation, independent of this code): a size of 5.9 % and a power of
    // 96.9 % when centred, 3.9 % and 93.8 % when one limit matters.
    let end = |key: &str, end: &str| answer[key][end].as_f64().unwrap();
    assert!((end("true_size", "from") - 0.039).abs() < 5e-4 && (end("true_size", "to") - 0.059).abs() < 5e-4);
    assert!(
        (end("true_power", "from") - 0.938).abs() < 5e-4 && (end("true_power", "to") - 0.969).abs() < 5e-4
    );
}

/// Rows of the reference tables (`sizes.csv`; mpmath and scipy) at an index of 1.5 and 95 %.
#[test]
fn the_sizes_of_the_reference_tables_come_out_of_the_command() {
    let path = concat!(env!("CARGO_MANIFEST_DIR"), "/../tests/reference/sizes.csv");
    let mut compared = 0;
    for row in std::fs::read_to_string(path).unwrap().lines() {
        let row: Vec<&str> = row.split(',').collect();
        let [task, method, delta, kind, level, at, other, width, power, n, value, before, critical, ..] =
            row[..]
        else {
            continue;
        };
        let (index, method) = match method {
            "Cp/chi2" => ("cp", "chi-square"),
            "Cpl_Cpu/nct" => ("cpl", "noncentral-t"),
            "Cpk/bissell" => ("cpk", "bissell"),
            "Cpk/exact_conservative" => ("cpk", "exact"),
            "Cpm/boyles" => ("cpm", "boyles"),
            _ => continue,
        };
        if (level, at) != (if task == "power" { "0.05" } else { "0.95" }, "1.5") {
            continue;
        }
        let line = match task {
            "precision" => {
                let percent = (width.parse::<f64>().unwrap() * 1e4).round() / 1e2;
                let offset = if delta.is_empty() { "0" } else { delta };
                format!(
                    "size precision --index {index} --at {at} --within {percent}% --confidence {level} --kind {kind} \
                     --method {method} --offset {offset} --json"
                )
            }
            _ => format!(
                "size power --index {index} --claim {at} --against {other} --alpha {level} --power {power} \
                 --method {method} --json"
            ),
        };
        let answer = donelight(&line).ends_with(0).json();
        assert_eq!(answer["n"], n.parse::<u64>().unwrap(), "{line}");
        for (key, expected) in [("achieved", value), ("achieved_before", before), ("critical", critical)] {
            if let Ok(expected) = expected.parse::<f64>() {
                let found = answer[key].as_f64().unwrap();
                assert!((found - expected).abs() < 1.01e-9, "{line} {key} {found} {expected}");
            }
        }
        compared += 1;
    }
    assert!(compared > 150, "{compared}");
}

#[test]
fn the_words_name_the_pieces_the_interval_and_what_one_piece_fewer_would_do() {
    let answer = donelight("size precision --index cpk --at 1.5 --within 10%").ends_with(0);
    assert_eq!(
        answer.out,
        "Measure 212 pieces.\n\
         \n\
         If Cpk then comes out at 1.5, its two-sided 95 % interval is 1.3500 to 1.6500.\n\
         It reaches 9.9989 % from the estimate; at most 10 % is wanted. With 211 pieces it would be 10.0227 %, which is too far.\n\
         If that is the true Cpk, such an interval covers it in 94.9 % to 95.4 % of studies, depending on where the mean lies.\n\
         \n\
         Method: Bissell's normal approximation (1990); sigma overall with n \u{2212} 1 degrees of freedom.\n\
         It supposes a stable process and readings near to normal.\n"
    );
    let answer = donelight("size power --index cpk --claim 1.5 --against 1.3").ends_with(0);
    assert!(answer.out.starts_with("Measure 297 pieces.\n"), "{}", answer.out);
    assert!(answer.out.contains("95.0464 %") && answer.out.contains("94.9852 %"), "{}", answer.out);
}

#[test]
fn the_same_level_in_any_writing_gives_the_same_answer() {
    let first = donelight("size precision --at 1.5 --within 10% --confidence 95% --json").json();
    for line in [
        "size precision --at 1,5 --within 10.0% --confidence 0.95 --json",
        "--json size precision --index CPK --at 1.50 --within 10% --kind Two-Sided",
    ] {
        assert_eq!(donelight(line).ends_with(0).json(), first);
    }
}

#[test]
fn an_absolute_width_and_a_bound_are_answered_in_their_own_terms() {
    let answer = donelight("size precision --at 1.5 --within 0.15 --json").ends_with(0).json();
    assert_eq!(answer["n"], 212, "0.15 is 10 % of 1.5");
    assert!(answer["achieved"].as_f64().unwrap() <= 0.15);
    let answer = donelight("size precision --at 1.5 --within 10% --kind lower --json").ends_with(0).json();
    assert!(answer["high"].is_null() && answer["low"].as_f64().unwrap() >= 1.35);
}

#[test]
fn options_out_of_range_or_contradicting_each_other_are_wrong_use() {
    for line in [
        "size",
        "size precision --at 1.5",
        "size precision --at 1.5 --within 0%",
        "size precision --at 0 --within 10%",
        "size precision --at -1 --within 10%",
        "size precision --at 150% --within 10%",
        "size precision --at 1.5 --within 10% --confidence 95",
        "size precision --at 1.5 --within 10% --confidence 49%",
        "size precision --at 1.5 --within 10% --confidence 100%",
        "size precision --at 1.5 --within 10% --confidence 95.00001%",
        "size precision --at 1.5 --within 10% --index cpq",
        "size precision --at 1.5 --within 10% --kind both",
        "size power --claim 1.5 --against 1.5",
        "size power --claim 1.5 --against 1.3 --alpha 0%",
        "size power --claim 1.5 --against 1.3 --alpha 51%",
        "size power --claim 1.5 --against 1.3 --power 100%",
        "size power --claim 1.5 --against 1.3 --depth 3",
    ] {
        let answer = donelight(line).ends_with(2);
        assert!(answer.err.starts_with("error: ") || answer.err.contains("Usage:"), "{line}: {}", answer.err);
        assert!(answer.out.is_empty(), "{line}: {}", answer.out);
    }
}

#[test]
fn what_no_study_can_reach_is_refused_with_advice() {
    let answer = donelight("size precision --at 1.5 --within 0.01% --json").ends_with(1);
    let error = &answer.json()["error"];
    assert_eq!(error["kind"], "size-above-limit");
    assert!(error["message"].as_str().unwrap().contains("accept a wider precision"));
    assert!(answer.err.contains("more than one million pieces"));
    let answer = donelight("size precision --index cpm --at 1.5 --within 10% --method exact").ends_with(2);
    assert!(answer.err.contains("choose chi-square or boyles"), "{}", answer.err);
}

#[test]
fn a_size_in_subgroups_is_a_whole_number_of_them_and_names_its_sigma() {
    // ν = 4n/5 in Bissell's formula asks for n ≥ 259.06, by hand.
    let answer = donelight("size precision --index cpk --at 1.5 --within 10% --subgroups 5 --json").json();
    assert_eq!(
        (&answer["n"], &answer["nu"], &answer["subgroup_size"]),
        (&260.into(), &208.0.into(), &5.into())
    );
    assert_eq!(
        (&answer["index"], &answer["name"], &answer["sigma"]),
        (&"cpk".into(), &"Cpk".into(), &"pooled".into())
    );
    assert!(answer["achieved"].as_f64().unwrap() <= 0.1 && answer["achieved_before"].as_f64().unwrap() > 0.1);
    let overall = donelight("size precision --index cpk --at 1.5 --within 10% --json").json();
    assert_eq!(
        (&overall["name"], &overall["sigma"], &overall["nu"]),
        (&"Ppk".into(), &"overall".into(), &211.0.into())
    );
    assert!(overall["subgroup_size"].is_null());

    let words = donelight("size precision --at 1.5 --within 10% --subgroups 5").ends_with(0).out;
    assert!(words.starts_with("Measure 260 pieces: 52 subgroups of 5.\n"), "{words}");
    assert!(
        words.contains("With 255 pieces") && words.contains("pooled within subgroups of 5 with 208 degrees"),
        "{words}"
    );
    let ranges = donelight("size power --claim 1.5 --against 1.3 --subgroups 5 --sigma Ranges --json").json();
    let pooled = donelight("size power --claim 1.5 --against 1.3 --subgroups 5 --json").json();
    assert!(ranges["n"].as_u64() > pooled["n"].as_u64() && ranges["n"].as_u64().unwrap().is_multiple_of(5));
    let moving =
        donelight("size precision --index cp --at 1.5 --within 10% --sigma moving-ranges --json").json();
    assert_eq!(moving["n"], 318);
}

#[test]
fn a_sigma_and_subgroups_that_do_not_go_together_are_wrong_use() {
    for (options, help) in [
        ("--sigma pooled", "--subgroups 5"),
        ("--sigma overall --subgroups 5", "Leave out --subgroups"),
        ("--sigma moving-ranges --subgroups 5", "Leave out --subgroups"),
        ("--sigma within", "possible values"),
        ("--subgroups 1", "2 to 25"),
        ("--subgroups 26", "2 to 25"),
        ("--subgroups five", "2 to 25"),
    ] {
        let answer = donelight(&format!("size precision --at 1.5 --within 10% {options}")).ends_with(2);
        assert!(answer.err.contains(help), "{options}: {}", answer.err);
    }
    let total = donelight("size precision --at 1.5 --within 10% --sigma total --subgroups 5").ends_with(1);
    assert!(total.err.contains("size the study with sigma overall"), "{}", total.err);
}

#[test]
fn deciding_early_names_its_looks_and_saves_thirty_percent_of_297_on_average() {
    let answer = donelight("size power --claim 1.5 --against 1.3 --early --json").ends_with(0).json();
    assert_eq!(answer["fixed"], 332);
    assert_eq!(answer["looks"].as_array().unwrap().len(), 8);
    assert!(answer["true_alpha"].as_f64().unwrap() <= 0.05);
    assert!(answer["true_power"].as_f64().unwrap() >= 0.95);
    for place in answer["places"].as_array().unwrap() {
        for value in ["at_claim", "at_against"] {
            assert!(place[value]["expected"].as_f64().unwrap() <= 208.0, "{place}");
        }
    }
    let words =
        donelight("size power --index cpl --claim 1.5 --against 1.3 --early --looks 4").ends_with(0).out;
    for needle in ["kept if it is", "a fixed size with the same promises takes 297", "only one limit matters"]
    {
        assert!(words.contains(needle), "{needle} is not in {words}");
    }
    donelight("size power --claim 1.5 --against 1.3 --looks 4").ends_with(2);
    donelight("size power --index cpm --claim 1.5 --against 1.3 --early").ends_with(1);
    donelight("size power --claim 1.5 --against 1.5 --early").ends_with(2);
    donelight("size power --claim 1.5 --against 1.3 --early --subgroups 5").ends_with(2);
    donelight("size power --claim 3 --against 0.5 --early").ends_with(1);
}
