//! For any sequence of events, the live state is the state replayed from the journal, to the last bit: the station starts anew
//! after random steps, and the host replays what it pulled.

use donelight_core::record::Sealed;
use donelight_core::record::{Event, Seq};
use donelight_core::station::Station;
use donelight_core::wire::{self, FRAME_MAX, FrameReader, Reply, Request};
use donelight_tests::sequences::{Happening, Reached, Sequence, Tally, numbers, on_all_cores};
use donelight_twin::{Bench, Memory, Step};

const SHORT: u64 = 20_000;
const LONG: u64 = 1_000_000;

/// A host that replays what it pulls.
#[derive(Default)]
struct Host {
    station: Station,
    number: u32,
}

impl Host {
    /// Pulls all records that it does not have. None may be missing: this host confirms only what it has.
    fn pull(&mut self, bench: &mut Bench<'_>) {
        loop {
            let from = self.station.through().map_or(Seq::FIRST, Seq::next);
            let records = self.ask(bench, &Request::Records { from });
            let mut rest = records.as_slice();
            if rest.is_empty() {
                return;
            }
            while !rest.is_empty() {
                let (sealed, behind) = Sealed::split(rest).expect("whole records");
                let record = sealed.record().expect("a record of this version");
                assert_eq!(record.seq, self.station.through().map_or(Seq::FIRST, Seq::next), "a gap");
                self.station.apply(record.seq, &record.event);
                rest = behind;
            }
        }
    }

    fn ask(&mut self, bench: &mut Bench<'_>, request: &Request) -> Vec<u8> {
        self.number = self.number.wrapping_add(1);
        let mut frame = [0; FRAME_MAX];
        let frame = wire::encode(self.number, request, &mut frame).expect("it fits");
        let now = bench.now();
        let mut reader = FrameReader::default();
        for byte in frame {
            let Some(answer) = bench.recorder().host_byte(now, *byte) else { continue };
            for byte in answer {
                let Some(message) = reader.push(*byte) else { continue };
                match wire::decode::<Reply<'_>>(message) {
                    Ok((_, Reply::Records { records, .. })) => return records.to_vec(),
                    other => panic!("{other:?}"),
                }
            }
        }
        panic!("no answer");
    }
}

fn stored(station: &Station) -> Vec<u8> {
    let mut space = vec![0; 1024];
    let used = station.store(&mut space).expect("it fits");
    space.truncate(used);
    space
}

/// The same state, and the same bytes of it, figures included, since those are worked out from nothing else.
fn assert_same(one: &Station, other: &Station, what: &str, number: u64, step: usize) {
    assert_eq!(one, other, "sequence {number}, step {step}: {what}");
    assert_eq!(stored(one), stored(other), "sequence {number}, step {step}: {what}");
    let figures = |station: &Station| {
        let study = station.study()?;
        let found = study.estimate();
        let sample = study.sample();
        let bits = |figure: Option<f64>| figure.map(f64::to_bits);
        Some([
            bits(study.moments().mean(study.plan().resolution)),
            bits(sample.map(|sample| sample.sigma())),
            bits(found.map(|found| found.estimate)),
            bits(found.and_then(|found| found.interval.low)),
            bits(found.and_then(|found| found.interval.high)),
        ])
    };
    assert_eq!(figures(one), figures(other), "sequence {number}, step {step}: {what}");
}

/// Starts the station anew: it must know what it knew, and of one boot more.
fn restart(bench: &mut Bench<'_>, number: u64, step: usize) {
    let mut expected = bench.station().clone();
    bench.take(&Step::Reboot);
    let seq = expected.through().map_or(Seq::FIRST, Seq::next);
    if bench.station().through() != expected.through() {
        expected.apply(seq, &Event::Boot { boot: expected.boots() + 1 });
    }
    assert_same(bench.station(), &expected, "the state after the start is not that before it", number, step);
}

fn replay(memory: &Memory, number: u64, tally: &mut Tally) {
    let sequence = Sequence::new(number);
    memory.wipe();
    let mut bench = Bench::start(memory);
    let mut host = Host::default();
    let mut reached = Reached::default();
    let mut step_number = 0;
    sequence.for_each_step(|happening, step| {
        step_number += 1;
        if let Happening::Asks(request) = happening
            && matches!(**request, Request::Received { .. })
        {
            host.pull(&mut bench);
        }
        match step {
            Step::Reboot => restart(&mut bench, number, step_number),
            step => bench.take(step),
        }
        reached.look(&mut bench);
        // Starts at places of its own too, so that there is one behind each kind of step.
        if (number + step_number as u64).is_multiple_of(17) {
            restart(&mut bench, number, step_number);
        }
    });
    host.pull(&mut bench);
    assert_same(&host.station, bench.station(), "the host's state is not the station's", number, step_number);
    restart(&mut bench, number, step_number);
    host.pull(&mut bench);
    assert_same(&host.station, bench.station(), "the host's state is not the station's", number, step_number);
    tally.add(step_number, reached);
}

#[test]
fn the_live_state_is_the_replayed_one_and_the_hosts_after_any_sequence() {
    let tallies = on_all_cores(numbers(SHORT, LONG), |mine| {
        let memory = Memory::blank();
        let mut tally = Tally::default();
        mine.for_each(|number| replay(&memory, number, &mut tally));
        tally
    });
    let tally = Tally::sum(&tallies);
    println!("{tally}");
    tally.assert_reached();
}
