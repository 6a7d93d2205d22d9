//! A station in this very process: the station's own code over flash in memory, with a clock that is moved by hand.
//!
//! The demo runs on it, and tests of everything that talks to a station.

use std::collections::VecDeque;
use std::io::{self, ErrorKind, Read, Write};
use std::time::{Duration, Instant};

use donelight_core::journal::OpenError;
use donelight_core::record::Millis;
use donelight_core::recorder::Recorder;
use donelight_core::text::Text;
use donelight_core::wire::StationId;
use embedded_storage::nor_flash::MultiwriteNorFlash;

use super::Transport;
use crate::virtual_station::flash::RamFlash;

/// A station and the line to it. Time passes only when a read finds nothing, or by [`MemoryLink::pass`].
#[derive(Debug)]
pub struct MemoryLink<F = RamFlash> {
    recorder: Box<Recorder<F>>,
    now: Millis,
    began: Instant,
    outbox: VecDeque<u8>,
}

/// Firmware must tick at least so often.
const TICK_MS: u64 = 10;
/// How long a read waits for a byte, on the station's clock.
const WAIT_MS: u64 = 50;

impl<F: MultiwriteNorFlash> MemoryLink<F> {
    /// Starts a station on this flash.
    ///
    /// # Errors
    /// If the flash does not suit a journal.
    pub fn start(flash: F, id: StationId) -> Result<Self, OpenError<F::Error>> {
        let firmware = Text::new(concat!("in memory ", env!("CARGO_PKG_VERSION"))).unwrap_or_default();
        let recorder = Box::new(Recorder::open(flash, id, firmware, Millis(0))?);
        Ok(Self { recorder, now: Millis(0), began: Instant::now(), outbox: VecDeque::new() })
    }

    /// The station.
    pub fn recorder(&mut self) -> &mut Recorder<F> {
        &mut self.recorder
    }

    /// The station's time.
    #[must_use]
    pub fn station_time(&self) -> Millis {
        self.now
    }

    /// Lets the station's time pass.
    pub fn pass(&mut self, milliseconds: u64) {
        let end = self.now.0.saturating_add(milliseconds);
        while self.now.0 < end {
            self.now = Millis(self.now.0.saturating_add(TICK_MS).min(end));
            self.recorder.tick(self.now);
        }
    }

    /// The gauge sends these bytes, now.
    pub fn gauge(&mut self, bytes: &[u8]) {
        self.recorder.gauge_bytes(self.now, bytes);
    }
}

impl<F: MultiwriteNorFlash> Read for MemoryLink<F> {
    fn read(&mut self, buffer: &mut [u8]) -> io::Result<usize> {
        if self.outbox.is_empty() {
            self.pass(WAIT_MS);
            return Err(ErrorKind::TimedOut.into());
        }
        self.outbox.read(buffer)
    }
}

impl<F: MultiwriteNorFlash> Write for MemoryLink<F> {
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
        for byte in bytes {
            if let Some(reply) = self.recorder.host_byte(self.now, *byte) {
                self.outbox.extend(reply);
            }
        }
        Ok(bytes.len())
    }

    fn flush(&mut self) -> io::Result<()> {
        Ok(())
    }
}

impl<F: MultiwriteNorFlash> Transport for MemoryLink<F> {
    fn now(&self) -> Instant {
        self.began + Duration::from_millis(self.now.0)
    }
}
