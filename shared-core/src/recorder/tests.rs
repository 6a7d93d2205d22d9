//! The whole station in memory: gauge bytes in, lamps and link out, power gone in between.

use std::vec::Vec;

use super::*;
use crate::{
    chain::Digest,
    counts::ReadingError,
    flash_model::Flash,
    plan::{Plan, tests as plans},
    record::{RECORD_MAX, Sealed},
    wire::Status,
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
    let from = Seq(99);
    let beyond = [
        Request::Records { from },
        Request::RecordsWithin { from, bytes: 9 },
        Request::Received { through: from },
    ];
    for request in beyond {
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

/// Where page `number` begins in the model's flash, for the ring's first round.
fn page_at(number: usize) -> usize {
    2 * 4096 + 256 * number
}

/// A station with so many readings whose flash `damage` has got at while it was off.
fn damaged(readings: usize, damage: impl FnOnce(&mut [u8])) -> Bench {
    let mut bench = loaded();
    for i in 0..readings {
        bench.line(LINES[i % LINES.len()]);
    }
    let mut flash = bench.recorder.journal().flash().clone();
    damage(&mut flash.bytes);
    boot(flash)
}

fn lost_on_record(bench: &mut Bench) -> Vec<Gap> {
    let lost = |(_, event)| match event {
        Event::Lost(gap) => Some(gap),
        _ => None,
    };
    bench.pull().into_iter().filter_map(lost).collect()
}

#[test]
fn records_that_cannot_be_read_call_for_help_in_a_rhythm_of_their_own_until_seen() {
    let mut bench = damaged(60, |bytes| bytes[page_at(2) + 9] ^= 4);
    // The patrol comes by within a second of quiet.
    bench.wait(1_000);
    let gaps = lost_on_record(&mut bench);
    assert_eq!(gaps.len(), 1, "{gaps:?}");
    let numbers: Vec<u32> = bench.pull().iter().map(|(seq, _)| seq.0).collect();
    assert!(numbers.iter().all(|n| !(gaps[0].first.0..=gaps[0].last.0).contains(n)));
    let status = bench.status();
    assert_eq!((status.gaps, status.lost, status.journal), (1, Some(gaps[0]), JournalHealth::Well));
    assert_eq!(bench.recorder.call(Millis(bench.now)), Some(Call::Lost));
    let lit = |t| Call::Lost.lit(Millis(t));
    assert_eq!((0..2_000).filter(|t| lit(*t) && !lit(t + 1)).count(), 2, "two flashes in two seconds");

    bench.recorder.press(Millis(bench.now), Button::Seen);
    assert_eq!(bench.recorder.call(Millis(bench.now)), None);
    let mut bench = bench.power_cut();
    bench.wait(1_000);
    assert_eq!(bench.recorder.call(Millis(bench.now)), None, "seen is on record");
    assert_eq!(lost_on_record(&mut bench), gaps, "and the gap is not told twice");
    bench.wait(PATROL_EVERY_MS + 2_000);
    assert_eq!(lost_on_record(&mut bench), gaps, "nor by the next round");
}

#[test]
fn a_newest_page_that_cannot_be_read_is_told_at_once_and_its_numbers_are_not_given_again() {
    let mut bench = damaged(40, |bytes| {
        let newest = (0..).take_while(|page| bytes[page_at(*page)] != 0xff).last().unwrap();
        bytes[page_at(newest)..page_at(newest + 1)].fill(0);
    });
    let gap = lost_on_record(&mut bench)[0];
    assert!(gap.first > Seq(20) && gap.last >= Seq(42), "{gap:?}");
    assert_eq!(bench.recorder.call(Millis(bench.now)), Some(Call::Lost));
    assert!(bench.pull().iter().any(|(seq, event)| *event == Event::Boot { boot: 2 } && *seq > gap.last));
    bench.line("10.001");
    assert!(bench.recorder.lamps(Millis(bench.now)).taken, "it measures on");
}

#[test]
fn a_write_that_the_power_cut_off_is_on_record_as_a_refusal_and_is_no_gap() {
    let mut bench = loaded();
    for line in &LINES[..5] {
        bench.line(line);
    }
    bench.recorder.journal().flash().fuel = 9;
    bench.line(LINES[5]);
    let mut bench = bench.power_cut();
    bench.wait(1_500);
    let refused = |(_, event): &(Seq, Event)| {
        matches!(event, Event::Refused { reason: Refusal::PowerFailed, times: 1 })
    };
    assert_eq!(bench.pull().iter().filter(|record| refused(record)).count(), 1);
    assert_eq!((bench.n(), bench.status().gaps), (5, 0));
    let mut bench = bench.power_cut();
    bench.wait(1_500);
    assert_eq!(bench.pull().iter().filter(|record| refused(record)).count(), 1, "told once");
}

#[test]
fn the_chain_by_the_link_is_that_of_the_records() {
    let mut bench = loaded();
    for line in LINES.iter().cycle().take(150) {
        bench.line(line);
    }
    for bytes in [u16::MAX, 300, 40, 0] {
        assert_chain(&mut bench, |from| Request::RecordsWithin { from, bytes }, bytes.max(RECORD_MAX as u16));
    }
    assert_chain(&mut bench, |from| Request::Records { from }, u16::MAX);
}

/// The records by these requests, none with more bytes of them than `most`, make the station's chain.
fn assert_chain(bench: &mut Bench, request: impl Fn(Seq) -> Request, most: u16) {
    let mut digest = Digest::origin(ID);
    let mut from = Seq::FIRST;
    loop {
        let (before, records) = bench.ask(&request(from), |reply| match reply {
            Reply::Records { before, records } => (before, records.to_vec()),
            other => panic!("{other:?}"),
        });
        assert!(records.len() <= most.into());
        assert_eq!(before, digest, "before {from}");
        let mut rest = &records[..];
        while let Ok((sealed, behind)) = Sealed::split(rest) {
            digest = digest.then(sealed.bytes());
            from = from.next();
            rest = behind;
        }
        if records.is_empty() {
            break;
        }
    }
    let head = bench.ask(&Request::Hello, |reply| match reply {
        Reply::Hello(hello) => hello.head,
        other => panic!("{other:?}"),
    });
    assert_eq!(head, digest);
}

#[test]
fn a_host_that_sets_the_clock_without_end_cannot_keep_boots_from_being_recorded() {
    let mut bench = loaded();
    let mut refused = false;
    for unix_ms in 0..20_000 {
        refused = bench.ask(&Request::SetClock { unix_ms }, |reply| matches!(reply, Reply::Refused(_)));
        if refused {
            break;
        }
    }
    assert!(refused, "the journal is not for clocks alone");
    for boots in 2..6 {
        bench = bench.power_cut();
        assert_eq!(bench.status().boots, boots);
    }
}

#[test]
fn the_room_that_is_told_is_there() {
    let mut bench = loaded();
    let told = bench.status().room;
    let mut taken = 0;
    loop {
        bench.now += 130;
        bench.recorder.tick(Millis(bench.now));
        bench.recorder.gauge_bytes(Millis(bench.now), b"10.001\n10.002\n");
        let n = bench.recorder.station().study().unwrap();
        let n = n.moments().n().get() + n.progress().surplus;
        if n == taken {
            break;
        }
        taken = n;
    }
    assert!(taken >= told && taken < told + told / 3, "{told} told, {taken} taken");
}
