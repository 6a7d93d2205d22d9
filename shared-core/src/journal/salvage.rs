//! What stands at the journal's end after a boot, and can be read or not: a write that the power cut off, or records that
//! were whole once.
//!
//! It matters which, since the number of a record that was never acknowledged is given again and that of a damaged one
//! never is. A write that was cut off has programmed some of its zeros, and nothing else: where a bit reads 0 that the
//! record or the header has as 1, or where more is programmed than one record takes, something else was there.

use super::page::{HEADER, Header, PAGE, RECORDS_IN_PAGE, is_blank};
use crate::record::{FRAMING, Gap, RECORD_MAX, RECORD_MIN, Sealed, Seq};

/// What a boot found at the journal's end.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub struct Salvage {
    /// A write was cut off; its record was never acknowledged.
    pub torn: bool,
    /// Numbers of records that were there and cannot be read any more, as many as there can have been. None of them is
    /// given again.
    pub skipped: Option<Gap>,
}

/// What stands behind the last whole record of the newest page.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Tail {
    Blank,
    /// A write that was cut off.
    Torn,
    /// A record in all but one bit, which is programmed in the page now. Either its write was all but complete, or it was
    /// acknowledged and has lost that bit since: whole again, it is right in both cases.
    Mended {
        bytes: usize,
    },
    /// So many records at most.
    Damaged {
        records: u32,
    },
}

/// Judges the bytes of `page` from `at` on, where record `seq` would stand.
pub(super) fn tail(page: &mut [u8; PAGE], at: usize, seq: Seq) -> Tail {
    let Some(rest) = page.get_mut(at..) else { return Tail::Blank };
    if is_blank(rest) {
        return Tail::Blank;
    }
    if let Some(bit) = mending_bit(rest, seq, true) {
        flip(rest, bit);
        if let Ok((sealed, _)) = Sealed::split(rest) {
            return Tail::Mended { bytes: sealed.bytes().len() };
        }
    }
    if torn_record(rest, seq) && mending_bit(rest, seq, false).is_none() {
        return Tail::Torn;
    }
    Tail::Damaged { records: room_for(rest) }
}

/// The most records that can stand in what is programmed of these bytes.
fn room_for(rest: &[u8]) -> u32 {
    let programmed = rest.iter().rposition(|byte| *byte != 0xff).map_or(0, |last| last + 1);
    let records = programmed.div_ceil(RECORD_MIN).min(rest.len() / RECORD_MIN);
    u32::try_from(records).unwrap_or(RECORDS_IN_PAGE)
}

/// Whether `rest` can be what is left of writing record `seq`.
fn torn_record(rest: &[u8], seq: Seq) -> bool {
    let Some((length, body)) = rest.split_first() else { return false };
    let mut number = [0; 5];
    let Ok(number) = postcard::to_slice(&seq, &mut number) else { return false };
    let longest = (usize::from(*length) + FRAMING).min(RECORD_MAX);
    *length != 0 && could_become(body, number) && rest.get(longest..).is_none_or(is_blank)
}

/// Whether a page whose header cannot be read can be what is left of writing it for the first time, with this header.
pub(super) fn torn_page(page: &[u8; PAGE], header: Header) -> bool {
    let Some((head, body)) = page.split_first_chunk::<HEADER>() else { return false };
    let whole_record = Sealed::split(body).is_ok();
    could_become(head, &header.encode())
        && !whole_record
        && (is_blank(body) || torn_record(body, header.first))
}

/// Whether a page is one with this header and a whole record, but for bits of the header that read 1 instead of 0. Either
/// its first write was all but complete, or it has lost those bits since: programmed once more, it is right in both cases.
pub(super) fn mendable_page(page: &[u8; PAGE], header: Header) -> bool {
    let Some((head, body)) = page.split_first_chunk::<HEADER>() else { return false };
    could_become(head, &header.encode())
        && Sealed::split(body).is_ok_and(|(sealed, _)| sealed.seq() == Some(header.first))
}

/// Whether programming more bits of `seen` can make it begin with `meant`.
fn could_become(seen: &[u8], meant: &[u8]) -> bool {
    seen.len() >= meant.len() && seen.iter().zip(meant).all(|(seen, meant)| seen & meant == *meant)
}

/// The one bit that, turned, makes record `seq` of what begins `rest`; only bits that read `set` are tried.
fn mending_bit(rest: &mut [u8], seq: Seq, set: bool) -> Option<usize> {
    let length = usize::from(*rest.first()?);
    // Where the length itself is wrong, one of its own bits mends it.
    let bits = 8 * (length + FRAMING).min(RECORD_MAX).min(rest.len());
    (0..bits).find(|bit| {
        let reads_set = rest.get(bit / 8).is_some_and(|byte| byte & (1 << (bit % 8)) != 0);
        if reads_set != set {
            return false;
        }
        flip(rest, *bit);
        let whole = Sealed::split(rest).is_ok_and(|(sealed, _)| sealed.seq() == Some(seq));
        flip(rest, *bit);
        whole
    })
}

fn flip(bytes: &mut [u8], bit: usize) {
    if let Some(byte) = bytes.get_mut(bit / 8) {
        *byte ^= 1 << (bit % 8);
    }
}

#[cfg(test)]
mod tests {
    use std::vec::Vec;

    use proptest::prelude::*;

    use super::*;
    use crate::chain::Digest;
    use crate::counts::Counts;
    use crate::journal::page::PageNumber;
    use crate::record::{Event, Millis, Record};

    const SEQ: Seq = Seq(20_000);

    fn record(counts: i64) -> Vec<u8> {
        let event = Event::Reading(Counts::new(counts).unwrap());
        let mut buffer = [0; RECORD_MAX];
        Record { seq: SEQ, at: Millis(9_000_000), event }.encode(&mut buffer).unwrap().to_vec()
    }

    fn header() -> Header {
        Header { number: PageNumber(77), first: SEQ, digest: Digest([0x5a; 16]) }
    }

    /// A page whose tail from 100 on is `bytes`.
    fn page(bytes: &[u8]) -> [u8; PAGE] {
        let mut page = [0xff; PAGE];
        page[100..100 + bytes.len()].copy_from_slice(bytes);
        page
    }

    proptest! {
        /// Some of the zeros programmed, in any order: all but the last one at most are.
        #[test]
        fn a_write_that_was_cut_off_is_torn_or_mended_and_never_damage(
            counts in -99_999i64..99_999,
            left in proptest::collection::vec(any::<u8>(), RECORD_MAX),
            from in 0usize..18,
        ) {
            let whole = record(counts);
            let mut cut = whole.clone();
            for (byte, left) in cut.iter_mut().zip(&left).skip(from) {
                *byte |= left;
            }
            prop_assume!(cut != whole && !is_blank(&cut));
            let mut page = page(&cut);
            match tail(&mut page, 100, SEQ) {
                Tail::Torn => {}
                Tail::Mended { bytes } => prop_assert_eq!(&page[100..100 + bytes], &whole[..]),
                other => prop_assert!(false, "{other:?}"),
            }
        }

        #[test]
        fn a_record_with_one_turned_bit_is_never_taken_for_one_that_was_cut_off(
            counts in -99_999i64..99_999,
            bit in any::<prop::sample::Index>(),
        ) {
            let whole = record(counts);
            let mut damaged = whole.clone();
            let bit = bit.index(8 * whole.len());
            flip(&mut damaged, bit);
            let mut page = page(&damaged);
            match tail(&mut page, 100, SEQ) {
                Tail::Mended { bytes } => prop_assert_eq!(&page[100..100 + bytes], &whole[..]),
                Tail::Damaged { records } => prop_assert!(records >= 1),
                other => prop_assert!(false, "{other:?}"),
            }
        }

        #[test]
        fn a_first_write_that_was_cut_off_is_told_from_a_used_page(
            counts in -99_999i64..99_999,
            left in proptest::collection::vec(any::<u8>(), PAGE),
            from in 0usize..HEADER,
        ) {
            let mut whole = header().encode().to_vec();
            whole.extend(record(counts));
            let mut page = [0xff; PAGE];
            for (at, byte) in whole.iter().enumerate() {
                page[at] = if at < from { *byte } else { byte | left[at] };
            }
            prop_assume!(Header::decode(page.first_chunk().unwrap()).is_none());
            prop_assume!(Sealed::split(&page[HEADER..]).is_err());
            prop_assert!(torn_page(&page, header()));
        }
    }

    #[test]
    fn pages_of_zeros_of_noise_or_with_another_header_were_used() {
        assert!(!torn_page(&[0; PAGE], header()));
        let noise: Vec<u8> = (0..PAGE).map(|i| (i * 101 % 251) as u8).collect();
        assert!(!torn_page(noise.as_slice().try_into().unwrap(), header()));
        let other = Header { number: PageNumber(78), ..header() };
        let mut page = [0xff; PAGE];
        page[..HEADER - 4].copy_from_slice(&other.encode()[..HEADER - 4]);
        assert!(!torn_page(&page, header()));
    }

    #[test]
    fn several_records_that_cannot_be_read_are_as_many_as_there_is_room_for() {
        let mut two = record(5);
        two.extend(record(6));
        two.iter_mut().for_each(|byte| *byte ^= 0x3c);
        let Tail::Damaged { records } = tail(&mut page(&two), 100, SEQ) else { panic!("not damaged") };
        assert!((2..=5).contains(&records), "{records}");
        assert_eq!(tail(&mut page(&[0; 156]), 100, SEQ), Tail::Damaged { records: 19 });
        assert_eq!(tail(&mut page(&[]), 100, SEQ), Tail::Blank);
    }
}
