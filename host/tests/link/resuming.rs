//! Pulls during which the station is unplugged, plugged in again under another port name, or starts again.

use std::time::{Duration, Instant};

use donelight::link::memory::MemoryLink;
use donelight::link::pull::Cause;
use donelight::link::resume::{at, pull_resumed};
use donelight::link::{LinkError, Session, Transport};
use donelight_core::record::Seq;
use donelight_core::wire::StationId;

use crate::support::*;
use crate::terminal::OnTerminal;

const PATIENCE: Duration = Duration::from_secs(2);

fn session_at(port: &str) -> Session<Box<dyn Transport>> {
    at(STATION, port).expect("the station is there")
}

/// Pulls a station that is unplugged after so many bytes each time and comes back as `back` makes it; gives the number of
/// breaks.
fn pull_with_breaks(cuts: &[usize], mut back: impl FnMut(MemoryLink) -> MemoryLink) -> u32 {
    let (_folder, path) = folder();
    let mut cuts = cuts.iter().copied().chain([usize::MAX]);
    let mut serve = |station| Some(OnTerminal::serve_until(station, cuts.next().unwrap_or(usize::MAX)));
    let mut terminal = serve(station_with_readings(600));
    let session = session_at(terminal.as_ref().unwrap().port());
    let mut ports = vec![terminal.as_ref().unwrap().port().to_owned()];
    let mut find = |station: StationId| {
        assert_eq!(station, STATION);
        let gone = terminal.take().unwrap().stop();
        terminal = serve(back(gone));
        let port = terminal.as_ref().unwrap().port();
        ports.push(port.to_owned());
        at(station, port)
    };
    let resumed = pull_resumed(session, STATION, &mut open(&path), &mut |_| {}, &mut find, PATIENCE).unwrap();
    assert_eq!(resumed.pulled.gaps, []);
    let mut station = terminal.unwrap().stop();
    assert_eq!(rows(&path), journal(&mut station), "complete");
    assert_eq!(resumed.pulled.new as usize, rows(&path).len(), "none counted twice");
    resumed.breaks
}

#[test]
fn a_station_that_is_unplugged_and_comes_back_under_another_port_name_is_pulled_to_the_end() {
    let breaks = pull_with_breaks(&[1_500, 2_500, 3_001], |station| station);
    assert_eq!(breaks, 3);
}

#[test]
fn a_station_that_starts_again_in_mid_pull_is_pulled_to_the_end_with_its_new_records() {
    let breaks = pull_with_breaks(&[2_000, 4_000], |mut station| {
        let flash = station.recorder().journal().flash().clone();
        let mut again = MemoryLink::start(flash, STATION).unwrap();
        again.pass(500);
        measure(&mut again, 3);
        again
    });
    assert_eq!(breaks, 2);
}

#[test]
fn another_station_at_the_old_port_is_not_taken_for_it() {
    let other = OnTerminal::serve(station_called(StationId([5; 8])));
    assert!(at(STATION, other.port()).is_none());
    assert!(at(StationId([5; 8]), other.port()).is_some(), "and is free again");
    other.stop();
}

#[test]
fn a_station_that_does_not_come_back_is_told_with_what_is_kept_and_pulled_later() {
    let (_folder, path) = folder();
    let terminal = OnTerminal::serve_until(station_with_readings(600), 4_000);
    let session = session_at(terminal.port());
    let mut looked = 0;
    let begin = Instant::now();
    let error = pull_resumed(
        session,
        STATION,
        &mut open(&path),
        &mut |_| {},
        &mut |_| {
            looked += 1;
            None
        },
        PATIENCE,
    )
    .unwrap_err();
    assert!(matches!(error.cause, Cause::Link(LinkError::Gone(_))), "{error}");
    assert!(looked > 4 && begin.elapsed() < PATIENCE + Duration::from_secs(2), "{looked} looks");
    assert!(error.kept.new > 60 && error.kept.through == Seq(error.kept.new), "{error}");
    assert!(error.to_string().contains("are kept"), "{error}");
    let mut station = terminal.stop();
    pull_all(&mut station, &mut open(&path));
    assert_eq!(rows(&path), journal(&mut station));
}

#[test]
fn a_station_that_goes_again_and_again_without_giving_anything_ends_the_pull() {
    let (_folder, path) = folder();
    let terminal = OnTerminal::serve_until(station_with_readings(60), 40);
    let session = Session::open(donelight::link::serial::open(terminal.port()).unwrap());
    // Its first word may be cut already; then it is no pull's matter.
    let Ok((session, _)) = session else { return };
    let mut gone = Some(terminal);
    let mut find = |_| {
        let station = gone.take().unwrap().stop();
        gone = Some(OnTerminal::serve_until(station, 70));
        let transport = donelight::link::serial::open(gone.as_ref().unwrap().port()).unwrap();
        Session::open(transport).ok().map(|(session, _)| session)
    };
    let error =
        pull_resumed(session, STATION, &mut open(&path), &mut |_| {}, &mut find, PATIENCE).unwrap_err();
    assert!(matches!(error.cause, Cause::Link(LinkError::Gone(_))), "{error}");
    assert_eq!(rows(&path).len(), 0);
}
