//! Device and host agree bit for bit on random sequences of events: the station's code compiled for the Cortex-M0 of the Pico, and
//! the same code compiled for this machine, compared by a digest of every state, figure, lamp, answer and byte of flash.
//!
//! These need the twin's image: `tests/run` builds it and runs them.

use std::sync::atomic::{AtomicU64, Ordering};
use std::time::Instant;

use donelight_tests::sequences::{Reached, SEQUENCE_VARIABLE, Sequence, Tally, numbers, on_all_cores};
use donelight_tests::twin::Twin;
use donelight_twin::{Bench, Digest, Memory};

const SHORT: u64 = 3_000;
const LONG: u64 = 1_000_000;

/// Sequences at once.
const BATCH: usize = 1_000;

/// Runs a sequence on the host.
fn on_host(memory: &Memory, sequence: &Sequence, tally: &mut Tally) -> Digest {
    memory.wipe();
    let mut bench = Bench::start(memory);
    let mut reached = Reached::default();
    let mut steps = 0;
    sequence.for_each_step(|_, step| {
        bench.take(step);
        reached.look(&mut bench);
        steps += 1;
    });
    tally.add(steps, reached);
    bench.finish()
}

#[test]
#[ignore = "needs the twin's image: run tests/run"]
fn device_and_host_agree_bit_for_bit_on_random_sequences() {
    let numbers = numbers(SHORT, LONG);
    let (began, of, done) = (Instant::now(), numbers.end - numbers.start, AtomicU64::new(0));
    let tallies = on_all_cores(numbers, |mut mine| {
        let memory = Memory::blank();
        let mut tally = Tally::default();
        let mut twin = Twin::load();
        loop {
            let batch: Vec<_> = mine.by_ref().take(BATCH).map(Sequence::new).collect();
            if batch.is_empty() {
                return tally;
            }
            let bytes: Vec<_> = batch.iter().map(Sequence::bytes).collect();
            let digests = twin.digests(&bytes);
            for ((sequence, bytes), device) in batch.iter().zip(&bytes).zip(digests) {
                let host = on_host(&memory, sequence, &mut tally).value();
                if device != host {
                    let step = twin.first_difference(bytes);
                    let number = sequence.number;
                    panic!(
                        "device and host differ, first at step {step:?}; again: {SEQUENCE_VARIABLE}={number}"
                    );
                }
            }
            let done = done.fetch_add(batch.len() as u64, Ordering::Relaxed) + batch.len() as u64;
            eprintln!("{done} of {of} sequences agree, {:.0?}", began.elapsed());
        }
    });
    let tally = Tally::sum(&tallies);
    println!("{tally}in {:.0?}", began.elapsed());
    tally.assert_reached();
}

/// The core that the tests above run on, and an emulator that others maintain, give the same digests for the same image.
#[test]
#[ignore = "needs the twin's image: run tests/run"]
fn our_core_executes_the_image_as_rp2040js_does() {
    let sequences: Vec<_> = numbers(40, 1_000).map(|number| Sequence::new(number).bytes()).collect();
    assert_eq!(Twin::here().digests(&sequences), Twin::rp2040js().digests(&sequences));
}

/// What is compared does tell: a sequence that lacks its last step has another digest, on the device too.
#[test]
#[ignore = "needs the twin's image: run tests/run"]
fn a_step_more_gives_another_digest() {
    for number in 0..20 {
        let whole = Sequence::new(number);
        let mut begun = whole.clone();
        begun.happenings.pop();
        let digests = Twin::here().digests(&[whole.bytes(), begun.bytes(), whole.bytes()]);
        assert_ne!(digests[0], digests[1], "sequence {number}");
        assert_eq!(digests[0], digests[2], "sequence {number}");
    }
}
