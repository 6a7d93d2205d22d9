//! Reading the gauge's bytes out of a ring that hardware fills without the processor's help.
//!
//! Erasing a sector of flash stops the processor for up to 400 ms with its interrupts off (from memory, W25Q16JV data
//! sheet), while the UART's own buffer of 32 bytes is full after 3 ms at 115 200 baud. So a DMA channel carries each
//! byte into a ring in RAM, and the reader comes by when it can. What the reader missed is counted and reported.

use embedded_io_async::{ErrorKind, ErrorType, Read};

use crate::clock::Clock;

/// The ring's size in bytes: 400 ms at 115 200 baud are 4 608 bytes, and twice that is not yet a lap.
pub const RING_SIZE: usize = 8192;

const _: () = assert!(RING_SIZE.is_power_of_two());

/// How often the reader looks, in milliseconds. One line at 9600 baud takes 10 ms and more.
const LOOK_EVERY_MS: u64 = 2;

/// Bytes that hardware may write while the reader copies; a ring fuller than this counts as lapped.
const MARGIN: usize = 64;

/// The hardware that fills the ring.
pub trait RingSource {
    /// Bytes carried since the transfer was last started, modulo 2³².
    fn carried(&self) -> u32;

    /// Where in the ring the next byte will be written, below [`RING_SIZE`].
    fn write_offset(&self) -> usize;

    /// Copies bytes that begin at `offset` and do not pass the ring's end.
    fn copy(&self, offset: usize, into: &mut [u8]);

    /// A fault that the receiver saw since the last call.
    fn fault(&mut self) -> Option<LineFault>;

    /// Starts the transfer again if its count will run out; gives how many bytes were carried before. The ring goes on
    /// at the same place.
    fn restart_if_due(&mut self) -> Option<u32>;
}

/// What can happen to bytes on the gauge's line.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[cfg_attr(feature = "pico", derive(defmt::Format))]
pub enum LineFault {
    /// The ring was full before the reader came: this many bytes are lost.
    Lapped(u32),
    /// The UART's own buffer was full: bytes are lost.
    Overrun,
    /// A byte came without its stop bit or with the wrong parity: the settings of gauge and plan differ, or the line is
    /// disturbed.
    Garbled,
}

impl core::fmt::Display for LineFault {
    fn fmt(&self, f: &mut core::fmt::Formatter<'_>) -> core::fmt::Result {
        match self {
            Self::Lapped(bytes) => write!(f, "{bytes} bytes from the gauge lost: the station was too busy"),
            Self::Overrun => f.write_str("bytes from the gauge lost: the receiver was full"),
            Self::Garbled => {
                f.write_str("garbled byte from the gauge: check baud rate, parity, stop bits and cable")
            }
        }
    }
}

impl core::error::Error for LineFault {}

impl embedded_io_async::Error for LineFault {
    fn kind(&self) -> ErrorKind {
        match self {
            Self::Lapped(_) | Self::Overrun => ErrorKind::OutOfMemory,
            Self::Garbled => ErrorKind::InvalidData,
        }
    }
}

/// The reading end of the ring. Dropping a pending `read` loses nothing: bytes leave the ring only when it is ready.
pub struct RingReader<S, C> {
    source: S,
    clock: C,
    /// Bytes carried before the transfer was last started, modulo 2³².
    base: u32,
    /// Bytes taken out, modulo 2³².
    taken: u32,
}

impl<S: RingSource, C: Clock> RingReader<S, C> {
    /// Reads a ring whose transfer has just been started for the first time.
    pub const fn new(source: S, clock: C) -> Self {
        Self { source, clock, base: 0, taken: 0 }
    }

    /// The hardware, to change its settings.
    pub fn source(&mut self) -> &mut S {
        &mut self.source
    }

    /// Bytes that lie in the ring, all written: the count may run ahead of the last write by a byte or two, or stand
    /// behind an address that was read a moment later; the address is what holds.
    fn waiting(&self) -> u32 {
        const HALF: i32 = RING_SIZE as i32 / 2;
        let counted = self.base.wrapping_add(self.source.carried());
        let ahead = (counted as usize).wrapping_sub(self.source.write_offset()) % RING_SIZE;
        let ahead = (ahead as i32 + HALF) % RING_SIZE as i32 - HALF;
        counted.wrapping_sub(ahead as u32).wrapping_sub(self.taken)
    }

    /// Takes what is there, up to `buffer`'s length or the ring's end.
    fn take(&mut self, buffer: &mut [u8]) -> Result<usize, LineFault> {
        if let Some(before) = self.source.restart_if_due() {
            self.base = self.base.wrapping_add(before);
        }
        let waiting = self.waiting();
        if waiting as usize > RING_SIZE - MARGIN {
            self.taken = self.taken.wrapping_add(waiting);
            return Err(LineFault::Lapped(waiting));
        }
        if let Some(fault) = self.source.fault() {
            // Any byte that waits may be the one: better none of them than a wrong reading.
            self.taken = self.taken.wrapping_add(self.waiting());
            return Err(fault);
        }
        let offset = self.taken as usize % RING_SIZE;
        let length = buffer.len().min(waiting as usize).min(RING_SIZE - offset);
        let (front, _) = buffer.split_at_mut(length);
        self.source.copy(offset, front);
        self.taken = self.taken.wrapping_add(length as u32);
        Ok(length)
    }
}

impl<S, C> ErrorType for RingReader<S, C> {
    type Error = LineFault;
}

impl<S: RingSource, C: Clock> Read for RingReader<S, C> {
    async fn read(&mut self, buffer: &mut [u8]) -> Result<usize, LineFault> {
        loop {
            let taken = self.take(buffer)?;
            if taken > 0 || buffer.is_empty() {
                return Ok(taken);
            }
            self.clock.pause(LOOK_EVERY_MS).await;
        }
    }
}

#[cfg(test)]
mod tests {
    extern crate std;
    use std::{vec, vec::Vec};

    use super::*;
    use crate::clock::testing::StillClock;

    /// Hardware that has carried `carried` bytes of the sequence 0, 1, 2 … (modulo 251).
    struct Sequence {
        ring: Vec<u8>,
        carried: u64,
        restarted_at: u64,
        count_runs_ahead: u32,
        restart: bool,
        fault: Option<LineFault>,
    }

    impl Sequence {
        fn new() -> Self {
            Self {
                ring: vec![0; RING_SIZE],
                carried: 0,
                restarted_at: 0,
                count_runs_ahead: 0,
                restart: false,
                fault: None,
            }
        }

        fn carry(&mut self, bytes: usize) {
            for _ in 0..bytes {
                self.ring[self.carried as usize % RING_SIZE] = (self.carried % 251) as u8;
                self.carried += 1;
            }
        }
    }

    impl RingSource for Sequence {
        fn carried(&self) -> u32 {
            ((self.carried - self.restarted_at) as u32).wrapping_add(self.count_runs_ahead)
        }
        fn write_offset(&self) -> usize {
            self.carried as usize % RING_SIZE
        }
        fn copy(&self, offset: usize, into: &mut [u8]) {
            into.copy_from_slice(&self.ring[offset..offset + into.len()]);
        }
        fn fault(&mut self) -> Option<LineFault> {
            self.fault.take()
        }
        fn restart_if_due(&mut self) -> Option<u32> {
            self.restart.then(|| {
                self.restart = false;
                let before = self.carried();
                self.restarted_at = self.carried;
                before
            })
        }
    }

    fn reader() -> RingReader<Sequence, StillClock> {
        RingReader::new(Sequence::new(), StillClock)
    }

    /// Everything that waits, in chunks of 64.
    fn drain(reader: &mut RingReader<Sequence, StillClock>) -> Vec<u8> {
        let mut all = Vec::new();
        let mut chunk = [0; 64];
        loop {
            match reader.take(&mut chunk).unwrap() {
                0 => return all,
                n => all.extend_from_slice(&chunk[..n]),
            }
        }
    }

    #[test]
    fn every_byte_comes_out_once_and_in_order_over_many_laps() {
        let mut reader = reader();
        let mut next = 0u64;
        for round in 0..200 {
            reader.source().carry(1 + round * 41 % 5000);
            for byte in drain(&mut reader) {
                assert_eq!(u64::from(byte), next % 251);
                next += 1;
            }
        }
        assert_eq!(next, reader.source().carried);
        assert!(next > 20 * RING_SIZE as u64);
    }

    #[test]
    fn a_lap_is_reported_with_its_length_and_reading_goes_on_behind_it() {
        let mut reader = reader();
        reader.source().carry(RING_SIZE + 10);
        assert_eq!(reader.take(&mut [0; 64]), Err(LineFault::Lapped(RING_SIZE as u32 + 10)));
        reader.source().carry(3);
        let expected: Vec<u8> = (0..3).map(|i| ((RING_SIZE as u64 + 10 + i) % 251) as u8).collect();
        assert_eq!(drain(&mut reader), expected);
    }

    #[test]
    fn several_laps_at_once_are_still_one_loss_of_known_length() {
        let mut reader = reader();
        reader.source().carry(3 * RING_SIZE + 7);
        assert_eq!(reader.take(&mut [0; 64]), Err(LineFault::Lapped(3 * RING_SIZE as u32 + 7)));
    }

    #[test]
    fn four_hundred_milliseconds_at_115200_baud_fit() {
        let mut reader = reader();
        reader.source().carry(4608);
        assert_eq!(drain(&mut reader).len(), 4608);
    }

    #[test]
    fn a_count_ahead_of_the_writes_gives_no_byte_too_early() {
        let mut reader = reader();
        reader.source().carry(5);
        reader.source().count_runs_ahead = 2;
        assert_eq!(drain(&mut reader), [0, 1, 2, 3, 4]);
        reader.source().carry(2);
        assert_eq!(drain(&mut reader), [5, 6]);
    }

    #[test]
    fn a_write_between_reading_count_and_address_is_taken_as_well() {
        let mut reader = reader();
        reader.source().carry(5);
        reader.source().count_runs_ahead = u32::MAX;
        assert_eq!(drain(&mut reader), [0, 1, 2, 3, 4]);
    }

    #[test]
    fn a_restart_of_the_transfer_loses_and_repeats_nothing() {
        let mut reader = reader();
        reader.source().carry(100);
        reader.source().restart = true;
        assert_eq!(drain(&mut reader).len(), 100);
        reader.source().carry(100);
        let expected: Vec<u8> = (100..200).map(|i| (i % 251) as u8).collect();
        assert_eq!(drain(&mut reader), expected);
    }

    #[test]
    fn a_fault_of_the_receiver_is_reported_once_and_takes_all_that_waits_with_it() {
        let mut reader = reader();
        reader.source().carry(4);
        reader.source().fault = Some(LineFault::Garbled);
        assert_eq!(reader.take(&mut [0; 64]), Err(LineFault::Garbled));
        reader.source().carry(2);
        assert_eq!(drain(&mut reader), [4, 5]);
    }
}
