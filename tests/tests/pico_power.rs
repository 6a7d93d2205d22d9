//! Power that fails on the real Pico image: between readings, inside a flash write, inside an erase. After the reboot the
//! study goes on; no reading that the operator was told of is lost, and none is counted twice.
//!
//! These need the image: `tests/run` builds it and runs them.

use std::time::Duration;

use donelight_tests::emulator::study::{assert_readings, plan};
use donelight_tests::emulator::{Board, Lamp, Moment, Operation, What};
use donelight_tests::nist::Set;
use donelight_tests::study::Study;

/// A board with a study of all of this set loaded.
fn board_with_study(set: &Set) -> Board {
    let mut board = Board::start();
    let study = Study::of(set, set.readings().len(), 150);
    board.load(&plan(&study.toml())).unwrap();
    board
}

/// A line that begins right after the start may have begun before it, and is refused; so the operator waits a moment.
fn restart(board: &mut Board) {
    board.power_on();
    board.connected();
    board.run(Duration::from_millis(100));
}

/// Measures the pieces of the set from number `from` on until the power fails or `to` pieces are told; gives the number
/// told.
#[track_caller]
fn measure(board: &mut Board, readings: &[&str], from: usize, to: usize) -> usize {
    for (index, reading) in readings.iter().enumerate().take(to).skip(from) {
        if board.try_measure(reading).is_none() {
            return index;
        }
        assert_eq!(board.is_lit(Lamp::Done), index + 1 == readings.len());
        if !board.is_powered() {
            return index + 1;
        }
    }
    to
}

/// After a cut: the station holds all that was told, and at most the one reading more that was under way.
#[track_caller]
fn resume(board: &mut Board, told: usize) -> usize {
    restart(board);
    let held = board.pieces();
    assert!(held == told || held == told + 1, "{told} readings were told, {held} are there");
    held
}

#[track_caller]
fn assert_complete(mut board: Board, readings: &[&str], cuts: usize) {
    assert!(board.is_lit(Lamp::Done));
    let folder = tempfile::tempdir().unwrap();
    let kept = board.pull(&folder.path().join("ledger.sqlite"));
    assert_readings(&kept, readings);
    let starts = board.events().iter().filter(|event| matches!(event.what, What::Connected(_))).count();
    assert_eq!(starts, cuts + 1);
    assert_eq!(board.status().boots as usize, starts);
}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn a_study_goes_on_after_power_cuts_between_readings() {
    let set = Set::named("Mavro");
    let readings = set.readings();
    let mut board = board_with_study(&set);
    let mut told = 0;
    let cuts = [1, 2, 20, 21, 49];
    for next in cuts {
        told = measure(&mut board, &readings, told, next);
        board.power_off();
        assert_eq!(resume(&mut board, told), told);
    }
    measure(&mut board, &readings, told, readings.len());
    assert_complete(board, &readings, cuts.len());
}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn no_reading_told_is_lost_and_none_doubled_by_power_cuts_inside_flash_writes() {
    let set = Set::named("Michelso");
    let readings = set.readings();
    let mut board = board_with_study(&set);
    let mut moments = vec![Moment::Before, Moment::After];
    for bytes in [0, 1, 8, 17, 40, 100, 255] {
        moments.push(Moment::Inside { bytes, seed: None });
        moments.push(Moment::Inside { bytes, seed: Some(bytes + 1) });
    }
    let mut held = 0;
    for (index, moment) in moments.iter().enumerate() {
        held = measure(&mut board, &readings, held, held + 4);
        // Some on the write of the next reading, some on the one after it.
        board.cut_power_at(1 + index as u32 % 2, Operation::Program, *moment);
        let told = measure(&mut board, &readings, held, readings.len());
        assert!(!board.is_powered(), "{moment:?} did not come");
        held = resume(&mut board, told);
    }
    measure(&mut board, &readings, held, readings.len());
    assert_complete(board, &readings, moments.len());
}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn no_reading_told_is_lost_and_none_doubled_by_power_cuts_inside_erases() {
    // Long enough to need sectors beyond those that the station erases at its first start.
    let set = Set::named("NumAcc3");
    let readings = set.readings();
    let mut board = board_with_study(&set);
    let moments = [
        Moment::Inside { bytes: 2048, seed: Some(8) },
        Moment::Inside { bytes: 0, seed: Some(7) },
        Moment::Inside { bytes: 4000, seed: None },
    ];
    let (mut held, mut cuts) = (0, 0);
    for moment in moments {
        board.cut_power_at(1, Operation::Erase, moment);
        held = measure(&mut board, &readings, held, readings.len());
        if board.is_powered() {
            break;
        }
        cuts += 1;
        held = resume(&mut board, held);
    }
    assert_eq!(cuts, moments.len(), "the set is too short for all cuts");
    measure(&mut board, &readings, held, readings.len());
    assert_complete(board, &readings, cuts);
}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn a_power_cut_while_the_station_starts_costs_nothing_but_another_start() {
    let set = Set::named("NumAcc1");
    let readings = set.readings();
    let mut board = Board::new();
    // The very first erase of a new board's flash, then the record of the next start.
    for (operation, bytes) in [(Operation::Erase, 2048), (Operation::Program, 9)] {
        board.cut_power_at(1, operation, Moment::Inside { bytes, seed: Some(3) });
        board.power_on();
        board.run(Duration::from_millis(500));
        assert!(!board.is_powered());
    }
    restart(&mut board);
    board.load(&plan(&Study::of(&set, readings.len(), 150).toml())).unwrap();
    measure(&mut board, &readings, 0, 2);
    board.power_off();
    board.cut_power_at(1, Operation::Program, Moment::Inside { bytes: 9, seed: Some(4) });
    board.power_on();
    board.run(Duration::from_millis(500));
    assert!(!board.is_powered());
    assert_eq!(resume(&mut board, 2), 2);
    measure(&mut board, &readings, 2, 3);
    assert!(board.is_lit(Lamp::Done));
    let folder = tempfile::tempdir().unwrap();
    assert_readings(&board.pull(&folder.path().join("ledger.sqlite")), &readings);
}
