//! The real Pico image on the emulated board: it starts, is found, listens, and survives.
//!
//! These need the image: `tests/run` builds it and runs them.

use std::time::Duration;

use donelight_tests::emulator::{Board, STATION, UsbIdentity};

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
    board.run(Duration::from_millis(10));
    let logs = board.logs();
    assert!(logs[0].iter().any(|line| line.starts_with("info Donelight 0.1.0, station")), "{logs:?}");
}
