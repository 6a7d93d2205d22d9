//! Stations, plans and ledgers to test with.

use std::path::{Path, PathBuf};

use donelight::ledger::{Ledger, Window};
use donelight::link::memory::MemoryLink;
use donelight::link::pull::{Pulled, pull};
use donelight::link::{LinkError, Session};
use donelight::virtual_station::flash::RamFlash;
use donelight_core::capability::Index;
use donelight_core::chain::Digest;
use donelight_core::interval::{Kind, Method};
use donelight_core::plan::{Draft, LineSettings, Plan};
use donelight_core::quantity::{Confidence, Count, Millionths, Precision};
use donelight_core::record::Seq;
use donelight_core::sigma::Sigma;
use donelight_core::stopping::{Goal, StoppingRule};
use donelight_core::text::Text;
use donelight_core::wire::StationId;

pub(crate) const STATION: StationId = StationId(*b"\xe6\x60\x44\x30\x43\x01\x02\x03");

/// Settled by 12 pieces of a tight process, spent at 30.
pub(crate) fn plan(name: &str) -> Plan {
    let count = |n| Count::new(n).unwrap();
    Plan::try_from(Draft {
        name: Text::new(name).unwrap(),
        part: Text::new("Lantern lid").unwrap(),
        characteristic: Text::new("Thickness").unwrap(),
        unit: Text::new("mm").unwrap(),
        resolution: "0.001".parse().unwrap(),
        lower: Some("1.95".parse().unwrap()),
        upper: Some("2.05".parse().unwrap()),
        target: None,
        index: Index::Cpk,
        confidence: Confidence::NINETY_FIVE_PERCENT,
        kind: Kind::TwoSided,
        rule: StoppingRule {
            planned: count(12),
            goal: Goal::Precision(Precision::Relative(Millionths(450_000))),
            limit: count(30),
        },
        gauge: LineSettings::default(),
        same_in_a_row: 0,
        sigma: Sigma::Overall,
        method: Method::Bissell,
    })
    .unwrap()
}

/// A fresh station.
pub(crate) fn station() -> MemoryLink {
    station_called(STATION)
}

pub(crate) fn station_called(id: StationId) -> MemoryLink {
    MemoryLink::start(RamFlash::blank(32), id).unwrap()
}

/// A station with a study of so many readings, loaded over the link.
pub(crate) fn station_with_readings(readings: u32) -> MemoryLink {
    with_readings(station(), readings)
}

/// The same on this station.
pub(crate) fn with_readings(mut station: MemoryLink, readings: u32) -> MemoryLink {
    station.pass(1_000);
    load(&mut station, &plan("Lids, lot 7"), false).unwrap();
    measure(&mut station, readings);
    station
}

/// The gauge sends so many readings around 2 mm, one every 300 ms.
pub(crate) fn measure(station: &mut MemoryLink, readings: u32) {
    for i in 0..readings {
        station.pass(300);
        // A fixed, uneven sequence of whole micrometres from 1.990 to 2.010.
        let micrometres = 1_990 + (i * 7 + i * i) % 21;
        station.gauge(format!("{}.{:03} mm\r\n", micrometres / 1_000, micrometres % 1_000).as_bytes());
    }
}

pub(crate) fn load(station: &mut MemoryLink, plan: &Plan, replace: bool) -> Result<Seq, LinkError> {
    Session::open(station).unwrap().0.load(plan, replace)
}

/// A folder for this test alone, and a ledger's path in it.
pub(crate) fn folder() -> (tempfile::TempDir, PathBuf) {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("ledger.sqlite");
    (folder, path)
}

pub(crate) fn open(path: &Path) -> Ledger {
    Ledger::open(Some(path)).unwrap()
}

/// Pulls with the usual patience, which on a station in memory is the station's own time.
pub(crate) fn pull_all(station: &mut MemoryLink, ledger: &mut Ledger) -> Pulled {
    let (mut session, _) = Session::open(station).unwrap();
    pull(&mut session, ledger, &mut |_| {}).unwrap()
}

/// The journal, record by record.
pub(crate) fn journal(station: &mut MemoryLink) -> Vec<(u32, Vec<u8>)> {
    let mut records = Vec::new();
    station
        .recorder()
        .journal()
        .visit(Seq::FIRST, |seq, sealed| {
            records.push((seq.0, sealed.bytes().to_vec()));
            std::ops::ControlFlow::Continue(())
        })
        .unwrap();
    records
}

/// The ledger's records of [`STATION`], as any SQLite program sees them.
pub(crate) fn rows(path: &Path) -> Vec<(u32, Vec<u8>)> {
    let connection = rusqlite::Connection::open(path).unwrap();
    let mut query =
        connection.prepare("SELECT seq, bytes FROM records WHERE station = ?1 ORDER BY seq").unwrap();
    let rows = query.query_map([STATION.0], |row| Ok((row.get(0)?, row.get(1)?))).unwrap();
    rows.map(Result::unwrap).collect()
}

/// These of all of [`STATION`]'s records, as a window.
pub(crate) fn window(all: &[(u32, Vec<u8>)], part: std::ops::Range<usize>) -> Window<'_> {
    let before =
        all[..part.start].iter().fold(Digest::origin(STATION), |digest, (_, bytes)| digest.then(bytes));
    Window { before, records: all[part].iter().map(|(seq, bytes)| (Seq(*seq), bytes.as_slice())).collect() }
}
