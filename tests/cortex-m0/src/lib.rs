//! A Cortex-M0 that runs a program with semihosting: its instructions and its memory, nothing else. For programs that compute;
//! the board with all that is on it is `donelight_tests::emulator`.

#![forbid(unsafe_code)]

mod decode;
mod execute;
mod memory;

use std::collections::VecDeque;
use std::path::Path;

use object::{Object, ObjectSegment};

use execute::Core;
pub use execute::Stop;

/// Semihosting for AArch32 and AArch64, version 2023Q3 (Arm, from memory): the breakpoint and the operations.
const SEMIHOSTING: u8 = 0xab;
const SYS_OPEN: u32 = 0x01;
const SYS_CLOSE: u32 = 0x02;
const SYS_WRITE: u32 = 0x05;
const SYS_READ: u32 = 0x06;
const SYS_EXIT: u32 = 0x18;
const SYS_EXIT_EXTENDED: u32 = 0x20;
const FAILED: u32 = u32::MAX;

/// Handles, by the mode that `:tt` is opened with.
const INPUT: u32 = 1;
const OUTPUT: u32 = 2;
const ERROR: u32 = 3;

/// A program at work.
#[derive(Clone, Debug)]
pub struct Program {
    core: Core,
    input: VecDeque<u8>,
    output: Vec<u8>,
    said: Vec<u8>,
    ended: bool,
}

/// Why a program does not go on.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum End {
    /// It wants input, and there is none.
    WantsInput,
    /// It ended by itself.
    Exit,
    /// The core stopped it.
    Stopped(Stop),
}

impl Program {
    /// Loads an ELF file.
    ///
    /// # Panics
    /// If it is none for such a core.
    #[must_use]
    pub fn load(path: &Path) -> Self {
        let bytes = std::fs::read(path).unwrap_or_else(|error| panic!("{}: {error}", path.display()));
        let file = object::File::parse(bytes.as_slice()).expect("an ELF file");
        let segments: Vec<_> = file.segments().filter(|segment| segment.size() > 0).collect();
        let base = segments.iter().map(|segment| segment.address()).min().expect("a segment");
        let mut code = Vec::new();
        for segment in segments {
            // The programs here have no variables with initial values.
            let at = usize::try_from(segment.address() - base).expect("code in one place");
            let data = segment.data().expect("the file's own bytes");
            assert!(at + data.len() <= 16 << 20, "a segment far from the others");
            code.resize(code.len().max(at + data.len()), 0);
            code[at..at + data.len()].copy_from_slice(data);
        }
        let base = u32::try_from(base).expect("an address of 32 bits");
        let core = Core::new(code, base).expect("a vector table");
        Self { core, input: VecDeque::new(), output: Vec::new(), said: Vec::new(), ended: false }
    }

    /// Puts bytes into its standard input.
    pub fn give(&mut self, bytes: &[u8]) {
        self.input.extend(bytes);
    }

    /// Takes what is on its standard output.
    pub fn take(&mut self) -> Vec<u8> {
        std::mem::take(&mut self.output)
    }

    /// What it said on its standard error.
    #[must_use]
    pub fn said(&self) -> String {
        String::from_utf8_lossy(&self.said).into_owned()
    }

    /// Instructions executed so far.
    #[must_use]
    pub fn executed(&self) -> u64 {
        self.core.executed()
    }

    /// Where it is.
    #[must_use]
    pub fn address(&self) -> u32 {
        self.core.address()
    }

    /// Runs until it wants input that is not there, or ends, or has executed so many instructions.
    pub fn run(&mut self, limit: u64) -> End {
        let end = self.executed().saturating_add(limit);
        loop {
            if self.ended {
                return End::Exit;
            }
            match self.core.run(end.saturating_sub(self.executed())) {
                Stop::Breakpoint(SEMIHOSTING) => match self.serve() {
                    Some(true) => {}
                    Some(false) => return End::WantsInput,
                    None => return End::Stopped(Stop::Fault(self.address())),
                },
                stop => return End::Stopped(stop),
            }
        }
    }

    /// Serves a request; `Some(false)` if it must wait, `None` if it makes no sense.
    fn serve(&mut self) -> Option<bool> {
        let (operation, block) = (self.core.register(0), self.core.register(1));
        let argument = |core: &Core, number: u32| core.memory.word(block.wrapping_add(4 * number));
        let answer = match operation {
            SYS_OPEN => match argument(&self.core, 1)? {
                0..=3 => INPUT,
                4..=7 => OUTPUT,
                8..=11 => ERROR,
                _ => FAILED,
            },
            SYS_CLOSE => 0,
            SYS_WRITE => {
                let [handle, from, length] = [0, 1, 2].map(|number| argument(&self.core, number));
                let bytes = self.core.memory.bytes(from?, length?)?;
                match handle? {
                    OUTPUT => self.output.extend_from_slice(bytes),
                    _ => self.said.extend_from_slice(bytes),
                }
                0
            }
            SYS_READ => {
                let [to, length] = [1, 2].map(|number| argument(&self.core, number));
                if self.input.is_empty() {
                    self.core.again();
                    return Some(false);
                }
                let ready = self.input.len().min(length? as usize);
                let space = self.core.memory.ram(to?, ready as u32)?;
                for (place, byte) in space.iter_mut().zip(self.input.drain(..ready)) {
                    *place = byte;
                }
                length? - ready as u32
            }
            SYS_EXIT | SYS_EXIT_EXTENDED => {
                self.ended = true;
                0
            }
            _ => FAILED,
        };
        self.core.set_register(0, answer);
        Some(true)
    }
}
