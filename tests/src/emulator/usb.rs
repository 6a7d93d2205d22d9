//! The board's serial port for the host's own code, on the board's own time.

use std::io::{self, ErrorKind, Read, Write};
use std::time::{Duration, Instant};

use donelight::link::Transport;

use super::Board;

/// How long a read waits for a byte, on the board's clock.
const WAIT: Duration = Duration::from_millis(50);

impl Read for Board {
    fn read(&mut self, buffer: &mut [u8]) -> io::Result<usize> {
        if self.from_usb.is_empty() {
            if !self.is_powered() {
                return Ok(0);
            }
            let end = self.now + super::nanos(WAIT);
            self.command(serde_json::json!({ "command": "run", "nanos": end - self.now, "until": ["usb"] }));
        }
        match self.from_usb.read(buffer)? {
            0 if self.is_powered() => Err(ErrorKind::TimedOut.into()),
            length => Ok(length),
        }
    }
}

impl Write for Board {
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
        if !self.is_powered() {
            return Err(ErrorKind::BrokenPipe.into());
        }
        self.send(bytes);
        Ok(bytes.len())
    }

    fn flush(&mut self) -> io::Result<()> {
        Ok(())
    }
}

impl Transport for Board {
    fn now(&self) -> Instant {
        self.began + Board::now(self)
    }
}
