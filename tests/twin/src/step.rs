//! What can be done to a station, and the bytes of a sequence of such steps.

use serde::{Deserialize, Serialize};

/// The longest sequence in bytes.
pub const SEQUENCE_MAX: usize = 32 * 1024;

/// One thing done to a station.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum Step<'a> {
    /// Bytes from the gauge, all at once.
    Gauge(&'a [u8]),
    /// Bytes from the host, all at once.
    Host(&'a [u8]),
    /// The button "take back".
    TakeBack,
    /// The button "seen".
    Seen,
    /// So many milliseconds pass, then the station looks around.
    Pass(u32),
    /// Bytes of the gauge are lost.
    Overrun,
    /// Bytes of the gauge arrive garbled.
    Garbled,
    /// The power goes and comes back.
    Reboot,
    /// All figures are worked out.
    Look,
}

/// Writes `step` to the front of `space` and gives what is left of it; `None` if it does not fit.
pub fn push<'s>(step: &Step<'_>, space: &'s mut [u8]) -> Option<&'s mut [u8]> {
    let used = postcard::to_slice(step, space).ok()?.len();
    space.get_mut(used..)
}

/// The steps in these bytes. Ends at the first that cannot be read, with `Err`.
#[derive(Clone, Copy, Debug)]
pub struct Steps<'a>(pub &'a [u8]);

/// Bytes that are no step.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct NoStep;

impl<'a> Iterator for Steps<'a> {
    type Item = Result<Step<'a>, NoStep>;

    fn next(&mut self) -> Option<Self::Item> {
        if self.0.is_empty() {
            return None;
        }
        match postcard::take_from_bytes(self.0) {
            Ok((step, rest)) => {
                self.0 = rest;
                Some(Ok(step))
            }
            Err(_) => {
                self.0 = &[];
                Some(Err(NoStep))
            }
        }
    }
}
