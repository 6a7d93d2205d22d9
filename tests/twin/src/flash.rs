//! NOR flash in memory, with the board's geometry but fewer sectors.

use core::cell::RefCell;

use embedded_storage::nor_flash::{ErrorType, MultiwriteNorFlash, NorFlash, NorFlashErrorKind, ReadNorFlash};

use crate::Digest;

const SECTOR: usize = 4096;
const PAGE: usize = 256;
/// So few that a sequence of a few hundred readings fills the journal.
const SECTORS: usize = 5;
const SIZE: usize = SECTORS * SECTOR;

/// What the flash holds, from one power cycle to the next.
#[derive(Debug)]
pub struct Memory(RefCell<Contents>);

#[derive(Debug)]
struct Contents {
    bytes: [u8; SIZE],
    /// Pages that were ever written since they were blank.
    touched: [bool; SIZE / PAGE],
    erases: u32,
}

impl Memory {
    /// A blank one.
    #[must_use]
    pub const fn blank() -> Self {
        let contents = Contents { bytes: [0xff; SIZE], touched: [false; SIZE / PAGE], erases: 0 };
        Self(RefCell::new(contents))
    }

    /// Makes it blank again.
    pub fn wipe(&self) {
        let mut contents = self.0.borrow_mut();
        contents.blank(0, SIZE);
        contents.erases = 0;
    }

    /// How many sectors were erased.
    #[must_use]
    pub fn erases(&self) -> u32 {
        self.0.borrow().erases
    }

    /// A chip that holds it.
    #[must_use]
    pub fn chip(&self) -> Chip<'_> {
        Chip(self)
    }

    /// All that is written.
    pub fn digest(&self, digest: &mut Digest) {
        let contents = self.0.borrow();
        for (number, page) in contents.bytes.chunks(PAGE).enumerate() {
            if contents.touched[number] {
                digest.number(number as u64);
                digest.bytes(page);
            }
        }
    }
}

impl Contents {
    fn blank(&mut self, from: usize, to: usize) {
        for page in from / PAGE..to / PAGE {
            if self.touched[page] {
                self.bytes[page * PAGE..(page + 1) * PAGE].fill(0xff);
                self.touched[page] = false;
            }
        }
    }
}

/// The flash as a journal takes it.
#[derive(Clone, Copy, Debug)]
pub struct Chip<'m>(&'m Memory);

/// Where `length` bytes from `offset` stand.
fn place(offset: u32, length: usize) -> Result<core::ops::Range<usize>, NorFlashErrorKind> {
    let from = offset as usize;
    match from.checked_add(length) {
        Some(to) if to <= SIZE => Ok(from..to),
        _ => Err(NorFlashErrorKind::OutOfBounds),
    }
}

impl ErrorType for Chip<'_> {
    type Error = NorFlashErrorKind;
}

impl ReadNorFlash for Chip<'_> {
    const READ_SIZE: usize = 1;

    fn read(&mut self, offset: u32, bytes: &mut [u8]) -> Result<(), NorFlashErrorKind> {
        bytes.copy_from_slice(&self.0.0.borrow().bytes[place(offset, bytes.len())?]);
        Ok(())
    }

    fn capacity(&self) -> usize {
        SIZE
    }
}

impl NorFlash for Chip<'_> {
    const WRITE_SIZE: usize = 1;
    const ERASE_SIZE: usize = SECTOR;

    fn erase(&mut self, from: u32, to: u32) -> Result<(), NorFlashErrorKind> {
        let place = place(from, to.saturating_sub(from) as usize)?;
        if !place.start.is_multiple_of(SECTOR) || !place.end.is_multiple_of(SECTOR) {
            return Err(NorFlashErrorKind::NotAligned);
        }
        let mut contents = self.0.0.borrow_mut();
        contents.erases += (place.len() / SECTOR) as u32;
        contents.blank(place.start, place.end);
        Ok(())
    }

    /// A bit can only fall.
    fn write(&mut self, offset: u32, bytes: &[u8]) -> Result<(), NorFlashErrorKind> {
        let place = place(offset, bytes.len())?;
        if bytes.is_empty() {
            return Ok(());
        }
        let mut contents = self.0.0.borrow_mut();
        for page in place.start / PAGE..=(place.end - 1) / PAGE {
            contents.touched[page] = true;
        }
        for (cell, byte) in contents.bytes[place].iter_mut().zip(bytes) {
            *cell &= byte;
        }
        Ok(())
    }
}

impl MultiwriteNorFlash for Chip<'_> {}
