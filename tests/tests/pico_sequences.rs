//! Random sequences on the real Pico image: gauge lines on its UART, plans, clocks and rubbish over USB, buttons, power off and on.
//! After each, the host replays what it pulls and works out every figure: the station's own, on its status, must be the same to
//! the last bit, and so again after a restart, when the station knows only what it replays from its journal.
//!
//! These need the image: `tests/run` builds it and runs them.

use std::path::Path;
use std::sync::atomic::{AtomicU64, Ordering};
use std::time::{Duration, Instant};

use donelight_core::station::Station as State;
use donelight_core::stopping::Standing;
use donelight_core::wire::Status;
use donelight_tests::emulator::Lamp;
use donelight_tests::emulator::sequence::Station;
use donelight_tests::sequences::{Sequence, numbers, on_all_cores};

const SHORT: u64 = 24;
const LONG: u64 = 1_000;

/// Sequences on one board, one after the other in one journal.
const ON_ONE_BOARD: usize = 10;

/// The station's figures are those of `host`, to the last bit.
#[track_caller]
fn assert_same(device: &Status, host: &State, number: u64) {
    assert_eq!(device.boots, host.boots(), "sequence {number}");
    assert_eq!(device.refused, host.refused(), "sequence {number}");
    assert_eq!(device.held, host.study().and_then(|study| study.held()), "sequence {number}");
    assert_eq!(device.study.is_some(), host.study().is_some(), "sequence {number}");
    let Some((device, study)) = device.study.as_ref().zip(host.study()) else { return };
    assert_eq!(device.began, study.began(), "sequence {number}");
    assert_eq!(device.progress, study.progress(), "sequence {number}");
    let resolution = study.plan().resolution;
    let moments = study.moments();
    let found = study.estimate();
    // Without spread there is a standard deviation of 0, which the station does not tell.
    let standard_deviation = study.sample().and_then(|_| moments.standard_deviation(resolution));
    let figures = [
        ("mean", device.mean, moments.mean(resolution)),
        ("standard deviation", device.standard_deviation, standard_deviation),
        ("estimate", device.estimate, found.map(|found| found.estimate)),
        ("low", device.low, found.and_then(|found| found.interval.low)),
        ("high", device.high, found.and_then(|found| found.interval.high)),
    ];
    for (what, device, host) in figures {
        assert_eq!(device.map(f64::to_bits), host.map(f64::to_bits), "sequence {number}: {what}");
    }
}

/// How many sequences ended how.
#[derive(Clone, Copy, Debug, Default)]
struct Ends([u64; 7]);

const ENDS: [&str; 7] = [
    "sequences",
    "with an estimate",
    "settled",
    "spent",
    "held",
    "with surplus",
    "with a reading taken back",
];

impl Ends {
    fn add(&mut self, host: &State) {
        let study = host.study();
        let progress = study.map(|study| study.progress());
        let standing = |wanted| progress.is_some_and(|progress| progress.standing == wanted);
        let ends = [
            true,
            study.is_some_and(|study| study.estimate().is_some()),
            standing(Standing::Settled),
            standing(Standing::Spent),
            study.is_some_and(|study| study.held().is_some()),
            progress.is_some_and(|progress| progress.surplus > 0),
            progress.is_some_and(|progress| progress.taken_back > 0),
        ];
        for (count, ends) in self.0.iter_mut().zip(ends) {
            *count += u64::from(ends);
        }
    }
}

/// Runs a sequence on the board, which has run others before, and compares.
#[track_caller]
fn run(station: &mut Station, host: &mut State, ledger: &Path, number: u64) {
    for happening in &Sequence::new(number).happenings {
        station.happen(happening);
    }
    // Refusals are recorded a second after they came.
    station.board.run(Duration::from_millis(1_100));
    let status = station.replay_into(host);
    assert_same(&status, host, number);
    let settled = host.study().is_some_and(|study| study.standing() == Standing::Settled);
    assert_eq!(station.board.is_lit(Lamp::Done), settled, "sequence {number}");
    if let Some(study) = host.study().cloned() {
        let kept = station.board.pull(ledger);
        assert_eq!(kept.study, study, "sequence {number}: the ledger's study");
    }
    station.restart();
    let status = station.replay_into(host);
    assert_same(&status, host, number);
}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn the_station_and_the_host_that_pulled_agree_bit_for_bit_after_random_sequences() {
    let numbers = numbers(SHORT, LONG);
    let (began, of, done) = (Instant::now(), numbers.end - numbers.start, AtomicU64::new(0));
    let ends = on_all_cores(numbers, |mut mine| {
        let mut ends = Ends::default();
        loop {
            let batch: Vec<u64> = mine.by_ref().take(ON_ONE_BOARD).collect();
            if batch.is_empty() {
                return ends;
            }
            let folder = tempfile::tempdir().expect("a temporary folder");
            let mut station = Station::start();
            let mut host = State::default();
            for number in batch {
                run(&mut station, &mut host, &folder.path().join("ledger.sqlite"), number);
                ends.add(&host);
                let done = done.fetch_add(1, Ordering::Relaxed) + 1;
                eprintln!("{done} of {of} sequences agree, {:.0?}", began.elapsed());
            }
        }
    });
    let total = ends.into_iter().fold(Ends::default(), |mut total, ends| {
        total.0.iter_mut().zip(ends.0).for_each(|(total, more)| *total += more);
        total
    });
    for (place, (what, count)) in ENDS.iter().zip(total.0).enumerate() {
        println!("{count:>6} {what}");
        // The short form is too short for more than the first three.
        assert!(count > 0 || of < SHORT || of < LONG && place > 2, "no sequence {what}");
    }
    println!("in {:.0?}", began.elapsed());
}
