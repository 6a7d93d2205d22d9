//! Decoders under bytes from outside: valid samples, mutated, so many a decoder, each fixed for ever by the decoder's name
//! and a number. A failure prints both: `DONELIGHT_FUZZ=<decoder>:<number>` runs that input and no other.
//!
//! A decoder may refuse or take what it is given; it must not panic, hang, or ask for memory without a bound, and what it
//! takes must pass the check that stands beside it.

mod device;
mod host;
mod mutate;
mod samples;

use std::panic::{AssertUnwindSafe, catch_unwind};
use std::path::{Path, PathBuf};
use std::sync::atomic::{AtomicBool, AtomicU64, Ordering};
use std::time::{Duration, Instant};

use crate::random::Random;
pub use mutate::INPUT_MAX;

/// Runs one input only: `<decoder>:<number>`.
pub const INPUT_VARIABLE: &str = "DONELIGHT_FUZZ";

/// No input takes longer than this, even on a busy machine and without optimisation.
const SLOW: Duration = Duration::from_secs(5);
/// An input that takes this long ends the test's process, since nothing else can end it.
const HUNG: Duration = Duration::from_secs(60);

/// A decoder, what to feed it with, and how often.
#[derive(Clone, Copy)]
pub struct Decoder {
    /// Its name, which is also its folder's in `tests/corpus`.
    pub name: &'static str,
    /// Feeds it; `true` if it took the bytes for valid.
    ///
    /// # Panics
    /// If what came of them cannot be right.
    pub feed: fn(&[u8]) -> bool,
    samples: fn() -> Vec<Vec<u8>>,
    words: &'static [&'static [u8]],
    /// Inputs in the short form.
    pub short: u64,
    /// Inputs in the long form.
    pub long: u64,
}

/// All decoders that meet bytes from outside.
#[must_use]
pub fn decoders() -> Vec<Decoder> {
    [device::DECODERS.as_slice(), host::DECODERS.as_slice()].concat()
}

/// What came of a decoder's inputs.
#[derive(Clone, Copy, Debug, Default)]
pub struct Outcome {
    /// How many there were.
    pub inputs: u64,
    /// How many were taken for valid.
    pub taken: u64,
    /// The longest that one took.
    pub slowest: Duration,
}

/// An input that a decoder does not stand.
#[derive(Clone, Debug)]
pub struct Failure {
    /// Its number.
    pub number: u64,
    /// The bytes.
    pub input: Vec<u8>,
    /// What happened.
    pub what: String,
}

impl Decoder {
    /// The input of this number.
    fn input(&self, samples: &[Vec<u8>], number: u64) -> Vec<u8> {
        // FNV-1a (Fowler, Noll, Vo) of the name, so that each decoder has numbers of its own.
        let name = self
            .name
            .bytes()
            .fold(0xcbf2_9ce4_8422_2325, |h: u64, b| (h ^ u64::from(b)).wrapping_mul(0x100_0000_01b3));
        let mut random = Random::new(name ^ number.wrapping_mul(0x9e37_79b9_7f4a_7c15));
        let [seed, other] = [0, 1].map(|_| &samples[random.below(samples.len() as u64) as usize]);
        mutate::mutate(&mut random, seed, other, self.words)
    }

    /// Its samples: what is valid, and the corpus.
    fn samples(&self) -> Vec<Vec<u8>> {
        let mut samples = (self.samples)();
        samples.extend(corpus(self.name).into_iter().map(|(_, bytes)| bytes));
        assert!(!samples.is_empty(), "{} has nothing to begin with", self.name);
        samples
    }

    /// Feeds it with the inputs of these numbers, on all cores.
    ///
    /// # Errors
    /// The first failure that was met.
    pub fn run(&self, numbers: std::ops::Range<u64>) -> Result<Outcome, Box<Failure>> {
        let samples = self.samples();
        let cores = std::thread::available_parallelism().map_or(1, std::num::NonZero::get);
        let stop = AtomicBool::new(false);
        let at: Vec<AtomicU64> = (0..cores).map(|_| AtomicU64::new(u64::MAX)).collect();
        std::thread::scope(|scope| {
            let (samples, stop) = (&samples, &stop);
            let workers: Vec<_> = (numbers.start..)
                .zip(&at)
                .map(|(first, at)| {
                    let mine = (first..numbers.end).step_by(cores);
                    scope.spawn(move || self.share(samples, mine, at, stop))
                })
                .collect();
            self.watch(&at, || workers.iter().all(std::thread::ScopedJoinHandle::is_finished));
            let mut sum = Outcome::default();
            for worker in workers {
                let part = worker.join().unwrap_or_else(|panic| std::panic::resume_unwind(panic))?;
                sum.inputs += part.inputs;
                sum.taken += part.taken;
                sum.slowest = sum.slowest.max(part.slowest);
            }
            Ok(sum)
        })
    }

    fn share(
        &self,
        samples: &[Vec<u8>],
        numbers: impl Iterator<Item = u64>,
        at: &AtomicU64,
        stop: &AtomicBool,
    ) -> Result<Outcome, Box<Failure>> {
        let mut outcome = Outcome::default();
        for number in numbers {
            if stop.load(Ordering::Relaxed) {
                break;
            }
            at.store(number, Ordering::Relaxed);
            let input = self.input(samples, number);
            let began = Instant::now();
            let fed = self.feed_whole(&input);
            let took = began.elapsed();
            outcome.inputs += 1;
            outcome.slowest = outcome.slowest.max(took);
            let fed = fed.and_then(|taken| match took {
                took if took > SLOW => Err(format!("took {took:?}")),
                _ => Ok(taken),
            });
            match fed {
                Ok(taken) => outcome.taken += u64::from(taken),
                Err(what) => {
                    stop.store(true, Ordering::Relaxed);
                    at.store(u64::MAX, Ordering::Relaxed);
                    return Err(Box::new(Failure { number, input, what }));
                }
            }
        }
        at.store(u64::MAX, Ordering::Relaxed);
        Ok(outcome)
    }

    /// Feeds it once.
    ///
    /// # Errors
    /// What it panicked with.
    pub fn feed_whole(&self, input: &[u8]) -> Result<bool, String> {
        catch_unwind(AssertUnwindSafe(|| (self.feed)(input))).map_err(|panic| {
            let text = panic.downcast_ref::<String>().map(String::as_str);
            let text = text.or_else(|| panic.downcast_ref::<&str>().copied());
            format!("panicked: {}", text.unwrap_or("without a word"))
        })
    }

    /// Looks on until all are done; ends the process if one hangs.
    fn watch(&self, at: &[AtomicU64], done: impl Fn() -> bool) {
        let mut seen: Vec<(u64, Instant)> = at.iter().map(|_| (u64::MAX, Instant::now())).collect();
        while !done() {
            std::thread::sleep(Duration::from_millis(2));
            for (at, seen) in at.iter().zip(&mut seen) {
                let number = at.load(Ordering::Relaxed);
                if number == u64::MAX || number != seen.0 {
                    *seen = (number, Instant::now());
                } else if seen.1.elapsed() > HUNG {
                    eprintln!("{}:{number} hangs: {INPUT_VARIABLE}={0}:{number}", self.name);
                    std::process::abort();
                }
            }
        }
    }
}

/// The files that are kept for a decoder: its name is their folder's.
///
/// # Panics
/// If they cannot be read.
#[must_use]
pub fn corpus(decoder: &str) -> Vec<(PathBuf, Vec<u8>)> {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("corpus").join(decoder);
    let Ok(files) = std::fs::read_dir(folder) else { return Vec::new() };
    let mut paths: Vec<PathBuf> = files.map(|file| file.expect("readable").path()).collect();
    paths.sort();
    paths.into_iter().map(|path| (path.clone(), std::fs::read(path).expect("readable"))).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    fn with(feed: fn(&[u8]) -> bool) -> Decoder {
        let samples = || vec![b"12.5 mm".to_vec(), b"limit = 30".to_vec()];
        Decoder { name: "none", feed, samples, words: &[b"lower"], short: 0, long: 0 }
    }

    #[test]
    fn a_panic_is_found_and_its_number_gives_the_same_input_again() {
        let weak = with(|bytes| {
            assert!(!bytes.windows(2).any(|pair| pair == b"55"), "two fives");
            true
        });
        let failure = weak.run(0..100_000).unwrap_err();
        assert!(failure.what.contains("two fives"), "{failure:?}");
        assert_eq!(weak.input(&weak.samples(), failure.number), failure.input);
        let again = weak.run(failure.number..failure.number + 1).unwrap_err();
        assert_eq!(again.input, failure.input);
    }

    #[test]
    fn inputs_differ_from_each_other_and_none_is_longer_than_the_bound() {
        let any = with(|_| true);
        let samples = any.samples();
        let inputs: Vec<_> = (0..20_000).map(|number| any.input(&samples, number)).collect();
        let longest = inputs.iter().map(Vec::len).max().unwrap();
        assert!(longest <= INPUT_MAX && longest > INPUT_MAX / 4, "{longest}");
        let mut unlike = inputs.clone();
        unlike.sort();
        unlike.dedup();
        assert!(unlike.len() > 10_000, "{} of {}", unlike.len(), inputs.len());
    }
}
