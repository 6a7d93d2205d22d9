//! A part of a flash chip as a flash of its own, so that nothing outside of it can be touched.

use embedded_storage::nor_flash::{
    ErrorType, MultiwriteNorFlash, NorFlash, NorFlashError, NorFlashErrorKind, ReadNorFlash, check_erase,
    check_read, check_write,
};

/// The bytes from `START` up to but not including `END` of another flash, counted from 0.
pub struct Region<F, const START: u32, const END: u32>(F);

/// What can go wrong in a [`Region`].
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum RegionError<E> {
    /// The place lies outside of the region or off its grid.
    Place(NorFlashErrorKind),
    /// The chip failed.
    Chip(E),
}

impl<E: NorFlashError> NorFlashError for RegionError<E> {
    fn kind(&self) -> NorFlashErrorKind {
        match self {
            Self::Place(kind) => *kind,
            Self::Chip(error) => error.kind(),
        }
    }
}

impl<F: NorFlash, const START: u32, const END: u32> Region<F, START, END> {
    const ON_THE_GRID: () = assert!(
        START < END
            && (START as usize).is_multiple_of(F::ERASE_SIZE)
            && (END as usize).is_multiple_of(F::ERASE_SIZE)
    );

    /// A window onto `flash`.
    pub const fn new(flash: F) -> Self {
        let () = Self::ON_THE_GRID;
        Self(flash)
    }
}

impl<F: NorFlash, const START: u32, const END: u32> ErrorType for Region<F, START, END> {
    type Error = RegionError<F::Error>;
}

impl<F: NorFlash, const START: u32, const END: u32> ReadNorFlash for Region<F, START, END> {
    const READ_SIZE: usize = F::READ_SIZE;

    fn read(&mut self, offset: u32, bytes: &mut [u8]) -> Result<(), Self::Error> {
        check_read(self, offset, bytes.len()).map_err(RegionError::Place)?;
        self.0.read(START + offset, bytes).map_err(RegionError::Chip)
    }

    fn capacity(&self) -> usize {
        (END - START) as usize
    }
}

impl<F: NorFlash, const START: u32, const END: u32> NorFlash for Region<F, START, END> {
    const WRITE_SIZE: usize = F::WRITE_SIZE;
    const ERASE_SIZE: usize = F::ERASE_SIZE;

    fn erase(&mut self, from: u32, to: u32) -> Result<(), Self::Error> {
        check_erase(self, from, to).map_err(RegionError::Place)?;
        self.0.erase(START + from, START + to).map_err(RegionError::Chip)
    }

    fn write(&mut self, offset: u32, bytes: &[u8]) -> Result<(), Self::Error> {
        check_write(self, offset, bytes.len()).map_err(RegionError::Place)?;
        self.0.write(START + offset, bytes).map_err(RegionError::Chip)
    }
}

impl<F: MultiwriteNorFlash, const START: u32, const END: u32> MultiwriteNorFlash for Region<F, START, END> {}

#[cfg(test)]
mod tests {
    extern crate std;
    use std::{vec, vec::Vec};

    use core::convert::Infallible;

    use super::*;

    /// Four sectors of 4 KiB.
    struct Chip(Vec<u8>);

    impl ErrorType for Chip {
        type Error = Infallible;
    }

    impl ReadNorFlash for Chip {
        const READ_SIZE: usize = 1;
        fn read(&mut self, offset: u32, bytes: &mut [u8]) -> Result<(), Infallible> {
            bytes.copy_from_slice(&self.0[offset as usize..][..bytes.len()]);
            Ok(())
        }
        fn capacity(&self) -> usize {
            self.0.len()
        }
    }

    impl NorFlash for Chip {
        const WRITE_SIZE: usize = 1;
        const ERASE_SIZE: usize = 4096;
        fn erase(&mut self, from: u32, to: u32) -> Result<(), Infallible> {
            self.0[from as usize..to as usize].fill(0xff);
            Ok(())
        }
        fn write(&mut self, offset: u32, bytes: &[u8]) -> Result<(), Infallible> {
            self.0[offset as usize..][..bytes.len()].copy_from_slice(bytes);
            Ok(())
        }
    }

    fn region() -> Region<Chip, 4096, 12288> {
        Region::new(Chip(vec![0; 16384]))
    }

    #[test]
    fn its_first_and_last_bytes_lie_at_start_and_before_end() {
        let mut region = region();
        assert_eq!(region.capacity(), 8192);
        region.write(0, &[1]).unwrap();
        region.write(8191, &[2]).unwrap();
        assert_eq!((region.0.0[4096], region.0.0[12287]), (1, 2));
        let mut byte = [0];
        region.read(8191, &mut byte).unwrap();
        assert_eq!(byte, [2]);
    }

    #[test]
    fn an_erase_of_all_of_it_leaves_its_neighbours_alone() {
        let mut region = region();
        region.erase(0, 8192).unwrap();
        let outside = region.0.0.iter().enumerate().filter(|(i, _)| !(4096..12288).contains(i));
        assert!(outside.clone().count() == 8192 && outside.clone().all(|(_, byte)| *byte == 0));
        assert!(region.0.0[4096..12288].iter().all(|byte| *byte == 0xff));
    }

    #[test]
    fn nothing_beyond_its_end_can_be_touched() {
        let mut region = region();
        let refused = Err(RegionError::Place(NorFlashErrorKind::OutOfBounds));
        assert_eq!(region.write(8191, &[1, 2]), refused);
        assert_eq!(region.read(8192, &mut [0]), refused);
        assert_eq!(region.erase(4096, 12288), refused);
        assert_eq!(region.write(u32::MAX, &[1]), refused);
        assert_eq!(region.erase(1, 4096), Err(RegionError::Place(NorFlashErrorKind::NotAligned)));
    }
}
