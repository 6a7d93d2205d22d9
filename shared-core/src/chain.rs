//! The chain: each record is bound to the one before it, so that none can be changed, left out or put in without every
//! digest behind it coming out otherwise.
//!
//! ```text
//! digest 0 = SHA-256("Donelight chain 1" ‖ the station's number)
//! digest i = SHA-256(digest i−1 ‖ the bytes of record i)              each cut to its first 16 bytes
//! ```
//!
//! Station and host compute it from the same bytes: the station to write it at the head of each page, the host to see
//! that what it got is what was written. It is no signature, since it has no key: who can rewrite every record can
//! compute every digest anew. A digest that was printed or sent elsewhere cannot be met again by other records, as far as
//! SHA-256 (FIPS 180-4; cut as NIST SP 800-107, section 5.1, both from memory) is understood: 128 bits.

use serde::{Deserialize, Serialize};
use sha2::{Digest as _, Sha256};

use crate::wire::StationId;

/// What all records up to one come to.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, Serialize, Deserialize)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub struct Digest(pub [u8; Self::BYTES]);

impl Digest {
    /// Bytes of a digest.
    pub const BYTES: usize = 16;

    /// Before a station's first record.
    #[must_use]
    pub fn origin(station: StationId) -> Self {
        Self::cut(Sha256::new().chain_update(b"Donelight chain 1").chain_update(station.0))
    }

    /// Behind the record with these bytes.
    #[must_use]
    pub fn then(self, record: &[u8]) -> Self {
        Self::cut(Sha256::new().chain_update(self.0).chain_update(record))
    }

    fn cut(sum: Sha256) -> Self {
        let whole: [u8; 32] = sum.finalize().into();
        // A half of 32 bytes: it is there.
        Self(whole.first_chunk().copied().unwrap_or_default())
    }
}

/// In hexadecimal.
impl core::fmt::Display for Digest {
    fn fmt(&self, f: &mut core::fmt::Formatter<'_>) -> core::fmt::Result {
        self.0.iter().try_for_each(|byte| write!(f, "{byte:02x}"))
    }
}

#[cfg(test)]
mod tests {
    use std::{string::ToString, vec::Vec};

    use proptest::prelude::*;

    use super::*;

    const STATION: StationId = StationId(*b"\xe6\x60\x44\x30\x43\x01\x02\x03");

    /// FIPS 180-4's example for "abc" (NIST, SHA256.pdf; from memory), and the two digests computed from the description
    /// above by Python's hashlib.
    #[test]
    fn digests_are_sha_256_cut_to_16_bytes() {
        let abc: [u8; 32] = Sha256::digest(b"abc").into();
        assert_eq!(abc[..8], [0xba, 0x78, 0x16, 0xbf, 0x8f, 0x01, 0xcf, 0xea]);
        let origin = Digest::origin(STATION);
        assert_eq!(origin.to_string(), "3622b4502b29c47aaed94726228431dd");
        assert_eq!(origin.then(b"a record").to_string(), "8ade6aad602306b84e54bde3bb8b38b4");
    }

    proptest! {
        #[test]
        fn whatever_is_changed_left_out_or_swapped_the_end_comes_out_otherwise(
            records in proptest::collection::vec(proptest::collection::vec(any::<u8>(), 1..30), 2..12),
            at in any::<prop::sample::Index>(),
            bit in 0usize..8,
        ) {
            let end = |records: &[Vec<u8>]| records.iter().fold(Digest::origin(STATION), |d, r| d.then(r));
            let at = at.index(records.len() - 1);
            let mut changed = records.clone();
            changed[at][0] ^= 1 << bit;
            let mut shorter = records.clone();
            shorter.remove(at);
            let mut swapped = records.clone();
            swapped.swap(at, at + 1);
            prop_assert_ne!(end(&changed), end(&records));
            prop_assert_ne!(end(&shorter), end(&records));
            prop_assert_eq!(end(&swapped) == end(&records), records[at] == records[at + 1]);
        }
    }

    #[test]
    fn two_stations_never_begin_alike() {
        assert_ne!(Digest::origin(STATION), Digest::origin(StationId([0; 8])));
    }
}
