//! The real command `donelight` on the emulated Pico's port, as a person types it.
//!
//! These need the image: `tests/run` builds it and runs them.
#![cfg(unix)]

use std::fs;
use std::time::Duration;

use donelight_tests::command::{self, donelight};
use donelight_tests::emulator::{Board, Lamp, STATION};
use donelight_tests::nist::Set;
use donelight_tests::study::Study;

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn plan_load_measure_pull_and_report_by_the_command_line() {
    // Built before the board's time begins.
    let _ = command::path();
    let set = Set::named("Mavro");
    let readings = set.readings();
    let study = Study::of(&set, 2, 25);
    let done_at = study.done_at(&readings).unwrap();
    let folder = tempfile::tempdir().unwrap();
    let [plan, ledger, page] =
        ["plan.toml", "ledger.sqlite", "report.html"].map(|name| folder.path().join(name));
    fs::write(&plan, study.toml()).unwrap();
    let [plan, ledger, page] = [&plan, &ledger, &page].map(|path| path.to_str().unwrap());

    let mut board = Board::start();
    let run = |board: &mut Board, arguments: &[&str]| {
        board.with_terminal(|port| {
            let port = ["--port", port.to_str().unwrap(), "--json"];
            donelight(["station"].iter().chain(arguments).chain(&port)).ends_with(0).json()
        })
    };
    let _ = run(&mut board, &["load", plan]);
    board.run(Duration::from_millis(100));
    for (index, reading) in readings[..done_at].iter().enumerate() {
        assert!(!board.is_lit(Lamp::Done), "lit after {index} readings, not {done_at}");
        board.measure(reading);
    }
    assert!(board.is_lit(Lamp::Done));

    let status = run(&mut board, &["status"]);
    assert_eq!(status["station"], STATION.to_string());
    let pulled = run(&mut board, &["pull", "--ledger", ledger]);
    assert_eq!(pulled["gaps"].as_array().map(Vec::len), Some(0));
    let again = run(&mut board, &["pull", "--ledger", ledger]);
    assert_eq!(again["new"], 0, "{again}");

    let device = &status["study"];
    let host = donelight(["report", "--ledger", ledger, "-o", page, "--json"]).ends_with(0).json();
    for what in ["n", "mean", "sd", "estimate", "low", "high", "standing"] {
        assert!(!device[what].is_null(), "{what}: {status}");
        assert_eq!(device[what], host[what], "{what}");
    }
    assert!(fs::read_to_string(page).unwrap().contains("</html>"));
}
