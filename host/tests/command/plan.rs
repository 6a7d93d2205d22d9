//! `donelight plan`: an example to start from, and every fault at once.

use std::fs;
use std::path::Path;

use crate::driver::run;

#[test]
fn a_new_plan_is_valid_and_is_not_written_over_a_file_that_is_there() {
    let folder = tempfile::tempdir().unwrap();
    let plan = folder.path().join("plan.toml");
    let answer = run(&["plan", "new", "plan.toml"], folder.path()).ends_with(0);
    assert!(answer.out.contains("donelight plan check plan.toml"), "{}", answer.out);
    let written = fs::read_to_string(&plan).unwrap();
    assert!(written.lines().filter(|line| line.starts_with('#')).count() >= 20, "the plan is commented");

    let check = run(&["plan", "check", "plan.toml"], folder.path()).ends_with(0);
    assert!(check.out.starts_with("plan.toml is a valid plan.\n"), "{}", check.out);
    for words in
        ["212, and never more than 240", "1.33: 218", "and never fewer than 194", "covers 94.7 % to 96.1 %"]
    {
        assert!(check.out.contains(words), "{words} is not in\n{}", check.out);
    }

    fs::write(&plan, "mine").unwrap();
    let again = run(&["plan", "new", "plan.toml"], folder.path()).ends_with(1);
    assert!(again.err.contains("exists already") && again.err.contains("--force"), "{}", again.err);
    assert_eq!(fs::read_to_string(&plan).unwrap(), "mine");
    run(&["plan", "new", "plan.toml", "--force"], folder.path()).ends_with(0);
    assert_eq!(fs::read_to_string(&plan).unwrap(), written);
}

#[test]
fn a_valid_plan_is_answered_in_json_with_what_it_takes() {
    let folder = tempfile::tempdir().unwrap();
    run(&["plan", "new", "plan.toml"], folder.path()).ends_with(0);
    let check = ["plan", "check", "plan.toml", "--studies", "100", "--json"];
    let json = run(&check, folder.path()).ends_with(0).json();
    assert_eq!(json["valid"], true);
    assert_eq!(json["planned"], 212);
    assert_eq!(json["resolution"], "0.001");
    assert_eq!(json["precision"]["relative"], 0.1);
    // 1 + z²/(2 r²) at 95 % and 10 % is 193.07; own computation.
    assert_eq!(json["floor"], 194);
}

#[test]
fn a_plan_that_contradicts_itself_is_told_all_its_faults_with_their_lines() {
    let folder = tempfile::tempdir().unwrap();
    let text = "\
name = \"Wick tubes\"
resolution = \"0.001\"
colour = \"red\"

[specification]
lower = \"12.05\"
upper = \"11.95\"

[capability]
index = \"cpk\"
confidence = \"9 5%\"

[stop]
planned = 300
precision = \"10%\"
limit = 240
";
    fs::write(folder.path().join("plan.toml"), text).unwrap();
    let answer = run(&["plan", "check", "plan.toml", "--json"], folder.path()).ends_with(1);
    for line in [
        "plan.toml is no valid plan: 4 faults",
        "line 3: colour: unknown key; known here: name,",
        "line 7: specification.upper: the lower limit is not below the upper one",
        "line 11: capability.confidence: not a number; write for example 95%",
        "line 14: stop.planned: more pieces are planned than the limit allows",
    ] {
        assert!(answer.err.contains(line), "{line} is not in\n{}", answer.err);
    }
    let error = &answer.json()["error"];
    assert_eq!(error["kind"], "plan-invalid");
    let lines: Vec<u64> =
        error["faults"].as_array().unwrap().iter().map(|fault| fault["line"].as_u64().unwrap()).collect();
    assert_eq!(lines, [3, 7, 11, 14]);
}

#[test]
fn a_plan_that_cannot_be_read_or_written_is_refused_with_advice() {
    let folder = tempfile::tempdir().unwrap();
    let answer = run(&["plan", "check", "none.toml", "--json"], folder.path()).ends_with(1);
    assert_eq!(answer.json()["error"]["kind"], "file-missing");
    assert!(
        answer.err.contains("cannot read none.toml") && answer.err.contains("plan new"),
        "{}",
        answer.err
    );
    run(&["plan", "check", "."], folder.path()).ends_with(1);
    fs::write(folder.path().join("binary.toml"), [0xff, 0xfe, 0x00, 0x80]).unwrap();
    let answer = run(&["plan", "check", "binary.toml"], folder.path()).ends_with(1);
    assert!(answer.err.contains("not text in UTF-8"), "{}", answer.err);
    let answer = run(&["plan", "new", "no/such/folder/plan.toml"], folder.path()).ends_with(1);
    assert!(answer.err.contains("Make the folder first"), "{}", answer.err);
    let answer = run(&["plan", "new", ".", "--force"], folder.path()).ends_with(1);
    assert!(answer.err.contains("cannot write ."), "{}", answer.err);
    assert!(Path::new(folder.path()).is_dir());
}

#[test]
fn a_valid_plan_is_simulated_with_the_seed_and_the_extent_that_are_asked_for() {
    let folder = tempfile::tempdir().unwrap();
    run(&["plan", "new", "plan.toml"], folder.path()).ends_with(0);
    let check = ["plan", "check", "plan.toml", "--studies", "300", "--seed", "5"];
    let simulation = |seed| {
        let arguments = [&check[..6], &[seed, "--json"]].concat();
        run(&arguments, folder.path()).ends_with(0).json()["simulation"].clone()
    };
    let simulated = simulation("5");
    assert_eq!((&simulated["seed"], &simulated["studies"]), (&5.into(), &300.into()));
    let cases = simulated["cases"].as_array().unwrap();
    let told: Vec<(f64, f64)> = cases
        .iter()
        .map(|case| (case["true_index"].as_f64().unwrap(), case["offset"].as_f64().unwrap()))
        .collect();
    assert_eq!(told, [(1.0, 0.0), (1.0, 1.0), (1.33, 0.0), (1.33, 1.0), (1.67, 0.0), (1.67, 1.0)]);
    for case in cases {
        let figure = |key: &str| case[key].as_f64().unwrap_or_else(|| panic!("{key} of {case}"));
        // Within five standard errors of the promise of 95 %.
        let (coverage, error) = (figure("coverage"), figure("coverage_se"));
        assert!((coverage - 0.95).abs() < 5.0 * error && error < 0.03, "{case}");
        assert!(figure("bias").abs() < 0.05, "{case}");
        let [median, p95, most] = ["n_median", "n_p95", "n_max"].map(figure);
        assert!(212.0 <= median && median <= p95 && p95 <= most && most <= 240.0, "{case}");
        assert!((0.0..=1.0).contains(&figure("spent")) && figure("n_mean") <= most, "{case}");
    }
    assert_eq!(simulation("5"), simulated);
    assert_ne!(simulation("6"), simulated);

    let words = run(&check, folder.path()).ends_with(0).out;
    assert!(words.contains("300 studies of each process") && words.contains("seed 5"), "{words}");
    assert!(words.contains("If Cpk is 1.33, expect 218 pieces; 222 are enough"), "{words}");
    for studies in ["0", "10000001", "many"] {
        run(&["plan", "check", "plan.toml", "--studies", studies], folder.path()).ends_with(2);
    }
}

#[test]
fn a_plan_whose_readings_no_gauge_can_count_is_checked_without_a_simulation() {
    let folder = tempfile::tempdir().unwrap();
    let text = "\
name = \"Wide\"
resolution = \"1\"

[specification]
lower = \"-999999999999\"
upper = \"999999999999\"

[capability]
index = \"cpk\"

[stop]
planned = 212
precision = \"10%\"
limit = 240
";
    fs::write(folder.path().join("plan.toml"), text).unwrap();
    let answer = run(&["plan", "check", "plan.toml"], folder.path()).ends_with(0);
    assert!(answer.out.contains("Not simulated: readings would go beyond 10^12 steps"), "{}", answer.out);
    let json = run(&["plan", "check", "plan.toml", "--json"], folder.path()).ends_with(0).json();
    assert!(json["simulation"]["refused"].as_str().unwrap().contains("10^12"), "{json}");
}

#[test]
fn a_new_plan_that_decides_early_is_valid_and_says_what_it_does() {
    let folder = tempfile::tempdir().unwrap();
    let new = ["plan", "new", "plan.toml", "--early", "--claim", "1.5", "--against", "1.3", "--looks", "3"];
    run(&new, folder.path()).ends_with(0);
    let check = run(&["plan", "check", "plan.toml"], folder.path()).ends_with(0);
    for words in ["Cpk is 1.5: rejected although true", "kept if it is", "Pieces on average", "not proven"] {
        assert!(check.out.contains(words), "{words} is not in\n{}", check.out);
    }
    let json = run(&["plan", "check", "plan.toml", "--json"], folder.path()).ends_with(0).json();
    assert_eq!(json["early"]["looks"].as_array().unwrap().len(), 3);
    assert_eq!(json["limit"], json["early"]["looks"][2]["n"]);
    // The simulation rounds to the gauge's steps and goes through the station's rule; the design knows of neither.
    let cases = json["simulation"]["cases"].as_array().unwrap();
    let places = json["early"]["places"].as_array().unwrap();
    for (case, (place, value)) in
        cases.iter().zip([(0, "at_claim"), (1, "at_claim"), (0, "at_against"), (1, "at_against")])
    {
        let (rejected, error) = (case["rejected"].as_f64().unwrap(), case["rejected_se"].as_f64().unwrap());
        let designed = places[place][value]["rejected"].as_f64().unwrap();
        assert!((rejected - designed).abs() < 5.0 * error, "{case} {designed}");
        assert!(case["coverage"].is_null(), "{case}");
    }
    run(&new[..6], folder.path()).ends_with(2);
    run(&["plan", "new", "other.toml", "--claim", "1.5"], folder.path()).ends_with(2);
    assert!(!folder.path().join("other.toml").exists());
}
