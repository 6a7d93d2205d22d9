//! Backups, restores, and ledgers of earlier versions.

use std::fs;
use std::path::{Path, PathBuf};
use std::process::Command;

use donelight::ledger::{BackupError, Ledger, LedgerError};
use rusqlite::Connection;
use serde_json::Value;

use crate::support::*;

fn donelight(arguments: &[&str]) -> (i32, Value, String) {
    let output =
        Command::new(env!("CARGO_BIN_EXE_donelight")).args(arguments).arg("--json").output().unwrap();
    let json = serde_json::from_slice(&output.stdout).unwrap();
    (output.status.code().unwrap(), json, String::from_utf8(output.stderr).unwrap())
}

/// A folder with a ledger of 40 readings and a backup of it.
fn backed_up() -> (tempfile::TempDir, PathBuf, PathBuf) {
    let (folder, path) = folder();
    pull_all(&mut station_with_readings(40), &mut open(&path));
    let backup = folder.path().join("backup.sqlite");
    open(&path).backup(&backup, false).unwrap();
    (folder, path, backup)
}

fn names(folder: &Path) -> Vec<String> {
    let mut names: Vec<String> = fs::read_dir(folder)
        .unwrap()
        .map(|entry| entry.unwrap().file_name().into_string().unwrap())
        .filter(|name| !name.ends_with("-wal") && !name.ends_with("-shm"))
        .collect();
    names.sort();
    names
}

#[test]
fn a_backup_holds_all_that_the_ledger_holds_and_is_one_file() {
    let (folder, path, backup) = backed_up();
    assert_eq!(rows(&backup), rows(&path));
    let copy = Ledger::open_to_read(Some(&backup)).unwrap();
    assert_eq!(copy.verify().unwrap(), open(&path).verify().unwrap());
    assert_eq!(copy.study(None).unwrap().fingerprint, open(&path).study(None).unwrap().fingerprint);
    assert_eq!(names(folder.path()), ["backup.sqlite", "ledger.sqlite"]);
}

#[test]
fn a_backup_is_made_while_another_program_pulls() {
    let (folder, path) = folder();
    let mut station = station_with_readings(40);
    pull_all(&mut station, &mut open(&path));
    measure(&mut station, 2_000);
    let mut copies = Vec::new();
    std::thread::scope(|scope| {
        scope.spawn(|| pull_all(&mut station, &mut open(&path)));
        for number in 0..5 {
            let backup = folder.path().join(format!("{number}.sqlite"));
            let saved = Ledger::open_to_read(Some(&path)).unwrap().backup(&backup, false).unwrap();
            assert!(saved.stations.iter().all(|station| station.misfit.is_none()), "{saved:?}");
            copies.push(rows(&backup));
        }
    });
    let all = rows(&path);
    assert_eq!(all, journal(&mut station));
    for copy in copies {
        assert!(copy.len() > 40 && copy == all[..copy.len()], "whole windows");
    }
}

#[test]
fn a_file_that_is_there_is_replaced_only_when_asked_and_never_the_ledger_itself() {
    let (_folder, path, backup) = backed_up();
    let [ledger, out] = [&path, &backup].map(|path| path.to_str().unwrap());
    let (code, json, _) = donelight(&["ledger", "backup", out, "--ledger", ledger]);
    assert_eq!((code, &json["error"]["kind"]), (1, &"file-exists".into()));
    let (code, json, _) = donelight(&["ledger", "backup", out, "--ledger", ledger, "--force"]);
    assert_eq!((code, &json["records"]), (0, &43.into()), "{json}");
    let (code, json, _) = donelight(&["ledger", "backup", ledger, "--ledger", ledger, "--force"]);
    assert_eq!((code, &json["error"]["kind"]), (2, &"writes-over-its-source".into()));
    assert_eq!(rows(&path), rows(&backup));
}

#[cfg(unix)]
#[test]
fn a_backup_that_does_not_fit_the_disk_leaves_nothing_behind() {
    let (folder, path) = folder();
    pull_all(&mut station_with_readings(3_000), &mut open(&path));
    let out = folder.path().join("backup.sqlite");
    let output = Command::new("sh")
        .args(["-c", "trap '' XFSZ; ulimit -f 64; exec \"$@\"", "sh", env!("CARGO_BIN_EXE_donelight")])
        .args(["ledger", "backup", "--json"])
        .arg(&out)
        .arg("--ledger")
        .arg(&path)
        .output()
        .unwrap();
    assert_eq!(output.status.code(), Some(1), "{output:?}");
    assert_eq!(names(folder.path()), ["ledger.sqlite"]);
}

#[test]
fn a_lost_ledger_is_restored_and_the_next_pull_goes_on_from_it() {
    let (folder, path) = folder();
    let mut station = station_with_readings(40);
    pull_all(&mut station, &mut open(&path));
    let backup = folder.path().join("backup.sqlite");
    open(&path).backup(&backup, false).unwrap();
    let before = rows(&path);
    measure(&mut station, 20);
    fs::remove_file(&path).unwrap();
    let (restored, saved) = Ledger::restore(&backup, Some(&path), false).unwrap();
    assert_eq!((restored, saved.records()), (path.clone(), before.len() as u64));
    assert_eq!(rows(&path), before);
    pull_all(&mut station, &mut open(&path));
    assert_eq!(rows(&path), journal(&mut station));
    assert!(open(&path).verify().unwrap()[0].fits());
}

#[test]
fn a_ledger_with_records_that_the_backup_lacks_is_kept_unless_they_are_given_up_plainly() {
    let (_folder, path, backup) = backed_up();
    let another = station_called(donelight_core::wire::StationId([9; 8]));
    pull_all(&mut with_readings(another, 7), &mut open(&path));
    let before = fs::read(&path).unwrap();
    let error = Ledger::restore(&backup, Some(&path), false).unwrap_err();
    let BackupError::Lacks { lacks, .. } = &error else { panic!("{error}") };
    assert_eq!((lacks.len(), lacks[0].records, lacks[0].first.0), (1, 10, 1), "{error}");
    assert_eq!(fs::read(&path).unwrap(), before, "as it was");
    let [ledger, out] = [&path, &backup].map(|path| path.to_str().unwrap());
    let (code, json, err) = donelight(&["ledger", "restore", out, "--ledger", ledger]);
    assert_eq!((code, &json["error"]["kind"]), (1, &"backup-lacks-records".into()));
    assert!(err.contains("--discard") && err.contains("0909090909090909"), "{err}");
    let (code, _, _) = donelight(&["ledger", "restore", out, "--ledger", ledger, "--discard"]);
    assert_eq!(code, 0);
    assert_eq!(rows(&path), rows(&backup));
    assert_eq!(open(&path).stations().unwrap().len(), 1);
}

#[test]
fn a_restore_that_would_change_a_known_record_is_refused() {
    let (_folder, path, backup) = backed_up();
    let connection = Connection::open(&path).unwrap();
    let sql = "UPDATE records SET bytes = (SELECT bytes FROM records WHERE seq = 8) WHERE seq = 7";
    connection.execute(sql, []).unwrap();
    drop(connection);
    let error = Ledger::restore(&backup, Some(&path), false).unwrap_err();
    assert!(matches!(&error, BackupError::Lacks { lacks, .. } if lacks[0].first.0 == 7), "{error}");
    Ledger::restore(&backup, Some(&path), true).unwrap();
    assert!(open(&path).verify().unwrap()[0].fits());
}

#[test]
fn a_damaged_ledger_is_replaced_only_when_asked_and_then_works_again() {
    let (_folder, path, backup) = backed_up();
    let mut bytes = fs::read(&path).unwrap();
    let pages = bytes.len() / 4096;
    bytes[4096..pages * 4096].fill(0x5a);
    fs::write(&path, &bytes).unwrap();
    let error = Ledger::restore(&backup, Some(&path), false).unwrap_err();
    assert!(matches!(error, BackupError::Unreadable { .. }), "{error}");
    assert_eq!(fs::read(&path).unwrap(), bytes);
    Ledger::restore(&backup, Some(&path), true).unwrap();
    assert_eq!(rows(&path), rows(&backup));
}

#[test]
fn what_is_no_backup_is_refused_and_nothing_is_changed() {
    let (folder, path, backup) = backed_up();
    let before = fs::read(&path).unwrap();
    let text = folder.path().join("text");
    fs::write(&text, "no ledger").unwrap();
    let refused = |backup: &Path| Ledger::restore(backup, Some(&path), true).unwrap_err();
    assert!(matches!(refused(&text), BackupError::Ledger(LedgerError::Foreign(_))));
    assert!(matches!(refused(&folder.path().join("none")), BackupError::Ledger(LedgerError::Missing(_))));
    assert!(matches!(refused(&path), BackupError::Write(_)), "itself");
    let connection = Connection::open(&backup).unwrap();
    connection.execute("DELETE FROM records WHERE seq = 9", []).unwrap();
    connection.close().unwrap();
    assert!(matches!(refused(&backup), BackupError::Misfit { .. }));
    // Nor is a file that is no ledger ever restored into.
    let (_other, _, good) = backed_up();
    let error = Ledger::restore(&good, Some(&text), true).unwrap_err();
    assert!(matches!(error, BackupError::Ledger(LedgerError::Foreign(_))), "{error}");
    assert_eq!(fs::read(&text).unwrap(), b"no ledger");
    assert_eq!(fs::read(&path).unwrap(), before);
}

/// Written by version 0.1.0's schema 1, from before there was a chain: `donelight demo`, 220 records.
const SCHEMA_1: &[u8] = include_bytes!("../fixtures/ledger-schema-1.sqlite");

fn schema_1() -> (tempfile::TempDir, PathBuf) {
    let (folder, path) = folder();
    fs::write(&path, SCHEMA_1).unwrap();
    (folder, path)
}

fn all_bytes(path: &Path) -> Vec<(Vec<u8>, u32, Vec<u8>, i64)> {
    let connection = Connection::open(path).unwrap();
    let mut query =
        connection.prepare("SELECT station, seq, bytes, received_ms FROM records ORDER BY 1, 2").unwrap();
    let rows = query.query_map([], |row| Ok((row.get(0)?, row.get(1)?, row.get(2)?, row.get(3)?)));
    rows.unwrap().map(Result::unwrap).collect()
}

#[test]
fn a_ledger_of_schema_1_is_brought_up_with_every_record_as_it_was() {
    let (_folder, path) = schema_1();
    let before = all_bytes(&path);
    assert_eq!(before.len(), 220);
    let ledger = open(&path);
    assert_eq!(all_bytes(&path), before);
    let version: u32 =
        Connection::open(&path).unwrap().pragma_query_value(None, "user_version", |row| row.get(0)).unwrap();
    assert_eq!(version, 2);
    let found = ledger.verify().unwrap().remove(0);
    assert_eq!((found.records, found.unchained, found.head, found.misfit), (220, 220, None, None));
    let kept = ledger.study(None).unwrap();
    assert_eq!((kept.study.progress().n.get(), kept.chain), (214, None));
}

#[test]
fn a_ledger_of_schema_1_is_read_and_backed_up_without_being_changed() {
    let (folder, path) = schema_1();
    let report = donelight(&["report", "--ledger", path.to_str().unwrap()]);
    assert_eq!((report.0, &report.1["n"]), (0, &214.into()));
    let (code, json, _) = donelight(&["ledger", "verify", "--ledger", path.to_str().unwrap()]);
    assert_eq!((code, &json["stations"][0]["unchained"]), (0, &220.into()), "{json}");
    let out = folder.path().join("backup.sqlite");
    let (code, _, _) =
        donelight(&["ledger", "backup", out.to_str().unwrap(), "--ledger", path.to_str().unwrap()]);
    assert_eq!(code, 0);
    assert_eq!(fs::read(&path).unwrap(), SCHEMA_1);
}

#[test]
fn a_damaged_ledger_of_schema_1_is_told_and_not_brought_up() {
    let (_folder, path) = schema_1();
    let mut bytes = SCHEMA_1.to_vec();
    let pages = bytes.len() / 4096;
    bytes[(pages - 1) * 4096..].fill(0x5a);
    fs::write(&path, &bytes).unwrap();
    let error = Ledger::open(Some(&path)).unwrap_err();
    assert!(matches!(error, LedgerError::Damaged { .. }), "{error}");
    assert_eq!(fs::read(&path).unwrap(), bytes);
}
