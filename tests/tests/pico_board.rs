//! The real Pico image on the emulated board, apart from its main job: it is found, it goes on measuring whatever the host
//! does, its buttons work, and it starts again when it hangs.
//!
//! These need the image: `tests/run` builds it and runs them.

use std::io::{self, Read, Write};
use std::time::{Duration, Instant};

use donelight::ledger::Ledger;
use donelight::link::pull::pull;
use donelight::link::{LinkError, Session, Transport};
use donelight_core::wire::{FRAME_MAX, Request, encode};
use donelight_tests::emulator::study::{assert_readings, plan};
use donelight_tests::emulator::{Board, Button, JOURNAL, Lamp, STATION, UsbIdentity, What};
use donelight_tests::nist::Set;
use donelight_tests::study::Study;

/// A board with a study of all of this set, and so many pieces of it measured.
fn board_with(set: &Set, pieces: usize) -> Board {
    let mut board = Board::start();
    board.load(&plan(&Study::of(set, set.readings().len(), 150).toml())).unwrap();
    board.run(Duration::from_millis(100));
    for reading in &set.readings()[..pieces] {
        board.measure(reading);
    }
    board
}

#[track_caller]
fn assert_pulled(board: &mut Board, readings: &[&str]) {
    let folder = tempfile::tempdir().unwrap();
    assert_readings(&board.pull(&folder.path().join("ledger.sqlite")), readings);
}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn the_board_is_found_by_its_name_and_shows_the_flash_chips_number() {
    let mut board = Board::new();
    board.power_on();
    assert_eq!(
        board.connected(),
        UsbIdentity {
            vendor: 0x1209,
            product_id: 0x0001,
            manufacturer: "Donelight".into(),
            product: "Donelight station".into(),
            serial_number: STATION.to_string(),
        }
    );
    let (_, hello) = Session::open(&mut board).unwrap();
    assert_eq!(hello.station, STATION);
    assert_eq!(hello.firmware.as_str(), "donelight-pico 0.1.0");
}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn the_log_says_which_station_has_started() {
    let mut board = Board::start();
    board.power_off();
    board.power_on();
    board.connected();
    for log in board.logs() {
        assert!(log[0].starts_with("info Donelight 0.1.0, station [e6, 61, 38, 52,"), "{log:?}");
    }
}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn the_first_bytes_on_the_port_may_be_anything() {
    let mut board = Board::start();
    let mut frame = [0; FRAME_MAX];
    let half = encode(7, &Request::Hello, &mut frame).unwrap();
    let half = half[..half.len() / 2].to_vec();
    for bytes in [b"AT\r".as_slice(), &half, &[0xff; 3000], &[0; 100]] {
        board.send(bytes);
        board.run(Duration::from_millis(50));
        assert!(Session::open(&mut board).is_ok(), "after {bytes:02x?}");
    }
}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn a_host_that_fetches_no_answer_does_not_keep_the_station_from_measuring() {
    let set = Set::named("NumAcc1");
    let mut board = board_with(&set, 1);
    board.fetch(false);
    let mut frame = [0; FRAME_MAX];
    for number in 0..20 {
        board.send(encode(number, &Request::Hello, &mut frame).unwrap());
    }
    board.measure(set.readings()[1]);
    board.measure(set.readings()[2]);
    assert!(board.is_lit(Lamp::Done));
    board.run(Duration::from_secs(15));
    board.fetch(true);
    assert_pulled(&mut board, &set.readings());
}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn a_pulled_cable_does_not_keep_the_station_from_measuring() {
    let set = Set::named("NumAcc1");
    let mut board = board_with(&set, 1);
    board.plug(false);
    board.measure(set.readings()[1]);
    board.plug(true);
    board.connected();
    board.measure(set.readings()[2]);
    assert!(board.is_lit(Lamp::Done));
    assert_pulled(&mut board, &set.readings());
}

/// The board's port, whose cable is pulled after `left` packets.
struct Fragile<'b> {
    board: &'b mut Board,
    left: u32,
}

impl Read for Fragile<'_> {
    fn read(&mut self, buffer: &mut [u8]) -> io::Result<usize> {
        if self.left == 0 {
            self.board.plug(false);
            return Ok(0);
        }
        let length = self.board.read(&mut buffer[..64])?;
        self.left -= 1;
        Ok(length)
    }
}

impl Write for Fragile<'_> {
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
        self.board.write(bytes)
    }
    fn flush(&mut self) -> io::Result<()> {
        Ok(())
    }
}

impl Transport for Fragile<'_> {
    fn now(&self) -> Instant {
        Transport::now(self.board)
    }
}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn a_cable_pulled_in_mid_pull_costs_nothing_wherever_it_happens() {
    let set = Set::named("Mavro");
    let mut board = board_with(&set, set.readings().len());
    for left in [1, 2, 3, 5, 8, 13] {
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("ledger.sqlite");
        let mut ledger = Ledger::open(Some(&path)).unwrap();
        let outcome = Session::open(Fragile { board: &mut board, left }).map(|(mut session, _)| {
            pull(&mut session, &mut ledger, &mut |_| {}).map(|_| ()).map_err(|error| error.to_string())
        });
        assert!(matches!(outcome, Err(LinkError::Gone(_)) | Ok(Err(_))), "{left}: {outcome:?}");
        board.plug(true);
        board.connected();
        assert_readings(&board.pull(&path), &set.readings());
    }
}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn take_back_removes_the_last_reading_once_a_press() {
    let set = Set::named("NumAcc1");
    let readings = set.readings();
    let mut board = board_with(&set, 2);
    board.press(Button::TakeBack);
    assert_eq!(board.pieces(), 1);
    board.measure(readings[1]);
    board.measure(readings[2]);
    assert!(board.is_lit(Lamp::Done));
    let progress = board.status().study.unwrap().progress;
    assert_eq!((progress.n.get(), progress.taken_back), (3, 1));
}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn a_stuck_gauge_holds_the_study_until_someone_has_seen_it() {
    let toml = Study::of(&Set::named("NumAcc1"), 3, 150).toml() + "[watch]\nsame_in_a_row = 3\n";
    let mut board = Board::start();
    board.load(&plan(&toml)).unwrap();
    board.run(Duration::from_millis(100));
    for _ in 0..3 {
        board.measure("10000002");
    }
    assert!(board.status().held.is_some());
    board.wait_for(Lamp::Attention, true, Duration::from_secs(1));
    board.press(Button::Seen);
    assert!(board.status().held.is_none());
}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn a_station_that_hangs_is_started_again_and_the_study_goes_on() {
    let set = Set::named("NumAcc1");
    let mut board = board_with(&set, 2);
    let hung_at = board.now();
    board.hang();
    let reset = board.run_until(
        &["reset"],
        Duration::from_secs(10),
        |event| matches!(&event.what, What::Reset { cause } if cause == "watchdog"),
    );
    let after = Duration::from_nanos(reset.at) - hung_at;
    assert!(after > Duration::from_secs(7) && after <= Duration::from_millis(8_010), "{after:?}");
    board.connected();
    board.run(Duration::from_millis(100));
    assert_eq!(board.pieces(), 2);
    board.measure(set.readings()[2]);
    assert!(board.is_lit(Lamp::Done));
    assert_pulled(&mut board, &set.readings());
}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn flash_full_of_noise_neither_stops_the_station_nor_makes_readings() {
    let mut board = Board::new();
    let mut state = 1u32;
    let noise: Vec<u8> = JOURNAL
        .map(|_| {
            state = state.wrapping_mul(1_664_525).wrapping_add(1_013_904_223);
            (state >> 24) as u8
        })
        .collect();
    for (index, sector) in noise.chunks(0x1_0000).enumerate() {
        board.damage_flash(JOURNAL.start + index as u32 * 0x1_0000, sector);
    }
    board.power_on();
    board.connected();
    let status = board.status();
    assert_eq!((status.study, status.boots), (None, 1));
}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn the_image_writes_nothing_below_the_journal() {
    let mut board = board_with(&Set::named("NumAcc1"), 3);
    let mut touched = board.events().iter().filter_map(|event| match event.what {
        What::Flash { address, length, .. } => Some(address..address + length),
        _ => None,
    });
    assert!(touched.clone().count() > 3);
    assert!(touched.all(|range| range.start >= JOURNAL.start && range.end <= JOURNAL.end));
    assert_eq!(board.flash(0..4).len(), 4);
}
