//! A line that does to the bytes what lines do.

use std::collections::VecDeque;
use std::io::{self, ErrorKind, Read, Write};
use std::time::Instant;

use donelight::link::Transport;
use proptest::prelude::*;

/// What happens to a byte.
#[derive(Clone, Copy, Debug)]
pub(crate) enum Fault {
    /// One bit of it turns.
    Flip(u8),
    /// It is lost, and so many after it.
    Lose(u8),
    /// It comes twice.
    Double,
    /// This comes before it.
    Insert(u8),
    /// Nothing passes any more, in this direction, until the next time that the host has waited in vain.
    Silence,
    /// The port is gone for good.
    Unplug,
}

/// A fault at so many bytes from the beginning.
pub(crate) type At = (u16, Fault);

pub(crate) fn faults(span: u16) -> impl Strategy<Value = Vec<At>> {
    let fault = prop_oneof![
        4 => (0..8u8).prop_map(Fault::Flip),
        4 => any::<u8>().prop_map(Fault::Lose),
        2 => Just(Fault::Double),
        2 => any::<u8>().prop_map(Fault::Insert),
        1 => Just(Fault::Insert(0)),
        2 => Just(Fault::Silence),
        1 => Just(Fault::Unplug),
    ];
    prop::collection::vec((0..span, fault), 0..12)
}

/// One direction.
#[derive(Debug)]
struct Direction {
    faults: VecDeque<At>,
    passed: u16,
    losing: u8,
    silent: bool,
}

impl Direction {
    fn new(mut faults: Vec<At>) -> Self {
        faults.sort_by_key(|(at, _)| *at);
        Self { faults: faults.into(), passed: 0, losing: 0, silent: false }
    }

    /// What comes out for `byte`; an error once the port is gone.
    fn pass(&mut self, byte: u8, out: &mut Vec<u8>) -> io::Result<()> {
        self.passed = self.passed.saturating_add(1);
        let mut byte = byte;
        let mut times = 1;
        while self.faults.front().is_some_and(|(at, _)| *at < self.passed) {
            match self.faults.pop_front().unwrap().1 {
                Fault::Flip(bit) => byte ^= 1 << bit,
                Fault::Lose(more) => self.losing = more.saturating_add(1),
                Fault::Double => times = 2,
                Fault::Insert(other) => out.push(other),
                Fault::Silence => self.silent = true,
                Fault::Unplug => return Err(ErrorKind::BrokenPipe.into()),
            }
        }
        if self.losing > 0 {
            self.losing -= 1;
        } else if !self.silent {
            out.extend(std::iter::repeat_n(byte, times));
        }
        Ok(())
    }
}

/// Faults in both directions of a transport.
#[derive(Debug)]
pub(crate) struct Faulty<T> {
    inner: T,
    there: Direction,
    back: Direction,
    unplugged: bool,
    arrived: VecDeque<u8>,
}

impl<T: Transport> Faulty<T> {
    pub(crate) fn new(inner: T, there: Vec<At>, back: Vec<At>) -> Self {
        Self {
            inner,
            there: Direction::new(there),
            back: Direction::new(back),
            unplugged: false,
            arrived: VecDeque::new(),
        }
    }
}

impl<T: Transport> Read for Faulty<T> {
    fn read(&mut self, buffer: &mut [u8]) -> io::Result<usize> {
        if self.unplugged {
            return Err(ErrorKind::BrokenPipe.into());
        }
        let mut bytes = [0; 64];
        match self.inner.read(&mut bytes) {
            Ok(got) => {
                let mut out = Vec::new();
                let passed = bytes[..got].iter().try_for_each(|byte| self.back.pass(*byte, &mut out));
                self.unplugged = passed.is_err();
                passed?;
                self.arrived.extend(out);
            }
            Err(error) if self.arrived.is_empty() => {
                self.there.silent = false;
                self.back.silent = false;
                return Err(error);
            }
            Err(_) => {}
        }
        match self.arrived.is_empty() {
            true => Err(ErrorKind::TimedOut.into()),
            false => self.arrived.read(buffer),
        }
    }
}

impl<T: Transport> Write for Faulty<T> {
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
        if self.unplugged {
            return Err(ErrorKind::BrokenPipe.into());
        }
        let mut out = Vec::new();
        let passed = bytes.iter().try_for_each(|byte| self.there.pass(*byte, &mut out));
        self.unplugged = passed.is_err();
        passed?;
        self.inner.write_all(&out)?;
        Ok(bytes.len())
    }

    fn flush(&mut self) -> io::Result<()> {
        Ok(())
    }
}

impl<T: Transport> Transport for Faulty<T> {
    fn now(&self) -> Instant {
        self.inner.now()
    }
}
