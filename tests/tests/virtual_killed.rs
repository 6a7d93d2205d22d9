//! A virtual station killed in the middle of a study (SIGKILL) and started again on the same store: nothing that it told
//! is lost, nothing is there twice.
#![cfg(unix)]

use std::ffi::OsStr;
use std::fs;
use std::path::Path;

use donelight_tests::command::donelight;
use donelight_tests::nist::Set;
use donelight_tests::study::Study;
use donelight_tests::virtual_bench::VirtualBench;
use serde_json::Value;

fn load(bench: &VirtualBench, plan: &Path) {
    let _ = donelight(["station", "load", plan.to_str().unwrap(), "--port", bench.port()]).ends_with(0);
}

fn pull(bench: &VirtualBench, ledger: &Path) {
    let _ = donelight(["station", "pull", "--ledger", ledger.to_str().unwrap(), "--port", bench.port()])
        .ends_with(0);
}

fn report(ledger: &Path) -> Value {
    donelight(["report", "--ledger", ledger.to_str().unwrap(), "--json"]).ends_with(0).json()
}

/// The values of the ledger's study, in order, as the station keeps them.
fn kept_values(ledger: &Path) -> Vec<String> {
    let file = ledger.with_extension("csv");
    let arguments = ["report", "--ledger", ledger.to_str().unwrap(), "--csv", file.to_str().unwrap()];
    let _ = donelight(arguments).ends_with(0);
    let table = fs::read_to_string(file).unwrap();
    table.lines().skip(1).map(|row| row.split(',').nth(1).unwrap().to_owned()).collect()
}

fn is_reading(event: &Value) -> bool {
    event["event"] == "reading"
}

#[test]
fn a_station_killed_after_any_reading_has_all_that_it_told_and_takes_the_rest() {
    let set = Set::named("Michelso");
    let readings = set.readings();
    let folder = tempfile::tempdir().unwrap();
    let [store, feed, ledger, plan] =
        ["store", "feed.txt", "ledger.sqlite", "plan.toml"].map(|name| folder.path().join(name));
    fs::write(&plan, Study::of(&set, readings.len(), 150).toml()).unwrap();

    let mut taken = 0;
    let mut starts = 0;
    while taken < readings.len() {
        // A feed begins anew at each start: it holds what the station has not taken yet.
        fs::write(&feed, readings[taken..].join("\n") + "\n").unwrap();
        let mut bench = VirtualBench::start(&store, ["--feed".as_ref(), feed.as_os_str()]);
        starts += 1;
        assert_eq!(bench.first["boots"], starts);
        match starts {
            1 => load(&bench, &plan),
            _ if starts % 3 == 0 => pull(&bench, &ledger),
            _ => {}
        }
        let told = (taken + starts).min(readings.len());
        bench.events_until(|event| is_reading(event) && event["n"] == told);
        bench.kill();

        let silent = VirtualBench::start(&store, [] as [&OsStr; 0]);
        starts += 1;
        let n = usize::try_from(silent.first["study"]["n"].as_u64().unwrap()).unwrap();
        // It may have taken more than it could tell, never less.
        assert!(n >= told, "{n} of {told}");
        taken = n;
        silent.kill();
    }
    assert!(starts >= 8, "killed only {starts} times");

    let bench = VirtualBench::start(&store, [] as [&OsStr; 0]);
    pull(&bench, &ledger);
    assert_eq!(kept_values(&ledger), readings);
    let kept = report(&ledger);
    assert_eq!(kept["standing"], "settled");
    set.assert_certified("mean", kept["mean"].as_f64().unwrap());
    set.assert_certified("sd", kept["sd"].as_f64().unwrap());
}

#[test]
fn a_simulated_process_gives_the_same_study_whether_its_station_is_killed_or_not() {
    let set = Set::named("Michelso");
    let folder = tempfile::tempdir().unwrap();
    let plan = folder.path().join("plan.toml");
    fs::write(&plan, Study::of(&set, 80, 150).toml()).unwrap();
    let process = ["--process", "normal:299.85,0.08", "--seed", "11", "--rate", "40"];

    let [whole, pieced] = [(&[] as &[u64], "whole"), (&[3, 17, 18, 30], "pieced")].map(|(kills, name)| {
        let [store, ledger] = ["store", "sqlite"].map(|ext| folder.path().join(name).with_extension(ext));
        let mut bench = VirtualBench::start(&store, process);
        load(&bench, &plan);
        for kill_at in kills {
            // It may have taken more before the last kill than it could tell, and tells that no more.
            if bench.first["study"]["n"].as_u64().unwrap_or(0) < *kill_at {
                bench.events_until(|event| is_reading(event) && event["n"].as_u64() >= Some(*kill_at));
            }
            bench.kill();
            bench = VirtualBench::start(&store, process);
        }
        bench.events_until_done();
        pull(&bench, &ledger);
        assert_eq!(report(&ledger)["n"], 80);
        kept_values(&ledger)
    });
    assert_eq!(whole.len(), 80);
    assert_eq!(whole, pieced);
}
