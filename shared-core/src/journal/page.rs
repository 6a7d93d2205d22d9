//! A page: what is programmed and lost together.
//!
//! ```text
//! | "DL" | format: 2 | 0xFF | page number: u32 | first seq: u32 | digest before the first record: 16 bytes
//! | CRC-32 of all before: u32 | records … | blank (0xFF) |
//! ```
//!
//! Page numbers only grow; page `p` stands at place `p mod places` of the ring, so a page proves its own place. A page's
//! records end where the next page's first seq says: what stands behind that was never acknowledged.

use crate::chain::Digest;
use crate::record::{CRC, RECORD_MAX, RECORD_MIN, Sealed, Seq};

/// Bytes in a page, and the most that one program call touches.
pub(super) const PAGE: usize = 256;
/// The same as a flash address.
pub(super) const PAGE_U32: u32 = 256;
/// Bytes of a header.
pub(super) const HEADER: usize = 32;
/// The most records that a page can hold.
#[allow(clippy::cast_possible_truncation, reason = "fewer than a page has bytes")]
pub(super) const RECORDS_IN_PAGE: u32 = ((PAGE - HEADER) / RECORD_MIN) as u32;

const FORMAT: u8 = 2;

/// The number of a page, growing for a station's whole life.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub(super) struct PageNumber(pub(super) u32);

impl PageNumber {
    pub(super) fn plus(self, pages: u32) -> Self {
        Self(self.0.saturating_add(pages))
    }
}

#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) struct Header {
    pub(super) number: PageNumber,
    pub(super) first: Seq,
    /// Of all records before `first`.
    pub(super) digest: Digest,
}

impl Header {
    pub(super) fn encode(self) -> [u8; HEADER] {
        let mut bytes = [0; HEADER];
        let parts: [&[u8]; 4] = [
            &[b'D', b'L', FORMAT, 0xff],
            &self.number.0.to_le_bytes(),
            &self.first.0.to_le_bytes(),
            &self.digest.0,
        ];
        let mut space = bytes.iter_mut();
        for (place, byte) in space.by_ref().zip(parts.into_iter().flatten()) {
            *place = *byte;
        }
        if let Some((sealed, sum)) = bytes.split_last_chunk_mut::<4>() {
            *sum = CRC.checksum(sealed).to_le_bytes();
        }
        bytes
    }

    /// `None` for anything that is not a whole header.
    pub(super) fn decode(bytes: &[u8; HEADER]) -> Option<Self> {
        // The cheap test first: most places of a young journal are blank.
        let rest = bytes.strip_prefix(&[b'D', b'L', FORMAT])?;
        let rest = rest.get(1..)?;
        let (number, rest) = rest.split_first_chunk::<4>()?;
        let (first, rest) = rest.split_first_chunk::<4>()?;
        let header = Self {
            number: PageNumber(u32::from_le_bytes(*number)),
            first: Seq(u32::from_le_bytes(*first)),
            digest: Digest(*rest.first_chunk()?),
        };
        (header.encode() == *bytes).then_some(header)
    }
}

/// The format of a page that another version of this journal wrote.
pub(super) fn other_format(bytes: &[u8; HEADER]) -> Option<u8> {
    match bytes {
        [b'D', b'L', format, 0xff, ..] if !matches!(*format, FORMAT | 0 | 0xff) => Some(*format),
        _ => None,
    }
}

/// The records of a page in order, from the header's end to the first byte that is none.
#[derive(Clone, Debug)]
pub(super) struct Records<'a> {
    rest: &'a [u8],
    expected: Seq,
    end: Seq,
}

impl<'a> Records<'a> {
    /// `end` is the first seq that is not this page's any more.
    pub(super) fn of(page: &'a [u8; PAGE], header: Header, end: Seq) -> Self {
        Self { rest: page.get(HEADER..).unwrap_or_default(), expected: header.first, end }
    }

    /// Bytes behind the records given so far.
    pub(super) fn rest(&self) -> &'a [u8] {
        self.rest
    }
}

impl<'a> Iterator for Records<'a> {
    type Item = (Seq, Sealed<'a>);

    fn next(&mut self) -> Option<Self::Item> {
        if self.expected >= self.end {
            return None;
        }
        let (sealed, rest) = Sealed::split(self.rest).ok()?;
        // A record of another number is what an earlier life of this page left: nothing behind it counts either.
        if sealed.seq()? != self.expected {
            return None;
        }
        let seq = self.expected;
        self.rest = rest;
        self.expected = seq.next();
        Some((seq, sealed))
    }
}

/// A record could never be written if it did not fit an empty page.
const _: () = assert!(HEADER + RECORD_MAX <= PAGE);

/// Whether a record's bytes fit behind `offset`.
pub(super) fn fits(offset: usize, record: &[u8]) -> bool {
    offset + record.len() <= PAGE
}

pub(super) fn is_blank(bytes: &[u8]) -> bool {
    bytes.iter().all(|byte| *byte == 0xff)
}
