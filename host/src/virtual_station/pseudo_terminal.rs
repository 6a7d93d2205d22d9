//! A pseudo-terminal: a serial port without hardware, for any program that opens a port by its path.

use std::ffi::OsStr;
use std::io;
use std::os::fd::{AsFd, BorrowedFd, OwnedFd};
use std::os::unix::ffi::OsStrExt;
use std::path::{Path, PathBuf};

use rustix::fs::{Mode, OFlags};
use rustix::pty::OpenptFlags;
use rustix::termios::OptionalActions;

use crate::output::Explain;

/// The system gives no pseudo-terminal.
#[derive(Debug, thiserror::Error)]
#[error("the system gives no pseudo-terminal: {0}")]
pub struct PseudoTerminalError(#[from] rustix::io::Errno);

impl Explain for PseudoTerminalError {
    fn kind(&self) -> &'static str {
        "no-pseudo-terminal"
    }

    fn help(&self) -> String {
        "Close programs that hold many of them, and see that /dev/pts is mounted. `donelight demo` needs none."
            .to_owned()
    }
}

/// The station's end of a pseudo-terminal.
#[derive(Debug)]
pub struct PseudoTerminal {
    master: OwnedFd,
    /// Kept open, so that the line does not hang up when a client closes its end.
    _client_end: OwnedFd,
    path: PathBuf,
}

impl PseudoTerminal {
    /// Opens a fresh one that passes every byte on as it is.
    ///
    /// # Errors
    /// The system has none left, or does not allow it.
    pub fn open() -> Result<Self, PseudoTerminalError> {
        let master = rustix::pty::openpt(OpenptFlags::RDWR | OpenptFlags::NOCTTY)?;
        rustix::pty::grantpt(&master)?;
        rustix::pty::unlockpt(&master)?;
        let name = rustix::pty::ptsname(&master, Vec::new())?;
        let client_end = rustix::fs::open(&name, OFlags::RDWR | OFlags::NOCTTY, Mode::empty())?;
        let mut settings = rustix::termios::tcgetattr(&client_end)?;
        settings.make_raw();
        rustix::termios::tcsetattr(&client_end, OptionalActions::Now, &settings)?;
        rustix::io::ioctl_fionbio(&master, true)?;
        let path = Path::new(OsStr::from_bytes(name.to_bytes())).to_owned();
        Ok(Self { master, _client_end: client_end, path })
    }

    /// What a client opens.
    #[must_use]
    pub fn path(&self) -> &Path {
        &self.path
    }

    /// Takes what a client has sent; 0 bytes if there is nothing.
    ///
    /// # Errors
    /// The system's own.
    pub fn receive(&self, bytes: &mut [u8]) -> io::Result<usize> {
        nothing_if_blocked(rustix::io::read(&self.master, bytes))
    }

    /// Sends what there is room for; gives the number of bytes.
    ///
    /// # Errors
    /// The system's own.
    pub fn send(&self, bytes: &[u8]) -> io::Result<usize> {
        nothing_if_blocked(rustix::io::write(&self.master, bytes))
    }
}

impl AsFd for PseudoTerminal {
    fn as_fd(&self) -> BorrowedFd<'_> {
        self.master.as_fd()
    }
}

fn nothing_if_blocked(outcome: rustix::io::Result<usize>) -> io::Result<usize> {
    match outcome {
        Err(rustix::io::Errno::AGAIN | rustix::io::Errno::INTR) => Ok(0),
        other => other.map_err(io::Error::from),
    }
}

#[cfg(test)]
mod tests {
    use std::fs::OpenOptions;
    use std::io::{Read, Write};

    use super::*;

    #[test]
    fn every_byte_passes_both_ways_unchanged_from_client_to_client() {
        let station = PseudoTerminal::open().unwrap();
        let all: Vec<u8> = (0..=255).collect();
        let mut back = [0; 256];
        for _ in 0..3 {
            let mut client = OpenOptions::new().read(true).write(true).open(station.path()).unwrap();
            client.write_all(&all).unwrap();
            assert_eq!(station.receive(&mut back).unwrap(), 256);
            assert_eq!(back[..], all);
            assert_eq!(station.send(&all).unwrap(), 256);
            back = [0; 256];
            client.read_exact(&mut back).unwrap();
            assert_eq!(back[..], all);
            drop(client);
            assert_eq!(station.receive(&mut back).unwrap(), 0, "no hang-up between clients");
        }
    }

    #[test]
    fn a_client_that_never_reads_does_not_block_the_station() {
        let station = PseudoTerminal::open().unwrap();
        let sent = (0..100).map(|_| station.send(&[0x55; 1000]).unwrap()).sum::<usize>();
        assert!(sent < 100_000, "{sent}");
    }
}
