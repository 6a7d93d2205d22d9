//! Power that fails on the real Pico image: between readings, inside a flash write, inside an erase. After the reboot the
//! study goes on; no reading that the operator was told of is lost, and none is counted twice.
//!
//! These need the image: `tests/run` builds it and runs them.

use std::cell::RefCell;
use std::rc::Rc;
use std::time::Duration;

use donelight::link::Session;
use donelight::link::memory::MemoryLink;
use donelight_core::lamps::Call;
use donelight_core::wire::JournalHealth;
use donelight_tests::emulator::study::{assert_readings, plan};
use donelight_tests::emulator::{Board, JOURNAL, Lamp, Moment, Operation, STATION, What};
use donelight_tests::nist::Set;
use donelight_tests::study::Study;
use embedded_storage::nor_flash::{ErrorType, MultiwriteNorFlash, NorFlash, NorFlashErrorKind, ReadNorFlash};

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

/// A flash that the test can look into.
#[derive(Clone)]
struct SharedFlash(Rc<RefCell<Vec<u8>>>);

impl ErrorType for SharedFlash {
    type Error = NorFlashErrorKind;
}

impl ReadNorFlash for SharedFlash {
    const READ_SIZE: usize = 1;
    fn read(&mut self, offset: u32, bytes: &mut [u8]) -> Result<(), NorFlashErrorKind> {
        bytes.copy_from_slice(&self.0.borrow()[offset as usize..][..bytes.len()]);
        Ok(())
    }
    fn capacity(&self) -> usize {
        self.0.borrow().len()
    }
}

impl NorFlash for SharedFlash {
    const WRITE_SIZE: usize = 1;
    const ERASE_SIZE: usize = 4096;
    fn erase(&mut self, from: u32, to: u32) -> Result<(), NorFlashErrorKind> {
        self.0.borrow_mut()[from as usize..to as usize].fill(0xff);
        Ok(())
    }
    fn write(&mut self, offset: u32, bytes: &[u8]) -> Result<(), NorFlashErrorKind> {
        for (cell, byte) in self.0.borrow_mut()[offset as usize..].iter_mut().zip(bytes) {
            *cell &= byte;
        }
        Ok(())
    }
}

impl MultiwriteNorFlash for SharedFlash {}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn a_station_with_a_full_journal_starts_in_good_time_and_says_that_it_is_full() {
    // The very code of the station fills the flash; the board then starts on it.
    let flash = SharedFlash(Rc::new(RefCell::new(vec![0xff; JOURNAL.len()])));
    let mut station = MemoryLink::start(flash.clone(), STATION).unwrap();
    station.pass(1_000);
    let toml = "name = \"Bell rims\"\nresolution = \"0.001\"\n\
                [specification]\nlower = \"0\"\nupper = \"100\"\n[capability]\nindex = \"cpk\"\n\
                [stop]\nplanned = 90000\nprecision = \"5%\"\nlimit = 100000\n";
    Session::open(&mut station).unwrap().0.load(&plan(toml), false).unwrap();
    let mut sent = 0;
    let is_full = |station: &mut MemoryLink<_>| {
        let now = station.station_time();
        station.recorder().call(now) == Some(Call::Act)
    };
    while !is_full(&mut station) {
        station.pass(1);
        station.gauge(format!("{}.{:03}\r\n", 40 + sent % 20, sent % 1_000).as_bytes());
        sent += 1;
    }
    let pieces = station.recorder().station().study().unwrap().moments().n().get();
    assert!(pieces > 50_000, "{pieces}");

    let mut board = Board::new();
    for (index, part) in flash.0.borrow().chunks(0x1_0000).enumerate() {
        board.damage_flash(JOURNAL.start + index as u32 * 0x1_0000, part);
    }
    board.power_on();
    let started = board
        .run_until(&["connected"], Duration::from_secs(4), |event| matches!(event.what, What::Connected(_)));
    println!("started on {pieces} readings in {:?}", Duration::from_nanos(started.at));
    let status = board.status();
    assert_eq!(status.journal, JournalHealth::Full);
    assert_eq!(status.study.unwrap().progress.n.get(), pieces);
    board.wait_for(Lamp::Attention, true, Duration::from_secs(1));
}
