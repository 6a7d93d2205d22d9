use super::*;

/// The example with one line changed; `line` is that line's number.
fn changed(from: &str, to: &str) -> (usize, Result<Plan, Vec<Fault>>) {
    assert_eq!(EXAMPLE.matches(from).count(), 1, "{from}");
    let line = 1 + EXAMPLE[..EXAMPLE.find(from).unwrap()].matches('\n').count();
    (line, from_text(&EXAMPLE.replace(from, to)))
}

#[track_caller]
fn one_fault(from: &str, to: &str, key: &str, words: &str) {
    let (line, result) = changed(from, to);
    let faults = result.unwrap_err();
    assert_eq!(faults.len(), 1, "{faults:?}");
    assert_eq!((faults[0].line, faults[0].key.as_str()), (line, key), "{faults:?}");
    assert!(faults[0].message.contains(words), "{faults:?}");
}

#[test]
fn the_example_is_a_valid_plan_and_says_what_it_seems_to_say() {
    let plan = from_text(EXAMPLE).unwrap();
    assert_eq!(plan.name.as_str(), "Wick tubes, first lot");
    assert_eq!(plan.resolution.to_string(), "0.001");
    assert_eq!(plan.lower.unwrap().to_string(), "11.95");
    assert_eq!(plan.rule.planned.get(), 212);
    assert_eq!(plan.same_in_a_row, 12);
}

#[test]
fn numbers_are_read_as_they_are_written_with_or_without_quotes() {
    let (_, quoted) = changed("lower = \"11.950\"", "lower = \"11.949999999999\"");
    let (_, bare) = changed("lower = \"11.950\"", "lower = 11.949_999_999_999");
    assert_eq!(quoted.clone().unwrap().lower.unwrap().to_string(), "11.949999999999");
    assert_eq!(quoted, bare);
    let (_, whole) = changed("lower = \"11.950\"", "lower = -3");
    assert_eq!(whole.unwrap().lower.unwrap().to_string(), "-3");
    one_fault("lower = \"11.950\"", "lower = 1.195e1", "specification.lower", "no exponent");
    one_fault("lower = \"11.950\"", "lower = nan", "specification.lower", "no digits");
    one_fault("lower = \"11.950\"", "lower = 0xB", "specification.lower", "not a plain decimal number");
}

#[test]
fn each_fault_is_named_at_its_line() {
    one_fault("name = \"Wick tubes, first lot\"", "name = \"\"", "name", "no name");
    let long = format!("part = \"{}\"", "x".repeat(25));
    one_fault("part = \"wick tube WT-40\"", &long, "part", "too long");
    one_fault("unit = \"mm\"", "unit = \"m m\"", "unit", "plain word");
    one_fault("resolution = \"0.001\"", "resolution = 0", "resolution", "above zero");
    one_fault("resolution = \"0.001\"", "resolution = true", "resolution", "not a boolean");
    one_fault("resolution = \"0.001\"", "resolution = \"0.5\"", "resolution", "less than one step");
    one_fault("target = \"12.000\"", "target = \"13\"", "specification.target", "outside");
    one_fault("# method = \"bissell\"", "method = \"boyles\"", "capability.method", "does not suit");
    one_fault("# method = \"bissell\"", "method = \"balanced\"", "capability.method", "takes seconds");
    one_fault("# method = \"bissell\"", "method = \"guess\"", "capability.method", "unknown method");
    one_fault("index = \"cpk\"", "index = \"cpz\"", "capability.index", "unknown index");
    one_fault("confidence = \"95%\"", "confidence = 95", "capability.confidence", "not between");
    one_fault("kind = \"two-sided\"", "kind = \"both\"", "capability.kind", "unknown kind");
    one_fault("planned = 212", "planned = 1", "stop.planned", "at least two");
    one_fault("planned = 212", "planned = 300", "stop.planned", "raise the limit");
    one_fault("planned = 212", "planned = 2.5", "stop.planned", "whole number");
    one_fault("precision = \"10%\"", "precision = \"wide\"", "stop.precision", "not a precision");
    one_fault("precision = \"10%\"", "precision = \"0%\"", "stop.precision", "above zero");
    one_fault("baud = 9600", "baud = 200", "gauge.baud", "baud");
    one_fault("data_bits = 8", "data_bits = 9", "gauge.data_bits", "7 or 8");
    one_fault("parity = \"none\"", "parity = \"mark\"", "gauge.parity", "none, even or odd");
    one_fault("stop_bits = 1", "stop_bits = 3", "gauge.stop_bits", "1 or 2");
    one_fault("same_in_a_row = 12", "same_in_a_row = 2", "watch.same_in_a_row", "3 and more");
    one_fault("same_in_a_row = 12", "same_in_a_row = 256", "watch.same_in_a_row", "range");
}

#[test]
fn what_is_missing_or_unknown_is_named_with_what_would_be_right() {
    let (line, result) = changed("planned = 212", "planed = 212");
    let faults = result.unwrap_err();
    assert_eq!(faults.len(), 2, "{faults:?}");
    assert_eq!(faults[0].line, 1 + EXAMPLE[..EXAMPLE.find("[stop]").unwrap()].matches('\n').count());
    assert!(faults[0].message.contains("missing; write for example planned = 212"), "{faults:?}");
    assert_eq!(faults[1].line, line);
    assert!(faults[1].message.contains("did you mean planned?"), "{faults:?}");
    let faults = from_text("").unwrap_err();
    let keys: Vec<&str> = faults.iter().map(|fault| fault.key.as_str()).collect();
    assert_eq!(keys, ["capability", "name", "resolution", "specification", "stop"]);
    let faults = from_text(&EXAMPLE.replace("[gauge]", "[guage]")).unwrap_err();
    assert_eq!(faults.len(), 1, "{faults:?}");
    assert!(faults[0].message.contains("did you mean gauge?"), "{faults:?}");
    let faults = from_text(&EXAMPLE.replace("[stop]", "[other]")).unwrap_err();
    assert_eq!(faults.len(), 2, "{faults:?}");
    let faults = from_text("specification = 3").unwrap_err();
    assert!(
        faults.iter().any(|fault| fault.message.contains("write [specification] on a line")),
        "{faults:?}"
    );
}

#[test]
fn limits_in_the_wrong_order_are_named_at_the_upper_one() {
    let faults = from_text(&EXAMPLE.replace("upper = \"12.050\"", "upper = \"11.9\"")).unwrap_err();
    assert_eq!(faults[0].key, "specification.upper");
    assert!(faults[0].message.contains("not below"), "{faults:?}");
    assert_eq!(EXAMPLE.lines().nth(faults[0].line - 1), Some("upper = \"12.050\""));
}

#[test]
fn a_precision_out_of_reach_is_named_at_the_limit_that_would_have_to_rise() {
    let faults = from_text(&EXAMPLE.replace("\"10%\"", "\"1%\"")).unwrap_err();
    assert_eq!(faults.len(), 1, "{faults:?}");
    assert_eq!(faults[0].key, "stop.limit");
    assert_eq!(EXAMPLE.lines().nth(faults[0].line - 1), Some("limit = 240"));
}

#[test]
fn many_faults_are_named_at_once_and_in_the_order_of_their_lines() {
    let text = EXAMPLE
        .replace("unit = \"mm\"", "unit = \"3 mm\"")
        .replace("upper = \"12.050\"", "upper = \"11.0\"")
        .replace("kind = \"two-sided\"", "kind = \"upwards\"")
        .replace("planned = 212", "planned = 500")
        .replace("baud = 9600", "baud = 9")
        .replace("stop_bits = 1", "stop_bits = 1\ncolour = \"red\"");
    let faults = from_text(&text).unwrap_err();
    let lines: Vec<&str> = faults.iter().map(|fault| text.lines().nth(fault.line - 1).unwrap()).collect();
    assert_eq!(
        lines,
        [
            "unit = \"3 mm\"",
            "upper = \"11.0\"",
            "target = \"12.000\"",
            "kind = \"upwards\"",
            "planned = 500",
            "baud = 9",
            "colour = \"red\"",
        ]
    );
}

#[test]
fn what_follows_from_a_value_that_cannot_be_read_is_not_a_fault_of_its_own() {
    one_fault("lower = \"11.950\"", "lower = \"eleven\"", "specification.lower", "no digits");
    let text = EXAMPLE.replace("upper = \"12.050\"\n", "").replace("\"11.950\"", "\"eleven\"");
    assert_eq!(from_text(&text).unwrap_err().len(), 1);
    let text = EXAMPLE.replace("\"0.001\"", "\"fine\"");
    assert_eq!(from_text(&text).unwrap_err().len(), 1);
}

#[test]
fn text_that_is_no_toml_is_named_by_its_lines() {
    let text = EXAMPLE.replace("planned = 212", "planned 212").replace("baud = 9600", "baud = = 9600");
    let faults = from_text(&text).unwrap_err();
    let mut lines: Vec<&str> = faults.iter().map(|fault| text.lines().nth(fault.line - 1).unwrap()).collect();
    lines.dedup();
    assert_eq!(lines, ["planned 212", "baud = = 9600"]);
    let faults = from_text("name = \"a\"\nname = \"b\"\n").unwrap_err();
    assert_eq!(faults[0].line, 2, "{faults:?}");
    for rubbish in ["\u{0}", "[[[", "= = =", "a = '''", "\u{feff}", "x = 1979-13-45"] {
        assert!(from_text(rubbish).is_err());
    }
}

#[test]
fn keys_that_may_be_left_out_have_the_defaults_that_the_example_names() {
    let text = "name = \"a\"\nresolution = 0.01\n[specification]\nupper = 3\n[capability]\nindex = \"cpu\"\n\
                [stop]\nplanned = 212\nprecision = \"10%\"\nlimit = 240\n";
    let plan = from_text(text).unwrap();
    assert_eq!(plan.gauge, donelight_core::plan::LineSettings::default());
    assert_eq!(plan.confidence.millionths(), 950_000);
    assert_eq!(plan.kind.name(), "two-sided");
    assert_eq!(plan.same_in_a_row, 0);
    assert!(describe::summary(&plan).contains("at most 3"));
}

#[test]
fn sigma_within_subgroups_is_planned_by_its_word_and_their_size() {
    use donelight_core::sigma::{Sigma, SubgroupSize};
    let five = SubgroupSize::new(5).unwrap();
    let within = |word: &str, size: &str| {
        let text = EXAMPLE.replace("planned = 212", "planned = 260").replace("limit = 240", "limit = 320");
        from_text(&text.replace("sigma = \"overall\"\n", word).replace("# [subgroups]\n# size = 5", size))
    };
    let table = "[subgroups]\nsize = 5";
    assert_eq!(within("sigma = \"pooled\"\n", table).unwrap().sigma, Sigma::Pooled(five));
    assert_eq!(within("sigma = \"Ranges\"\n", table).unwrap().sigma, Sigma::Ranges(five));
    assert_eq!(within("", table).unwrap().sigma, Sigma::Pooled(five));
    assert_eq!(within("", "").unwrap().sigma, Sigma::Overall);
    assert_eq!(within("sigma = \"moving-ranges\"\n", "").unwrap().sigma, Sigma::MovingRanges);
    let plan = within("sigma = \"pooled\"\n", table).unwrap();
    assert!(describe::summary(&plan).contains("pooled within subgroups of 5"));
    assert_eq!(describe::json(&plan)["name"], "Cpk");

    let one = |word: &str, size: &str, key: &str, words: &str| {
        let faults = within(word, size).unwrap_err();
        assert_eq!(faults.len(), 1, "{faults:?}");
        assert_eq!(faults[0].key, key, "{faults:?}");
        assert!(faults[0].message.contains(words), "{faults:?}");
    };
    one("sigma = \"pooled\"\n", "", "capability.sigma", "[subgroups]: size = 5");
    one("sigma = \"within\"\n", table, "capability.sigma", "unknown sigma");
    one("sigma = \"overall\"\n", table, "subgroups.size", "leave their size out");
    one("sigma = \"total\"\n", table, "capability.sigma", "does not stop by total sigma");
    one("sigma = \"pooled\"\n", "[subgroups]\nsize = 26", "subgroups.size", "2 to 25");
    one("sigma = \"pooled\"\n", "[subgroups]\n", "subgroups.size", "missing");
    one("sigma = \"pooled\"\n", "[subgroups]\nsize = 8", "stop.planned", "multiple");
    one("sigma = \"pooled\"\n", "[subgroups]\nsize = 13", "stop.limit", "multiple");
    one("sigma = \"moving-ranges\"\n", "[subgroups]\nsize = 5", "subgroups.size", "leave their size out");
    one("sigma = \"ranges\"\n", "[subgroups]\nsize = 5\nshape = 3", "subgroups.shape", "unknown key");
}

/// The example with a claim in place of its precision; few looks, so that the test is quick.
fn early_text() -> String {
    let (before, rest) = EXAMPLE.split_once("[stop]\n").unwrap();
    let after = &rest[rest.find("[gauge]").unwrap()..];
    format!("{before}[stop.early]\nclaim = 1.5\nagainst = 1.3\nlooks = [150, 290, 430]\n{after}")
}

#[track_caller]
fn early_fault(from: &str, to: &str, key: &str, words: &str) {
    let text = early_text();
    assert_eq!(text.matches(from).count(), 1, "{from}");
    let faults = from_text(&text.replace(from, to)).unwrap_err();
    assert_eq!(faults.len(), 1, "{faults:?}");
    assert_eq!(faults[0].key, key, "{faults:?}");
    assert!(faults[0].message.contains(words), "{faults:?}");
}

#[test]
fn a_claim_is_decided_early_at_the_looks_that_the_file_names() {
    let text = early_text();
    let plan = from_text(&text).unwrap();
    let early = plan.rule.early().unwrap();
    assert_eq!(early.looks.iter().map(|look| look.n.get()).collect::<Vec<_>>(), [150, 290, 430]);
    assert_eq!((plan.rule.planned.get(), plan.rule.limit.get()), (150, 430));
    assert_eq!((early.alpha.0, early.power.millionths()), (50_000, 950_000));
    let words = describe::summary(&plan);
    for needle in
        ["Cpk is 1.5: rejected although true", "after 150, 290, 430 pieces", "kept if it is", "not proven"]
    {
        assert!(words.contains(needle), "{needle} is not in {words}");
    }
    assert!(!words.contains("not the ones that this command computes"), "{words}");
    let json = describe::json(&plan);
    assert_eq!(json["early"]["looks"][2]["keep"], json["early"]["looks"][2]["reject"]);
    assert!(json["early"]["true_alpha"].as_f64().unwrap() <= 0.05);
    // The same file, the same boundaries.
    assert_eq!(from_text(&text).unwrap(), plan);
}

#[test]
fn what_is_wrong_with_a_claim_or_its_looks_is_named() {
    early_fault("claim = 1.5", "claim = 1.3", "stop.early.claim", "set them apart");
    early_fault("claim = 1.5", "claim = \"95%\"", "stop.early.claim", "no percent sign");
    early_fault("claim = 1.5\n", "", "stop.early.claim", "missing; write for example claim = 1.5");
    early_fault("claim = 1.5", "claim = 1.5\nalpha = \"60%\"", "stop.early.alpha", "up to 50%");
    early_fault("claim = 1.5", "claim = 1.5\nspending = \"evenly\"", "stop.early.spending", "pocock");
    early_fault("claim = 1.5", "claim = 1.5\ncolour = 3", "stop.early.colour", "unknown key");
    early_fault("looks = [150, 290, 430]\n", "", "stop.early.looks", "size power --early");
    early_fault("[150, 290, 430]", "150", "stop.early.looks", "a list belongs here");
    early_fault("[150, 290, 430]", "[150, \"x\"]", "stop.early.looks", "whole number");
    early_fault("[150, 290, 430]", "[150, -3]", "stop.early.looks", "whole number");
    early_fault("[150, 290, 430]", "[150, 140]", "stop.early.looks", "ascend");
    early_fault("[150, 290, 430]", "[100, 200, 300]", "stop.early.looks", "put the last look later");
    let faults = from_text(&early_text().replace("index = \"cpk\"", "index = \"cpm\"")).unwrap_err();
    assert!(faults.iter().any(|fault| fault.message.contains("cannot be decided early")), "{faults:?}");
    early_fault("[stop.early]", "[stop]\nrule = \"precision\"\n[stop.early]", "stop.rule", "write early");
    early_fault("[stop.early]", "[stop]\nplanned = 212\n[stop.early]", "stop.planned", "unknown key");
    let faults = from_text(&EXAMPLE.replace("planned = 212", "planned = 212\nrule = \"early\"")).unwrap_err();
    assert!(faults.len() == 1 && faults[0].message.contains("[stop.early] is missing"), "{faults:?}");
}

/// The reason names the share of studies that would pass a process exactly at the requirement; the reference simulation
/// has them.
#[test]
fn to_measure_until_the_lower_limit_passes_is_refused_with_the_reason() {
    for asking in [
        "rule = \"until-lower-limit-passes\"",
        "rule = \"stop when capable\"",
        "rule = \"lower limit\"",
        "until = \"lower >= 1.33\"",
        "require = 1.33",
        "required = true",
        "lower_limit = 1.33",
    ] {
        let text = EXAMPLE.replace("planned = 212", &format!("planned = 212\n{asking}"));
        let faults = from_text(&text).unwrap_err();
        let told: Vec<_> = faults.iter().filter(|fault| fault.message.contains("is no test")).collect();
        assert_eq!(told.len(), 1, "{asking}: {faults:?}");
        assert!(told[0].message.contains("22 % to 39 %"), "{faults:?}");
        let (key, _) = asking.split_once(' ').unwrap();
        assert_eq!(told[0].key, format!("stop.{key}"));
    }
    let faults = from_text(&EXAMPLE.replace("planned = 212", "planned = 212\nrule = \"hurry\"")).unwrap_err();
    assert!(faults[0].message.contains("write precision or early"), "{faults:?}");
    assert!(from_text(&EXAMPLE.replace("planned = 212", "planned = 212\nrule = \"precision\"")).is_ok());
}

#[test]
fn the_written_example_of_an_early_decision_is_the_plan_that_it_was_written_for() {
    let plan = from_text(&early_text()).unwrap();
    let early_decision = plan.rule.early().unwrap();
    let written = early::example(early_decision);
    assert_eq!(from_text(&written).unwrap().rule, plan.rule, "{written}");
}
