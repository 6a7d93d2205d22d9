//! What can go wrong on the gauge's line, on the real Pico image: rubbish, lines too long, halves of lines, other settings,
//! bytes that come while the flash is erased, and too many of them.
//!
//! These need the image: `tests/run` builds it and runs them.

use std::time::Duration;

use donelight_core::plan::{LineSettings, Parity};
use donelight_core::record::Refusal;
use donelight_tests::emulator::study::{assert_readings, plan, readings};
use donelight_tests::emulator::{Board, Lamp, Operation, What};
use serde_json::json;

/// The chip's longest times, from memory, W25Q16JV data sheet.
const LONGEST_ERASE: Duration = Duration::from_millis(400);
const LONGEST_PROGRAM: Duration = Duration::from_millis(3);

const FAST: LineSettings = LineSettings { baud: 115_200, data_bits: 8, parity: Parity::None, stop_bits: 1 };

/// A study of far more pieces than any test here measures.
fn long_study(gauge: &str) -> String {
    format!(
        "name = \"Bell rims\"\nunit = \"mm\"\nresolution = \"0.001\"\n\
         [specification]\nlower = \"0\"\nupper = \"10\"\n\
         [capability]\nindex = \"cpk\"\n\
         [stop]\nplanned = 5000\nprecision = \"5%\"\nlimit = 6000\n{gauge}"
    )
}

fn board_with(gauge: &str) -> Board {
    let mut board = Board::start();
    board.load(&plan(&long_study(gauge))).unwrap();
    board.run(Duration::from_millis(100));
    board
}

/// Distinct readings, all of the same length.
fn sequence(count: usize) -> Vec<String> {
    (0..count).map(|i| format!("{}.{:03}", 1 + i / 1000, i % 1000)).collect()
}

fn lines(readings: &[String]) -> String {
    readings.iter().map(|reading| format!("{reading}\r\n")).collect()
}

/// Sends something that is no reading; gives the reason that the station tells for it.
#[track_caller]
fn refused(board: &mut Board, bytes: &[u8]) -> Refusal {
    let before = board.status();
    board.gauge(bytes);
    board.wait_for(Lamp::Attention, true, Duration::from_secs(3));
    // Refusals are recorded within a second, and shown for as long.
    board.run(Duration::from_millis(2_500));
    let after = board.status();
    assert!(after.refused > before.refused);
    assert_eq!(after.study, before.study, "a refused line changes nothing");
    after.last_refusal.expect("a reason")
}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn rubbish_long_and_half_lines_are_refused_with_their_reason_and_cost_no_reading() {
    let mut board = board_with("");
    board.measure("1.001");
    assert!(matches!(refused(&mut board, b"hello, station\r\n"), Refusal::Reading(_)));
    assert!(matches!(refused(&mut board, b"1.0001\r\n"), Refusal::Reading(_)));
    assert!(matches!(refused(&mut board, b"\xff\x00\x80\r\n"), Refusal::Reading(_)));
    assert_eq!(refused(&mut board, &[b'1'; 3000]), Refusal::LineTooLong);
    board.gauge("\r\n");
    assert_eq!(refused(&mut board, b"1.0"), Refusal::LineUnfinished);
    board.measure("1.002");
    let folder = tempfile::tempdir().unwrap();
    assert_readings(&board.pull(&folder.path().join("ledger.sqlite")), &["1.001", "1.002"]);
}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn a_reading_without_a_plan_is_refused() {
    let mut board = Board::start();
    board.run(Duration::from_millis(100));
    assert_eq!(refused(&mut board, b"1.001\r\n"), Refusal::NoPlan);
}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn the_line_is_set_as_the_plan_says_and_stays_so_over_a_restart() {
    let mut board = Board::start();
    assert_eq!(board.line(), json!({ "baud": 9600, "data_bits": 8, "parity": "none", "stop_bits": 1 }));
    let gauge = "[gauge]\nbaud = 19200\ndata_bits = 7\nparity = \"even\"\nstop_bits = 2\n";
    board.load(&plan(&long_study(gauge))).unwrap();
    board.run(Duration::from_millis(100));
    board.set_gauge(LineSettings { baud: 19_200, data_bits: 7, parity: Parity::Even, stop_bits: 2 });
    board.measure("2.001");
    board.power_off();
    board.power_on();
    board.connected();
    board.run(Duration::from_millis(100));
    let line = board.line();
    assert_eq!(
        (&line["data_bits"], &line["parity"], &line["stop_bits"]),
        (&7.into(), &"even".into(), &2.into())
    );
    assert!((line["baud"].as_f64().unwrap() / 19_200.0 - 1.0).abs() < 0.001, "{line}");
    board.set_gauge(LineSettings { baud: 19_200, data_bits: 7, parity: Parity::Even, stop_bits: 2 });
    board.measure("2.002");
    assert_eq!(board.pieces(), 2);
}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn a_gauge_of_other_settings_gives_no_reading() {
    let mut board = board_with("");
    board.set_gauge(LineSettings { baud: 19_200, ..LineSettings::default() });
    assert_eq!(refused(&mut board, b"1.001\r\n1.002\r\n"), Refusal::GaugeGarbled);
    board.set_gauge(LineSettings::default());
    board.run(Duration::from_secs(1));
    board.measure("1.003");
    assert_eq!(board.pieces(), 1);
}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn a_parity_error_spoils_its_line() {
    let mut board = board_with("[gauge]\nparity = \"even\"\n");
    // The emulated gauge sends the right bits, and the receiver finds the parity wrong.
    board.set_gauge(LineSettings { parity: Parity::Odd, ..LineSettings::default() });
    assert_eq!(refused(&mut board, b"1.001\r\n"), Refusal::GaugeGarbled);
}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn the_longest_erase_loses_no_byte_at_115200_baud() {
    let mut board = board_with("[gauge]\nbaud = 115200\n");
    board.set_gauge(FAST);
    board.set_flash_times(LONGEST_ERASE, LONGEST_PROGRAM);
    // The gauge pads its lines and sends without a pause, a little slower than the station can write: no quiet moment to
    // erase ahead, so each sector is erased when it is due, while the gauge goes on.
    let all = sequence(1_500);
    let from = board.events().len();
    board.gauge(all.iter().map(|reading| format!("{reading:>58}\r\n")).collect::<String>());
    board.run(Duration::from_secs(10));
    let longest = longest_sending_into_an_erase(&board, from);
    assert!(!board.events().iter().any(|event| event.what == What::Overrun));
    let folder = tempfile::tempdir().unwrap();
    let kept = board.pull(&folder.path().join("ledger.sqlite"));
    assert_readings(&kept, &all.iter().map(String::as_str).collect::<Vec<_>>());
    assert_eq!(board.status().refused, 0);
    assert!(longest >= Duration::from_millis(390), "no erase while the gauge was sending: {longest:?}");
}

/// For how long of an erase the gauge went on sending, at most.
fn longest_sending_into_an_erase(board: &Board, from: usize) -> Duration {
    let mut longest = 0;
    let mut began = None;
    let mut last_line = None;
    for event in &board.events()[from..] {
        match event.what {
            What::Flash { operation: Operation::Erase, .. } => began = Some(event.at),
            What::LineEnd => last_line = Some(event.at),
            What::FlashDone { operation: Operation::Erase, .. } => {
                if let (Some(began), Some(line)) = (began.take(), last_line) {
                    longest = longest.max(line.saturating_sub(began));
                }
            }
            _ => {}
        }
    }
    Duration::from_nanos(longest)
}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn more_than_the_station_can_take_is_told_and_never_becomes_a_wrong_reading() {
    let mut board = board_with("[gauge]\nbaud = 115200\n");
    board.set_gauge(FAST);
    board.set_flash_times(LONGEST_ERASE, LONGEST_PROGRAM);
    let all = sequence(6_000);
    board.gauge(lines(&all));
    board.wait_for(Lamp::Attention, true, Duration::from_secs(30));
    board.run(Duration::from_secs(12));
    assert!(board.status().refused > 0);
    let folder = tempfile::tempdir().unwrap();
    let kept = readings(&board.pull(&folder.path().join("ledger.sqlite")));
    let mut sent = all.iter().map(|text| text.parse::<f64>().unwrap());
    for reading in &kept {
        assert!(sent.any(|value| (value - reading).abs() < 0.0005), "{reading} was not sent, or not then");
    }
    // With every flash time at its longest: 871, measured.
    assert!(kept.len() > 700 && kept.len() < all.len(), "{}", kept.len());
}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn the_transfer_into_the_ring_is_started_again_before_its_count_runs_out() {
    let mut board = board_with("");
    board.measure("1.001");
    board.age_gauge_transfer(5);
    board.run(Duration::from_secs(3));
    for reading in ["1.002", "1.003", "1.004"] {
        board.measure(reading);
    }
    assert_eq!(board.pieces(), 4);
}
