//! `donelight assess`, on published data and on all that may be wrong with a file.

use std::fs;
use std::path::{Path, PathBuf};

use serde_json::Value;

use crate::driver::{Said, donelight, run};

/// NIST's univariate sets with their certified values, in the file's own comments.
fn nist(name: &str) -> PathBuf {
    reference(&format!("nist_{name}.csv"))
}

fn reference(name: &str) -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("../tests/reference").join(name)
}

fn certified(text: &str, name: &str) -> f64 {
    let start = format!("# certified {name}=");
    let line =
        text.lines().find(|line| line.starts_with(&start)).expect("the file names its certified values");
    line[start.len()..].split(' ').next().unwrap().parse().unwrap()
}

fn assess(file: &Path, options: &str) -> Said {
    let file = file.to_str().unwrap();
    let arguments: Vec<&str> = ["assess", file].into_iter().chain(options.split_whitespace()).collect();
    run(&arguments, Path::new("."))
}

fn number(json: &Value, name: &str) -> f64 {
    json[name].as_f64().unwrap_or_else(|| panic!("{name} is no number in {json}"))
}

#[test]
fn mean_and_standard_deviation_agree_with_the_values_that_nist_certifies() {
    // NIST Statistical Reference Datasets, univariate summary statistics. Certified to 15 digits.
    for (name, resolution) in [
        ("lew", "1"),
        ("lottery", "1"),
        ("mavro", "0.00001"),
        ("michelso", "0.01"),
        ("numacc1", "1"),
        ("numacc2", "0.1"),
        ("numacc3", "0.1"),
        ("numacc4", "0.1"),
    ] {
        let file = nist(name);
        let text = fs::read_to_string(&file).unwrap();
        let answer = assess(&file, &format!("--lsl -1000 --usl 20000000 --resolution {resolution} --json"));
        let json = answer.ends_with(0).json();
        assert_eq!(number(&json, "n"), certified(&text, "n"), "{name}");
        for key in ["mean", "sd"] {
            let (ours, theirs) = (number(&json, key), certified(&text, key));
            assert!((ours - theirs).abs() <= 2e-15 * theirs.abs(), "{name} {key}: {ours} against {theirs}");
        }
    }
}

#[test]
fn the_indices_of_the_handbook_come_out() {
    // NIST/SEMATECH e-Handbook of Statistical Methods, 6.1.6: LSL 8, USL 20, mean 16, s 2 give Cp 1.0, Cpu 0.6667,
    // Cpl 1.3333 and Cpk 0.6667.
    for (index, value) in [("cp", 1.0), ("cpu", 0.6667), ("cpl", 1.3333), ("cpk", 0.6667)] {
        let json =
            donelight(&format!("assess --summary n=50,mean=16,sd=2 --lsl 8 --usl 20 --index {index} --json"))
                .ends_with(0)
                .json();
        assert!((number(&json, "estimate") - value).abs() < 5e-5, "{index} {json}");
        assert_eq!(json["index"], index);
        assert_eq!(json["nu"], 49.0);
    }
}

#[test]
fn bissells_interval_has_all_its_digits_and_its_real_coverage() {
    // Ĉ ∓ z √(1/(9n) + Ĉ²/(2(n − 1))) with z = 1.959963984540054 (Bissell 1990), worked out here again.
    let line =
        "assess --summary n=212,mean=12.0069,sd=0.0097 --lsl 11.95 --usl 12.05 --method bissell --json";
    let json = donelight(line).ends_with(0).json();
    let estimate = (12.05 - 12.0069) / (3.0 * 0.0097);
    let half = 1.959_963_984_540_054 * f64::sqrt(1.0 / (9.0 * 212.0) + estimate * estimate / (2.0 * 211.0));
    let close = |a: f64, b: f64| (a - b).abs() < 1e-12;
    assert!(close(number(&json, "estimate"), estimate) && close(number(&json, "low"), estimate - half));
    assert!(close(number(&json, "high"), estimate + half));
    let text = json["low"].to_string();
    assert!(text.len() >= 16, "full double precision: {text}");
    let (from, to) = (number(&json["coverage"], "from"), number(&json["coverage"], "to"));
    assert!((0.948..0.95).contains(&from) && (0.95..0.96).contains(&to), "{}", json["coverage"]);
}

#[test]
fn readings_and_their_own_summary_give_the_same_answer() {
    let file = nist("michelso");
    let whole = assess(&file, "--lsl 299.5 --usl 300.2 --resolution 0.01 --json").ends_with(0).json();
    let summary = format!("n={},mean={},sd={}", whole["n"], whole["mean"], whole["sd"]);
    let again =
        run(&["assess", "--summary", &summary, "--lsl", "299.5", "--usl", "300.2", "--json"], Path::new("."))
            .ends_with(0)
            .json();
    for key in ["estimate", "low", "high"] {
        let (a, b) = (number(&whole, key), number(&again, key));
        assert!((a - b).abs() < 1e-11 * a.abs(), "{key}: {a} against {b}");
    }
}

#[test]
fn a_bound_has_one_limit_and_each_index_its_method() {
    let summary = "assess --summary n=100,mean=12,sd=0.01 --lsl 11.95 --usl 12.05 --target 12 --json";
    let lower = donelight(&format!("{summary} --kind lower")).ends_with(0).json();
    assert!(lower["high"].is_null() && lower["low"].is_f64());
    let upper = donelight(&format!("{summary} --kind upper")).ends_with(0).json();
    assert!(upper["low"].is_null() && upper["high"].is_f64());
    let cpm = donelight(&format!("{summary} --index cpm")).ends_with(0).json();
    assert_eq!(cpm["method"], "chi-square");
    let (low, estimate, high) = (number(&cpm, "low"), number(&cpm, "estimate"), number(&cpm, "high"));
    assert!(low < estimate && estimate < high && estimate > 1.6);
    assert_eq!((&lower["method"], &upper["method"]), (&"noncentral-t".into(), &"exact".into()));
    assert!((number(&lower["coverage"], "from") - 0.95).abs() < 1e-9, "{lower}");
    assert_eq!(donelight(&format!("{summary} --index cpu")).json()["method"], "noncentral-t");
    assert_eq!(donelight(summary).json()["method"], "balanced");
    for (options, words) in [
        ("--method boyles", "does not suit Cpk; choose balanced, exact, noncentral-t or bissell"),
        ("--index cp --method exact", "choose chi-square or bissell"),
        ("--method balanced --kind lower", "two-sided intervals only"),
    ] {
        let refused = donelight(&format!("{summary} {options}")).ends_with(2);
        assert!(refused.err.contains(words), "{options}: {}", refused.err);
    }
    donelight(&format!("{summary} --method guess")).ends_with(2);
}

/// Rows of the reference tables (`intervals.csv`; mpmath and scipy): n = 30, estimate 1.33, 95 %.
#[test]
fn the_intervals_of_the_reference_tables_come_out_of_the_command() {
    let mut compared = 0;
    let table = fs::read_to_string(reference("intervals.csv")).unwrap();
    for row in table.lines().map(|line| line.split(',').collect::<Vec<_>>()) {
        let [index, method, _, "30", "1.33", "0.95", delta, kind, low, high] = row[..] else { continue };
        let (index, method) = match (index, method) {
            ("Cp", "chi2") => ("cp", "chi-square"),
            ("Cpk", "exact_conservative") => ("cpk", "exact"),
            (_, "nct") => ("cpu", "noncentral-t"),
            ("Cpm", "boyles_patnaik") if delta == "0.0" => ("cpm", "boyles"),
            _ => continue,
        };
        // Limits at ±3.99 and a sigma of 1 give 1.33, but for Cpm, which divides by n.
        let sd = if index == "cpm" { (30.0 / 29.0_f64).sqrt() } else { 1.0 };
        let line = format!(
            "assess --summary n=30,mean=0,sd={sd} --lsl -3.99 --usl 3.99 --target 0 --index {index} --method {method} \
             --kind {kind} --json"
        );
        let json = donelight(&line).ends_with(0).json();
        for (key, exact) in [("low", low), ("high", high)] {
            match exact.parse::<f64>() {
                Ok(exact) => assert!((number(&json, key) / exact - 1.0).abs() < 1e-11, "{line} {key} {json}"),
                Err(_) => assert!(json[key].is_null()),
            }
        }
        compared += 1;
    }
    assert_eq!(compared, 12);
}

#[test]
fn one_limit_is_enough_where_the_index_allows_it() {
    let summary = "assess --summary n=100,mean=12,sd=0.01 --usl 12.05 --json";
    for index in ["cpk", "cpu"] {
        let json = donelight(&format!("{summary} --index {index}")).ends_with(0).json();
        assert!((number(&json, "estimate") - 5.0 / 3.0).abs() < 1e-9, "{json}");
    }
    for (index, words) in
        [("cp", "needs a lower limit"), ("cpl", "needs a lower limit"), ("cpm", "lower limit")]
    {
        let answer = donelight(&format!("{summary} --index {index}")).ends_with(2);
        assert!(answer.err.contains(words), "{index}: {}", answer.err);
    }
}

#[test]
fn a_required_index_is_shown_or_not_and_the_exit_code_tells() {
    let summary = "assess --summary n=212,mean=12,sd=0.01 --lsl 11.95 --usl 12.05";
    let shown = donelight(&format!("{summary} --require 1.33")).ends_with(0);
    assert!(shown.out.starts_with("Cpk is shown to be at least 1.33"), "{}", shown.out);
    let not = donelight(&format!("{summary} --require 1.67")).ends_with(1);
    assert!(not.out.starts_with("Cpk is not shown to be at least 1.67"), "{}", not.out);
    assert!(not.err.is_empty(), "an answer is no error: {}", not.err);
    for said in [&shown, &not] {
        assert!(said.out.contains("does not replace the standards in force"), "{}", said.out);
    }
    let json = donelight(&format!("{summary} --require 1.67 --json")).ends_with(1).json();
    assert_eq!(json["shown"], false);
    assert_eq!(json["required"], 1.67);
    donelight(&format!("{summary} --require 1.33 --kind upper")).ends_with(2);
}

#[test]
fn a_bad_row_is_named_and_nothing_is_computed_from_the_rest() {
    let folder = tempfile::tempdir().unwrap();
    fs::write(folder.path().join("a.csv"), "# lot 7\ny\n12.001\n12.0005\n11.99x\n\n12.002\n12.003 cm\n")
        .unwrap();
    let line =
        ["assess", "a.csv", "--lsl", "11", "--usl", "13", "--resolution", "0.001", "--unit", "mm", "--json"];
    let answer = run(&line, folder.path()).ends_with(1);
    for words in [
        "3 rows are no readings; nothing was computed",
        "line 4: \"12.0005\": more digits than the plan's resolution",
        "line 5: \"11.99x\": another unit than the plan's",
        "line 8: \"12.003 cm\": another unit than the plan's",
    ] {
        assert!(answer.err.contains(words), "{words} is not in\n{}", answer.err);
    }
    let json = answer.json();
    assert!(json.get("n").is_none());
    assert_eq!(json["error"]["kind"], "bad-rows");
    assert_eq!(json["error"]["bad_rows"][0]["line"], 4);
    assert_eq!(json["error"]["bad_row_count"], 3);
}

#[test]
fn what_makes_no_sense_is_wrong_use_and_what_the_world_lacks_is_refused() {
    let folder = tempfile::tempdir().unwrap();
    fs::write(folder.path().join("same.csv"), "1.0\n1.0\n1.0\n").unwrap();
    fs::write(folder.path().join("one.csv"), "1.0\n").unwrap();
    fs::write(folder.path().join("empty.csv"), "").unwrap();
    fs::write(folder.path().join("two.csv"), "a,b\n1,2\n2,3\n").unwrap();
    fs::write(folder.path().join("sheet.xls"), [0xd0, 0xcf, 0x11, 0xe0, 0, 0]).unwrap();
    for (line, code, words) in [
        ("assess", 2, "required arguments"),
        ("assess a.csv --lsl 1", 2, "--resolution"),
        ("assess a.csv --resolution 0.1", 2, "--lsl"),
        ("assess a.csv --lsl 1 --usl 1 --resolution 0.1", 2, "not below"),
        ("assess a.csv --lsl 2 --usl 1 --resolution 0.1", 2, "swap or correct"),
        ("assess a.csv --lsl 1 --usl 2 --target 3 --resolution 0.1", 2, "outside the limits"),
        ("assess a.csv --lsl one --resolution 0.1", 2, "no digits"),
        ("assess a.csv --lsl 1 --resolution 0", 2, "above zero"),
        ("assess a.csv --lsl 1 --resolution 0.1 --summary n=3,mean=1,sd=1", 2, "cannot be used with"),
        ("assess --summary n=3,mean=1 --lsl 1", 2, "n, mean and sd are all needed"),
        ("assess --summary n=3,mean=1,sd=nan --lsl 1", 2, "not a number"),
        ("assess --summary n=3,n=3,mean=1,sd=1 --lsl 1", 2, "given twice"),
        ("assess --summary n=-3,mean=1,sd=1 --lsl 1", 2, "whole number"),
        ("assess --summary n=1,mean=1,sd=1 --lsl 1", 1, "fewer than two"),
        ("assess --summary n=3,mean=1,sd=0 --lsl 1", 1, "alike"),
        ("assess --summary n=3,mean=1,sd=-1 --lsl 1", 1, "below zero"),
        ("assess none.csv --lsl 1 --resolution 0.1", 1, "cannot read none.csv"),
        ("assess . --lsl 1 --resolution 0.1", 1, "cannot read ."),
        ("assess empty.csv --lsl 1 --resolution 0.1", 1, "no rows"),
        ("assess one.csv --lsl 1 --resolution 0.1", 1, "fewer than two"),
        ("assess same.csv --lsl 1 --resolution 0.1", 1, "alike"),
        ("assess sheet.xls --lsl 1 --resolution 0.1", 1, "Save it as CSV"),
        ("assess two.csv --lsl 1 --resolution 0.1", 1, "--column 2"),
        ("assess two.csv --lsl 1 --resolution 0.1 --column c", 1, "no column \"c\""),
        ("assess two.csv --lsl 1 --resolution 0.1 --column b --report two.csv", 2, "is named twice"),
        ("assess two.csv --lsl 1 --resolution 0.1 --column b --report no/x.html", 1, "Make the folder first"),
    ] {
        let said = run(&line.split(' ').collect::<Vec<_>>(), folder.path());
        assert_eq!(said.code, code, "{line}: {said:?}");
        assert!(said.err.contains(words), "{line}: {words} is not in\n{}", said.err);
        assert!(said.out.is_empty(), "{line}: {}", said.out);
    }
    assert_eq!(fs::read_to_string(folder.path().join("two.csv")).unwrap(), "a,b\n1,2\n2,3\n");
}

#[test]
fn the_page_is_written_with_what_was_assessed() {
    let folder = tempfile::tempdir().unwrap();
    let csv = folder.path().join("tubes.csv");
    fs::write(&csv, "piece;diameter\n1;12,001\n2;11,998\n3;12,004\n4;12,000\n").unwrap();
    let line = "assess tubes.csv --column diameter --lsl 11.95 --usl 12.05 --resolution 0.001 --unit mm --report a.html";
    let arguments: Vec<&str> = line.split(' ').chain(["--title", "Lot <b>&\"7\""]).collect();
    let answer = run(&arguments, folder.path()).ends_with(0);
    assert!(answer.out.ends_with("The page is in a.html\n"), "{}", answer.out);
    let page = fs::read_to_string(folder.path().join("a.html")).unwrap();
    assert!(page.starts_with("<!DOCTYPE html>") && page.ends_with("</html>"));
    assert!(page.contains("<h1>Lot &lt;b&gt;&amp;&quot;7&quot;</h1>") && !page.contains("<b>"));
    assert!(page.contains("diameter in mm") && page.contains("USL 12.050"));
    // The file's fingerprint, as `sha256sum` gives it.
    let fingerprint = donelight::readings::fingerprint(&fs::read(&csv).unwrap());
    assert!(page.contains(&fingerprint));
    assert_eq!(fs::read_dir(folder.path()).unwrap().count(), 2, "nothing else is left behind");
}

#[cfg(target_os = "linux")]
#[test]
fn a_full_disk_is_told_and_nothing_is_said_to_be_written() {
    let line = "assess --summary n=100,mean=12,sd=0.01 --lsl 11.95 --report /dev/full --json";
    let answer = donelight(line).ends_with(1);
    assert_eq!(answer.json()["error"]["kind"], "file-unwritable");
    assert!(
        answer.err.contains("cannot write /dev/full") && answer.err.contains("Make room"),
        "{}",
        answer.err
    );
}

#[test]
fn the_words_of_an_assessment_are_these() {
    let answer =
        donelight("assess --summary n=212,mean=12,sd=0.01 --lsl 11.95 --usl 12.05 --unit mm --require 1.33");
    assert_eq!(
        answer.ends_with(0).out,
        "Cpk is shown to be at least 1.33: Cpk is estimated at 1.667; its lower 95 % bound is 1.527.\n\
         \n\
         \x20 n     212\n\
         \x20 mean  12 mm\n\
         \x20 sd    0.01 mm  (n \u{2212} 1)\n\
         \x20 Cpk   1.6667  1.527\n\
         \x20 Cp    1.6667  1.532\n\
         \x20 Cpl   1.6667  1.527\n\
         \x20 Cpu   1.6667  1.527\n\
         \n\
         The interval of Cpk is by the noncentral t: it covers with the confidence or more wherever the mean lies. If the \
         true Cpk is the estimate, an interval from so many pieces covers it in 95.0 % to 97.1 % of studies, depending on \
         where the mean lies.\n\
         \n\
         A summary does not tell whether the process was stable and the readings near to normal.\n\
         \n\
         This verdict does not replace the standards in force, the customer's rules or the judgement of a qualified \
         person. It does not say that a part or a machine is safe.\n"
    );
}

/// NIST StRD, analysis of variance, SiRstv (a public copy): five instruments, five resistivities each.
const SIRSTV: &str = "instrument,resistivity\n1,196.3052\n1,196.1240\n1,196.1890\n1,196.2569\n1,196.3403\n2,196.3042\n\
    2,196.3825\n2,196.1669\n2,196.3257\n2,196.0422\n3,196.1303\n3,196.2005\n3,196.2889\n3,196.0343\n3,196.1811\n\
    4,196.2795\n4,196.1748\n4,196.1494\n4,196.1485\n4,195.9885\n5,196.2119\n5,196.1051\n5,196.1850\n5,196.0052\n5,196.2090\n";

#[test]
fn sigma_within_subgroups_agrees_with_the_mean_squares_that_nist_certifies() {
    let folder = tempfile::tempdir().unwrap();
    let file = folder.path().join("sirstv.csv");
    fs::write(&file, SIRSTV).unwrap();
    let options = "--lsl 195.5 --usl 197 --resolution 0.0001 --json";
    let by_column = assess(&file, &format!("{options} --subgroup-column instrument")).ends_with(0).json();
    // Certified: mean squares of 1.27865654E-02 between (4) and 1.08318280E-02 within (20 degrees of freedom); from memory.
    let (between, within) = (1.278_656_54e-2_f64, 1.083_182_80e-2_f64);
    let near = |json: &Value, name: &str, value: f64| {
        assert!((number(json, name) / value - 1.0).abs() < 1e-13, "{name}: {} against {value}", json[name]);
    };
    near(&by_column, "sigma_estimate", within.sqrt());
    assert_eq!((number(&by_column, "nu"), number(&by_column, "n")), (20.0, 25.0));
    assert_eq!((&by_column["sigma"], &by_column["name"]), (&"pooled".into(), &"Cpk".into()));
    let by_size = assess(&file, &format!("{options} --column 2 --subgroups 5")).ends_with(0).json();
    assert_eq!(by_size["estimate"], by_column["estimate"]);

    let total = assess(&file, &format!("{options} --subgroup-column 1 --sigma total")).ends_with(0).json();
    let variance = between / 5.0 + within * 0.8;
    near(&total, "sigma_estimate", variance.sqrt());
    let [p, q] = [between / 5.0, within * 0.8].map(|part| part / variance);
    near(&total, "nu", 1.0 / (p * p / 4.0 + q * q / 20.0));
    assert_eq!(total["name"], "Ppk");

    let overall = assess(&file, &format!("{options} --column 2")).ends_with(0).json();
    assert_eq!(
        (&overall["sigma"], &overall["name"], &overall["index"]),
        (&"overall".into(), &"Ppk".into(), &"cpk".into())
    );
    assert_eq!(overall["sigma_estimate"], overall["sd"]);
    for json in [&by_column, &total] {
        assert_eq!(
            json["sd"], overall["sd"],
            "the standard deviation of all readings is that of all readings"
        );
    }
}

#[test]
fn the_words_and_the_page_name_the_sigma_and_what_it_leaves_out() {
    let folder = tempfile::tempdir().unwrap();
    let (file, page) = (folder.path().join("sirstv.csv"), folder.path().join("sirstv.html"));
    fs::write(&file, SIRSTV).unwrap();
    let options = format!("--usl 197 --resolution 0.0001 --column 2 --report {}", page.display());
    let within = assess(&file, &format!("{options} --subgroups 5 --sigma ranges")).ends_with(0);
    assert!(
        within.out.contains("by the mean range of subgroups of 5; 18.35 degrees of freedom"),
        "{}",
        within.out
    );
    assert!(
        within.out.contains("left out of Cpk. The standard deviation of all readings is"),
        "{}",
        within.out
    );
    let html = fs::read_to_string(&page).unwrap();
    assert!(html.contains("Cpk (sigma by the mean range of subgroups of 5)"));
    assert!(html.contains("effective ones (Patnaik 1950)"));
    assess(&file, &options).ends_with(0);
    let html = fs::read_to_string(&page).unwrap();
    assert!(html.contains("Cpk (overall sigma; the trade also calls it Ppk)"));
    let total = assess(&file, &format!("{options} --subgroups 5 --sigma total")).ends_with(0);
    assert!(total.out.contains("; the trade also calls Cpk with it Ppk)"), "{}", total.out);
    assert!(fs::read_to_string(&page).unwrap().contains("(Satterthwaite 1946)"));
}

#[test]
fn a_summary_may_give_sigma_within_subgroups() {
    let line = "assess --summary n=260,mean=12,sd=0.01 --lsl 11.95 --usl 12.05";
    let json = donelight(&format!("{line} --subgroups 5 --method bissell --json")).ends_with(0).json();
    assert_eq!((number(&json, "nu"), number(&json, "sigma_estimate")), (208.0, 0.01));
    assert!(json["sd"].is_null(), "it is not the standard deviation of all readings");
    // Bissell's formula by hand: 5/3 ∓ 1.95996 √(1/(9·260) + (5/3)²/(2·208)).
    let reach = 1.959_963_984_540_054 * (1.0 / 2340.0 + 25.0 / 9.0 / 416.0_f64).sqrt();
    assert!((number(&json, "low") - (5.0 / 3.0 - reach)).abs() < 1e-12, "{json}");
    let refused = donelight(&format!("{line} --subgroups 5 --sigma total")).ends_with(2);
    assert!(refused.err.contains("Give the readings in a file"), "{}", refused.err);
    let cpm = donelight(&format!("{line} --target 12 --subgroups 5 --index cpm")).ends_with(2);
    assert!(cpm.err.contains("overall sigma only"), "{}", cpm.err);
}

#[test]
fn subgroups_that_cannot_be_taken_from_a_file_are_told_with_the_line() {
    let folder = tempfile::tempdir().unwrap();
    let file = folder.path().join("uneven.csv");
    fs::write(&file, SIRSTV.replace("1,196.1240\n", "")).unwrap();
    let answer =
        assess(&file, "--usl 197 --resolution 0.0001 --subgroup-column instrument --json").ends_with(1);
    assert_eq!(answer.json()["error"]["kind"], "bad-subgroups");
    assert!(answer.err.contains("line 6: subgroup \"2\" has 5 readings, the first one 4"), "{}", answer.err);
    let few = assess(&file, "--usl 197 --resolution 0.0001 --column 2 --subgroups 25").ends_with(1);
    assert!(few.err.contains("too few whole subgroups"), "{}", few.err);
    let both = assess(&file, "--usl 197 --resolution 0.0001 --subgroup-column 1 --subgroups 5").ends_with(2);
    assert!(both.err.contains("cannot be used with"), "{}", both.err);
}
