//! Tells what a station does, one event at a time, in words and as JSON.
//!
//! It reads the journal and applies each record to a station of its own, so it may lag behind without losing anything,
//! and what it says of a record is how the station stood right then.

use std::fmt;
use std::ops::ControlFlow;

use donelight_core::lamps::Call;
use donelight_core::record::{Event, Gap, Millis, Record, Refusal, Seq};
use donelight_core::recorder::Recorder;
use donelight_core::station::{Held, Station, Study};
use donelight_core::stopping::Standing;
use serde_json::{Value, json};

use super::flash::{Flash, Medium};

/// Why the attention lamp flashes, as far as it is told: what lasts.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Attention {
    /// The gauge seems to be stuck.
    GaugeStuck,
    /// Nothing can be recorded.
    Journal,
    /// Records can no longer be read.
    Lost,
    /// The plan's limit is reached without the precision.
    Spent,
    /// The journal will soon be full.
    Pull,
}

/// One thing that happened.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum News {
    /// A plan was loaded.
    Plan {
        /// The record.
        seq: Seq,
        /// The study's name.
        name: String,
        /// Pieces planned.
        planned: u32,
        /// Pieces at most.
        limit: u32,
    },
    /// A reading is in the journal.
    Reading {
        /// The record.
        seq: Seq,
        /// Pieces that count, with this one.
        n: u32,
        /// As the gauge shows it.
        reading: String,
        /// The unit's word.
        unit: String,
        /// It came after the study was settled or spent, and does not count.
        surplus: bool,
    },
    /// A reading was taken back.
    TakenBack {
        /// The record.
        seq: Seq,
        /// Pieces that still count.
        n: u32,
    },
    /// Someone has looked.
    Seen {
        /// The record.
        seq: Seq,
    },
    /// Something was refused.
    Refused {
        /// The record.
        seq: Seq,
        /// Why.
        reason: Refusal,
        /// How often.
        times: u16,
    },
    /// Records can no longer be read.
    Lost {
        /// The record that says so.
        seq: Seq,
        /// Their numbers.
        gap: Gap,
    },
    /// The clock was set.
    Clock {
        /// The record.
        seq: Seq,
        /// Milliseconds since 1970-01-01 00:00 UTC.
        unix_ms: u64,
    },
    /// The done lamp is lit or dark from now on.
    Done {
        /// Lit.
        lit: bool,
        /// Pieces that count.
        n: u32,
    },
    /// The attention lamp flashes for this reason from now on, or for none.
    Attention(Option<Attention>),
    /// The lamps show which station this is, or have done so.
    Blink(bool),
}

impl News {
    /// For scripts: an object with the member `event`.
    #[must_use]
    pub fn json(&self) -> Value {
        match self {
            Self::Plan { seq, name, planned, limit } => {
                json!({ "event": "plan", "seq": seq, "name": name, "planned": planned, "limit": limit })
            }
            Self::Reading { seq, n, reading, unit, surplus } => json!({
                "event": "reading", "seq": seq, "n": n, "reading": reading, "unit": unit, "surplus": surplus
            }),
            Self::TakenBack { seq, n } => json!({ "event": "taken-back", "seq": seq, "n": n }),
            Self::Seen { seq } => json!({ "event": "seen", "seq": seq }),
            Self::Refused { seq, reason, times } => {
                json!({ "event": "refused", "seq": seq, "reason": reason.to_string(), "times": times })
            }
            Self::Lost { seq, gap } => {
                json!({ "event": "lost", "seq": seq, "first": gap.first, "last": gap.last })
            }
            Self::Clock { seq, unix_ms } => json!({ "event": "clock", "seq": seq, "unix_ms": unix_ms }),
            Self::Done { lit, n } => json!({ "event": "lamp", "lamp": "done", "lit": lit, "n": n }),
            Self::Attention(reason) => json!({
                "event": "lamp", "lamp": "attention", "lit": reason.is_some(),
                "reason": reason.map(|reason| reason.to_string()),
            }),
            Self::Blink(on) => json!({ "event": "blink", "on": on }),
        }
    }
}

impl fmt::Display for Attention {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Self::GaugeStuck => "the gauge repeats itself; look at it, then press seen",
            Self::Journal => "nothing can be recorded; pull the log, or mend the disk and start again",
            Self::Lost => "records can no longer be read; pull the log, then press seen",
            Self::Spent => "the plan's limit is reached without the wanted precision",
            Self::Pull => "the journal will soon be full; pull the log",
        })
    }
}

impl fmt::Display for News {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Plan { name, planned, limit, .. } => {
                write!(f, "plan loaded: {name}; {planned} pieces planned, {limit} at most")
            }
            Self::Reading { n, reading, unit, surplus, .. } => {
                let space = if unit.is_empty() { "" } else { " " };
                let note = if *surplus { "  (surplus, outside the study)" } else { "" };
                write!(f, "{n:>6}  {reading}{space}{unit}{note}")
            }
            Self::TakenBack { n, .. } => write!(f, "reading taken back; {n} pieces count"),
            Self::Seen { .. } => f.write_str("seen"),
            Self::Refused { reason, times: 1, .. } => write!(f, "refused: {reason}"),
            Self::Refused { reason, times, .. } => write!(f, "refused {times} times: {reason}"),
            Self::Lost { gap, .. } => {
                write!(f, "records {} to {} can no longer be read", gap.first, gap.last)
            }
            Self::Clock { .. } => f.write_str("clock set"),
            Self::Done { lit: true, n } => write!(f, "done lamp lit at piece {n}"),
            Self::Done { lit: false, .. } => f.write_str("done lamp dark"),
            Self::Attention(Some(reason)) => write!(f, "attention lamp flashes: {reason}"),
            Self::Attention(None) => f.write_str("attention lamp dark"),
            Self::Blink(true) => f.write_str("both lamps blink in turn: this is the station asked for"),
            Self::Blink(false) => f.write_str("lamps no longer blink"),
        }
    }
}

/// Follows a station.
#[derive(Debug)]
pub struct Narrator {
    next: Seq,
    station: Station,
    done: bool,
    attention: Option<Attention>,
    blinks: bool,
}

impl Narrator {
    /// Begins at record `next`, with the station as of the records before it. All lamps count as dark.
    #[must_use]
    pub fn new(next: Seq, station: Station) -> Self {
        Self { next, station, done: false, attention: None, blinks: false }
    }

    /// The next thing to tell, in order; `None` if all is told.
    pub fn next<M: Medium>(&mut self, recorder: &mut Recorder<Flash<M>>, now: Millis) -> Option<News> {
        loop {
            if let Some(news) = self.done_lamp() {
                return Some(news);
            }
            if self.next >= recorder.journal().next() {
                return self.other_lamps(recorder, now);
            }
            let record = next_record(recorder, self.next);
            // A record that was pulled and erased before it was told, or one that cannot be read, is passed over.
            let seq = record.as_ref().map_or(self.next, |record| record.seq);
            self.next = seq.next();
            if let Some(news) = record.and_then(|record| self.tell(&record)) {
                return Some(news);
            }
        }
    }

    fn done_lamp(&mut self) -> Option<News> {
        let study = self.station.study();
        let lit = study.is_some_and(|study| study.standing() == Standing::Settled);
        if lit == self.done {
            return None;
        }
        self.done = lit;
        Some(News::Done { lit, n: study.map_or(0, n) })
    }

    fn other_lamps<M: Medium>(&mut self, recorder: &Recorder<Flash<M>>, now: Millis) -> Option<News> {
        let attention = match recorder.call(now) {
            Some(Call::Act) if recorder.station().study().and_then(Study::held) == Some(Held::GaugeStuck) => {
                Some(Attention::GaugeStuck)
            }
            Some(Call::Act) => Some(Attention::Journal),
            Some(Call::Lost) => Some(Attention::Lost),
            Some(Call::Spent) => Some(Attention::Spent),
            Some(Call::Pull) => Some(Attention::Pull),
            // Told by its record; it hides what lasts for a second only.
            Some(Call::Refused { .. }) => self.attention,
            None => None,
        };
        if attention != self.attention {
            self.attention = attention;
            return Some(News::Attention(attention));
        }
        let blinks = recorder.blinks(now);
        if blinks != self.blinks {
            self.blinks = blinks;
            return Some(News::Blink(blinks));
        }
        None
    }

    fn tell(&mut self, record: &Record) -> Option<News> {
        let seq = record.seq;
        let before = self.station.study().map_or(0, n);
        self.station.apply(seq, &record.event);
        let study = self.station.study();
        let n = study.map_or(0, n);
        Some(match &record.event {
            Event::Boot { .. } => return None,
            Event::Plan(plan) => News::Plan {
                seq,
                name: plan.name.as_str().to_owned(),
                planned: plan.rule.planned.get(),
                limit: plan.rule.limit.get(),
            },
            Event::Reading(counts) => {
                let plan = study?.plan();
                News::Reading {
                    seq,
                    n,
                    reading: plan.resolution.show(*counts).to_string(),
                    unit: plan.unit.as_str().to_owned(),
                    surplus: n == before,
                }
            }
            Event::TakenBack(_) => News::TakenBack { seq, n },
            Event::Seen => News::Seen { seq },
            Event::Refused { reason, times } => News::Refused { seq, reason: *reason, times: *times },
            Event::Lost(gap) => News::Lost { seq, gap: *gap },
            Event::Clock { unix_ms } => News::Clock { seq, unix_ms: *unix_ms },
            _ => return None,
        })
    }
}

fn n(study: &Study) -> u32 {
    study.progress().n.get()
}

fn next_record<M: Medium>(recorder: &mut Recorder<Flash<M>>, from: Seq) -> Option<Record> {
    let mut record = None;
    // A flash that cannot be read is told of elsewhere.
    let _ = recorder.journal().visit(from, |_, sealed| {
        record = sealed.record().ok();
        ControlFlow::Break(())
    });
    record
}
