//! The station, its operator and its narrator together, asked over the wire but without a port.

use std::fs;
use std::io;

use donelight_core::capability::Index;
use donelight_core::interval::{Kind, Method};
use donelight_core::lamps::Call;
use donelight_core::plan::{Draft, LineSettings, Plan};
use donelight_core::quantity::{Confidence, Count, Millionths, Precision};
use donelight_core::record::Refusal;
use donelight_core::sigma::Sigma;
use donelight_core::stopping::{Goal, StoppingRule};
use donelight_core::wire::{self, FRAME_MAX, FrameReader, Reply, Request};

use super::feed::Feed;
use super::flash::RamFlash;
use super::narrator::{Attention, News};
use super::operator::Gauge;
use super::process::Process;
use super::*;

fn plan(planned: u32, limit: u32) -> Plan {
    let count = |n| Count::new(n).unwrap();
    let draft = Draft {
        name: Text::new("Bell clappers").unwrap(),
        part: Text::default(),
        characteristic: Text::default(),
        unit: Text::new("mm").unwrap(),
        resolution: "0.001".parse().unwrap(),
        lower: Some("11.9".parse().unwrap()),
        upper: Some("12.1".parse().unwrap()),
        target: None,
        index: Index::Cpk,
        confidence: Confidence::NINETY_FIVE_PERCENT,
        kind: Kind::TwoSided,
        rule: StoppingRule {
            planned: count(planned),
            goal: Goal::Precision(Precision::Relative(Millionths(500_000))),
            limit: count(limit),
        },
        gauge: LineSettings::default(),
        same_in_a_row: 4,
        sigma: Sigma::Overall,
        method: Method::Bissell,
    };
    Plan::try_from(draft).unwrap()
}

fn process(seed: u64) -> Process {
    Process { mean: 12.0, sd: 0.02, drift: 0.0, outlier_every: None, stuck_from: None, seed }
}

/// A station with its narrator, and a clock that is moved by hand.
struct Bench {
    station: VirtualStation<Vec<u8>>,
    narrator: Narrator,
    now: Millis,
}

impl Bench {
    fn start(flash: RamFlash, gauge: Gauge, keep_measuring: bool) -> Self {
        let operator = Operator::new(gauge, Some(50.0), keep_measuring);
        let mut station = VirtualStation::start(flash, StationId([7; 8]), operator).unwrap();
        let narrator = station.narrator();
        Self { station, narrator, now: Millis(0) }
    }

    fn ask<R>(&mut self, request: &Request, read: impl Fn(&Reply<'_>) -> R) -> R {
        let mut frame = [0; FRAME_MAX];
        let mut reader = FrameReader::default();
        for byte in wire::encode(1, request, &mut frame).unwrap() {
            for byte in self.station.host_byte(self.now, *byte).unwrap_or_default() {
                if let Some(answer) = reader.push(*byte) {
                    return read(&wire::decode(answer).unwrap().1);
                }
            }
        }
        panic!("no answer to {request:?}");
    }

    fn load(&mut self, plan: Plan) {
        assert!(
            self.ask(&Request::Load { plan, replace: true }, |reply| matches!(reply, Reply::Recorded(_)))
        );
    }

    fn refused(&mut self) -> u32 {
        self.ask(&Request::Status, |reply| match reply {
            Reply::Status(status) => status.refused,
            other => panic!("{other:?}"),
        })
    }

    fn press(&mut self, button: Button) {
        self.station.press(self.now, button);
    }

    /// Lets a millisecond pass and tells what happened.
    fn step(&mut self) -> (Option<Incident>, Vec<News>) {
        self.now.0 += 1;
        let incident = self.station.step(self.now);
        let told = std::iter::from_fn(|| self.narrator.next(self.station.recorder(), self.now));
        (incident, told.collect())
    }

    /// What happens within five seconds.
    fn watch(&mut self) -> Vec<News> {
        (0..5_000).flat_map(|_| self.step().1).collect()
    }

    /// What happens until so many readings are told in all.
    fn watch_until(&mut self, all: &mut Vec<News>, count: usize) {
        while readings(all).len() < count {
            all.extend(self.step().1);
        }
    }
}

fn readings(news: &[News]) -> Vec<&str> {
    news.iter()
        .filter_map(|news| match news {
            News::Reading { reading, .. } => Some(reading.as_str()),
            _ => None,
        })
        .collect()
}

#[test]
fn the_operator_waits_for_a_plan_and_stops_when_the_done_lamp_is_lit() {
    let mut bench = Bench::start(RamFlash::blank(256), Gauge::Process(process(3)), false);
    assert_eq!(bench.watch(), []);
    bench.load(plan(20, 90));
    let news = bench.watch();
    assert!(matches!(&news[0], News::Plan { planned: 20, limit: 90, .. }), "{news:?}");
    assert!(matches!(&news[20], News::Reading { n: 20, surplus: false, .. }), "{news:?}");
    assert_eq!(news[21..], [News::Done { lit: true, n: 20 }]);
    assert_eq!(bench.refused(), 0);
}

#[test]
fn who_keeps_measuring_gathers_surplus() {
    let mut bench = Bench::start(RamFlash::blank(256), Gauge::Process(process(3)), true);
    bench.load(plan(10, 90));
    let mut news = Vec::new();
    bench.watch_until(&mut news, 15);
    assert_eq!(news[11], News::Done { lit: true, n: 10 });
    assert!(matches!(news[12], News::Reading { n: 10, surplus: true, .. }), "{news:?}");
}

#[test]
fn a_station_that_was_cut_off_goes_on_with_the_pieces_of_one_that_was_not() {
    let mut whole = Bench::start(RamFlash::blank(256), Gauge::Process(process(5)), false);
    whole.load(plan(40, 90));
    let uncut = whole.watch();

    let mut flash = RamFlash::blank(256);
    let mut pieced = Vec::new();
    for stop_after in [1, 7, 8, 25, 40] {
        let mut bench = Bench::start(flash, Gauge::Process(process(5)), false);
        if bench.station.recorder().station().study().is_none() {
            bench.load(plan(40, 90));
        }
        bench.watch_until(&mut pieced, stop_after);
        flash = bench.station.recorder().journal().flash().clone();
    }
    assert_eq!(readings(&pieced), readings(&uncut));
}

#[test]
fn a_stuck_gauge_stops_the_operator_until_someone_has_seen_it() {
    let stuck = Process { stuck_from: Some(6), ..process(3) };
    let mut bench = Bench::start(RamFlash::blank(256), Gauge::Process(stuck), false);
    bench.load(plan(20, 90));
    let news = bench.watch();
    assert_eq!(readings(&news).len(), 9, "the sixth piece four times: {news:?}");
    assert_eq!(news.last(), Some(&News::Attention(Some(Attention::GaugeStuck))));
    assert_eq!(bench.station.recorder().call(bench.now), Some(Call::Act));
    bench.press(Button::Seen);
    let news = bench.watch();
    assert!(matches!(news[0], News::Seen { .. }), "{news:?}");
    assert_eq!(readings(&news).len(), 4);
}

#[test]
fn a_reading_taken_back_is_told_and_its_piece_is_not_measured_again() {
    let mut bench = Bench::start(RamFlash::blank(256), Gauge::Process(process(3)), false);
    bench.load(plan(20, 90));
    let before = bench.watch();
    bench.press(Button::TakeBack);
    let news = bench.watch();
    assert!(matches!(news[0], News::TakenBack { n: 19, .. }), "{news:?}");
    assert_eq!(news[1], News::Done { lit: false, n: 19 });
    assert!(matches!(news[2], News::Reading { n: 20, .. }), "{news:?}");
    assert_eq!(news[3..], [News::Done { lit: true, n: 20 }]);
    let (before, after) = (readings(&before), readings(&news));
    assert_eq!(after[0].as_bytes(), process(3).line(20, "0.001".parse().unwrap(), "").trim().as_bytes());
    assert_eq!(before.len(), 20);
}

#[test]
fn a_feed_is_held_until_a_plan_is_there_and_its_rubbish_is_refused_and_told() {
    let folder = tempfile::tempdir().unwrap();
    let file = folder.path().join("lines.txt");
    let too_long = "9".repeat(300);
    fs::write(&file, format!("12.001 mm\r\nhello\n{too_long}\n\n12.002\r12,003mm\n12.0045\n12.0")).unwrap();
    let mut bench = Bench::start(RamFlash::blank(256), Gauge::Feed(Feed::open(&file).unwrap()), false);
    assert_eq!(bench.watch(), []);
    bench.load(plan(20, 90));
    let mut news = Vec::new();
    let mut ends = 0;
    for _ in 0..5_000 {
        let (incident, told) = bench.step();
        ends += u32::from(matches!(incident, Some(Incident::FeedEnded)));
        news.extend(told);
    }
    assert_eq!(ends, 1);
    assert_eq!(readings(&news), ["12.001", "12.002", "12.003"]);
    let refused: Vec<Refusal> = news
        .iter()
        .filter_map(|news| match news {
            News::Refused { reason, times, .. } => Some((*reason, *times)),
            _ => None,
        })
        .map(|(reason, times)| {
            assert_eq!(times, 1, "{reason}");
            reason
        })
        .collect();
    assert_eq!(refused.len(), 4, "{refused:?}");
    assert!(refused.contains(&Refusal::LineTooLong) && refused.contains(&Refusal::LineUnfinished));
    assert_eq!(bench.refused(), 4);
}

#[test]
fn every_event_is_told_in_words_and_as_json() {
    let mut bench = Bench::start(RamFlash::blank(256), Gauge::Absent, false);
    bench.load(plan(20, 90));
    assert!(bench.ask(&Request::SetClock { unix_ms: 5 }, |r| matches!(r, Reply::Recorded(_))));
    assert!(bench.ask(&Request::Blink, |r| *r == Reply::Done));
    let news = bench.watch();
    let words: Vec<String> = news.iter().map(ToString::to_string).collect();
    assert_eq!(
        words,
        [
            "plan loaded: Bell clappers; 20 pieces planned, 90 at most",
            "clock set",
            "both lamps blink in turn: this is the station asked for",
        ]
    );
    let events: Vec<_> = news.iter().map(|news| news.json()["event"].clone()).collect();
    assert_eq!(events, ["plan", "clock", "blink"]);
    assert!(bench.ask(&Request::Hello, |reply| match reply {
        Reply::Hello(hello) => hello.firmware.as_str().starts_with("donelight virtual"),
        _ => false,
    }));
}

/// Memory that can become a full disk.
#[derive(Debug)]
struct Disk {
    bytes: Vec<u8>,
    full: bool,
}

impl Medium for Disk {
    fn size(&self) -> usize {
        self.bytes.size()
    }

    fn read_at(&mut self, offset: usize, bytes: &mut [u8]) -> io::Result<()> {
        self.bytes.read_at(offset, bytes)
    }

    fn write_at(&mut self, offset: usize, bytes: &[u8]) -> io::Result<()> {
        if self.full { Err(io::ErrorKind::StorageFull.into()) } else { self.bytes.write_at(offset, bytes) }
    }
}

#[test]
fn a_disk_that_takes_nothing_more_stops_the_operator_and_loses_nothing_that_was_taken() {
    let mut taken = Bench::start(RamFlash::blank(256), Gauge::Process(process(3)), false);
    taken.load(plan(20, 90));
    taken.watch_until(&mut Vec::new(), 5);
    let bytes = taken.station.recorder().journal().flash().medium().clone();

    let operator = Operator::new(Gauge::Process(process(3)), Some(50.0), false);
    let disk = Flash::over(Disk { bytes, full: false });
    let mut station = VirtualStation::start(disk, StationId([7; 8]), operator).unwrap();
    station.recorder().journal().flash().medium().full = true;
    let incidents: Vec<Incident> = (1..5_000).filter_map(|ms| station.step(Millis(ms))).collect();
    assert!(
        matches!(incidents[..], [Incident::Flash(FlashError::Medium(io::ErrorKind::StorageFull))]),
        "one try, then the operator waits: {incidents:?}"
    );
    assert_eq!(station.recorder().call(Millis(5_000)), Some(Call::Act));

    let bytes = station.recorder().journal().flash().medium().bytes.clone();
    let mut again = Bench::start(Flash::over(bytes), Gauge::Process(process(3)), false);
    let mut news = Vec::new();
    again.watch_until(&mut news, 1);
    assert!(matches!(news[0], News::Reading { n: 6, .. }), "{news:?}");
}
