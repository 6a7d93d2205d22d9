//! The recorder: journal, station, gauge line and link in one machine without I/O of its own. The Pico's firmware and the
//! virtual station both drive this, byte by byte and tick by tick.
//!
//! It is the one place where *durable first* is enforced: an event changes the station's state, and so the lamps, only
//! after [`Journal::append`] returned.

mod answer;

use core::ops::ControlFlow;

use embedded_storage::nor_flash::MultiwriteNorFlash;

use crate::{
    counts::Counts,
    gauge::LineAssembler,
    journal::{AppendError, Journal, OpenError, Patrol, Prepared, STATE_MAX},
    lamps::{self, Call, Lamps},
    plan::LineSettings,
    quantity::Count,
    record::{Event, Gap, Millis, Refusal, Seq},
    station::Station,
    stopping::Standing,
    text::Text,
    wire::{
        self, FRAME_MAX, FrameError, FrameReader, JournalHealth, RECORDS_MAX, Reason, Reply, Request,
        StationId,
    },
};

/// Pages kept back from readings, so that boots, clocks and plans can still be recorded when the journal is full.
const RESERVED_PAGES: u32 = 20;
/// Of these, pages kept back from what a host asks for, so that no host can fill the journal.
const RESERVED_FOR_BOOTS: u32 = 10;
/// The journal is nearly full when fewer than one page in so many is left.
const NEARLY_FULL: u32 = 8;
/// The patrol begins a new round so long after the last one.
const PATROL_EVERY_MS: u64 = 60 * 60 * 1_000;
/// The erase ahead of need waits until the gauge was silent for so long.
const QUIET_MS: u64 = 200;
/// Refusals are collected for so long before they are recorded, so that rubbish does not fill the journal.
const REFUSALS_EVERY_MS: u64 = 1_000;
/// Different reasons collected at most.
const REASONS_MAX: usize = 8;

/// A button beside the lamps.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub enum Button {
    /// Take the latest reading back.
    TakeBack,
    /// I have looked at what held the study.
    Seen,
}

/// A station at work. See the module's documentation.
#[derive(Debug)]
pub struct Recorder<F> {
    journal: Journal<F>,
    station: Station,
    id: StationId,
    firmware: Text<32>,
    gauge: LineAssembler,
    gauge_heard: Millis,
    frames: FrameReader,
    reply: [u8; FRAME_MAX],
    health: JournalHealth,
    refusals: heapless::Vec<(Refusal, u16), REASONS_MAX>,
    last_refusal: Option<(Millis, Refusal)>,
    refused_unrecorded: u32,
    minded: Millis,
    taken: Option<Millis>,
    blinking: Option<Millis>,
    widest: i64,
    /// When the patrol's last round was done; `None` during a round.
    patrolled: Option<Millis>,
}

impl<F: MultiwriteNorFlash> Recorder<F> {
    /// Finds the journal, replays it and records the boot.
    ///
    /// # Errors
    /// Only if the flash cannot be read at all, or holds a journal of another format; a full journal, a damaged one, or
    /// one that cannot be written is shown instead.
    pub fn open(
        flash: F,
        id: StationId,
        firmware: Text<32>,
        now: Millis,
    ) -> Result<Self, OpenError<F::Error>> {
        let mut state = [0; STATE_MAX];
        let (mut journal, opened) = Journal::open(flash, id, &mut state)?;
        // A state of another version does not decode: the replay then begins at the first record that is kept.
        let mut station: Station = opened
            .state
            .and_then(|length| state.get(..length))
            .and_then(Station::restore)
            .unwrap_or_default();
        let from = station.through().map_or(Seq::FIRST, Seq::next);
        journal.visit(from, |seq, sealed| {
            if let Ok(record) = sealed.record() {
                station.apply(seq, &record.event);
            }
            ControlFlow::Continue(())
        })?;
        let mut recorder = Self {
            journal,
            station,
            id,
            firmware,
            gauge: LineAssembler::new(now),
            gauge_heard: now,
            frames: FrameReader::default(),
            reply: [0; FRAME_MAX],
            health: JournalHealth::Well,
            refusals: heapless::Vec::new(),
            last_refusal: None,
            refused_unrecorded: 0,
            minded: now,
            taken: None,
            blinking: None,
            widest: answer::SIX_DIGITS,
            patrolled: None,
        };
        recorder.look_at_journal();
        let boot = recorder.station.boots().saturating_add(1);
        // Where even that cannot be recorded, the journal's health says so.
        let _ = recorder.record(now, &Event::Boot { boot });
        if opened.salvage.torn {
            recorder.refuse(now, Refusal::PowerFailed);
        }
        if let Some(gap) = opened.salvage.skipped {
            recorder.lost(now, gap);
        }
        Ok(recorder)
    }

    /// The state, for whoever shows it.
    #[must_use]
    pub fn station(&self) -> &Station {
        &self.station
    }

    /// The journal, for tests that look at it.
    pub fn journal(&mut self) -> &mut Journal<F> {
        &mut self.journal
    }

    /// How the gauge sends, by the plan.
    #[must_use]
    pub fn line_settings(&self) -> LineSettings {
        self.station.study().map_or_else(LineSettings::default, |study| study.plan().gauge)
    }

    /// Takes what the gauge sent, in order. Readings in it are durable when this returns.
    pub fn gauge_bytes(&mut self, now: Millis, bytes: &[u8]) {
        for byte in bytes {
            self.gauge_heard = now;
            let outcome = match self.gauge.push(now, *byte) {
                None => continue,
                Some(Err(refusal)) => Err(refusal),
                Some(Ok(line)) => read_line(&self.station, line),
            };
            match outcome.and_then(|counts| self.take_reading(now, counts)) {
                Ok(()) => self.taken = Some(now),
                Err(refusal) => self.refuse(now, refusal),
            }
        }
    }

    /// Bytes of the gauge were lost before they could be taken.
    pub fn gauge_overrun(&mut self, now: Millis) {
        self.gauge.spoil(now);
        self.refuse(now, Refusal::GaugeOverrun);
    }

    /// Bytes of the gauge arrived garbled, as the receiver noticed; it keeps them to itself.
    pub fn gauge_garbled(&mut self, now: Millis) {
        self.gauge.spoil(now);
        self.refuse(now, Refusal::GaugeGarbled);
    }

    /// Takes a byte from the host. If it completes a request, gives the reply's frame: send it whole before the next
    /// byte is fed.
    pub fn host_byte(&mut self, now: Millis, byte: u8) -> Option<&[u8]> {
        let frame = self.frames.push(byte)?;
        let (number, request) = match wire::decode::<Request>(frame) {
            Ok((number, request)) => (number, Ok(request)),
            Err(FrameError::Version { number, .. }) => {
                (number, Err(Reason::Version { station: wire::VERSION }))
            }
            Err(FrameError::Unknown { number }) => (number, Err(Reason::UnknownRequest)),
            // Whoever sent it hears nothing and asks again.
            Err(FrameError::Damaged | FrameError::TooLong) => return None,
        };
        let mut records = [0; RECORDS_MAX];
        let reply = match request {
            Ok(request) => self.answer(now, request, &mut records),
            Err(reason) => Reply::Refused(reason),
        };
        // All replies fit: their parts are bounded, as a test proves.
        wire::encode(number, &reply, &mut self.reply).ok()
    }

    /// A button was pressed.
    pub fn press(&mut self, now: Millis, button: Button) {
        let outcome = match button {
            Button::TakeBack => match self.station.last_reading() {
                Some(seq) => self.record(now, &Event::TakenBack(seq)),
                None => Err(Refusal::NothingToTakeBack),
            },
            Button::Seen
                if self.station.calls_for_lost()
                    || self.station.study().is_some_and(|study| study.held().is_some()) =>
            {
                self.record(now, &Event::Seen)
            }
            Button::Seen => return,
        };
        if let Err(refusal) = outcome {
            self.refuse(now, refusal);
        }
    }

    /// Lets time pass; call it every 10 ms or more often. In quiet moments this erases flash ahead of need, which can
    /// take the flash's longest erase time, twice now and then, or reads a page to see that it still can be read.
    pub fn tick(&mut self, now: Millis) {
        if let Some(refusal) = self.gauge.tick(now) {
            self.refuse(now, refusal);
        }
        if now.since(self.minded) >= REFUSALS_EVERY_MS {
            self.minded = now;
            self.record_refusals(now);
            self.look_at_journal();
        }
        if now.since(self.gauge_heard) >= QUIET_MS && !matches!(self.prepare(), Ok(Prepared::Erased)) {
            self.patrol(now);
        }
    }

    /// What the lamps show at `now`.
    #[must_use]
    pub fn lamps(&self, now: Millis) -> Lamps {
        if self.blinks(now) {
            return lamps::blink(now);
        }
        let standing = self.station.study().map(|study| study.standing());
        Lamps {
            done: standing == Some(Standing::Settled),
            attention: self.call(now).is_some_and(|call| call.lit(now)),
            taken: self.taken.is_some_and(|since| now.since(since) < lamps::TAKEN_SHOWN_MS),
        }
    }

    /// Whether the lamps show which station this is, since the host asked.
    #[must_use]
    pub fn blinks(&self, now: Millis) -> bool {
        self.blinking.is_some_and(|since| now.since(since) < lamps::BLINK_MS)
    }

    /// Why the attention lamp flashes at `now`, if it does.
    #[must_use]
    pub fn call(&self, now: Millis) -> Option<Call> {
        let study = self.station.study();
        if matches!(self.health, JournalHealth::Full | JournalHealth::Faulty)
            || study.is_some_and(|study| study.held().is_some())
        {
            return Some(Call::Act);
        }
        if let Some((since, _)) = self.last_refusal
            && now.since(since) < lamps::REFUSAL_SHOWN_MS
        {
            return Some(Call::Refused { since });
        }
        if self.station.calls_for_lost() {
            return Some(Call::Lost);
        }
        if study.is_some_and(|study| study.standing() == Standing::Spent) {
            return Some(Call::Spent);
        }
        (self.health == JournalHealth::NearlyFull).then_some(Call::Pull)
    }

    // ---- recording ----

    fn take_reading(&mut self, now: Millis, counts: Counts) -> Result<(), Refusal> {
        self.record_leaving(RESERVED_PAGES, now, &Event::Reading(counts))?;
        self.widest = self.widest.max(counts.get().saturating_abs());
        Ok(())
    }

    /// [`Recorder::record`] if more than so many pages are left.
    fn record_leaving(&mut self, pages: u32, now: Millis, event: &Event) -> Result<Seq, Refusal> {
        if !self.journal.has_room(pages).map_err(|_| Refusal::FlashFault)? {
            return Err(Refusal::JournalFull);
        }
        self.record(now, event)
    }

    /// Durable first, then applied.
    fn record(&mut self, now: Millis, event: &Event) -> Result<Seq, Refusal> {
        let seq = match self.journal.append(now, event) {
            Err(AppendError::NotPrepared) => {
                if self.prepare()? == Prepared::Full {
                    return Err(Refusal::JournalFull);
                }
                self.journal.append(now, event)
            }
            other => other,
        };
        match seq {
            Ok(seq) => {
                self.station.apply(seq, event);
                Ok(seq)
            }
            Err(_) => {
                self.health = JournalHealth::Faulty;
                Err(Refusal::FlashFault)
            }
        }
    }

    fn prepare(&mut self) -> Result<Prepared, Refusal> {
        let station = &self.station;
        let prepared = self.journal.prepare(|space| station.store(space));
        if matches!(prepared, Ok(Prepared::Erased)) {
            self.gauge.was_deaf();
        }
        prepared.map_err(|_| {
            self.health = JournalHealth::Faulty;
            Refusal::FlashFault
        })
    }

    fn refuse(&mut self, now: Millis, reason: Refusal) {
        self.last_refusal = Some((now, reason));
        if matches!(reason, Refusal::JournalFull | Refusal::FlashFault) {
            self.refused_unrecorded = self.refused_unrecorded.saturating_add(1);
            self.look_at_journal();
            return;
        }
        if let Some((_, times)) = self.refusals.iter_mut().find(|(known, _)| *known == reason) {
            *times = times.saturating_add(1);
            return;
        }
        if self.refusals.is_full() {
            self.record_refusals(now);
        }
        // Just emptied where it was full.
        let _ = self.refusals.push((reason, 1));
    }

    fn record_refusals(&mut self, now: Millis) {
        while let Some((reason, times)) = self.refusals.pop() {
            let room = self.journal.has_room(RESERVED_PAGES).unwrap_or(false);
            if !room || self.record(now, &Event::Refused { reason, times }).is_err() {
                self.refused_unrecorded = self.refused_unrecorded.saturating_add(u32::from(times));
            }
        }
    }

    /// Records that these records can no longer be read, unless that is on record.
    fn lost(&mut self, now: Millis, gap: Gap) {
        if !self.station.knows_lost(gap) {
            // Where it cannot be recorded, the journal's health says why, and the next round finds it again.
            let _ = self.record_leaving(RESERVED_FOR_BOOTS, now, &Event::Lost(gap));
        }
    }

    fn patrol(&mut self, now: Millis) {
        if self.patrolled.is_some_and(|done| now.since(done) < PATROL_EVERY_MS) {
            return;
        }
        self.patrolled = None;
        match self.journal.patrol() {
            Ok(Patrol::Going) => {}
            Ok(Patrol::Missing(gap)) => self.lost(now, gap),
            Ok(Patrol::Done) | Err(_) => self.patrolled = Some(now),
        }
    }

    fn look_at_journal(&mut self) {
        if self.health == JournalHealth::Faulty {
            return;
        }
        self.health = match self.journal.pages_left() {
            Err(_) => JournalHealth::Faulty,
            Ok(left) if left <= RESERVED_PAGES => JournalHealth::Full,
            Ok(left) if left <= self.journal.places() / NEARLY_FULL => JournalHealth::NearlyFull,
            Ok(_) => JournalHealth::Well,
        };
    }
}

/// What the line says, if there is a study that can take it.
fn read_line(station: &Station, line: &[u8]) -> Result<Counts, Refusal> {
    let study = station.study().ok_or(Refusal::NoPlan)?;
    let counts = study.plan().resolution.read(line, study.plan().unit.as_str()).map_err(Refusal::Reading)?;
    if study.moments().n() == Count::MAX {
        return Err(Refusal::StudyFull);
    }
    Ok(counts)
}

#[cfg(test)]
mod tests;
