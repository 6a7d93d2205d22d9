//! Damage and disturbance on the real Pico image: a page that can no longer be read, a host that sends rubbish, a start in
//! the middle of a pull.
//!
//! These need the image: `tests/run` builds it and runs them.

use std::time::Duration;

use donelight::ledger::Ledger;
use donelight::link::Session;
use donelight::link::pull::{Pulled, pull};
use donelight_core::wire::JournalHealth;
use donelight_tests::emulator::study::{assert_readings, plan};
use donelight_tests::emulator::{Board, Button, JOURNAL, Lamp};
use donelight_tests::nist::Set;
use donelight_tests::study::Study;

fn board_with(set: &Set, pieces: usize) -> Board {
    let mut board = Board::start();
    board.load(&plan(&Study::of(set, set.readings().len(), 150).toml())).unwrap();
    board.run(Duration::from_millis(100));
    for reading in &set.readings()[..pieces] {
        board.measure(reading);
    }
    board
}

fn restart(board: &mut Board) {
    board.power_off();
    board.power_on();
    board.connected();
    board.run(Duration::from_millis(100));
}

fn pull_into(board: &mut Board, ledger: &mut Ledger) -> Pulled {
    let (mut session, _) = Session::open(board).unwrap();
    pull(&mut session, ledger, &mut |_| {}).unwrap()
}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn a_page_that_can_no_longer_be_read_is_told_by_the_lamp_and_to_the_host_and_costs_no_more() {
    let set = Set::named("Mavro");
    let mut board = board_with(&set, 40);
    board.power_off();
    // The second page behind the two sectors of checkpoints.
    board.damage_flash(JOURNAL.start + 2 * 4096 + 256 + 50, &[0; 40]);
    board.power_on();
    board.connected();
    board.wait_for(Lamp::Attention, true, Duration::from_secs(3));
    let status = board.status();
    let gap = status.lost.expect("it is on record");
    assert_eq!((status.gaps, status.journal), (1, JournalHealth::Well));

    let folder = tempfile::tempdir().unwrap();
    let mut ledger = Ledger::open(Some(&folder.path().join("ledger.sqlite"))).unwrap();
    let pulled = pull_into(&mut board, &mut ledger);
    assert_eq!(pulled.gaps, [gap]);
    let found = ledger.verify().unwrap().remove(0);
    assert!(found.fits() && found.gaps == [gap], "{found:?}");
    let kept = ledger.study(None).unwrap();
    assert_eq!(kept.readings.len(), 40 - (gap.last.0 - gap.first.0 + 1) as usize);

    board.press(Button::Seen);
    board.run(Duration::from_secs(3));
    assert!(!board.is_lit(Lamp::Attention));
    board.measure(set.readings()[40]);
    assert_eq!(pull_into(&mut board, &mut ledger).gaps, []);
    assert!(ledger.verify().unwrap()[0].fits());
}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn a_host_that_sends_rubbish_all_the_time_does_not_keep_the_station_from_measuring() {
    let set = Set::named("NumAcc1");
    let mut board = board_with(&set, 0);
    let mut noise = 1u32;
    let mut rubbish = || {
        let bytes = (0..4_096).map(|_| {
            noise = noise.wrapping_mul(1_664_525).wrapping_add(1_013_904_223);
            if noise >> 29 == 0 { 0 } else { (noise >> 16) as u8 }
        });
        bytes.collect::<Vec<u8>>()
    };
    for reading in set.readings() {
        board.send(&rubbish());
        board.run(Duration::from_millis(20));
        board.send(&rubbish());
        board.measure(reading);
    }
    assert!(board.is_lit(Lamp::Done));
    let folder = tempfile::tempdir().unwrap();
    assert_readings(&board.pull(&folder.path().join("ledger.sqlite")), &set.readings());
}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn a_station_that_starts_again_in_mid_pull_is_pulled_to_the_end_and_the_chain_fits() {
    let set = Set::named("Michelso");
    let mut board = board_with(&set, 100);
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("ledger.sqlite");
    let mut ledger = Ledger::open(Some(&path)).unwrap();
    let (mut session, hello) = Session::open(&mut board).unwrap();
    ledger.meet(&hello, donelight::ledger::UnixMillis(0)).unwrap();
    // The first window is on its way when the power fails.
    let (before, bytes) = session.records(donelight_core::record::Seq::FIRST).unwrap();
    assert!(!bytes.is_empty() && before == donelight_core::chain::Digest::origin(hello.station));
    drop(session);
    restart(&mut board);
    let kept = board.pull(&path);
    assert_readings(&kept, &set.readings());
    let found = Ledger::open_to_read(Some(&path)).unwrap().verify().unwrap().remove(0);
    assert!(found.fits() && found.gaps.is_empty() && found.head.is_some(), "{found:?}");
}
