//! The main job on the real Pico image: NIST's univariate data sets as lines on its UART, the plan loaded over its USB
//! port by the host's own code, the done lamp lit at the right reading and not one earlier, the log pulled into a ledger.
//!
//! Source of the sets: NIST Statistical Reference Datasets, <https://www.itl.nist.gov/div898/strd/univ/homepage.html>.
//! These need the image: `tests/run` builds it and runs them.

use std::path::Path;
use std::time::Duration;

use donelight_core::wire::StudyStatus;
use donelight_tests::emulator::study::{assert_readings, plan};
use donelight_tests::emulator::{Board, Lamp, What};
use donelight_tests::nist::Set;
use donelight_tests::study::Study;

/// Measures pieces until the done lamp is lit, one after the other as an operator would; gives how many it took.
#[track_caller]
fn measure_until_done(board: &mut Board, readings: &[&str]) -> usize {
    assert!(!board.is_lit(Lamp::Done), "lit before the first reading");
    for (index, reading) in readings.iter().enumerate() {
        board.measure(reading);
        if board.is_lit(Lamp::Done) {
            return index + 1;
        }
    }
    panic!("the done lamp is dark after all {} readings", readings.len());
}

/// Pulls all, and compares the station's own figures with those that the host works out of the records, bit for bit.
#[track_caller]
fn pull_and_compare(board: &mut Board, ledger: &Path, readings: &[&str]) -> StudyStatus {
    let kept = board.pull(ledger);
    assert_readings(&kept, readings);
    let device = board.status().study.expect("a study");
    let host = &kept.study;
    assert_eq!(device.progress, host.progress());
    let resolution = host.plan().resolution;
    let estimate = host.estimate().expect("an estimate");
    let bits = |value: Option<f64>| value.expect("a figure").to_bits();
    assert_eq!(bits(device.mean), bits(host.moments().mean(resolution)));
    assert_eq!(bits(device.standard_deviation), bits(host.moments().standard_deviation(resolution)));
    assert_eq!(bits(device.estimate), estimate.estimate.to_bits());
    assert_eq!(bits(device.low), bits(estimate.interval.low));
    assert_eq!(bits(device.high), bits(estimate.interval.high));
    device
}

/// Two studies on one board of the same readings: the first takes all of the set, the second stops on its precision.
#[track_caller]
fn main_job(name: &str, precision: u32) {
    let set = Set::named(name);
    let readings = set.readings();
    let folder = tempfile::tempdir().unwrap();
    let ledger = folder.path().join("ledger.sqlite");
    let mut board = Board::start();

    let whole = Study::of(&set, readings.len(), 150);
    assert_eq!(whole.done_at(&readings), Some(readings.len()));
    board.load(&plan(&whole.toml())).unwrap();
    assert_eq!(measure_until_done(&mut board, &readings), readings.len());
    let device = pull_and_compare(&mut board, &ledger, &readings);
    set.assert_certified("mean", device.mean.unwrap());
    set.assert_certified("sd", device.standard_deviation.unwrap());

    let precise = Study::of(&set, 2, precision);
    let done_at = precise.done_at(&readings).expect("a precision that this set reaches");
    board.load(&plan(&precise.toml())).unwrap();
    board.wait_for(Lamp::Done, false, Duration::from_secs(1));
    assert_eq!(measure_until_done(&mut board, &readings), done_at);
    pull_and_compare(&mut board, &ledger, &readings[..done_at]);

    let lit = What::Pin { pin: Lamp::Done as u8, high: true };
    assert_eq!(board.events().iter().filter(|event| event.what == lit).count(), 2, "lit once a study");
    assert!(!board.events().iter().any(|event| event.what == What::Overrun));
}

/// Thirty of Lew's readings with each sigma that a station can take: done at the thirtieth, all figures those of the host.
#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn every_sigma_within_subgroups_is_the_same_to_the_last_bit_on_device_and_host() {
    let set = Set::named("Lew");
    let readings = &set.readings()[..30];
    let mut study = Study::of(&set, 30, 150);
    study.limit = 60;
    let toml = study.toml();
    let folder = tempfile::tempdir().unwrap();
    for (i, (sigma, table)) in [
        ("pooled", "[subgroups]\nsize = 5\n"),
        ("ranges", "[subgroups]\nsize = 3\n"),
        ("ranges", "[subgroups]\nsize = 15\n"),
        ("moving-ranges", ""),
    ]
    .into_iter()
    .enumerate()
    {
        let mut board = Board::start();
        let text = toml.replace("[capability]\n", &format!("[capability]\nsigma = \"{sigma}\"\n")) + table;
        board.load(&plan(&text)).unwrap();
        assert_eq!(measure_until_done(&mut board, readings), 30, "{sigma}");
        pull_and_compare(&mut board, &folder.path().join(format!("ledger{i}.sqlite")), readings);
    }
}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn lew_is_done_at_the_right_reading_and_keeps_the_certified_values() {
    main_job("Lew", 12);
}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn lottery_is_done_at_the_right_reading_and_keeps_the_certified_values() {
    main_job("Lottery", 12);
}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn mavro_is_done_at_the_right_reading_and_keeps_the_certified_values() {
    main_job("Mavro", 25);
}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn michelso_is_done_at_the_right_reading_and_keeps_the_certified_values() {
    main_job("Michelso", 18);
}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn numacc1_is_done_at_the_right_reading_and_keeps_the_certified_values() {
    main_job("NumAcc1", 120);
}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn numacc2_is_done_at_the_right_reading_and_keeps_the_certified_values() {
    main_job("NumAcc2", 6);
}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn numacc3_is_done_at_the_right_reading_and_keeps_the_certified_values() {
    main_job("NumAcc3", 6);
}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn numacc4_is_done_at_the_right_reading_and_keeps_the_certified_values() {
    main_job("NumAcc4", 6);
}
