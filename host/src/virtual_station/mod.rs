//! A station without hardware: the station's own code, its flash in a file and its gauge simulated.
//!
//! [`VirtualStation`] has neither port nor clock: whoever drives it passes the host's bytes and the time on, and calls
//! [`VirtualStation::step`] often. [`pseudo_terminal`] is the port that the command gives it on Unix.

pub mod feed;
pub mod flash;
#[cfg(unix)]
pub mod keyboard;
pub mod narrator;
pub mod operator;
pub mod process;
#[cfg(unix)]
pub mod pseudo_terminal;
pub mod store;
#[cfg(test)]
mod tests;

use donelight_core::journal::OpenError;
use donelight_core::record::Millis;
use donelight_core::recorder::{Button, Recorder};
use donelight_core::text::Text;
use donelight_core::wire::StationId;
use embedded_storage::nor_flash::NorFlashErrorKind;

use self::feed::FeedError;
use self::flash::{Flash, FlashError, Medium};
use self::narrator::Narrator;
use self::operator::{Act, Operator};
use crate::output::Explain;

/// [`VirtualStation::step`] wants to be called again after so long at the latest.
pub const TICK_MS: u64 = 10;

/// Why a virtual station does not start. The file of its flash is left as it is.
#[derive(Debug, thiserror::Error)]
pub enum StartError {
    /// The flash cannot be read.
    #[error("the station's journal cannot be read: {0}")]
    Flash(FlashError),
    /// It holds a journal of another format.
    #[error("the station's journal has format {found}, which this version does not know")]
    Format {
        /// Its format.
        found: u8,
    },
}

impl From<OpenError<FlashError>> for StartError {
    fn from(error: OpenError<FlashError>) -> Self {
        match error {
            OpenError::Flash(fault) => Self::Flash(fault),
            OpenError::Geometry => Self::Flash(NorFlashErrorKind::OutOfBounds.into()),
            OpenError::Format { found } => Self::Format { found },
        }
    }
}

impl Explain for StartError {
    fn kind(&self) -> &'static str {
        match self {
            Self::Flash(_) => "store-access",
            Self::Format { .. } => "store-other-format",
        }
    }

    fn help(&self) -> String {
        match self {
            Self::Flash(_) => "Check the disk that the --store lies on; the file is left as it is.",
            Self::Format { .. } => {
                "Pull it with the version of donelight that wrote it, then go on with a new --store. The file is left as \
                 it is."
            }
        }
        .to_owned()
    }
}

/// What an operator beside the station would notice although no record says it.
#[derive(Debug)]
pub enum Incident {
    /// The feed is at its end.
    FeedEnded,
    /// The feed cannot be read any more.
    FeedBroken(FeedError),
    /// The file of the flash cannot be read or written.
    Flash(FlashError),
}

/// A station, its gauge and its operator. Its time begins with 0 at its start, as on a board.
#[derive(Debug)]
pub struct VirtualStation<M> {
    recorder: Recorder<Flash<M>>,
    operator: Operator,
}

impl<M: Medium> VirtualStation<M> {
    /// Switches the station on.
    ///
    /// # Errors
    /// The flash cannot be read.
    pub fn start(flash: Flash<M>, id: StationId, operator: Operator) -> Result<Self, StartError> {
        let firmware = concat!("donelight virtual ", env!("CARGO_PKG_VERSION"));
        // Far shorter than 32 bytes, and a test looks at it.
        let firmware = Text::new(firmware).unwrap_or_default();
        let recorder = Recorder::open(flash, id, firmware, Millis(0))?;
        Ok(Self { recorder, operator })
    }

    /// The station itself.
    pub fn recorder(&mut self) -> &mut Recorder<Flash<M>> {
        &mut self.recorder
    }

    /// Begins to tell what happens from now on.
    #[must_use]
    pub fn narrator(&mut self) -> Narrator {
        Narrator::new(self.recorder.journal().next(), self.recorder.station().clone())
    }

    /// Lets time pass and the operator work: measures one piece at most.
    pub fn step(&mut self, now: Millis) -> Option<Incident> {
        self.recorder.tick(now);
        let incident = match self.operator.act(now, self.recorder.station(), self.recorder.call(now)) {
            Act::Wait => None,
            Act::Measure(bytes) => {
                self.recorder.gauge_bytes(now, &bytes);
                None
            }
            Act::FeedEnded => Some(Incident::FeedEnded),
            Act::FeedBroken(error) => Some(Incident::FeedBroken(error)),
        };
        incident.or_else(|| self.recorder.journal().flash().take_fault().map(Incident::Flash))
    }

    /// How long [`VirtualStation::step`] has nothing to do, in ms.
    #[must_use]
    pub fn idle_ms(&self, now: Millis) -> u64 {
        let idle = self.operator.idle_ms(now, self.recorder.station(), self.recorder.call(now));
        idle.map_or(TICK_MS, |idle| idle.min(TICK_MS))
    }

    /// Takes a byte from the host; see [`Recorder::host_byte`].
    pub fn host_byte(&mut self, now: Millis, byte: u8) -> Option<&[u8]> {
        self.recorder.host_byte(now, byte)
    }

    /// Presses a button.
    pub fn press(&mut self, now: Millis, button: Button) {
        self.recorder.press(now, button);
    }
}
