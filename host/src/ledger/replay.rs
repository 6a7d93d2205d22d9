//! From a station's records to its studies, through the station's own state machine.

use donelight_core::record::{Event, Millis, Record, Seq};
use donelight_core::station::{Held, Progress, Station};
use donelight_core::wire::StationId;

use sha2::{Digest, Sha256};

use super::studies::{Fate, Happening, Incident, Kept, Reading, Row, StudyKey};
use super::{Bounds, Gap, UnixMillis, WallTime};

/// Takes a station's records in order.
pub(super) struct Replay {
    id: StationId,
    firmware: String,
    station: Station,
    time: WallTime,
    next: Seq,
    studies: Vec<Kept>,
    /// The stations' own times of what is in `studies`, in its order; wall times are known only at the end.
    times: Vec<Times>,
    /// Of the latest study's records.
    fingerprint: Sha256,
}

/// The times since boot of a study's plan, readings and incidents.
#[derive(Default)]
struct Times {
    began: Millis,
    readings: Vec<Millis>,
    incidents: Vec<Option<Millis>>,
}

impl Replay {
    pub(super) fn new(id: StationId, firmware: &str) -> Self {
        Self {
            id,
            firmware: firmware.to_owned(),
            station: Station::default(),
            time: WallTime::default(),
            next: Seq::FIRST,
            studies: Vec::new(),
            times: Vec::new(),
            fingerprint: Sha256::new(),
        }
    }

    /// The next record; those between the last one and this one are missing.
    pub(super) fn take(&mut self, row: Row<'_>) {
        let Row { received, seq, sealed, chain } = row;
        self.missing_until(seq);
        self.next = seq.next();
        match sealed.record() {
            Ok(record) => self.apply(received, record),
            Err(_) => self.note(seq, None, Happening::UnknownKind),
        }
        if let Some((kept, study)) = self.studies.last_mut().zip(self.station.study()) {
            kept.study = study.clone();
            kept.last_received = received;
            kept.through = seq;
            kept.chain = chain;
            self.fingerprint.update(sealed.bytes());
        }
    }

    /// The records from the last one on to this one are missing. A boot may be among them.
    pub(super) fn missing_until(&mut self, seq: Seq) {
        if seq > self.next {
            let gap = Gap { first: self.next, last: Seq(seq.0 - 1) };
            self.note(gap.first, None, Happening::Missing(gap));
            self.time.gap(seq);
            self.next = seq;
        }
    }

    fn apply(&mut self, received: UnixMillis, record: Record) {
        let Record { seq, at, event } = record;
        let before = self.progress();
        let held_before = self.held();
        self.station.apply(seq, &event);
        if let Event::Boot { .. } = event {
            self.time.restart(seq);
        }
        self.time.record(seq, at);
        match event {
            Event::Boot { boot } => {
                self.note(seq, Some(at), Happening::Restarted { boot });
            }
            Event::Plan(_) => self.begin(received, seq, at),
            Event::Clock { unix_ms } => self.time.clock(seq, at, unix_ms),
            Event::Reading(counts) => {
                let fate = match (before, self.progress()) {
                    (Some(before), Some(now)) if now.surplus > before.surplus => Fate::Surplus,
                    _ => Fate::Counted,
                };
                if let Some((kept, times)) = self.latest() {
                    let bounds = Bounds::default();
                    kept.readings.push(Reading { seq, time: None, bounds, counts, fate });
                    times.readings.push(at);
                }
            }
            Event::Refused { reason, times } => {
                self.note(seq, Some(at), Happening::Refused { reason, times });
            }
            Event::TakenBack(reading) => self.take_back(seq, at, reading, before),
            Event::Seen => self.note(seq, Some(at), Happening::Seen),
            Event::Lost(gap) => self.note(seq, Some(at), Happening::Unreadable(gap)),
            _ => self.note(seq, Some(at), Happening::UnknownKind),
        }
        if let (None, Some(held)) = (held_before, self.held()) {
            self.note(seq, Some(at), Happening::Held(held));
        }
    }

    fn begin(&mut self, received: UnixMillis, seq: Seq, at: Millis) {
        self.close();
        let Some(study) = self.station.study() else { return };
        self.studies.push(Kept {
            key: StudyKey { station: self.id, began: seq },
            firmware: self.firmware.clone(),
            study: study.clone(),
            readings: Vec::new(),
            incidents: Vec::new(),
            began: None,
            began_received: received,
            last_received: received,
            through: seq,
            fingerprint: String::new(),
            chain: None,
        });
        self.times.push(Times { began: at, ..Times::default() });
    }

    /// What follows belongs to the next study.
    fn close(&mut self) {
        let sum = std::mem::take(&mut self.fingerprint).finalize();
        if let Some(kept) = self.studies.last_mut() {
            kept.fingerprint = sum.iter().map(|byte| format!("{byte:02x}")).collect();
        }
    }

    fn take_back(&mut self, seq: Seq, at: Millis, reading: Seq, before: Option<Progress>) {
        let count = |progress: Option<Progress>| progress.map_or(0, |progress| progress.taken_back);
        if count(self.progress()) == count(before) {
            return;
        }
        if let Some((kept, _)) = self.latest()
            && let Some(taken) = kept.readings.iter_mut().rev().find(|kept| kept.seq == reading)
        {
            taken.fate = Fate::TakenBack;
        }
        self.note(seq, Some(at), Happening::TakenBack(reading));
    }

    fn note(&mut self, seq: Seq, at: Option<Millis>, what: Happening) {
        if let Some((kept, times)) = self.latest() {
            kept.incidents.push(Incident { seq, time: None, what });
            times.incidents.push(at);
        }
    }

    fn latest(&mut self) -> Option<(&mut Kept, &mut Times)> {
        self.studies.last_mut().zip(self.times.last_mut())
    }

    fn progress(&self) -> Option<Progress> {
        self.station.study().map(|study| study.progress())
    }

    fn held(&self) -> Option<Held> {
        self.station.study().and_then(|study| study.held())
    }

    /// Gives the studies with their wall times; `conflicts` are numbers with a second, differing record.
    pub(super) fn finish(mut self, conflicts: &[Seq]) -> Vec<Kept> {
        self.close();
        for (kept, times) in self.studies.iter_mut().zip(&self.times) {
            let of = |seq, at: Millis| self.time.of(seq, at);
            kept.began = of(kept.key.began, times.began);
            for (reading, at) in kept.readings.iter_mut().zip(&times.readings) {
                reading.time = of(reading.seq, *at);
                reading.bounds = self.time.bounds(reading.seq, *at);
            }
            for (incident, at) in kept.incidents.iter_mut().zip(&times.incidents) {
                incident.time = at.and_then(|at| of(incident.seq, at));
            }
            let here = conflicts.iter().copied().filter(|seq| (kept.key.began..=kept.through).contains(seq));
            let here: Vec<Incident> =
                here.map(|seq| Incident { seq, time: None, what: Happening::Conflict }).collect();
            kept.incidents.extend(here);
            kept.incidents.sort_by_key(|incident| incident.seq);
        }
        self.studies
    }
}
