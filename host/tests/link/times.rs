//! Wall times of what was recorded before the station's clock was set, over several boots within one pull.

use donelight::ledger::{Bounds, Kept, Ledger, UnixMillis};
use donelight::link::Session;
use donelight::link::memory::MemoryLink;
use donelight::link::pull::pull;
use donelight::virtual_station::flash::RamFlash;

use crate::support::*;

/// The power goes; the station starts on the same flash, its time at 0 again.
fn reboot(mut station: MemoryLink) -> MemoryLink {
    let flash: RamFlash = station.recorder().journal().flash().clone();
    MemoryLink::start(flash, STATION).unwrap()
}

fn set_clock(station: &mut MemoryLink, unix_ms: u64) {
    Session::open(station).unwrap().0.set_clock(|| unix_ms).unwrap();
}

/// 20 readings in a boot whose clock is set at its end only, 10 in one without, 10 in one whose clock is set between.
fn three_boots() -> MemoryLink {
    let mut station = station();
    station.pass(1_000);
    load(&mut station, &plan("Lids, lot 9"), false).unwrap();
    measure(&mut station, 20);
    set_clock(&mut station, 1_000_000_000_000);
    let mut station = reboot(station);
    station.pass(400);
    measure(&mut station, 10);
    let mut station = reboot(station);
    measure(&mut station, 5);
    set_clock(&mut station, 1_000_000_060_000);
    measure(&mut station, 5);
    station
}

fn kept_of(station: &mut MemoryLink) -> Kept {
    let (_folder, path) = folder();
    let mut ledger: Ledger = open(&path);
    let (mut session, _) = Session::open(station).unwrap();
    pull(&mut session, &mut ledger, &mut |_| {}).unwrap();
    ledger.study(None).unwrap()
}

#[test]
fn readings_from_before_the_clock_was_set_get_their_wall_time_by_the_clock_of_their_boot() {
    let kept = kept_of(&mut three_boots());
    let times: Vec<Option<i64>> = kept.readings.iter().map(|r| r.time.map(|time| time.0)).collect();
    // The 20th reading came just when the clock was set, one every 300 ms before it.
    let first: Vec<_> = (0..20).map(|i| Some(1_000_000_000_000 - 300 * (19 - i))).collect();
    assert_eq!(times[..20], first);
    assert!(times[20..30].iter().all(Option::is_none), "nobody told that boot the time");
    let last: Vec<_> = (0..10).map(|i| Some(1_000_000_060_000 + 300 * (i - 4))).collect();
    assert_eq!(times[30..], last);
}

#[test]
fn readings_of_a_boot_without_a_clock_lie_between_the_boots_around_it() {
    let kept = kept_of(&mut three_boots());
    for (i, reading) in kept.readings[20..30].iter().enumerate() {
        let i = i as i64;
        let Bounds { earliest: Some(earliest), latest: Some(latest) } = reading.bounds else {
            panic!("{:?}", reading.bounds)
        };
        // That boot came after the first clock and its readings 700, 1,000 … ms into it; it ended before the last boot,
        // which was 1,500 ms old when its clock was set.
        assert_eq!(earliest.0, 1_000_000_000_000 + 700 + 300 * i);
        assert_eq!(latest.0, 1_000_000_058_500 - 300 * (9 - i));
    }
    let known = &kept.readings[35];
    assert_eq!((known.bounds.earliest, known.bounds.latest), (known.time, known.time));
}

#[test]
fn with_a_later_anchor_only_the_latest_time_is_known() {
    let mut station = station_with_readings(5);
    station = reboot(station);
    measure(&mut station, 1);
    let kept = kept_of(&mut station);
    // The pull itself set the clock of the second boot.
    let now = UnixMillis::now();
    for reading in &kept.readings[..5] {
        assert_eq!((reading.time, reading.bounds.earliest), (None, None));
        let latest = reading.bounds.latest.expect("the second boot's clock");
        assert!(latest < now && now.0 - latest.0 < 60_000, "{latest}");
    }
    assert!(kept.readings[5].time.is_some());
}
