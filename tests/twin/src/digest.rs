//! A digest that costs a Cortex-M0 few cycles. It is to tell equal from different, not to withstand anyone.

use core::fmt;

/// 64 bits of all that was put in, in order: two lanes of multiply and rotate, each with its own odd multiplier. Each step is
/// a bijection of the lane for a given word, so a single differing word always makes a difference.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Digest([u32; 2]);

const MULTIPLIERS: [u32; 2] = [0x9e37_79b1, 0x85eb_ca77];
const ROTATIONS: [u32; 2] = [13, 17];

impl Default for Digest {
    fn default() -> Self {
        Self([0x243f_6a88, 0x85a3_08d3])
    }
}

impl Digest {
    /// What it comes to.
    #[must_use]
    pub fn value(self) -> u64 {
        let [low, high] = self.0;
        u64::from(high) << 32 | u64::from(low)
    }

    /// Puts a word in.
    pub fn word(&mut self, word: u32) {
        for ((lane, multiplier), rotation) in self.0.iter_mut().zip(MULTIPLIERS).zip(ROTATIONS) {
            *lane = (*lane ^ word).wrapping_mul(multiplier).rotate_left(rotation);
        }
    }

    /// Puts a number in.
    pub fn number(&mut self, number: u64) {
        self.word(number as u32);
        self.word((number >> 32) as u32);
    }

    /// Puts a double in, with all its bits, or that there is none.
    pub fn double(&mut self, double: Option<f64>) {
        self.word(double.is_some().into());
        self.number(double.map_or(0, f64::to_bits));
    }

    /// Puts a text in.
    pub fn words(&mut self, text: fmt::Arguments<'_>) {
        // A digest takes everything.
        let _ = fmt::write(self, text);
    }

    /// Puts bytes in, and how many.
    pub fn bytes(&mut self, bytes: &[u8]) {
        self.word(bytes.len() as u32);
        let (words, rest) = bytes.as_chunks::<4>();
        for word in words {
            self.word(u32::from_le_bytes(*word));
        }
        for byte in rest {
            self.word((*byte).into());
        }
    }
}

impl fmt::Write for Digest {
    fn write_str(&mut self, text: &str) -> fmt::Result {
        self.bytes(text.as_bytes());
        Ok(())
    }
}
