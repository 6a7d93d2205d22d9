//! The demo's station, gauge and operator, all in this process and in a time of their own.

use std::io;

use donelight_core::station::Study;
use donelight_core::wire::StationId;

use crate::ledger::UnixMillis;
use crate::link::memory::MemoryLink;
use crate::virtual_station::StartError;
use crate::virtual_station::flash::{Flash, Medium, RamFlash};
use crate::virtual_station::operator;
use crate::virtual_station::process::Process;

/// The station's time from one piece to the next.
pub(super) const PIECE_MS: u64 = 4_000;

/// The station's number, which tells a demo's ledger from any other.
pub(super) const STATION: StationId = StationId(*b"the demo");

/// As much flash as the reference board's journal has.
const SECTORS: usize = 256;

/// A made-up lathe and its gauge, set a little off the middle: Cpk 1.5. Of this seed's pieces the planned count is just
/// not enough.
const PROCESS: Process =
    Process { mean: 6.003, sd: 0.006, drift: 0.0, outlier_every: None, stuck_from: None, seed: 6 };

/// Flash in memory whose power can fail in the middle of a write.
#[derive(Debug)]
pub(super) struct Supplied {
    flash: Vec<u8>,
    /// Bytes that can still be written; `None`: any number.
    left: Option<usize>,
}

impl Medium for Supplied {
    fn size(&self) -> usize {
        self.flash.size()
    }

    fn read_at(&mut self, offset: usize, bytes: &mut [u8]) -> io::Result<()> {
        self.flash.read_at(offset, bytes)
    }

    fn write_at(&mut self, offset: usize, bytes: &[u8]) -> io::Result<()> {
        let Some(left) = self.left else { return self.flash.write_at(offset, bytes) };
        let written = left.min(bytes.len());
        self.left = Some(left - written);
        self.flash.write_at(offset, bytes.get(..written).unwrap_or_default())?;
        if written == bytes.len() { Ok(()) } else { Err(io::Error::other("the power has failed")) }
    }
}

/// What stands on the bench.
#[derive(Debug)]
pub(super) struct Bench {
    pub(super) link: MemoryLink<Flash<Supplied>>,
    /// The wall time of the station's last start.
    started: UnixMillis,
}

impl Bench {
    /// Switches a new station on, at this wall time.
    ///
    /// # Errors
    /// Its flash cannot be read; memory always can.
    pub(super) fn start(now: UnixMillis) -> Result<Self, StartError> {
        Self::on(RamFlash::blank(SECTORS).medium().clone(), now)
    }

    fn on(flash: Vec<u8>, now: UnixMillis) -> Result<Self, StartError> {
        let link = MemoryLink::start(Flash::over(Supplied { flash, left: None }), STATION)?;
        Ok(Self { link, started: now })
    }

    /// The wall time on the bench.
    pub(super) fn now(&self) -> UnixMillis {
        let passed = i64::try_from(self.link.station_time().0).unwrap_or(i64::MAX);
        UnixMillis(self.started.0.saturating_add(passed))
    }

    /// The study under way.
    pub(super) fn study(&mut self) -> Option<&Study> {
        self.link.recorder().station().study()
    }

    /// Pieces that count so far.
    pub(super) fn n(&mut self) -> u32 {
        self.study().map_or(0, |study| study.progress().n.get())
    }

    /// Puts the next piece to the gauge: if the station takes its reading, it is on record when this returns.
    pub(super) fn measure(&mut self) {
        self.link.pass(PIECE_MS);
        let line = self.study().map(next_line).unwrap_or_default();
        self.link.gauge(line.as_bytes());
    }

    /// The gauge sends the next piece's line with one bit flipped on the way; gives what arrives.
    pub(super) fn disturb(&mut self) -> String {
        self.link.pass(PIECE_MS);
        let line = self.study().map(next_line).unwrap_or_default().replace('.', "n");
        self.link.gauge(line.as_bytes());
        line.trim_end().to_owned()
    }

    /// The power fails while the next reading is being written, and comes back: the station starts on what is in its
    /// flash then.
    ///
    /// # Errors
    /// Its flash cannot be read; memory always can.
    pub(super) fn cut_power(mut self) -> Result<Self, StartError> {
        /// A reading takes 16 to 20 bytes.
        const BYTES_WRITTEN: usize = 7;
        self.link.pass(PIECE_MS);
        let line = self.study().map(next_line).unwrap_or_default();
        self.link.recorder().journal().flash().medium().left = Some(BYTES_WRITTEN);
        self.link.gauge(line.as_bytes());
        let now = self.now();
        let flash = std::mem::take(&mut self.link.recorder().journal().flash().medium().flash);
        Self::on(flash, now)
    }
}

/// What the gauge sends of the study's next piece.
fn next_line(study: &Study) -> String {
    let plan = study.plan();
    PROCESS.line(operator::pieces_before(study), plan.resolution, plan.unit.as_str())
}

#[cfg(test)]
mod tests {
    use donelight_core::record::{Refusal, Seq};

    use super::*;
    use crate::link::Session;
    use crate::plan_file;

    fn loaded() -> Bench {
        let mut bench = Bench::start(UnixMillis(0)).unwrap();
        let plan = plan_file::from_text(super::super::PLAN).unwrap();
        let (mut session, _) = Session::open(&mut bench.link).unwrap();
        session.load(&plan, false).unwrap();
        bench
    }

    #[test]
    fn a_cut_in_the_middle_of_a_reading_leaves_what_was_taken_and_no_more() {
        let mut bench = loaded();
        for n in 1..40 {
            bench.measure();
            assert_eq!(bench.n(), n);
            let moments = *bench.study().unwrap().moments();
            bench = bench.cut_power().unwrap();
            assert_eq!(*bench.study().unwrap().moments(), moments, "after {n}");
        }
        assert_eq!(bench.link.recorder().station().boots(), 40);
        assert!(bench.link.recorder().journal().next() > Seq(80));
    }

    #[test]
    fn a_disturbed_line_is_refused_and_recorded() {
        let mut bench = loaded();
        bench.measure();
        let line = bench.disturb();
        assert!(line.starts_with("6n0") || line.starts_with("5n9"), "{line}");
        bench.link.pass(1_100);
        assert_eq!((bench.n(), bench.link.recorder().station().refused()), (1, 1));
        let (mut session, _) = Session::open(&mut bench.link).unwrap();
        let reading = donelight_core::counts::ReadingError::NotANumber;
        assert_eq!(session.status().unwrap().last_refusal, Some(Refusal::Reading(reading)));
    }
}
