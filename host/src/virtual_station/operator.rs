//! The simulated operator: puts piece after piece to the gauge at a steady pace.
//!
//! Measures nothing before a plan is loaded; waits while the station calls for someone to look; stops when the study is
//! settled or spent, unless told to keep measuring.

use donelight_core::gauge::SETTLING_MS;
use donelight_core::lamps::Call;
use donelight_core::record::{Millis, Seq};
use donelight_core::station::{Station, Study};
use donelight_core::stopping::Standing;

use super::feed::{Feed, FeedError};
use super::process::Process;

/// From a plan's loading, or the start, to the first piece: the station first listens to a quiet line.
const TO_THE_BENCH_MS: f64 = 2.0 * SETTLING_MS as f64;

/// Where the readings come from.
#[derive(Debug)]
pub enum Gauge {
    /// None is connected.
    Absent,
    /// Simulated.
    Process(Process),
    /// Read from a file. From its end on it is silent.
    Feed(Feed),
}

/// What the operator did in one turn.
#[derive(Debug)]
pub enum Act {
    /// Nothing.
    Wait,
    /// Made the gauge send these bytes.
    Measure(Vec<u8>),
    /// Found that the feed is at its end, once.
    FeedEnded,
    /// Found that the feed cannot be read any more, once.
    FeedBroken(FeedError),
}

/// The operator.
#[derive(Debug)]
pub struct Operator {
    gauge: Gauge,
    period_ms: f64,
    keep_measuring: bool,
    study: Option<Seq>,
    due_ms: f64,
}

impl Operator {
    /// `rate` in pieces a second, `None`: as fast as the station takes them.
    #[must_use]
    pub fn new(gauge: Gauge, rate: Option<f64>, keep_measuring: bool) -> Self {
        let period_ms = rate.map_or(0.0, |rate| 1000.0 / rate);
        Self { gauge, period_ms, keep_measuring, study: None, due_ms: 0.0 }
    }

    /// How long there is nothing to do, in ms; `None`: until something happens.
    #[must_use]
    pub fn idle_ms(&self, now: Millis, station: &Station, call: Option<Call>) -> Option<u64> {
        let study = self.wanted(station, call)?;
        if self.study != Some(study.began()) {
            return Some(0);
        }
        // Saturates at 0 where the time has come.
        Some((self.due_ms - now.0 as f64).ceil() as u64)
    }

    /// Does what is to be done at `now`: one line at most.
    pub fn act(&mut self, now: Millis, station: &Station, call: Option<Call>) -> Act {
        let now_ms = now.0 as f64;
        let Some(study) = self.wanted(station, call) else { return Act::Wait };
        if self.study != Some(study.began()) {
            self.study = Some(study.began());
            self.due_ms = now_ms + TO_THE_BENCH_MS.max(self.period_ms);
        }
        if now_ms < self.due_ms {
            return Act::Wait;
        }
        // A pace that was lost is not caught up.
        self.due_ms = (self.due_ms + self.period_ms).max(now_ms);
        self.measure(study)
    }

    /// The study, if a piece is wanted for it now.
    fn wanted<'s>(&self, station: &'s Station, call: Option<Call>) -> Option<&'s Study> {
        let study = station.study()?;
        let open = study.standing() == Standing::Gathering || self.keep_measuring;
        let free = call != Some(Call::Act) && study.held().is_none();
        (open && free && !matches!(self.gauge, Gauge::Absent)).then_some(study)
    }

    fn measure(&mut self, study: &Study) -> Act {
        match &mut self.gauge {
            Gauge::Absent => Act::Wait,
            Gauge::Process(process) => {
                let plan = study.plan();
                let line = process.line(pieces_before(study), plan.resolution, plan.unit.as_str());
                Act::Measure(line.into_bytes())
            }
            Gauge::Feed(feed) => match feed.next_line() {
                Ok(line) if line.is_empty() => {
                    self.gauge = Gauge::Absent;
                    Act::FeedEnded
                }
                Ok(line) => Act::Measure(line),
                Err(error) => {
                    self.gauge = Gauge::Absent;
                    Act::FeedBroken(error)
                }
            },
        }
    }
}

/// How many pieces of this study were measured: a station that starts again goes on behind them.
#[must_use]
pub fn pieces_before(study: &Study) -> u32 {
    let progress = study.progress();
    progress.n.get().saturating_add(progress.surplus).saturating_add(progress.taken_back)
}
