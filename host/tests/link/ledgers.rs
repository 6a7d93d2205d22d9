//! Ledgers that are new, foreign, newer, damaged, held by others, and what is told of gaps and conflicts.

use std::fs;
use std::path::Path;
use std::time::{Duration, Instant};

use donelight::ledger::{Fate, Gap, Happening, Ledger, LedgerError, SelectError, UnixMillis, Window};
use donelight::link::Session;
use donelight::link::pull::{Cause, pull};
use donelight_core::record::{Event, Millis, RECORD_MAX, Record, Refusal, Seq};
use donelight_core::wire::StationId;
use rusqlite::Connection;

use crate::support::*;

fn refused(path: &Path) -> LedgerError {
    let before = fs::read(path).unwrap();
    let error = Ledger::open(Some(path)).unwrap_err();
    let to_read = Ledger::open_to_read(Some(path)).unwrap_err();
    assert_eq!(error.to_string(), to_read.to_string());
    assert_eq!(fs::read(path).unwrap(), before, "the file is as it was");
    assert_eq!(fs::read_dir(path.parent().unwrap()).unwrap().count(), 1, "and nothing lies beside it");
    error
}

#[test]
fn a_file_that_is_no_ledger_is_refused_and_left_as_it_is() {
    for content in ["lot,thickness\n7,2.001\n", "x", "SQLite format 3\0 but no more than that"] {
        let (_folder, path) = folder();
        fs::write(&path, content).unwrap();
        assert!(matches!(refused(&path), LedgerError::Foreign(_)), "{content:?}");
    }
}

#[test]
fn another_programs_database_is_refused_and_left_as_it_is() {
    for application in ["", "PRAGMA application_id = 1;"] {
        let (_folder, path) = folder();
        let other = Connection::open(&path).unwrap();
        other.execute_batch(&format!("{application} CREATE TABLE lids (thickness REAL);")).unwrap();
        drop(other);
        assert!(matches!(refused(&path), LedgerError::Foreign(_)));
    }
}

#[test]
fn a_ledger_of_a_newer_version_is_refused_and_left_as_it_is() {
    let (_folder, path) = folder();
    drop(open(&path));
    Connection::open(&path).unwrap().pragma_update(None, "user_version", 99).unwrap();
    let error = refused(&path);
    assert!(matches!(error, LedgerError::Newer { version: 99, known: 2, .. }), "{error}");
}

#[test]
fn an_empty_file_becomes_a_ledger() {
    let (_folder, path) = folder();
    fs::write(&path, "").unwrap();
    assert!(matches!(Ledger::open_to_read(Some(&path)), Err(LedgerError::Missing(_))));
    drop(open(&path));
    assert!(Ledger::open_to_read(Some(&path)).is_ok());
}

#[test]
fn a_missing_folder_or_file_is_named() {
    let (_folder, path) = folder();
    assert!(matches!(Ledger::open_to_read(Some(&path)), Err(LedgerError::Missing(_))));
    let deeper = path.with_file_name("no such folder").join("ledger.sqlite");
    assert!(matches!(Ledger::open(Some(&deeper)), Err(LedgerError::NoFolder(_))));
}

#[test]
fn nothing_is_confirmed_to_the_station_when_the_ledger_is_damaged() {
    let (_folder, path) = folder();
    let mut station = station_with_readings(200);
    pull_all(&mut station, &mut open(&path));
    measure(&mut station, 20);
    let released = station.recorder().journal().released();
    // A page of records in the middle of the file is overwritten.
    let mut bytes = fs::read(&path).unwrap();
    let pages = bytes.len() / 4096;
    bytes[(pages - 1) * 4096..].fill(0x5a);
    fs::write(&path, &bytes).unwrap();
    let error = Ledger::open(Some(&path)).unwrap_err();
    assert!(matches!(error, LedgerError::Damaged { .. }), "{error}");
    assert_eq!(station.recorder().journal().released(), released);
}

#[test]
fn a_record_whose_check_sum_does_not_fit_is_named() {
    let (_folder, path) = folder();
    pull_all(&mut station_with_readings(20), &mut open(&path));
    Connection::open(&path)
        .unwrap()
        .execute("UPDATE records SET bytes = (SELECT bytes FROM records WHERE seq = 8) WHERE seq = 7", [])
        .unwrap();
    let error = open(&path).studies().unwrap_err();
    assert!(matches!(error, LedgerError::DamagedRecord { seq: Seq(7), .. }), "{error}");
}

#[test]
fn a_pull_waits_for_another_programs_transaction_but_not_for_ever() {
    let (_folder, path) = folder();
    drop(open(&path));
    let other = Connection::open(&path).unwrap();
    other.execute_batch("BEGIN IMMEDIATE").unwrap();
    let begin = Instant::now();
    let station = std::thread::spawn({
        let path = path.clone();
        move || pull_all(&mut station_with_readings(20), &mut open(&path))
    });
    std::thread::sleep(Duration::from_millis(300));
    assert!(Ledger::open_to_read(Some(&path)).unwrap().studies().is_ok(), "a reader need not wait");
    other.execute_batch("COMMIT").unwrap();
    assert!(station.join().unwrap().new > 20);
    assert!(begin.elapsed() >= Duration::from_millis(300));

    other.execute_batch("BEGIN IMMEDIATE").unwrap();
    let mut ledger = open(&path);
    let begin = Instant::now();
    let error = ledger.note_gap(STATION, Gap { first: Seq(90), last: Seq(91) }, UnixMillis(0)).unwrap_err();
    assert!(matches!(error, LedgerError::Busy(_)), "{error}");
    assert!(begin.elapsed() < Duration::from_secs(20));
}

#[test]
fn two_programs_make_the_same_new_ledger_without_harm() {
    for _ in 0..10 {
        let (_folder, path) = folder();
        std::thread::scope(|scope| {
            for _ in 0..4 {
                scope.spawn(|| drop(open(&path)));
            }
        });
        pull_all(&mut station_with_readings(5), &mut open(&path));
    }
}

#[test]
fn stations_pulled_at_once_into_one_ledger_do_not_disturb_each_other() {
    let (_folder, path) = folder();
    let ids: Vec<StationId> = (1..=3).map(|n| StationId([n; 8])).collect();
    std::thread::scope(|scope| {
        for id in &ids {
            scope.spawn(|| {
                let mut station = with_readings(station_called(*id), 300);
                assert_eq!(pull_all(&mut station, &mut open(&path)).new, 303);
            });
        }
    });
    let ledger = open(&path);
    let studies = ledger.studies().unwrap();
    assert_eq!(studies.iter().map(|kept| kept.key.station).collect::<Vec<_>>(), ids);
    assert!(studies.windows(2).all(|pair| pair[0].study == pair[1].study), "the same readings on each");
    let error = ledger.study(Some("2")).unwrap_err();
    assert!(matches!(error, SelectError::Ambiguous { .. }), "the number alone will not do: {error}");
    assert_eq!(ledger.study(Some("0202020202020202:2")).unwrap().key.station, ids[1]);
}

#[test]
fn numbers_that_the_station_no_longer_has_are_a_gap_and_are_told() {
    let (_folder, path) = folder();
    let (_other_folder, other) = folder();
    let mut station = station_with_readings(30);
    // Another ledger takes the records, and the station makes room by erasing them.
    for _ in 0..12 {
        pull_all(&mut station, &mut open(&other));
        measure(&mut station, 1_000);
    }
    let oldest = station.recorder().journal().oldest().unwrap();
    assert!(oldest > Seq(1_000), "{oldest}");
    let pulled = pull_all(&mut station, &mut open(&path));
    assert_eq!(pulled.gaps, [Gap { first: Seq(1), last: Seq(oldest.0 - 1) }]);
    assert_eq!(rows(&path), journal(&mut station));
    let again = pull_all(&mut station, &mut open(&path));
    assert_eq!((again.new, again.gaps.len()), (0, 0), "told once");
    // The study's plan is in the gap, so this ledger cannot show the study, and says so.
    assert!(matches!(open(&path).study(None), Err(SelectError::NoStudy { .. })));
    assert_eq!(open(&other).studies().unwrap().len(), 1);
}

#[test]
fn a_gap_within_a_study_is_among_its_incidents_and_times_do_not_reach_over_it() {
    let (_folder, path) = folder();
    let mut ledger = open(&path);
    let mut station = station();
    station.pass(1_000);
    Session::open(&mut station).unwrap().0.set_clock(|| 1_000_000).unwrap();
    load(&mut station, &plan("Lids, lot 8"), false).unwrap();
    measure(&mut station, 20);
    let all = journal(&mut station);
    let hello = Session::open(&mut station).unwrap().1;
    ledger.meet(&hello, UnixMillis(7)).unwrap();
    let committed = ledger.commit(STATION, &window(&all, 0..10), UnixMillis(8)).unwrap();
    assert_eq!(committed.new, 10);
    let committed = ledger.commit(STATION, &window(&all, 12..all.len()), UnixMillis(9)).unwrap();
    assert_eq!(committed.gaps, [Gap { first: Seq(11), last: Seq(12) }]);
    let kept = ledger.study(None).unwrap();
    let missing: Vec<_> = kept.incidents.iter().map(|incident| incident.what).collect();
    assert_eq!(missing, [Happening::Missing(Gap { first: Seq(11), last: Seq(12) })]);
    assert!(kept.readings.iter().all(|reading| reading.time.is_some() == (reading.seq < Seq(11))));
    assert_eq!(kept.readings[0].time, Some(UnixMillis(1_000_300)));
    assert_eq!(kept.last_received, UnixMillis(9));
    // What was missing may still come, from a copy of the journal: it is taken.
    ledger.commit(STATION, &window(&all, 10..12), UnixMillis(10)).unwrap();
    assert!(ledger.study(None).unwrap().incidents.is_empty());
    assert_eq!(rows(&path), all);
}

#[test]
fn a_station_that_begins_again_is_refused_and_nothing_is_confirmed() {
    let (_folder, path) = folder();
    pull_all(&mut station_with_readings(60), &mut open(&path));
    let before = rows(&path);
    let mut wiped = station_with_readings(10);
    let (mut session, _) = Session::open(&mut wiped).unwrap();
    let error = pull(&mut session, &mut open(&path), &mut |_| {}).unwrap_err();
    assert!(matches!(error.cause, Cause::BegunAgain { .. }), "{error}");
    drop(session);
    assert_eq!(rows(&path), before);
    assert_eq!(wiped.recorder().journal().released(), Seq(0));
}

#[test]
fn a_wiped_station_that_has_caught_up_is_a_conflict_and_both_records_are_kept() {
    let (_folder, path) = folder();
    let mut first = station_with_readings(10);
    pull_all(&mut first, &mut open(&path));
    let before = rows(&path);
    let mut wiped = station_with_readings(60);
    let (mut session, _) = Session::open(&mut wiped).unwrap();
    let mut ledger = open(&path);
    let error = pull(&mut session, &mut ledger, &mut |_| {}).unwrap_err();
    let last = Seq(before.len() as u32);
    assert!(matches!(error.cause, Cause::Conflict { seq, .. } if seq == last), "{error}");
    drop(session);
    assert_eq!(rows(&path), before);
    assert_eq!(wiped.recorder().journal().released(), Seq(0));
    let conflicts: u32 = Connection::open(&path)
        .unwrap()
        .query_row("SELECT count(*) FROM conflicts", [], |row| row.get(0))
        .unwrap();
    assert_eq!(conflicts, 1);
    let kept = ledger.study(None).unwrap();
    assert_eq!(kept.incidents.last().unwrap().what, Happening::Conflict);
}

#[test]
fn a_study_is_chosen_by_name_by_number_or_as_the_newest() {
    let (_folder, path) = folder();
    assert!(matches!(open(&path).study(None), Err(SelectError::NoStudy { .. })));
    let mut station = station_with_readings(15);
    for name in ["Lids, lot 8", "Lids, lot 7"] {
        load(&mut station, &plan(name), true).unwrap();
        measure(&mut station, 3);
    }
    pull_all(&mut station, &mut open(&path));
    let ledger = open(&path);
    let studies = ledger.studies().unwrap();
    assert_eq!(studies.len(), 3);
    let began = |selector: Option<&str>| ledger.study(selector).unwrap().key;
    assert_eq!(began(None), studies[2].key);
    assert_eq!(began(Some("Lids, lot 8")), studies[1].key);
    assert_eq!(began(Some(&studies[0].key.to_string())), studies[0].key);
    assert_eq!(began(Some(&studies[0].key.began.to_string())), studies[0].key);
    let error = ledger.study(Some("Lids, lot 7")).unwrap_err();
    assert!(matches!(&error, SelectError::Ambiguous { candidates, .. } if candidates.len() == 2), "{error}");
    let error = ledger.study(Some("Lids, lot 9")).unwrap_err();
    assert!(error.to_string().contains("Lids, lot 8"), "{error}");
}

#[test]
fn what_did_not_go_straight_is_told_with_its_record() {
    let (_folder, path) = folder();
    let mut station = station_with_readings(5);
    station.gauge(b"2.0004 mm\r\n2.0004 mm\r\n");
    station.pass(2_000);
    let now = station.station_time();
    station.recorder().press(now, donelight_core::recorder::Button::TakeBack);
    pull_all(&mut station, &mut open(&path));
    let kept = open(&path).study(None).unwrap();
    let happenings: Vec<_> = kept.incidents.iter().map(|incident| (incident.seq, incident.what)).collect();
    let refused = Refusal::Reading(donelight_core::counts::ReadingError::FinerThanResolution);
    assert_eq!(
        happenings,
        [(Seq(8), Happening::Refused { reason: refused, times: 2 }), (Seq(9), Happening::TakenBack(Seq(7))),]
    );
    assert_eq!(kept.readings.last().unwrap().fate, Fate::TakenBack);
    assert!(kept.readings.iter().all(|reading| reading.time.is_some()), "by the clock that the pull set");
}

#[test]
fn a_record_of_a_newer_kind_is_kept_and_told() {
    let (_folder, path) = folder();
    let mut station = station_with_readings(3);
    let mut ledger = open(&path);
    let pulled = pull_all(&mut station, &mut ledger);
    let seq = pulled.through.next();
    let record = Record { seq, at: Millis(99), event: Event::Boot { boot: 1 } };
    let mut buffer = [0; RECORD_MAX];
    let mut newer = record.encode(&mut buffer).unwrap().to_vec();
    // The event's number becomes one that no version knows yet, and the seal is made anew.
    let at = newer.len() - 4 - 2;
    newer[at] = 99;
    let sealed = newer.len() - 4;
    let sum = crc::Crc::<u32>::new(&crc::CRC_32_ISCSI).checksum(&newer[..sealed]).to_le_bytes();
    newer[sealed..].copy_from_slice(&sum);
    let before = ledger.head(STATION).unwrap().unwrap().1.unwrap();
    ledger.commit(STATION, &Window { before, records: vec![(seq, &newer)] }, UnixMillis(1)).unwrap();
    let kept = ledger.study(None).unwrap();
    assert_eq!(kept.incidents.last().unwrap().what, Happening::UnknownKind);
    assert_eq!(kept.readings.len(), 3);
}
