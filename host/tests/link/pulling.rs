//! Pulling over a good line.

use std::process::Command;

use donelight::ledger::Fate;
use donelight::link::Session;
use donelight::link::memory::MemoryLink;
use donelight::link::pull::pull;
use donelight::virtual_station::flash::RamFlash;
use donelight_core::plan::{Draft, Plan};
use donelight_core::recorder::Button;
use donelight_core::sigma::{Sigma, SubgroupSize};
use donelight_core::stopping::Standing;

use crate::support::*;

#[test]
fn the_ledger_holds_the_journal_word_for_word() {
    let (_folder, path) = folder();
    let mut station = station_with_readings(200);
    let pulled = pull_all(&mut station, &mut open(&path));
    let journal = journal(&mut station);
    assert_eq!(rows(&path), journal);
    assert_eq!(pulled.new as usize, journal.len());
    assert!(pulled.gaps.is_empty());
    let (mut session, _) = Session::open(&mut station).unwrap();
    assert_eq!(session.status().unwrap().unconfirmed, 0, "all is confirmed");
}

#[test]
fn pulling_twice_changes_nothing() {
    let (_folder, path) = folder();
    let mut station = station_with_readings(60);
    pull_all(&mut station, &mut open(&path));
    let before = rows(&path);
    let again = pull_all(&mut station, &mut open(&path));
    assert_eq!(again.new, 0);
    assert_eq!(rows(&path), before);
}

#[test]
fn the_study_in_the_ledger_is_the_study_on_the_station() {
    let (_folder, path) = folder();
    let mut station = station_with_readings(40);
    station
        .recorder()
        .press(donelight_core::record::Millis(14_000), donelight_core::recorder::Button::TakeBack);
    pull_all(&mut station, &mut open(&path));
    let kept = open(&path).study(None).unwrap();
    assert_eq!(Some(&kept.study), station.recorder().station().study());
    assert_eq!(kept.study.standing(), Standing::Settled);
    let fates = |fate| kept.readings.iter().filter(|reading| reading.fate == fate).count();
    let progress = kept.study.progress();
    assert_eq!(kept.readings.len(), 40);
    assert_eq!(fates(Fate::Counted), progress.n.get() as usize);
    assert_eq!(fates(Fate::Surplus), progress.surplus as usize);
    assert_eq!(fates(Fate::TakenBack), 1);
}

/// Eight readings, one taken back and measured anew: the second subgroup has another third piece, on the station and in the
/// report alike.
#[test]
fn a_study_in_subgroups_is_kept_and_reported_with_its_sigma() {
    let (_folder, path) = folder();
    let mut station = station();
    station.pass(1_000);
    let three = SubgroupSize::new(3).unwrap();
    let draft = Draft { sigma: Sigma::Pooled(three), ..plan("Lids in threes").into() };
    load(&mut station, &Plan::try_from(draft).unwrap(), false).unwrap();
    let send = |station: &mut MemoryLink, micrometres: u32| {
        station.pass(300);
        station.gauge(format!("2.0{micrometres:02} mm\r\n").as_bytes());
    };
    [1, 4, 1, 20, 23, 99].into_iter().for_each(|reading| send(&mut station, reading));
    let now = station.station_time();
    station.recorder().press(now, Button::TakeBack);
    [20, 40].into_iter().for_each(|reading| send(&mut station, reading));
    pull_all(&mut station, &mut open(&path));

    let kept = open(&path).study(None).unwrap();
    assert_eq!(Some(&kept.study), station.recorder().station().study());
    let sample = kept.study.sample().unwrap();
    // Both subgroups have deviations of −1, +2 and −1 µm: 6 + 6 on 2 + 2 degrees of freedom; the seventh piece waits.
    assert!((sample.sigma() - 0.003_f64.sqrt() / 1_000_f64.sqrt()).abs() < 1e-18, "{}", sample.sigma());
    assert_eq!((sample.nu().get(), sample.n().get()), (4.0, 7));
    let report = Command::new(env!("CARGO_BIN_EXE_donelight"))
        .args(["report", "--json", "--ledger"])
        .arg(&path)
        .output()
        .unwrap();
    let json: serde_json::Value = serde_json::from_slice(&report.stdout).unwrap();
    assert_eq!(json["sigma_estimate"], sample.sigma());
    assert_eq!(json["estimate"], kept.study.estimate().unwrap().estimate);
    assert_eq!((&json["sigma"], &json["name"], &json["n"]), (&"pooled".into(), &"Cpk".into(), &7.into()));
}

#[test]
fn progress_reaches_its_end() {
    let (_folder, path) = folder();
    let mut station = station_with_readings(300);
    let mut ledger = open(&path);
    let (mut session, hello) = Session::open(&mut station).unwrap();
    let mut told = Vec::new();
    pull(&mut session, &mut ledger, &mut |progress| told.push(progress)).unwrap();
    assert!(told.len() > 3, "several windows: {told:?}");
    assert!(told.windows(2).all(|pair| pair[0].total != pair[1].total || pair[0].done < pair[1].done));
    let whole = told.iter().rfind(|progress| progress.total == hello.next.0 - 1).unwrap();
    assert_eq!(whole.done, whole.total);
}

#[test]
fn an_empty_station_with_the_picos_flash_says_that_more_than_fifty_thousand_readings_fit() {
    let mut station = MemoryLink::start(RamFlash::blank(256), STATION).unwrap();
    station.pass(1_000);
    let room = Session::open(&mut station).unwrap().0.status().unwrap().room;
    assert_eq!(room, 52_559);
}
