//! A NOR flash in memory that loses power: after so many bytes of any write, and halfway through an erase.

use std::vec::Vec;

use embedded_storage::nor_flash::{
    ErrorType, MultiwriteNorFlash, NorFlash, NorFlashError, NorFlashErrorKind, ReadNorFlash,
};

/// The power is gone, or an access is out of bounds.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) struct Cut;

impl NorFlashError for Cut {
    fn kind(&self) -> NorFlashErrorKind {
        NorFlashErrorKind::Other
    }
}

/// NOR flash of `SECTORS` sectors: programming only clears bits, erasing sets a whole sector.
#[derive(Clone, Debug)]
pub(crate) struct Flash {
    pub(crate) bytes: Vec<u8>,
    /// Bytes that can still be programmed (an erase counts as one sector's bytes) before the power goes.
    pub(crate) fuel: usize,
    pub(crate) erases: usize,
}

pub(crate) const SECTORS: usize = 6;

impl Flash {
    pub(crate) fn blank() -> Self {
        Self { bytes: std::vec![0xff; SECTORS * 4096], fuel: usize::MAX, erases: 0 }
    }

    fn burn(&mut self, bytes: usize) -> usize {
        let burnt = bytes.min(self.fuel);
        if self.fuel != usize::MAX {
            self.fuel -= burnt;
        }
        burnt
    }
}

impl ErrorType for Flash {
    type Error = Cut;
}

impl ReadNorFlash for Flash {
    const READ_SIZE: usize = 1;

    fn read(&mut self, offset: u32, bytes: &mut [u8]) -> Result<(), Cut> {
        let offset = offset as usize;
        bytes.copy_from_slice(self.bytes.get(offset..offset + bytes.len()).ok_or(Cut)?);
        Ok(())
    }

    fn capacity(&self) -> usize {
        self.bytes.len()
    }
}

impl NorFlash for Flash {
    const WRITE_SIZE: usize = 1;
    const ERASE_SIZE: usize = 4096;

    fn erase(&mut self, from: u32, to: u32) -> Result<(), Cut> {
        let (from, to) = (from as usize, to as usize);
        let burnt = self.burn(to - from);
        self.erases += 1;
        self.bytes[from..from + burnt].fill(0xff);
        if burnt < to - from { Err(Cut) } else { Ok(()) }
    }

    fn write(&mut self, offset: u32, bytes: &[u8]) -> Result<(), Cut> {
        let offset = offset as usize;
        assert_eq!(offset / 256, (offset + bytes.len() - 1) / 256, "a program call may not cross a page");
        let burnt = self.burn(bytes.len());
        for (cell, byte) in self.bytes[offset..].iter_mut().zip(&bytes[..burnt]) {
            *cell &= byte;
        }
        if burnt < bytes.len() { Err(Cut) } else { Ok(()) }
    }
}

impl MultiwriteNorFlash for Flash {}
