//! The core's memory: code that cannot be written, and RAM. Anything else is a fault, and so is what is not aligned.

/// Where RAM begins.
pub(super) const RAM: u32 = 0x2000_0000;
/// Bytes of RAM, as the Raspberry Pi Pico has them.
pub(super) const RAM_SIZE: usize = 264 * 1024;

/// Code and RAM.
#[derive(Clone, Debug)]
pub(super) struct Memory {
    code: Vec<u8>,
    base: u32,
    ram: Box<[u8]>,
}

impl Memory {
    pub(super) fn new(code: Vec<u8>, base: u32) -> Self {
        Self { code, base, ram: vec![0; RAM_SIZE].into_boxed_slice() }
    }

    /// `N` bytes at `address`, which must be a multiple of `N`.
    #[inline(always)]
    pub(super) fn read<const N: usize>(&self, address: u32) -> Option<[u8; N]> {
        if address & (N as u32 - 1) != 0 {
            return None;
        }
        let at = address.wrapping_sub(RAM) as usize;
        if let Some(bytes) = self.ram.get(at..).and_then(<[u8]>::first_chunk) {
            return Some(*bytes);
        }
        let at = address.wrapping_sub(self.base) as usize;
        self.code.get(at..)?.first_chunk().copied()
    }

    /// Writes `N` bytes to `address` in RAM, which must be a multiple of `N`.
    #[inline(always)]
    pub(super) fn write<const N: usize>(&mut self, address: u32, bytes: [u8; N]) -> Option<()> {
        if address & (N as u32 - 1) != 0 {
            return None;
        }
        let at = address.wrapping_sub(RAM) as usize;
        *self.ram.get_mut(at..)?.first_chunk_mut()? = bytes;
        Some(())
    }

    #[inline(always)]
    pub(super) fn word(&self, address: u32) -> Option<u32> {
        self.read(address).map(u32::from_le_bytes)
    }

    #[inline(always)]
    pub(super) fn half(&self, address: u32) -> Option<u16> {
        self.read(address).map(u16::from_le_bytes)
    }

    #[inline(always)]
    pub(super) fn byte(&self, address: u32) -> Option<u8> {
        self.read(address).map(u8::from_le_bytes)
    }

    /// Any bytes of RAM.
    pub(super) fn ram(&mut self, address: u32, length: u32) -> Option<&mut [u8]> {
        let at = address.checked_sub(RAM)? as usize;
        self.ram.get_mut(at..at.checked_add(length as usize)?)
    }

    /// Any bytes.
    pub(super) fn bytes(&self, address: u32, length: u32) -> Option<&[u8]> {
        let within = |bytes, base| {
            let at = address.wrapping_sub(base) as usize;
            <[u8]>::get(bytes, at..at.checked_add(length as usize)?)
        };
        within(&self.ram, RAM).or_else(|| within(&self.code, self.base))
    }
}
