//! A page: what is programmed and lost together.
//!
//! ```text
//! | "DL" | format: 1 | 0xFF | page number: u32 | first seq: u32 | CRC-32 of these 12: u32 | records … | blank (0xFF) |
//! ```
//!
//! Page numbers only grow; page `p` stands at place `p mod places` of the ring, so a page proves its own place. A page's
//! records end where the next page's first seq says: what stands behind that was never acknowledged.

use crate::record::{CRC, Sealed, Seq};

/// Bytes in a page, and the most that one program call touches.
pub(super) const PAGE: usize = 256;
/// The same as a flash address.
pub(super) const PAGE_U32: u32 = 256;
/// Bytes of a header.
pub(super) const HEADER: usize = 16;

const MAGIC: [u8; 3] = *b"DL\x01";

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
}

impl Header {
    pub(super) fn encode(self) -> [u8; HEADER] {
        let [n0, n1, n2, n3] = self.number.0.to_le_bytes();
        let [s0, s1, s2, s3] = self.first.0.to_le_bytes();
        let [m0, m1, m2] = MAGIC;
        let head = [m0, m1, m2, 0xff, n0, n1, n2, n3, s0, s1, s2, s3];
        let [c0, c1, c2, c3] = CRC.checksum(&head).to_le_bytes();
        [m0, m1, m2, 0xff, n0, n1, n2, n3, s0, s1, s2, s3, c0, c1, c2, c3]
    }

    /// `None` for anything that is not a whole header.
    pub(super) fn decode(bytes: &[u8; HEADER]) -> Option<Self> {
        // The cheap test first: most places of a young journal are blank.
        let [m0, m1, m2, _, n0, n1, n2, n3, s0, s1, s2, s3, ..] = *bytes;
        if [m0, m1, m2] != MAGIC {
            return None;
        }
        let header = Self {
            number: PageNumber(u32::from_le_bytes([n0, n1, n2, n3])),
            first: Seq(u32::from_le_bytes([s0, s1, s2, s3])),
        };
        (header.encode() == *bytes).then_some(header)
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
const _: () = assert!(HEADER + crate::record::RECORD_MAX <= PAGE);

/// Whether a record's bytes fit behind `offset`.
pub(super) fn fits(offset: usize, record: &[u8]) -> bool {
    offset + record.len() <= PAGE
}
