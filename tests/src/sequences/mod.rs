//! Random sequences of all that can happen to a station, each fixed for ever by its number, so that a failure is found again
//! by that number alone: `DONELIGHT_SEQUENCE=<number>` runs a test on it and on no other.

mod plans;
mod reached;
mod readings;

use donelight_core::plan::Plan;
use donelight_core::record::Seq;
use donelight_core::wire::{self, FRAME_MAX, Request};
use donelight_twin::{SEQUENCE_MAX, Step, push};

use crate::random::Random;
pub use reached::{REACHED, Reached, Tally};
use readings::Gauge;

/// Runs a test on the sequence of this number only.
pub const SEQUENCE_VARIABLE: &str = "DONELIGHT_SEQUENCE";
/// If set, the long forms run: see [`numbers`].
pub const LONG_VARIABLE: &str = "DONELIGHT_LONG";

/// Something that happens to a station.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Happening {
    /// The gauge sends lines, each with its end.
    Lines(Vec<u8>),
    /// The host asks.
    Asks(Box<Request>),
    /// Rubbish arrives from the host.
    Rubbish(Vec<u8>),
    /// Nothing but one of the plain steps.
    Plain(Step<'static>),
}

/// A sequence.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Sequence {
    /// Its number.
    pub number: u64,
    /// What happens, in order.
    pub happenings: Vec<Happening>,
}

/// The numbers that a test runs: the one that [`SEQUENCE_VARIABLE`] names, or the first `long` if [`LONG_VARIABLE`] is set,
/// or else the first `short`.
///
/// # Panics
/// If a variable's value makes no sense.
#[must_use]
pub fn numbers(short: u64, long: u64) -> std::ops::Range<u64> {
    if let Some(number) = std::env::var_os(SEQUENCE_VARIABLE) {
        let number = number.to_str().and_then(|text| text.parse().ok());
        let number: u64 = number.unwrap_or_else(|| panic!("{SEQUENCE_VARIABLE} is no number"));
        return number..number + 1;
    }
    0..if is_long() { long } else { short }
}

/// Whether the long forms run.
#[must_use]
pub fn is_long() -> bool {
    std::env::var_os(LONG_VARIABLE).is_some_and(|value| value == "1")
}

/// Has `work` done on every core, each on its share of the numbers, and gives what came of each share.
///
/// # Panics
/// If `work` does.
pub fn on_all_cores<T: Send>(
    numbers: std::ops::Range<u64>,
    work: impl Fn(std::iter::StepBy<std::ops::Range<u64>>) -> T + Sync,
) -> Vec<T> {
    let cores = std::thread::available_parallelism().map_or(1, std::num::NonZero::get);
    std::thread::scope(|scope| {
        let work = &work;
        let start = |core| {
            let mine = (numbers.start + core as u64..numbers.end).step_by(cores);
            scope.spawn(move || work(mine))
        };
        let workers: Vec<_> = (0..cores).map(start).collect();
        let join = |worker: std::thread::ScopedJoinHandle<'_, T>| {
            worker.join().unwrap_or_else(|panic| std::panic::resume_unwind(panic))
        };
        workers.into_iter().map(join).collect()
    })
}

impl Sequence {
    /// The sequence of this number.
    #[must_use]
    pub fn new(number: u64) -> Self {
        Writer::new(number).write()
    }

    /// Its steps, one after the other.
    pub fn for_each_step(&self, mut take: impl FnMut(&Happening, &Step<'_>)) {
        let mut frame = [0; FRAME_MAX];
        for (number, happening) in (0..).zip(&self.happenings) {
            let step = match happening {
                Happening::Lines(bytes) => Step::Gauge(bytes),
                Happening::Rubbish(bytes) => Step::Host(bytes),
                Happening::Asks(request) => {
                    Step::Host(wire::encode(number, request, &mut frame).expect("requests fit a frame"))
                }
                Happening::Plain(step) => *step,
            };
            take(happening, &step);
        }
    }

    /// Its bytes, as the bench takes them.
    ///
    /// # Panics
    /// If it is longer than [`SEQUENCE_MAX`].
    #[must_use]
    pub fn bytes(&self) -> Vec<u8> {
        let mut bytes = vec![0; SEQUENCE_MAX];
        let mut used = 0;
        self.for_each_step(|_, step| {
            let left = push(step, &mut bytes[used..]).expect("a sequence of bounded length").len();
            used = SEQUENCE_MAX - left;
        });
        bytes.truncate(used);
        bytes
    }
}

/// Makes up a sequence.
struct Writer {
    number: u64,
    random: Random,
    gauge: Option<Gauge>,
    plan: Option<Plan>,
    happenings: Vec<Happening>,
}

impl Writer {
    fn new(number: u64) -> Self {
        Self { number, random: Random::new(number), gauge: None, plan: None, happenings: Vec::new() }
    }

    fn write(mut self) -> Sequence {
        self.pass();
        if self.random.chance(1, 200) {
            self.fill();
        }
        if !self.random.chance(1, 50) {
            self.load(false);
            self.lines();
        }
        let most = self.random.one(&[12, 12, 12, 12, 12, 12, 12, 24, 24, 60]);
        let end = self.happenings.len() + self.random.between(5, most) as usize;
        while self.happenings.len() < end {
            self.event();
        }
        if self.random.chance(1, 6) {
            self.plain(Step::Reboot);
        }
        Sequence { number: self.number, happenings: self.happenings }
    }

    /// Plan after plan, since they fill a journal soonest: to its end, or round it again if the host pulls.
    fn fill(&mut self) {
        let pulls = self.random.chance(1, 2);
        let most = if pulls { 150 } else { 60 };
        for loads in 1..=self.random.between(most / 2, most) as u32 {
            self.load(true);
            self.lines();
            if pulls && self.random.chance(1, 3) {
                // There are more records than this, as a rule.
                self.happenings.push(Happening::Asks(Request::Received { through: Seq(loads) }.into()));
            }
        }
    }

    fn event(&mut self) {
        match self.random.below(100) {
            0..60 => self.lines(),
            60..70 => self.pass(),
            70..76 => self.plain(Step::TakeBack),
            76..82 => self.plain(Step::Seen),
            82..84 => self.plain(Step::Reboot),
            84 => self.plain(Step::Look),
            85 | 86 => self.load(false),
            87 => self.plain(Step::Overrun),
            88 => self.plain(Step::Garbled),
            89 => {
                let length = self.random.below(80);
                let bytes = (0..length).map(|_| self.random.bits() as u8).collect();
                self.happenings.push(Happening::Rubbish(bytes));
            }
            _ => self.ask(),
        }
    }

    fn plain(&mut self, step: Step<'static>) {
        self.happenings.push(Happening::Plain(step));
    }

    /// Mostly long enough that the next line is heard from its beginning; at times long enough for lines left unfinished.
    fn pass(&mut self) {
        let milliseconds = match self.random.below(8) {
            0 => self.random.between(0, 49),
            1 => self.random.between(500, 20_000),
            _ => self.random.between(50, 499),
        };
        self.plain(Step::Pass(milliseconds as u32));
    }

    fn lines(&mut self) {
        let number = if self.random.chance(1, 16) { self.random.between(2, 20) } else { 1 };
        let mut bytes = Vec::new();
        for _ in 0..number {
            bytes.extend(match &mut self.gauge {
                Some(gauge) => gauge.line(&mut self.random),
                None => readings::rubbish(&mut self.random),
            });
            let ends: [&[u8]; 5] = [b"\r\n", b"\r\n", b"\r\n", b"\n", b"\r"];
            bytes.extend(self.random.one(&ends));
        }
        if self.random.chance(1, 32) {
            bytes.pop();
            bytes.pop();
        }
        self.happenings.push(Happening::Lines(bytes));
    }

    /// A new plan, or the same one again as after an answer that was lost.
    fn load(&mut self, replace: bool) {
        let again = self.random.chance(1, 8);
        let plan = match &self.plan {
            Some(plan) if again => plan.clone(),
            _ => {
                let (plan, scale) = plans::plan(&mut self.random);
                self.gauge = Some(Gauge::new(&mut self.random, &plan, scale));
                plan
            }
        };
        self.plan = Some(plan.clone());
        let replace = replace || self.random.chance(1, 2);
        self.happenings.push(Happening::Asks(Request::Load { plan, replace }.into()));
        if !self.random.chance(1, 8) {
            self.plain(Step::Pass(60));
        }
    }

    fn ask(&mut self) {
        let seq = Seq(self.random.below(40) as u32);
        let request = match self.random.below(8) {
            0 => Request::Hello,
            1 => Request::Status,
            2 => Request::Records { from: seq },
            3 => Request::RecordsWithin {
                from: seq,
                bytes: self.random.bits() as u16 >> self.random.below(16),
            },
            4 => Request::Received { through: seq },
            5 | 6 => Request::SetClock { unix_ms: 1_700_000_000_000 + self.random.below(1 << 40) },
            _ => Request::Blink,
        };
        self.happenings.push(Happening::Asks(request.into()));
    }
}

#[cfg(test)]
mod tests {
    use donelight_twin::Steps;

    use super::*;

    #[test]
    fn a_number_gives_the_same_sequence_again_and_its_bytes_give_its_steps() {
        for number in 0..200 {
            let sequence = Sequence::new(number);
            assert_eq!(sequence, Sequence::new(number));
            let bytes = sequence.bytes();
            let mut read = Steps(&bytes);
            sequence.for_each_step(|_, step| assert_eq!(read.next(), Some(Ok(*step))));
            assert_eq!(read.next(), None);
        }
    }
}
