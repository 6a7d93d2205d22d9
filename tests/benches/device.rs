//! What the station's image takes of the board, and how long a reading takes from its line to the lamp, against
//! `budgets.toml`. Counted by the emulator, so the figures do not depend on the machine.

use std::process::ExitCode;
use std::time::Duration;

use donelight_tests::budgets::at_most;
use donelight_tests::emulator::study::plan;
use donelight_tests::emulator::{Board, Event, Lamp, What, image};
use donelight_tests::nist::Set;
use donelight_tests::study::Study;

fn main() -> ExitCode {
    if std::env::var_os(image::IMAGE_VARIABLE).is_none() {
        println!("LEFT OUT: the device's budgets need the Pico image: run tests/run");
        return ExitCode::SUCCESS;
    }
    let size = image::size();
    let (readings, stack) = measure();
    let (judged, limit) = measure_noncentral_t();
    let mut cycles: Vec<u64> = readings.iter().map(|reading| reading.cycles).collect();
    cycles.sort_unstable();
    let longest = readings.iter().map(|reading| reading.time).max().unwrap_or_default();
    let verdicts = [
        at_most("device.image_bytes_max", size.flash as f64),
        at_most("device.variables_bytes_max", size.ram as f64),
        at_most("device.stack_bytes_max", stack as f64),
        at_most("device.cycles_a_reading_median_max", cycles[cycles.len() / 2] as f64),
        at_most("device.cycles_a_reading_max", cycles[cycles.len() - 1] as f64),
        at_most("device.microseconds_a_reading_max", longest.as_secs_f64() * 1e6),
        at_most("device.cycles_a_judged_reading_max", judged as f64),
        at_most("device.cycles_a_limit_max", limit as f64),
    ];
    if verdicts.iter().all(|verdict| *verdict == ExitCode::SUCCESS) {
        ExitCode::SUCCESS
    } else {
        ExitCode::FAILURE
    }
}

/// From a line feed to the taken lamp.
struct Cost {
    cycles: u64,
    time: Duration,
}

/// A lower bound by the noncentral t, whose relative precision of 7 % is near from about the 195th reading on and reached
/// behind the 300th: the most cycles that a reading between took to be judged, and those of a whole limit at 5 to 300 pieces, as a status
/// asks for it.
fn measure_noncentral_t() -> (u64, u64) {
    let set = Set::named("Lottery");
    let text = Study::of(&set, 2, 7).toml();
    let text = text.replace("index = \"cpk\"", "index = \"cpk\"\nkind = \"lower\"");
    let mut board = Board::start();
    board.load(&plan(&text.replace("limit = 218", "limit = 400"))).expect("the plan is taken");
    board.run(Duration::from_millis(300));
    let (mut judged, mut limit) = (0, 0);
    for (i, reading) in set.readings().iter().cycle().take(300).enumerate() {
        let from = board.events().len();
        let told = board.measure(reading);
        if i >= 200 {
            let is_line_end = |event: &&Event| event.what == What::LineEnd;
            let line = board.events()[from..].iter().find(is_line_end).expect("a line feed");
            judged = judged.max(told.cycles - line.cycles);
        }
        if [5, 10, 30, 100, 300].contains(&(i + 1)) {
            let from = board.cycles();
            let study = board.status().study.expect("a study");
            assert_eq!(study.progress.n.get() as usize, i + 1);
            assert!(study.low.is_some_and(|low| low > 0.3), "{study:?}");
            limit = limit.max(board.cycles() - from);
        }
    }
    assert!(!board.is_lit(Lamp::Done), "the study is still under way");
    (judged, limit)
}

/// Measures a study whose interval is computed at every reading from the second on, pulls it, and gives the most stack
/// in use as well.
fn measure() -> (Vec<Cost>, usize) {
    let set = Set::named("Lottery");
    let mut board = Board::start();
    board.load(&plan(&Study::of(&set, 2, 10).toml())).expect("the plan is taken");
    board.run(Duration::from_millis(300));
    let cost = |reading: &&str| {
        let from = board.events().len();
        let told = board.measure(reading);
        let is_line_end = |event: &&Event| event.what == What::LineEnd;
        let line = board.events()[from..].iter().find(is_line_end).expect("a line feed");
        Cost { cycles: told.cycles - line.cycles, time: Duration::from_nanos(told.at - line.at) }
    };
    let costs = set.readings().iter().map(cost).collect();
    let folder = tempfile::tempdir().expect("a temporary folder");
    let kept = board.pull(&folder.path().join("ledger.sqlite"));
    assert_eq!(kept.readings.len(), set.readings().len());
    (costs, board.stack_used())
}
