//! A serial port, or on Unix a socket, as a [`Transport`].
//!
//! A write to a serial port can block for ever when the other end does not read, whatever timeout is set; so a thread of
//! its own writes, and is left behind if it does not come back. Nothing here waits until bytes are sent (`flush`), since
//! that may never return either.

use std::io::{self, ErrorKind, Read, Write};
use std::path::Path;
use std::sync::mpsc::{Receiver, RecvTimeoutError, Sender, channel};
use std::time::{Duration, Instant};

use serialport::{ClearBuffer, SerialPort};

use super::{PortError, Transport};

/// How long a read or a write waits.
const WAIT: Duration = Duration::from_millis(50);

/// How long a port that is closed waits for its writer.
const PARTING: Duration = Duration::from_millis(500);

/// USB and pseudo-terminals do not care; a converter does.
const BAUD: u32 = 115_200;

/// Bytes handed to the port at once: one full-speed USB packet.
const CHUNK: usize = 64;

/// Opens a port by its name. On Unix the name may also be a socket's.
///
/// # Errors
/// See [`PortError`].
pub fn open(port: &str) -> Result<Box<dyn Transport>, PortError> {
    #[cfg(unix)]
    if is_socket(Path::new(port)) {
        return Ok(Box::new(open_socket(port)?));
    }
    Ok(Box::new(SerialLink::open(port)?))
}

#[cfg(unix)]
fn is_socket(path: &Path) -> bool {
    use std::os::unix::fs::FileTypeExt;
    std::fs::metadata(path).is_ok_and(|file| file.file_type().is_socket())
}

#[cfg(unix)]
fn open_socket(port: &str) -> Result<std::os::unix::net::UnixStream, PortError> {
    let open = || {
        let socket = std::os::unix::net::UnixStream::connect(port)?;
        socket.set_read_timeout(Some(WAIT))?;
        socket.set_write_timeout(Some(WAIT))?;
        Ok(socket)
    };
    open().map_err(|error: io::Error| from_io(port, error.kind(), error.to_string()))
}

/// An open serial port.
pub struct SerialLink {
    port: Box<dyn SerialPort>,
    /// `None` only while it is dropped.
    chunks: Option<Sender<Vec<u8>>>,
    written: Receiver<io::Result<usize>>,
    /// A chunk is with the writer.
    writing: bool,
}

impl SerialLink {
    /// Opens the port for this program alone, raises DTR and drops what lies in its buffers.
    ///
    /// # Errors
    /// See [`PortError`].
    pub fn open(port: &str) -> Result<Self, PortError> {
        look_at(port)?;
        let failed = |error: serialport::Error| from_serial(port, error);
        let reading =
            serialport::new(port, baud(port)).timeout(WAIT).dtr_on_open(true).open().map_err(failed)?;
        reading.clear(ClearBuffer::All).map_err(failed)?;
        let writing = reading.try_clone().map_err(failed)?;
        let (chunks, to_write) = channel();
        let (tell, written) = channel();
        std::thread::spawn(move || write_all(writing, &to_write, &tell));
        Ok(Self { port: reading, chunks: Some(chunks), written, writing: false })
    }
}

/// Writes what comes, chunk by chunk, until the other end of the channel is gone.
fn write_all(mut port: Box<dyn SerialPort>, chunks: &Receiver<Vec<u8>>, tell: &Sender<io::Result<usize>>) {
    while let Ok(chunk) = chunks.recv() {
        if tell.send(port.write(&chunk)).is_err() {
            return;
        }
    }
}

impl Read for SerialLink {
    fn read(&mut self, buffer: &mut [u8]) -> io::Result<usize> {
        self.port.read(buffer)
    }
}

impl Write for SerialLink {
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
        let chunk = bytes.get(..CHUNK).unwrap_or(bytes);
        if !self.writing {
            let chunks = self.chunks.as_ref().ok_or(ErrorKind::BrokenPipe)?;
            chunks.send(chunk.to_vec()).map_err(|_| ErrorKind::BrokenPipe)?;
            self.writing = true;
        }
        match self.written.recv_timeout(WAIT) {
            Ok(outcome) => {
                self.writing = false;
                outcome
            }
            Err(RecvTimeoutError::Timeout) => Err(ErrorKind::TimedOut.into()),
            Err(RecvTimeoutError::Disconnected) => Err(ErrorKind::BrokenPipe.into()),
        }
    }

    fn flush(&mut self) -> io::Result<()> {
        Ok(())
    }
}

impl Transport for SerialLink {}

impl Drop for SerialLink {
    fn drop(&mut self) {
        if self.writing {
            // Frees the writer, and spares the system from waiting for the other end when the port is closed.
            let _ = self.port.clear(ClearBuffer::Output);
        }
        // The writer closes its handle of the port before its channel, so that the port is free when this returns; one
        // that is stuck is left behind.
        self.chunks = None;
        let end = Instant::now() + PARTING;
        while let Ok(_outcome) = self.written.recv_timeout(end.saturating_duration_since(Instant::now())) {}
    }
}

/// A pseudo-terminal on macOS takes no other rate than 0, which stands for "as it is".
fn baud(port: &str) -> u32 {
    if cfg!(target_os = "macos") && port.starts_with("/dev/ttys") { 0 } else { BAUD }
}

/// Tells apart by name what the system's open would mix up.
fn look_at(port: &str) -> Result<(), PortError> {
    let name = port.to_owned();
    match std::fs::metadata(Path::new(port)) {
        Ok(file) if file.is_dir() || file.is_file() => Err(PortError::NotAPort { port: name }),
        Err(error) if cfg!(unix) && error.kind() == ErrorKind::NotFound => {
            Err(PortError::Missing { port: name })
        }
        // Other systems' port names are no paths.
        _ => Ok(()),
    }
}

fn from_serial(port: &str, error: serialport::Error) -> PortError {
    let name = port.to_owned();
    match error.kind {
        // On Unix a port that is held by another program; on Windows also one that is not there.
        serialport::ErrorKind::NoDevice if cfg!(unix) => PortError::Busy { port: name },
        serialport::ErrorKind::NoDevice => PortError::Missing { port: name },
        serialport::ErrorKind::Io(kind) => from_io(port, kind, error.description),
        // ENOTTY has no kind of its own.
        _ if error.description == "Inappropriate ioctl for device"
            || error.description == "Not a typewriter" =>
        {
            PortError::NotAPort { port: name }
        }
        _ => PortError::Other { port: name, reason: error.description },
    }
}

fn from_io(port: &str, kind: ErrorKind, reason: String) -> PortError {
    let port = port.to_owned();
    match kind {
        ErrorKind::NotFound => PortError::Missing { port },
        // Windows says so of a port that another program holds.
        ErrorKind::PermissionDenied if cfg!(windows) => PortError::Busy { port },
        ErrorKind::PermissionDenied => PortError::Permission { port },
        ErrorKind::ResourceBusy => PortError::Busy { port },
        _ => PortError::Other { port, reason },
    }
}
