//! How many records a second the host verifies and stores, against the budget in `budgets.toml`.
//!
//! A station in memory holds a full working week of readings. They go through frames, check sums, windows and SQLite
//! transactions to the disk, then back as a study; the station's own share of the time is counted in.

use std::process::ExitCode;
use std::time::Instant;

use donelight::ledger::Ledger;
use donelight::link::Session;
use donelight::link::memory::MemoryLink;
use donelight::link::pull::pull;
use donelight::plan_file;
use donelight::virtual_station::flash::RamFlash;
use donelight_core::wire::StationId;
use donelight_tests::budgets;

const READINGS: u32 = 40_000;

fn main() -> ExitCode {
    let mut station = measured();
    let folder = tempfile::tempdir().expect("a temporary folder");
    let mut ledger = Ledger::open(Some(&folder.path().join("ledger.sqlite"))).expect("a new ledger");

    let begin = Instant::now();
    let (mut session, _) = Session::open(&mut station).expect("the station answers");
    let pulled = pull(&mut session, &mut ledger, &mut |_| {}).expect("the line is good");
    let stored = begin.elapsed();
    assert!(pulled.new > READINGS && pulled.gaps.is_empty(), "{pulled:?}");

    let begin = Instant::now();
    let kept = ledger.study(None).expect("the study is there");
    let replayed = begin.elapsed();
    assert_eq!(kept.readings.len(), READINGS as usize);

    let a_second = f64::from(pulled.new) / stored.as_secs_f64();
    println!("host: {} records verified and stored in {stored:.2?}, replayed in {replayed:.2?}", pulled.new);
    budgets::at_least("host.records_per_second_min", a_second)
}

/// Takes the readings a piece at a time, as the gauge sends them.
fn measured() -> MemoryLink {
    let mut station =
        MemoryLink::start(RamFlash::blank(256), StationId(*b"benched!")).expect("the flash suits a journal");
    station.pass(1_000);
    let plan = plan_file::from_text(plan_file::EXAMPLE).expect("the example is valid");
    Session::open(&mut station)
        .and_then(|(mut session, _)| session.load(&plan, false))
        .expect("it is loaded");
    for i in 0..READINGS {
        station.pass(250);
        let thousandths = 11_980 + (i * 7 + i / 13) % 41;
        station.gauge(format!("{}.{:03}\r\n", thousandths / 1_000, thousandths % 1_000).as_bytes());
    }
    station
}
