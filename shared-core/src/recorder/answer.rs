//! What the station answers to a host's requests.

use embedded_storage::nor_flash::MultiwriteNorFlash;

use super::{RESERVED_FOR_BOOTS, RESERVED_PAGES, Recorder};
use crate::{
    counts::Counts,
    gauge::LineAssembler,
    plan::Plan,
    quantity::Count,
    record::{Event, Millis, RECORD_MAX, Refusal, Seq},
    stopping::Standing,
    wire::{Hello, RECORDS_MAX, Reason, Reply, Request, Status, StudyStatus},
};

/// Room is told for readings as wide as the widest so far, and at least of six digits …
pub(super) const SIX_DIGITS: i64 = 999_999;
/// … and for stations that are on for a hundred days, or twice as long as now.
const LONG_UP: Millis = Millis(1 << 33);

impl<F: MultiwriteNorFlash> Recorder<F> {
    pub(super) fn answer<'r>(
        &mut self,
        now: Millis,
        request: Request,
        records: &'r mut [u8; RECORDS_MAX],
    ) -> Reply<'r> {
        match request {
            Request::Hello => Reply::Hello(Hello {
                station: self.id,
                firmware: self.firmware.clone(),
                next: self.journal.next(),
                oldest: self.journal.oldest().unwrap_or(self.journal.next()),
                head: self.journal.digest(),
            }),
            Request::Status => Reply::Status(self.status(now)),
            Request::Load { plan, replace } => recorded(self.load(now, plan, replace)),
            Request::Records { from } => self.records(from, RECORDS_MAX, records),
            Request::RecordsWithin { from, bytes } => self.records(from, bytes.into(), records),
            Request::Received { through } if through >= self.journal.next() => {
                Reply::Refused(Reason::BeyondJournal)
            }
            Request::Received { through } => {
                self.journal.release(through);
                self.look_at_journal();
                Reply::Done
            }
            Request::SetClock { unix_ms } => {
                let event = Event::Clock { unix_ms };
                recorded(self.record_leaving(RESERVED_FOR_BOOTS, now, &event).map_err(Reason::NotRecorded))
            }
            Request::Blink => {
                self.blinking = Some(now);
                Reply::Done
            }
        }
    }

    fn records<'r>(&mut self, from: Seq, most: usize, records: &'r mut [u8; RECORDS_MAX]) -> Reply<'r> {
        if from > self.journal.next() {
            return Reply::Refused(Reason::BeyondJournal);
        }
        let space = records.get_mut(..most.min(RECORDS_MAX)).unwrap_or_default();
        let mut window = self.journal.window(from, space);
        if most < RECORD_MAX && matches!(window, Ok((_, 0))) {
            // An empty answer means that there is nothing, so a record that alone is longer than was asked for is given too.
            window = self.journal.window(from, records.get_mut(..RECORD_MAX).unwrap_or_default());
        }
        match window {
            Ok((before, used)) => Reply::Records { before, records: records.get(..used).unwrap_or_default() },
            Err(_) => Reply::Refused(Reason::NotRecorded(Refusal::FlashFault)),
        }
    }

    fn load(&mut self, now: Millis, plan: Plan, replace: bool) -> Result<Seq, Reason> {
        if let Some(study) = self.station.study() {
            let untouched = study.moments().n() == Count::ZERO && study.progress().taken_back == 0;
            // Asked again because the answer was lost: the study is there already.
            if untouched && *study.plan() == plan {
                return Ok(study.began());
            }
            if !untouched && study.standing() == Standing::Gathering && !replace {
                return Err(Reason::StudyUnfinished);
            }
        }
        let before = self.line_settings();
        let event = Event::Plan(plan);
        let seq = self.record_leaving(RESERVED_FOR_BOOTS, now, &event).map_err(Reason::NotRecorded)?;
        if self.line_settings() != before {
            self.gauge = LineAssembler::new(now);
        }
        Ok(seq)
    }

    fn status(&mut self, now: Millis) -> Status {
        self.look_at_journal();
        let last = self.journal.next().0.saturating_sub(1);
        Status {
            study: self.station.study().map(|study| {
                let sample = study.sample();
                let estimate = study.estimate();
                StudyStatus {
                    began: study.began(),
                    name: study.plan().name.clone(),
                    progress: study.progress(),
                    mean: study.moments().mean(study.plan().resolution),
                    // That of all readings, whichever sigma the index takes.
                    standard_deviation: sample
                        .and_then(|_| study.moments().standard_deviation(study.plan().resolution)),
                    estimate: estimate.map(|e| e.estimate),
                    low: estimate.and_then(|e| e.interval.low),
                    high: estimate.and_then(|e| e.interval.high),
                }
            }),
            held: self.station.study().and_then(|study| study.held()),
            boots: self.station.boots(),
            up: now,
            room: self.room(now),
            unconfirmed: last.saturating_sub(self.journal.released().0),
            refused: self.station.refused().saturating_add(self.refused_unrecorded),
            last_refusal: self.last_refusal.map(|(_, refusal)| refusal),
            journal: self.health,
            gaps: self.station.gaps(),
            lost: self.station.latest_lost(),
        }
    }

    /// Readings that surely can still be taken; see [`Journal::readings_in`].
    fn room(&mut self, now: Millis) -> u32 {
        let left = self.journal.pages_left().unwrap_or(0).saturating_sub(RESERVED_PAGES);
        let at = Millis(now.0.saturating_mul(2)).max(LONG_UP);
        // Within range, since it was read as a reading.
        let widest = Counts::new(self.widest).unwrap_or_default();
        self.journal.readings_in(left, at, widest)
    }
}

fn recorded<'r>(outcome: Result<Seq, Reason>) -> Reply<'r> {
    match outcome {
        Ok(seq) => Reply::Recorded(seq),
        Err(reason) => Reply::Refused(reason),
    }
}
