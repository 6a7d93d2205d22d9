//! The host's end of the link to a station: one request at a time, each harmless to repeat, each with an end.
//!
//! [`Session`] asks and waits over any [`Transport`]: a serial port ([`serial`]), a socket, or a station in this very
//! process ([`memory`]). [`discover`] finds the ports; [`pull`] fetches the records and keeps them, [`resume`]
//! also when the station was unplugged meanwhile.

pub mod discover;
pub mod error;
pub mod memory;
pub mod pull;
pub mod resume;
pub mod serial;
pub mod session;

use std::io::{Read, Write};
use std::time::Instant;

pub use error::{LinkError, PortError};
pub use session::{Patience, Session};

/// Bytes to and from a station.
///
/// `read` and `write` wait a short time at most (100 ms or so) and then fail with [`std::io::ErrorKind::TimedOut`] or
/// [`std::io::ErrorKind::WouldBlock`]; a `read` of no bytes means that the other end is gone. `write` may take a part.
pub trait Transport: Read + Write {
    /// The time that patience is measured by; a simulated station has its own.
    fn now(&self) -> Instant {
        Instant::now()
    }
}

impl Transport for Box<dyn Transport> {
    fn now(&self) -> Instant {
        self.as_ref().now()
    }
}

impl<T: Transport> Transport for &mut T {
    fn now(&self) -> Instant {
        (**self).now()
    }
}

/// A socket; set its read and write timeouts.
#[cfg(unix)]
impl Transport for std::os::unix::net::UnixStream {}
