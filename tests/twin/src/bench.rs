//! The station on the bench: steps in, a digest of all that it does out.

use donelight_core::{
    lamps::Call,
    record::Millis,
    recorder::{Button, Recorder},
    station::Station,
    text::Text,
    wire::StationId,
};

use crate::{
    Chip, Digest, Memory, Step,
    step::{NoStep, Steps},
};

/// The bench's station.
pub const STATION: StationId = StationId(*b"the twin");

/// Room for a stored state.
const STATE_MAX: usize = 1024;

/// A station at work on a flash.
#[derive(Debug)]
pub struct Bench<'m> {
    memory: &'m Memory,
    recorder: Recorder<Chip<'m>>,
    now: Millis,
    digest: Digest,
}

impl<'m> Bench<'m> {
    /// Switches a station on.
    ///
    /// # Panics
    /// If it does not start, which a flash without a fault gives no reason for.
    #[must_use]
    pub fn start(memory: &'m Memory) -> Self {
        Self { memory, recorder: open(memory), now: Millis(0), digest: Digest::default() }
    }

    /// The station.
    pub fn recorder(&mut self) -> &mut Recorder<Chip<'m>> {
        &mut self.recorder
    }

    /// Its state.
    #[must_use]
    pub fn station(&self) -> &Station {
        self.recorder.station()
    }

    /// Milliseconds since it was last switched on.
    #[must_use]
    pub fn now(&self) -> Millis {
        self.now
    }

    /// Sectors of its flash that were erased so far.
    #[must_use]
    pub fn erases(&self) -> u32 {
        self.memory.erases()
    }

    /// Why its attention lamp flashes, if it does.
    #[must_use]
    pub fn call(&self) -> Option<Call> {
        self.recorder.call(self.now)
    }

    /// Does this to the station. What it answers goes into the digest, and all that can be seen of it afterwards.
    ///
    /// # Panics
    /// If it does not start again.
    pub fn take(&mut self, step: &Step<'_>) {
        let now = self.now;
        match step {
            Step::Gauge(bytes) => self.recorder.gauge_bytes(now, bytes),
            Step::Host(bytes) => self.hear(bytes),
            Step::TakeBack => self.recorder.press(now, Button::TakeBack),
            Step::Seen => self.recorder.press(now, Button::Seen),
            Step::Pass(milliseconds) => {
                self.now = Millis(now.0.saturating_add((*milliseconds).into()));
                self.recorder.tick(self.now);
            }
            Step::Overrun => self.recorder.gauge_overrun(now),
            Step::Garbled => self.recorder.gauge_garbled(now),
            Step::Reboot => self.reboot(),
            Step::Look => self.figures(),
        }
        self.appearance();
    }

    /// What all that it did comes to, the state as it is stored, all figures and the flash included.
    #[must_use]
    pub fn finish(mut self) -> Digest {
        self.stored();
        self.figures();
        self.memory.digest(&mut self.digest);
        self.digest
    }

    fn hear(&mut self, bytes: &[u8]) {
        for byte in bytes {
            if let Some(answer) = self.recorder.host_byte(self.now, *byte) {
                self.digest.bytes(answer);
            }
        }
    }

    fn reboot(&mut self) {
        self.stored();
        self.recorder = open(self.memory);
        self.now = Millis(0);
        self.stored();
    }

    /// The state's bytes.
    fn stored(&mut self) {
        let mut space = [0; STATE_MAX];
        let used = self.recorder.station().store(&mut space).expect("room for a state");
        self.digest.bytes(&space[..used]);
    }

    /// Lamps, counts and where the study stands.
    fn appearance(&mut self) {
        let digest = &mut self.digest;
        let lamps = self.recorder.lamps(self.now);
        let lit = [lamps.done, lamps.attention, lamps.taken].map(u32::from);
        digest.word(lit[0] << 2 | lit[1] << 1 | lit[2]);
        if let Some(call) = self.recorder.call(self.now) {
            digest.words(format_args!("{call:?}"));
        }
        let station = self.recorder.station();
        digest.word(station.through().map_or(0, |through| through.0));
        digest.word(station.boots());
        digest.word(station.refused());
        let Some(study) = station.study() else { return };
        let progress = study.progress();
        digest.word(progress.standing as u32);
        if let Some(held) = study.held() {
            digest.words(format_args!("{held:?}"));
        }
        for count in [progress.n, progress.planned, progress.limit] {
            digest.word(count.get());
        }
        digest.word(progress.surplus);
        digest.word(progress.taken_back);
    }

    /// Every figure of the study, to the last bit.
    fn figures(&mut self) {
        let digest = &mut self.digest;
        let Some(study) = self.recorder.station().study() else { return };
        let resolution = study.plan().resolution;
        let moments = study.moments();
        digest.double(moments.mean(resolution));
        digest.double(moments.variance(resolution));
        digest.double(moments.standard_deviation(resolution));
        let sample = study.sample();
        digest.double(sample.map(|sample| sample.sigma()));
        digest.double(sample.map(|sample| sample.nu().get()));
        let found = study.estimate();
        digest.double(found.map(|found| found.estimate));
        digest.double(found.and_then(|found| found.interval.low));
        digest.double(found.and_then(|found| found.interval.high));
        digest.double(found.map(|found| found.half_width));
        digest.word(study.decision().map_or(0, |decision| 1 + decision as u32));
    }
}

/// Switches the station on.
fn open(memory: &Memory) -> Recorder<Chip<'_>> {
    let firmware = Text::new("twin").unwrap_or_default();
    Recorder::open(memory.chip(), STATION, firmware, Millis(0)).expect("flash without a fault")
}

/// Runs a whole sequence on this flash, which is wiped first.
///
/// # Errors
/// The bytes are no sequence.
pub fn run(memory: &Memory, sequence: &[u8]) -> Result<Digest, NoStep> {
    memory.wipe();
    let mut bench = Bench::start(memory);
    for step in Steps(sequence) {
        bench.take(&step?);
    }
    Ok(bench.finish())
}
