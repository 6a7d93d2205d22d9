//! The board's serial port as a device file, for programs that open a port by its path.

use std::path::Path;
use std::thread;
use std::time::{Duration, Instant};

use donelight::virtual_station::pseudo_terminal::PseudoTerminal;

use super::Board;

/// The board runs in steps of this length while a program uses the port.
const STEP: Duration = Duration::from_millis(2);

impl Board {
    /// Runs `program` with the path of the board's port in a thread of its own. Meanwhile the board's time passes, never
    /// faster than the clock on the wall, so that neither end's patience is tried by the other's.
    ///
    /// # Panics
    /// If there is no pseudo-terminal, or `program` panics.
    #[track_caller]
    pub fn with_terminal<R: Send>(&mut self, program: impl FnOnce(&Path) -> R + Send) -> R {
        let terminal = PseudoTerminal::open().expect("a pseudo-terminal");
        let path = terminal.path().to_owned();
        thread::scope(|scope| {
            let running = scope.spawn(move || program(&path));
            let began = Instant::now();
            let from = self.now();
            while !running.is_finished() {
                self.pass_on(&terminal);
                self.run(STEP);
                let ahead = (self.now() - from).saturating_sub(began.elapsed());
                thread::sleep(ahead);
            }
            running.join().unwrap_or_else(|panic| std::panic::resume_unwind(panic))
        })
    }

    fn pass_on(&mut self, terminal: &PseudoTerminal) {
        let mut bytes = [0; 4096];
        let received = terminal.receive(&mut bytes).expect("the terminal is ours");
        if received > 0 {
            self.send(&bytes[..received]);
        }
        let waiting: Vec<u8> = self.from_usb.iter().copied().collect();
        if !waiting.is_empty() {
            let sent = terminal.send(&waiting).expect("the terminal is ours");
            self.from_usb.drain(..sent);
        }
    }
}
