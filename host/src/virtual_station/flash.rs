//! NOR flash as the station's journal knows it, held in a file or in memory: bytes are programmed one by one, which only
//! clears bits; a sector of 4096 bytes is erased at once, which sets them all.
//!
//! In a file, each write and erase is handed to the disk (`fdatasync` or its like) before it returns. A killed process
//! would lose nothing without that; a computer whose power fails would. One reading is one write, so it costs a disk's
//! flush a reading (0.2 ms on an idle disk, 3 ms on a busy one, where this was written), which no gauge is fast enough
//! to notice.

use std::fs::File;
use std::io::{self, Read, Seek, SeekFrom, Write};

use embedded_storage::nor_flash::{
    ErrorType, MultiwriteNorFlash, NorFlash, NorFlashError, NorFlashErrorKind, ReadNorFlash, check_erase,
    check_read, check_write,
};

/// Bytes of the journal's flash: the upper half of the reference board's 2 MiB.
pub const FLASH_SIZE: usize = 1024 * 1024;

/// Bytes that are erased at once, as on the reference board.
const SECTOR: usize = 4096;

/// What is left of a sector after an erase.
pub(super) const ERASED: u8 = 0xff;

/// Where a flash's bytes are kept. Offsets are checked before they get here.
pub trait Medium {
    /// How many bytes there are.
    fn size(&self) -> usize;

    /// Reads the bytes from `offset` on.
    ///
    /// # Errors
    /// The medium's own.
    fn read_at(&mut self, offset: usize, bytes: &mut [u8]) -> io::Result<()>;

    /// Replaces the bytes from `offset` on; they are durable when this returns.
    ///
    /// # Errors
    /// The medium's own.
    fn write_at(&mut self, offset: usize, bytes: &[u8]) -> io::Result<()>;
}

impl Medium for Vec<u8> {
    fn size(&self) -> usize {
        self.len()
    }

    fn read_at(&mut self, offset: usize, bytes: &mut [u8]) -> io::Result<()> {
        let kept = self.get(offset..offset + bytes.len()).ok_or(io::ErrorKind::UnexpectedEof)?;
        bytes.copy_from_slice(kept);
        Ok(())
    }

    fn write_at(&mut self, offset: usize, bytes: &[u8]) -> io::Result<()> {
        let kept = self.get_mut(offset..offset + bytes.len()).ok_or(io::ErrorKind::UnexpectedEof)?;
        kept.copy_from_slice(bytes);
        Ok(())
    }
}

/// A file of [`FLASH_SIZE`] bytes.
#[derive(Debug)]
pub struct FlashFile(pub(super) File);

impl Medium for FlashFile {
    fn size(&self) -> usize {
        FLASH_SIZE
    }

    fn read_at(&mut self, offset: usize, bytes: &mut [u8]) -> io::Result<()> {
        self.0.seek(SeekFrom::Start(offset as u64))?;
        self.0.read_exact(bytes)
    }

    fn write_at(&mut self, offset: usize, bytes: &[u8]) -> io::Result<()> {
        self.0.seek(SeekFrom::Start(offset as u64))?;
        self.0.write_all(bytes)?;
        self.0.sync_data()
    }
}

/// Why the flash did not do what it was asked.
#[derive(Clone, Copy, Debug, PartialEq, Eq, thiserror::Error)]
pub enum FlashError {
    /// Beyond the flash, or not at a sector's edge.
    #[error("the journal asked for a place that its flash does not have ({0}): please report this")]
    Misused(NorFlashErrorKind),
    /// The file's system refused.
    #[error("the file of the station's flash can no longer be read or written: {0}")]
    Medium(io::ErrorKind),
}

impl NorFlashError for FlashError {
    fn kind(&self) -> NorFlashErrorKind {
        match self {
            Self::Misused(kind) => *kind,
            Self::Medium(_) => NorFlashErrorKind::Other,
        }
    }
}

impl From<NorFlashErrorKind> for FlashError {
    fn from(kind: NorFlashErrorKind) -> Self {
        Self::Misused(kind)
    }
}

/// NOR flash over a medium.
#[derive(Clone, Debug)]
pub struct Flash<M> {
    medium: M,
    fault: Option<FlashError>,
}

/// NOR flash in memory, gone with the process.
pub type RamFlash = Flash<Vec<u8>>;

/// NOR flash in a file.
pub type FileFlash = Flash<FlashFile>;

impl RamFlash {
    /// An erased flash of so many sectors of 4096 bytes; a journal needs four at least.
    #[must_use]
    pub fn blank(sectors: usize) -> Self {
        Self::over(vec![ERASED; sectors * SECTOR])
    }
}

impl FileFlash {
    /// Fills a fresh file with erased flash and hands it to the disk.
    pub(super) fn format(file: &mut File) -> io::Result<()> {
        file.write_all(&vec![ERASED; FLASH_SIZE])?;
        file.sync_all()
    }
}

impl<M: Medium> Flash<M> {
    /// Flash over what this medium holds.
    #[must_use]
    pub fn over(medium: M) -> Self {
        Self { medium, fault: None }
    }

    /// Where the bytes are kept.
    pub fn medium(&mut self) -> &mut M {
        &mut self.medium
    }

    /// What went wrong since this was last asked; the journal itself only learns that something did.
    pub fn take_fault(&mut self) -> Option<FlashError> {
        self.fault.take()
    }

    fn noting<T>(&mut self, outcome: Result<T, FlashError>) -> Result<T, FlashError> {
        outcome.inspect_err(|fault| self.fault = Some(*fault))
    }
}

impl<M: Medium> ErrorType for Flash<M> {
    type Error = FlashError;
}

impl<M: Medium> ReadNorFlash for Flash<M> {
    const READ_SIZE: usize = 1;

    fn read(&mut self, offset: u32, bytes: &mut [u8]) -> Result<(), FlashError> {
        let outcome = check_read(self, offset, bytes.len())
            .map_err(FlashError::from)
            .and_then(|()| self.medium.read_at(offset as usize, bytes).map_err(medium_fault));
        self.noting(outcome)
    }

    fn capacity(&self) -> usize {
        self.medium.size()
    }
}

impl<M: Medium> NorFlash for Flash<M> {
    const WRITE_SIZE: usize = 1;
    const ERASE_SIZE: usize = SECTOR;

    fn erase(&mut self, from: u32, to: u32) -> Result<(), FlashError> {
        let outcome = check_erase(self, from, to).map_err(FlashError::from).and_then(|()| {
            let blank = [ERASED; SECTOR];
            (from as usize..to as usize)
                .step_by(SECTOR)
                .try_for_each(|sector| self.medium.write_at(sector, &blank).map_err(medium_fault))
        });
        self.noting(outcome)
    }

    fn write(&mut self, offset: u32, bytes: &[u8]) -> Result<(), FlashError> {
        let outcome = check_write(self, offset, bytes.len()).map_err(FlashError::from).and_then(|()| {
            let mut programmed = vec![0; bytes.len()];
            self.medium.read_at(offset as usize, &mut programmed).map_err(medium_fault)?;
            programmed.iter_mut().zip(bytes).for_each(|(kept, new)| *kept &= new);
            self.medium.write_at(offset as usize, &programmed).map_err(medium_fault)
        });
        self.noting(outcome)
    }
}

impl<M: Medium> MultiwriteNorFlash for Flash<M> {}

fn medium_fault(error: io::Error) -> FlashError {
    FlashError::Medium(error.kind())
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn programming_only_clears_bits_and_erasing_sets_a_whole_sector() {
        let mut flash = RamFlash::blank(256);
        flash.write(4095, &[0b1010_1010, 0x0f]).unwrap();
        flash.write(4095, &[0b1100_1100]).unwrap();
        let mut bytes = [0; 3];
        flash.read(4094, &mut bytes).unwrap();
        assert_eq!(bytes, [0xff, 0b1000_1000, 0x0f]);
        flash.erase(0, 4096).unwrap();
        flash.read(4094, &mut bytes).unwrap();
        assert_eq!(bytes, [0xff, 0xff, 0x0f]);
    }

    #[test]
    fn a_place_beyond_the_flash_is_an_error_and_is_kept_as_the_fault() {
        let mut flash = RamFlash::blank(256);
        let end = u32::try_from(FLASH_SIZE).unwrap();
        let beyond = FlashError::Misused(NorFlashErrorKind::OutOfBounds);
        assert_eq!(flash.write(end - 1, &[0, 0]), Err(beyond));
        assert_eq!(flash.erase(0, 100), Err(FlashError::Misused(NorFlashErrorKind::NotAligned)));
        assert_eq!(flash.read(end, &mut [0]), Err(beyond));
        assert_eq!(flash.take_fault(), Some(beyond));
        assert_eq!(flash.take_fault(), None);
    }
}
