//! The Pico's image: where it is, and how big.

use std::path::PathBuf;

use object::{Object, ObjectSection, SectionFlags, elf};

/// Names the image's ELF file; `tests/run` builds it and sets this.
pub const IMAGE_VARIABLE: &str = "DONELIGHT_PICO_ELF";

/// The image's ELF file.
///
/// # Panics
/// If [`IMAGE_VARIABLE`] does not name one.
#[must_use]
pub fn path() -> PathBuf {
    let path = std::env::var_os(IMAGE_VARIABLE).map(PathBuf::from);
    let path = path.unwrap_or_else(|| panic!("{IMAGE_VARIABLE} names no image: run tests/run"));
    assert!(path.is_file(), "{IMAGE_VARIABLE}: no file {}", path.display());
    path
}

/// What the image takes of the board.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Size {
    /// Bytes of flash, initial values of variables included.
    pub flash: u64,
    /// Bytes of RAM for variables; the stack has the rest.
    pub ram: u64,
    /// The address behind the last variable.
    pub variables_end: u32,
}

/// The address behind the board's RAM, from where the stack grows downwards.
pub const RAM_END: u32 = 0x2004_2000;

/// Adds up the image's sections.
///
/// # Panics
/// If the file is no ELF file.
#[must_use]
pub fn size() -> Size {
    let bytes = std::fs::read(path()).expect("the image can be read");
    let file = object::File::parse(bytes.as_slice()).expect("an ELF file");
    let mut size = Size { flash: 0, ram: 0, variables_end: 0 };
    for section in file.sections() {
        let SectionFlags::Elf { sh_flags } = section.flags() else { continue };
        if sh_flags & u64::from(elf::SHF_ALLOC) == 0 {
            continue;
        }
        let in_ram = section.address() >= 0x2000_0000;
        let stored = section.file_range().is_some();
        if in_ram {
            size.ram += section.size();
            let end = u32::try_from(section.address() + section.size()).expect("an address of the board");
            size.variables_end = size.variables_end.max(end);
        }
        size.flash += if stored { section.size() } else { 0 };
    }
    size
}
