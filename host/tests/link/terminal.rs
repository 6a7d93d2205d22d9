//! A station in memory on a pseudo-terminal, so that the serial port's code is what talks to it.

use std::io::{Read, Write};
use std::path::{Path, PathBuf};
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};
use std::thread::JoinHandle;
use std::time::Duration;

use donelight::link::memory::MemoryLink;
use donelight::virtual_station::pseudo_terminal::PseudoTerminal;

/// A station that answers on its port until it is told to stop or its cable is pulled.
pub(crate) struct OnTerminal {
    path: PathBuf,
    stop: Arc<AtomicBool>,
    thread: JoinHandle<MemoryLink>,
}

impl OnTerminal {
    pub(crate) fn serve(station: MemoryLink) -> Self {
        Self::serve_until(station, usize::MAX)
    }

    /// The cable is pulled after so many bytes to the host.
    pub(crate) fn serve_until(station: MemoryLink, bytes: usize) -> Self {
        let terminal = PseudoTerminal::open().unwrap();
        let path = terminal.path().to_owned();
        let stop = Arc::new(AtomicBool::new(false));
        let thread = std::thread::spawn({
            let stop = Arc::clone(&stop);
            move || run(station, terminal, &stop, bytes)
        });
        Self { path, stop, thread }
    }

    pub(crate) fn path(&self) -> &Path {
        &self.path
    }

    pub(crate) fn port(&self) -> &str {
        self.path.to_str().unwrap()
    }

    /// The station, after the last program has gone.
    pub(crate) fn stop(self) -> MemoryLink {
        self.stop.store(true, Ordering::Relaxed);
        self.thread.join().unwrap()
    }
}

fn run(mut station: MemoryLink, terminal: PseudoTerminal, stop: &AtomicBool, mut left: usize) -> MemoryLink {
    let mut bytes = [0; 256];
    while !stop.load(Ordering::Relaxed) {
        let got = terminal.receive(&mut bytes).unwrap();
        station.write_all(&bytes[..got]).unwrap();
        match station.read(&mut bytes) {
            Ok(answered) => {
                let part = answered.min(left);
                let mut rest = &bytes[..part];
                while !rest.is_empty() && !stop.load(Ordering::Relaxed) {
                    let sent = terminal.send(rest).unwrap();
                    rest = &rest[sent..];
                }
                left -= part;
                if left == 0 {
                    return station;
                }
            }
            Err(_) if got == 0 => std::thread::sleep(Duration::from_micros(200)),
            Err(_) => {}
        }
    }
    station
}
