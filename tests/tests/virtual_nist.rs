//! The main job through `donelight virtual`, a pseudo-terminal and the real command, on NIST's univariate data sets.
//!
//! Source: NIST Statistical Reference Datasets, <https://www.itl.nist.gov/div898/strd/univ/homepage.html>.
#![cfg(unix)]

use std::fs;
use std::path::Path;

use donelight_tests::command::donelight;
use donelight_tests::nist::Set;
use donelight_tests::study::Study;
use donelight_tests::virtual_bench::VirtualBench;
use serde_json::Value;

/// Loads the study's plan and waits for the done lamp; gives the readings until then, as the station told them.
fn measure(bench: &mut VirtualBench, study: &Study, folder: &Path) -> Vec<f64> {
    let plan = folder.join("plan.toml");
    fs::write(&plan, study.toml()).unwrap();
    let plan = plan.to_str().unwrap();
    let _ = donelight(["station", "load", plan, "--port", bench.port(), "--json"]).ends_with(0);
    let events = bench.events_until_done();
    let readings: Vec<&Value> = events.iter().filter(|event| event["event"] == "reading").collect();
    assert_eq!(events.last().unwrap()["n"], readings.len());
    assert!(readings.iter().all(|reading| reading["surplus"] == false));
    readings.iter().map(|reading| reading["reading"].as_str().unwrap().parse().unwrap()).collect()
}

/// Pulls, and compares the study in the ledger with the station's own figures, bit for bit. Gives the figures.
fn pull_and_compare(bench: &VirtualBench, ledger: &Path) -> Value {
    let ledger = ledger.to_str().unwrap();
    let pulled = donelight(["station", "pull", "--port", bench.port(), "--ledger", ledger, "--json"]);
    assert_eq!(pulled.ends_with(0).json()["gaps"], Value::Array(Vec::new()));
    let status = donelight(["station", "status", "--port", bench.port(), "--json"]).ends_with(0).json();
    let device = &status["study"];
    let report =
        donelight(["report", device["study"].as_str().unwrap(), "--ledger", ledger, "--json"]).ends_with(0);
    let host = report.json();
    for what in ["n", "mean", "sd", "estimate", "low", "high", "surplus", "standing"] {
        assert!(!device[what].is_null(), "{what}: {status}");
        assert_eq!(device[what], host[what], "{what}");
    }
    host
}

/// Two studies on one station, of the same readings: the first takes all of the set, the second stops on its precision.
#[track_caller]
fn main_job(name: &str, precision: u32) {
    let set = Set::named(name);
    let readings = set.readings();
    let values: Vec<f64> = readings.iter().map(|text| text.parse().unwrap()).collect();
    let folder = tempfile::tempdir().unwrap();
    let [store, feed, ledger] = ["store", "feed.txt", "ledger.sqlite"].map(|name| folder.path().join(name));
    fs::write(&feed, format!("{}\r\n", readings.join("\r\n")).repeat(2)).unwrap();
    let mut bench = VirtualBench::start(&store, ["--feed".as_ref(), feed.as_os_str()]);

    let whole = Study::of(&set, readings.len(), 150);
    assert_eq!(whole.done_at(&readings), Some(readings.len()));
    assert_eq!(measure(&mut bench, &whole, folder.path()), values);
    let kept = pull_and_compare(&bench, &ledger);
    assert_eq!(kept["n"], readings.len());
    set.assert_certified("mean", kept["mean"].as_f64().unwrap());
    set.assert_certified("sd", kept["sd"].as_f64().unwrap());

    let precise = Study::of(&set, 2, precision);
    let done_at = precise.done_at(&readings).expect("a precision that this set reaches");
    assert_eq!(measure(&mut bench, &precise, folder.path()), values[..done_at]);
    let kept = pull_and_compare(&bench, &ledger);
    assert_eq!((&kept["n"], &kept["surplus"]), (&done_at.into(), &0.into()));
}

#[test]
fn lew_is_done_at_the_right_reading_and_keeps_the_certified_values() {
    main_job("Lew", 12);
}

#[test]
fn lottery_is_done_at_the_right_reading_and_keeps_the_certified_values() {
    main_job("Lottery", 12);
}

#[test]
fn mavro_is_done_at_the_right_reading_and_keeps_the_certified_values() {
    main_job("Mavro", 25);
}

#[test]
fn michelso_is_done_at_the_right_reading_and_keeps_the_certified_values() {
    main_job("Michelso", 18);
}

#[test]
fn numacc1_is_done_at_the_right_reading_and_keeps_the_certified_values() {
    main_job("NumAcc1", 120);
}

#[test]
fn numacc2_is_done_at_the_right_reading_and_keeps_the_certified_values() {
    main_job("NumAcc2", 6);
}

#[test]
fn numacc3_is_done_at_the_right_reading_and_keeps_the_certified_values() {
    main_job("NumAcc3", 6);
}

#[test]
fn numacc4_is_done_at_the_right_reading_and_keeps_the_certified_values() {
    main_job("NumAcc4", 6);
}
