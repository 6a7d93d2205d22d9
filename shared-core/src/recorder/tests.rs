//! The whole station in memory: gauge bytes in, lamps and link out, power gone in between.

use std::vec::Vec;

use super::*;
use crate::{
    counts::ReadingError,
    flash_model::Flash,
    plan::{Plan, tests as plans},
    record::Sealed,
};

const ID: StationId = StationId([1, 2, 3, 4, 5, 6, 7, 8]);

/// Time goes on by itself; everything else is asked of the recorder.
struct Bench {
    recorder: Recorder<Flash>,
    now: u64,
    number: u32,
}

fn boot(flash: Flash) -> Bench {
    let recorder = Recorder::open(flash, ID, Text::new("test 1").unwrap(), Millis(0)).unwrap();
    let mut bench = Bench { recorder, now: 0, number: 0 };
    bench.wait(300);
    bench
}

impl Bench {
    fn wait(&mut self, ms: u64) {
        for _ in 0..ms / 10 {
            self.now += 10;
            self.recorder.tick(Millis(self.now));
        }
    }

    fn line(&mut self, line: &str) {
        // Longer than the taken lamp's wink.
        self.wait(200);
        self.recorder.gauge_bytes(Millis(self.now), line.as_bytes());
        self.recorder.gauge_bytes(Millis(self.now), b"\r\n");
    }

    fn ask<R>(&mut self, request: &Request, answer: impl FnOnce(Reply<'_>) -> R) -> R {
        self.number += 1;
        let mut out = [0; FRAME_MAX];
        let mut reply = Vec::new();
        for byte in wire::encode(self.number, request, &mut out).unwrap().to_vec() {
            if let Some(frame) = self.recorder.host_byte(Millis(self.now), byte) {
                reply = frame.to_vec();
            }
        }
        let mut reader = FrameReader::default();
        for byte in reply {
            if let Some(frame) = reader.push(byte) {
                let (number, reply) = wire::decode::<Reply<'_>>(frame).unwrap();
                assert_eq!(number, self.number);
                return answer(reply);
            }
        }
        panic!("no answer to {request:?}");
    }

    fn load(&mut self, plan: &Plan, replace: bool) -> Result<Seq, Reason> {
        self.ask(&Request::Load { plan: plan.clone(), replace }, |reply| match reply {
            Reply::Recorded(seq) => Ok(seq),
            Reply::Refused(reason) => Err(reason),
            other => panic!("{other:?}"),
        })
    }

    fn status(&mut self) -> Status {
        self.ask(&Request::Status, |reply| match reply {
            Reply::Status(status) => status,
            other => panic!("{other:?}"),
        })
    }

    /// All records by the link, in windows.
    fn pull(&mut self) -> Vec<(Seq, Event)> {
        let mut all: Vec<(Seq, Event)> = Vec::new();
        loop {
            let from = all.last().map_or(Seq::FIRST, |(seq, _)| seq.next());
            let window = self.ask(&Request::Records { from }, |reply| match reply {
                Reply::Records { records, .. } => records.to_vec(),
                other => panic!("{other:?}"),
            });
            let mut rest = &window[..];
            while let Ok((sealed, behind)) = Sealed::split(rest) {
                let record = sealed.record().unwrap();
                all.push((record.seq, record.event));
                rest = behind;
            }
            if window.is_empty() {
                return all;
            }
        }
    }

    fn n(&mut self) -> u32 {
        self.status().study.map_or(0, |study| study.progress.n.get())
    }

    fn power_cut(mut self) -> Bench {
        let mut flash = self.recorder.journal().flash().clone();
        flash.fuel = usize::MAX;
        boot(flash)
    }
}

fn loaded() -> Bench {
    let mut bench = boot(Flash::blank());
    assert_eq!(bench.load(&plans::small(), false), Ok(Seq(2)));
    bench
}

const LINES: [&str; 12] = [
    "10.001", "9.999 mm", "+10,002", "  9.998", "10.003", "9.997", "10.001", "9.999", "10.002", "9.998",
    "10.000", "10.003",
];

#[test]
fn the_done_lamp_is_lit_by_the_settling_reading_and_not_before() {
    let mut bench = loaded();
    let mut lit_at = None;
    for (i, line) in LINES.iter().enumerate() {
        bench.line(line);
        let lamps = bench.recorder.lamps(Millis(bench.now));
        assert!(lamps.taken, "the operator sees that {line} was taken");
        assert!(!lamps.attention);
        if lamps.done && lit_at.is_none() {
            lit_at = Some(i + 1);
        }
        assert_eq!(lamps.done, lit_at.is_some());
    }
    let status = bench.status().study.unwrap();
    assert_eq!(lit_at, Some(status.progress.n.get() as usize));
    assert_eq!(status.progress.standing, Standing::Settled);
    let half = status.high.unwrap() - status.estimate.unwrap();
    assert!(half / status.estimate.unwrap() <= 0.5);
}

#[test]
fn each_refusal_is_shown_counted_and_recorded_with_its_reason() {
    let mut bench = boot(Flash::blank());
    bench.line("1.000");
    bench.load(&plans::small(), false).unwrap();
    for line in ["abc", "10.0001", "99999999999999999999", "10.0 inch", &"9".repeat(100)] {
        bench.line(line);
        assert!(!bench.recorder.lamps(Millis(bench.now)).taken);
        assert!((0..20).any(|t| bench.recorder.lamps(Millis(bench.now + 50 * t)).attention), "{line}");
    }
    bench.recorder.press(Millis(bench.now), Button::TakeBack);
    bench.recorder.gauge_bytes(Millis(bench.now), b"10.0");
    bench.wait(2_500);
    let recorded: Vec<Refusal> = bench
        .pull()
        .into_iter()
        .filter_map(|(_, event)| match event {
            Event::Refused { reason, times } => Some((reason, times)),
            _ => None,
        })
        .inspect(|(_, times)| assert_eq!(*times, 1))
        .map(|(reason, _)| reason)
        .collect();
    for expected in [
        Refusal::NoPlan,
        Refusal::Reading(ReadingError::FinerThanResolution),
        Refusal::Reading(ReadingError::OutOfRange),
        Refusal::LineTooLong,
        Refusal::NothingToTakeBack,
        Refusal::LineUnfinished,
    ] {
        assert!(recorded.contains(&expected), "{expected:?} is not in {recorded:?}");
    }
    let status = bench.status();
    assert_eq!(status.refused as usize, recorded.len());
    assert_eq!((recorded.len(), bench.n()), (8, 0));
}

#[test]
fn rubbish_does_not_fill_the_journal() {
    let mut bench = loaded();
    let before = bench.recorder.journal().next();
    for _ in 0..50_000 {
        bench.now += 1;
        bench.recorder.gauge_bytes(Millis(bench.now), b"?\n!\nx.y\n");
        bench.recorder.tick(Millis(bench.now));
    }
    bench.wait(1_000);
    let used = bench.recorder.journal().next().0 - before.0;
    assert!(used <= 60, "{used} records in 51 s");
    assert_eq!(bench.status().refused, 150_000);
}

#[test]
fn a_study_goes_on_after_a_power_cut_at_any_byte() {
    for fuel in 0..700 {
        let mut bench = loaded();
        bench.recorder.journal().flash().fuel = fuel;
        let mut told = 0;
        for line in &LINES[..6] {
            bench.line(line);
            told += u32::from(bench.recorder.lamps(Millis(bench.now)).taken);
        }
        let cut_within_reading = told < 6;
        let mut bench = bench.power_cut();
        let n = bench.n();
        assert!(n == told || (cut_within_reading && n == told + 1), "fuel {fuel}: told {told}, found {n}");
        assert_eq!(bench.status().boots, 2);
        bench.line("10.001");
        assert_eq!(bench.n(), n + 1, "fuel {fuel}: the study goes on");
        let numbers: Vec<u32> = bench.pull().iter().map(|(seq, _)| seq.0).collect();
        assert_eq!(
            numbers,
            (1..=numbers.len() as u32).collect::<Vec<_>>(),
            "fuel {fuel}: none missing, none twice"
        );
    }
}

#[test]
fn the_live_state_is_the_state_replayed_from_what_was_pulled() {
    let mut bench = loaded();
    for line in LINES {
        bench.line(line);
    }
    bench.recorder.press(Millis(bench.now), Button::TakeBack);
    bench.wait(1_500);
    let mut replayed = Station::default();
    for (seq, event) in bench.pull() {
        replayed.apply(seq, &event);
    }
    assert_eq!(&replayed, bench.recorder.station());
    let bench = bench.power_cut();
    let again = bench.recorder.station();
    assert_eq!(again.study(), replayed.study());
}

#[test]
fn a_full_journal_calls_for_help_refuses_readings_and_takes_them_again_after_a_pull() {
    let mut bench = loaded();
    let mut taken = 0;
    loop {
        bench.line("10.001");
        bench.line("10.002");
        if !bench.recorder.lamps(Millis(bench.now)).taken {
            break;
        }
        taken += 2;
        assert!(taken < 10_000, "it never fills");
    }
    let status = bench.status();
    assert_eq!((status.journal, status.room), (JournalHealth::Full, 0));
    assert!((0..10).any(|t| bench.recorder.lamps(Millis(bench.now + 50 * t)).attention));
    let last = bench.pull().last().unwrap().0;
    bench.ask(&Request::Received { through: last }, |reply| assert_eq!(reply, Reply::Done));
    assert_eq!(bench.status().unconfirmed, 0);
    bench.line("10.003");
    assert!(bench.recorder.lamps(Millis(bench.now)).taken);
    let before = bench.recorder.station().study().unwrap().clone();
    let bench = bench.power_cut();
    assert_eq!(bench.recorder.station().study().unwrap(), &before, "though its plan's record was erased");
}

#[test]
fn loading_again_because_the_answer_was_lost_begins_no_second_study() {
    let mut bench = loaded();
    assert_eq!(bench.load(&plans::small(), false), Ok(Seq(2)));
    bench.line("10.001");
    assert_eq!(bench.load(&plans::small(), false), Err(Reason::StudyUnfinished));
    assert_eq!(bench.n(), 1);
    assert_eq!(bench.load(&plans::small(), true), Ok(Seq(4)));
    assert_eq!(bench.n(), 0);
}

#[test]
fn numbers_beyond_the_journal_are_refused_and_release_nothing() {
    let mut bench = loaded();
    for request in [Request::Records { from: Seq(99) }, Request::Received { through: Seq(99) }] {
        bench.ask(&request, |reply| assert_eq!(reply, Reply::Refused(Reason::BeyondJournal)));
    }
    assert_eq!(bench.status().unconfirmed, 2);
}

#[test]
fn blinking_shows_both_lamps_in_turn_and_ends_by_itself() {
    let mut bench = loaded();
    bench.ask(&Request::Blink, |reply| assert_eq!(reply, Reply::Done));
    let lamps = |bench: &Bench, after: u64| bench.recorder.lamps(Millis(bench.now + after));
    assert!((0..20).any(|t| lamps(&bench, t * 50).done));
    assert!((0..200).all(|t| lamps(&bench, t * 50).done != lamps(&bench, t * 50).attention));
    assert_eq!(lamps(&bench, lamps::BLINK_MS), Lamps::default());
}

#[test]
fn a_held_study_calls_until_the_button_is_pressed() {
    let mut bench = loaded();
    for _ in 0..4 {
        bench.line("10.001");
    }
    assert!(bench.status().held.is_some());
    assert!((0..10).any(|t| bench.recorder.lamps(Millis(bench.now + 50 * t)).attention));
    bench.recorder.press(Millis(bench.now), Button::Seen);
    assert_eq!(bench.status().held, None);
    assert_eq!(bench.n(), 4);
}
