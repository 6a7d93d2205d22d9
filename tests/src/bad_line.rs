//! A station in memory at the end of a bad line: the line flips, drops, doubles, delays and cuts what passes; ports go and come
//! back, the station starts anew, and its gauge goes on meanwhile. All of it is fixed by a seed, and time is the station's own.

use std::cell::RefCell;
use std::collections::VecDeque;
use std::io::{self, ErrorKind, Read, Write};
use std::ops::ControlFlow;
use std::rc::Rc;
use std::time::{Duration, Instant};

use donelight::link::Transport;
use donelight::link::memory::MemoryLink;
use donelight::virtual_station::flash::RamFlash;
use donelight_core::record::Seq;
use donelight_core::wire::StationId;

use crate::random::Random;

/// How often each kind of fault came about.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Faults {
    /// Bits that turned.
    pub flipped: u64,
    /// Runs of bytes that were lost.
    pub dropped: u64,
    /// Runs of bytes that came again.
    pub doubled: u64,
    /// Bytes that nobody sent.
    pub inserted: u64,
    /// Times when nothing passed for a while and then all of it.
    pub delayed: u64,
    /// Frames of which the rest was lost.
    pub cut: u64,
    /// Times when the port went.
    pub unplugged: u64,
    /// Starts of the station in mid-conversation.
    pub resets: u64,
}

impl Faults {
    /// Each with its name.
    #[must_use]
    pub fn named(&self) -> [(&'static str, u64); 8] {
        [
            ("flipped", self.flipped),
            ("dropped", self.dropped),
            ("doubled", self.doubled),
            ("inserted", self.inserted),
            ("delayed", self.delayed),
            ("cut", self.cut),
            ("unplugged", self.unplugged),
            ("resets", self.resets),
        ]
    }

    /// Adds these.
    pub fn add(&mut self, other: &Self) {
        self.flipped += other.flipped;
        self.dropped += other.dropped;
        self.doubled += other.doubled;
        self.inserted += other.inserted;
        self.delayed += other.delayed;
        self.cut += other.cut;
        self.unplugged += other.unplugged;
        self.resets += other.resets;
    }
}

/// One direction's state.
#[derive(Debug, Default)]
struct Direction {
    losing: u64,
    cutting: bool,
    /// What passed last.
    latest: VecDeque<u8>,
}

/// The station, its gauge and the line.
#[derive(Debug)]
pub struct BadLine {
    station: MemoryLink,
    id: StationId,
    random: Random,
    /// One fault in so many bytes.
    bytes_a_fault: u64,
    /// The time of the station's earlier lives.
    lived: Duration,
    began: Instant,
    /// Which plugging-in is good.
    plugged: u32,
    directions: [Direction; 2],
    arrived: VecDeque<u8>,
    held_until: Option<Instant>,
    /// So many more readings are measured.
    to_measure: u32,
    /// All records that the station ever acknowledged, as they stand in its journal.
    journal: Vec<(Seq, Vec<u8>)>,
    faults: Faults,
}

/// What came of a byte.
enum Passed {
    On,
    Unplugged,
    Reset,
}

impl BadLine {
    /// A line to this station, with one fault in so many bytes on average; its gauge measures so many more pieces meanwhile.
    #[must_use]
    pub fn new(
        station: MemoryLink,
        id: StationId,
        random: Random,
        bytes_a_fault: u64,
        to_measure: u32,
    ) -> Self {
        let mut line = Self {
            station,
            id,
            random,
            bytes_a_fault,
            lived: Duration::ZERO,
            began: Instant::now(),
            plugged: 0,
            directions: Default::default(),
            arrived: VecDeque::new(),
            held_until: None,
            to_measure,
            journal: Vec::new(),
            faults: Faults::default(),
        };
        line.learn();
        line
    }

    /// The station.
    pub fn station(&mut self) -> &mut MemoryLink {
        &mut self.station
    }

    /// The gauge stops.
    pub fn stop_measuring(&mut self) {
        self.to_measure = 0;
    }

    /// All records that were ever in the journal.
    #[must_use]
    pub fn journal(&self) -> &[(Seq, Vec<u8>)] {
        &self.journal
    }

    /// What went wrong so far.
    #[must_use]
    pub fn faults(&self) -> Faults {
        self.faults
    }

    fn now(&self) -> Instant {
        self.began + self.lived + Duration::from_millis(self.station.station_time().0)
    }

    /// Notes the records that came to the journal, before a host can confirm them and the station erase them.
    fn learn(&mut self) {
        let from = self.journal.last().map_or(Seq::FIRST, |(seq, _)| seq.next());
        let journal = self.station.recorder().journal();
        if journal.next() == from {
            return;
        }
        let all = &mut self.journal;
        let visited = journal.visit(from, |seq, sealed| {
            all.push((seq, sealed.bytes().to_vec()));
            ControlFlow::Continue(())
        });
        visited.expect("flash in memory");
    }

    fn measure(&mut self) {
        if self.to_measure > 0 && self.random.chance(1, 12) {
            self.to_measure -= 1;
            let micrometres = self.random.between(1_990, 2_010);
            let line = format!("{}.{:03} mm\r\n", micrometres / 1_000, micrometres % 1_000);
            self.station.gauge(line.as_bytes());
        }
    }

    /// Passes a byte on, or does to it what bad lines do.
    fn pass(&mut self, back: bool, byte: u8, out: &mut Vec<u8>) -> Passed {
        let fault = self.random.chance(1, self.bytes_a_fault);
        let direction = &mut self.directions[usize::from(back)];
        let random = &mut self.random;
        let mut byte = byte;
        let mut again = 0;
        if fault {
            match random.below(100) {
                0..30 => {
                    byte ^= 1 << random.below(8);
                    self.faults.flipped += 1;
                }
                30..55 => {
                    direction.losing = random.one(&[1, 1, 1, 2, 5, 30]);
                    self.faults.dropped += 1;
                }
                55..73 => {
                    again = random.one(&[1, 1, 1, 2, 5, 30, 70]);
                    self.faults.doubled += 1;
                }
                73..83 => {
                    out.push(random.one(&[0, 1, 0xff, 0x55]));
                    self.faults.inserted += 1;
                }
                83..91 => {
                    direction.cutting = true;
                    self.faults.cut += 1;
                }
                91..97 => {
                    let wait = random.one(&[20, 300, 1_400, 1_600, 3_000]);
                    self.held_until = Some(self.now() + Duration::from_millis(wait));
                    self.faults.delayed += 1;
                }
                97 | 98 => {
                    self.faults.unplugged += 1;
                    return Passed::Unplugged;
                }
                _ => {
                    self.faults.resets += 1;
                    return Passed::Reset;
                }
            }
        }
        let direction = &mut self.directions[usize::from(back)];
        if direction.losing > 0 {
            direction.losing -= 1;
            return Passed::On;
        }
        if direction.cutting {
            // Up to the end of the frame; that is gone as well.
            direction.cutting = byte != 0;
            return Passed::On;
        }
        out.push(byte);
        direction.latest.push_back(byte);
        if direction.latest.len() > 80 {
            direction.latest.pop_front();
        }
        let repeated = direction.latest.len().saturating_sub(again);
        if again > 0 {
            out.extend(direction.latest.iter().skip(repeated));
        }
        Passed::On
    }

    /// The station's power goes for a moment.
    fn reset(&mut self) {
        self.lived += Duration::from_millis(self.station.station_time().0 + 300);
        let flash: RamFlash = self.station.recorder().journal().flash().clone();
        self.station = MemoryLink::start(flash, self.id).expect("its own flash");
        self.station.pass(60);
        self.arrived.clear();
        self.held_until = None;
        if self.random.chance(1, 2) {
            self.plugged += 1;
        }
        self.learn();
    }

    fn read(&mut self, buffer: &mut [u8]) -> io::Result<usize> {
        self.measure();
        let mut bytes = [0; 64];
        let got = self.station.read(&mut bytes).unwrap_or(0);
        for byte in &bytes[..got] {
            let mut out = Vec::new();
            match self.pass(true, *byte, &mut out) {
                Passed::On => self.arrived.extend(out),
                Passed::Unplugged => {
                    self.plugged += 1;
                    return Err(ErrorKind::BrokenPipe.into());
                }
                Passed::Reset => {
                    self.reset();
                    return Err(ErrorKind::TimedOut.into());
                }
            }
        }
        self.learn();
        if let Some(until) = self.held_until {
            if self.now() < until {
                self.station.pass(20);
                return Err(ErrorKind::TimedOut.into());
            }
            self.held_until = None;
        }
        match self.arrived.is_empty() {
            true => Err(ErrorKind::TimedOut.into()),
            false => self.arrived.read(buffer),
        }
    }

    fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
        self.measure();
        for byte in bytes {
            let mut out = Vec::new();
            match self.pass(false, *byte, &mut out) {
                Passed::On => self.station.write_all(&out)?,
                Passed::Unplugged => {
                    self.plugged += 1;
                    return Err(ErrorKind::BrokenPipe.into());
                }
                Passed::Reset => self.reset(),
            }
            self.learn();
        }
        Ok(bytes.len())
    }
}

/// The host's end; gone for good when it was unplugged.
#[derive(Clone, Debug)]
pub struct Port {
    line: Rc<RefCell<BadLine>>,
    plugged: u32,
}

impl Port {
    /// Plugs in.
    #[must_use]
    pub fn open(line: &Rc<RefCell<BadLine>>) -> Self {
        let mut here = line.borrow_mut();
        // What was on its way to the one before is not for this one.
        here.arrived.clear();
        here.plugged += 1;
        Self { line: Rc::clone(line), plugged: here.plugged }
    }

    fn plugged(&self) -> io::Result<std::cell::RefMut<'_, BadLine>> {
        let line = self.line.borrow_mut();
        if line.plugged == self.plugged { Ok(line) } else { Err(ErrorKind::BrokenPipe.into()) }
    }
}

impl Read for Port {
    fn read(&mut self, buffer: &mut [u8]) -> io::Result<usize> {
        self.plugged()?.read(buffer)
    }
}

impl Write for Port {
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
        self.plugged()?.write(bytes)
    }

    fn flush(&mut self) -> io::Result<()> {
        Ok(())
    }
}

impl Transport for Port {
    fn now(&self) -> Instant {
        self.line.borrow().now()
    }
}
