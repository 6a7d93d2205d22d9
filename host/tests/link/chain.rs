//! The chain from station to ledger: what was changed, left out or swapped is named, and is not taken in silence.

use std::path::Path;
use std::process::Command;

use donelight::ledger::verify::{Verified, Why};
use donelight::ledger::{Gap, Ledger, UnixMillis};
use donelight::link::Session;
use donelight::link::memory::MemoryLink;
use donelight::link::pull::{Cause, PullError, pull};
use donelight_core::chain::Digest;
use donelight_core::record::{Record, Seq};
use donelight_core::wire::StationId;
use rusqlite::{Connection, params};
use serde_json::Value;

use crate::support::*;

/// A ledger that a station of 60 readings was pulled into.
fn kept() -> (tempfile::TempDir, std::path::PathBuf, MemoryLink) {
    let (folder, path) = folder();
    let mut station = station_with_readings(60);
    pull_all(&mut station, &mut open(&path));
    (folder, path, station)
}

fn change(path: &Path, sql: &str) {
    assert!(Connection::open(path).unwrap().execute(sql, []).unwrap() > 0, "{sql}");
}

fn verified(path: &Path) -> Verified {
    let mut stations = Ledger::open_to_read(Some(path)).unwrap().verify().unwrap();
    assert_eq!(stations.len(), 1);
    stations.remove(0)
}

/// The first record that does not fit.
fn misfit(path: &Path) -> (Seq, Why) {
    let misfit = verified(path).misfit.expect("something does not fit");
    (misfit.seq, misfit.why)
}

/// Another reading under the same number, with a check sum that fits.
fn forged(bytes: &[u8]) -> Vec<u8> {
    let mut record = Record::decode(bytes).unwrap();
    record.at.0 += 1;
    record.encode(&mut [0; 224]).unwrap().to_vec()
}

fn pull_error(station: &mut MemoryLink, path: &Path) -> PullError {
    let (mut session, _) = Session::open(station).unwrap();
    pull(&mut session, &mut open(path), &mut |_| {}).unwrap_err()
}

#[test]
fn every_record_is_kept_with_the_digest_that_the_station_has_there() {
    let (_folder, path, mut station) = kept();
    let digests: Vec<Digest> = {
        let connection = Connection::open(&path).unwrap();
        let mut query = connection.prepare("SELECT digest FROM records ORDER BY seq").unwrap();
        query.query_map([], |row| row.get(0).map(Digest)).unwrap().map(Result::unwrap).collect()
    };
    let mut digest = Digest::origin(STATION);
    let expected: Vec<Digest> = journal(&mut station)
        .iter()
        .map(|(_, bytes)| {
            digest = digest.then(bytes);
            digest
        })
        .collect();
    assert_eq!(digests, expected);
    assert_eq!(station.recorder().journal().digest(), digest);
    let found = verified(&path);
    assert_eq!((found.head, found.records as usize, found.misfit), (Some(digest), digests.len(), None));
    assert_eq!(open(&path).study(None).unwrap().chain, Some(digest));
}

#[test]
fn a_record_that_was_changed_is_named_even_if_its_check_sum_was_made_to_fit() {
    let (_folder, path, _) = kept();
    let bytes = forged(&rows(&path)[29].1);
    let connection = Connection::open(&path).unwrap();
    connection.execute("UPDATE records SET bytes = ?1 WHERE seq = 30", [bytes]).unwrap();
    drop(connection);
    assert_eq!(misfit(&path), (Seq(30), Why::Chain));
    change(&path, "UPDATE records SET bytes = x'00112233' WHERE seq = 12");
    let (seq, why) = misfit(&path);
    assert!(seq == Seq(12) && matches!(why, Why::Bytes(_)), "{seq} {why}");
}

#[test]
fn records_that_were_swapped_taken_out_or_put_in_are_named() {
    let (_folder, path, _) = kept();
    let all = rows(&path);
    let restore = |seq: u32| {
        let connection = Connection::open(&path).unwrap();
        connection
            .execute("UPDATE records SET bytes = ?1 WHERE seq = ?2", params![all[seq as usize - 1].1, seq])
            .unwrap();
    };
    change(&path, "UPDATE records SET bytes = (SELECT bytes FROM records WHERE seq = 8) WHERE seq = 7");
    assert_eq!(misfit(&path).0, Seq(7));
    restore(7);
    assert_eq!(verified(&path).misfit, None);
    change(&path, "UPDATE records SET digest = zeroblob(16) WHERE seq = 21");
    assert_eq!(misfit(&path), (Seq(21), Why::Chain));
    change(&path, "DELETE FROM records WHERE seq = 20");
    assert_eq!(misfit(&path), (Seq(21), Why::Missing));
    change(&path, "DELETE FROM records WHERE seq < 20");
    assert_eq!(misfit(&path), (Seq(21), Why::Missing));
}

#[test]
fn without_its_digest_a_record_in_the_chain_does_not_fit() {
    let (_folder, path, _) = kept();
    change(&path, "UPDATE records SET digest = NULL WHERE seq = 40");
    assert_eq!(misfit(&path), (Seq(40), Why::Chain));
}

#[test]
fn the_command_names_the_record_and_scripts_can_trust_its_exit_code() {
    let (_folder, path, _) = kept();
    let verify = |path: &Path| -> (i32, Value, String) {
        let command = || {
            let mut command = Command::new(env!("CARGO_BIN_EXE_donelight"));
            command.args(["ledger", "verify", "--ledger"]).arg(path);
            command
        };
        let words = command().output().unwrap();
        let json = command().arg("--json").output().unwrap();
        assert_eq!(words.status.code(), json.status.code());
        let text = String::from_utf8(words.stdout).unwrap();
        (json.status.code().unwrap(), serde_json::from_slice(&json.stdout).unwrap(), text)
    };
    let (code, json, text) = verify(&path);
    assert_eq!(
        (code, &json["fits"], &json["stations"][0]["through"]),
        (0, &true.into(), &63.into()),
        "{json}"
    );
    assert!(text.contains("63 records, through 63, all fit"), "{text}");
    assert!(text.contains(json["stations"][0]["chain"].as_str().unwrap()), "{text}");
    change(&path, "UPDATE records SET bytes = (SELECT bytes FROM records WHERE seq = 8) WHERE seq = 7");
    let (code, json, text) = verify(&path);
    assert_eq!((code, &json["fits"], &json["stations"][0]["misfit"]["seq"]), (1, &false.into(), &7.into()));
    assert!(text.contains("record 7 does not fit"), "{text}");
}

#[test]
fn a_pull_into_a_ledger_that_was_changed_takes_nothing_and_confirms_nothing() {
    let (_folder, path, mut station) = kept();
    // The last known record, which each pull asks for again, still has its bytes but another digest: what stands before it
    // is not what the station wrote.
    change(&path, "UPDATE records SET digest = zeroblob(16) WHERE seq = 63");
    measure(&mut station, 10);
    let released = station.recorder().journal().released();
    let error = pull_error(&mut station, &path);
    assert!(matches!(error.cause, Cause::Misfit { seq: Seq(63), station: STATION }), "{error}");
    assert!(error.to_string().contains("record 63"), "{error}");
    assert_eq!(rows(&path).len(), 63);
    assert_eq!(station.recorder().journal().released(), released);
}

#[test]
fn a_record_behind_a_changed_history_is_not_stored() {
    let (_folder, path, mut station) = kept();
    measure(&mut station, 10);
    let all = journal(&mut station);
    let mut ledger = open(&path);
    let mut strange = window(&all, 63..73);
    strange.before = Digest([9; 16]);
    let committed = ledger.commit(STATION, &strange, UnixMillis(1)).unwrap();
    assert_eq!((committed.new, committed.misfit), (0, Some(Seq(64))));
    assert_eq!(rows(&path).len(), 63);
    // Known records that would continue otherwise are refused where they differ.
    let mut known = window(&all, 50..73);
    known.before = Digest([9; 16]);
    assert_eq!(ledger.commit(STATION, &known, UnixMillis(1)).unwrap().misfit, Some(Seq(51)));
    let other = window(&all, 0..5);
    let committed = ledger.commit(StationId([8; 8]), &other, UnixMillis(1)).unwrap();
    assert_eq!(committed.misfit, Some(Seq(1)), "the records of one station are not another's");
    assert_eq!(ledger.commit(STATION, &window(&all, 63..73), UnixMillis(1)).unwrap().new, 10);
}

#[test]
fn the_chain_goes_on_behind_a_gap_and_verify_tells_it() {
    let (_folder, path) = folder();
    let mut station = station_with_readings(200);
    // Behind two sectors of checkpoints the pages stand in order.
    station.recorder().journal().flash().medium()[2 * 4096 + 5 * 256 + 40] ^= 1;
    let pulled = pull_all(&mut station, &mut open(&path));
    assert_eq!(pulled.gaps.len(), 1);
    let found = verified(&path);
    assert_eq!((found.misfit, &found.gaps), (None, &pulled.gaps));
    assert_eq!(found.head, Some(station.recorder().journal().digest()));
    let Gap { first, last } = pulled.gaps[0];
    let said = Command::new(env!("CARGO_BIN_EXE_donelight"))
        .args(["ledger", "verify", "--ledger"])
        .arg(&path)
        .output()
        .unwrap();
    let said = String::from_utf8(said.stdout).unwrap();
    assert!(said.contains(&format!("gap, from {first} to {last}")), "{said}");
    // What stands right behind the gap is in the chain as well.
    let behind = last.next();
    let bytes = forged(&rows(&path).iter().find(|(seq, _)| *seq == behind.0).unwrap().1);
    let connection = Connection::open(&path).unwrap();
    connection.execute("UPDATE records SET bytes = ?1 WHERE seq = ?2", params![bytes, behind.0]).unwrap();
    drop(connection);
    assert_eq!(misfit(&path), (behind, Why::Chain));
}

#[test]
fn a_record_taken_out_under_a_noted_gap_elsewhere_is_still_named() {
    let (_folder, path) = folder();
    let mut station = station_with_readings(200);
    station.recorder().journal().flash().medium()[2 * 4096 + 5 * 256 + 40] ^= 1;
    let gap = pull_all(&mut station, &mut open(&path)).gaps[0];
    change(&path, &format!("DELETE FROM records WHERE seq = {}", gap.last.0 + 2));
    assert_eq!(misfit(&path), (Seq(gap.last.0 + 3), Why::Missing));
    change(&path, &format!("DELETE FROM records WHERE seq = {}", gap.first.0 - 1));
    assert_eq!(misfit(&path), (gap.last.next(), Why::Missing));
}
