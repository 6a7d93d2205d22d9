//! Records: their bytes come back, and nothing else passes for one.

use std::vec::Vec;

use proptest::prelude::*;

use super::*;
use crate::plan::{Draft, tests as plans};

fn plan(draft: Draft) -> Plan {
    Plan::try_from(draft).unwrap()
}

pub(crate) fn any_event() -> impl Strategy<Value = Event> {
    prop_oneof![
        any::<u32>().prop_map(|boot| Event::Boot { boot }),
        Just(Event::Plan(plan(plans::draft()))),
        (-1_000_000_000_000i64..=1_000_000_000_000).prop_map(|c| Event::Reading(Counts::new(c).unwrap())),
        any::<u16>().prop_map(|times| Event::Refused { reason: Refusal::LineTooLong, times }),
        any::<u32>().prop_map(|seq| Event::TakenBack(Seq(seq))),
        Just(Event::Seen),
        any::<u64>().prop_map(|unix_ms| Event::Clock { unix_ms }),
        any::<[u32; 2]>().prop_map(|[first, last]| Event::Lost(Gap { first: Seq(first), last: Seq(last) })),
    ]
}

proptest! {
    #[test]
    fn a_record_decodes_to_what_was_encoded(seq in any::<u32>(), at in any::<u64>(), event in any_event()) {
        let record = Record { seq: Seq(seq), at: Millis(at), event };
        let mut buffer = [0; RECORD_MAX];
        let bytes = record.encode(&mut buffer).unwrap();
        prop_assert_eq!(Record::decode(bytes), Ok(record));
        let (sealed, rest) = Sealed::split(bytes).unwrap();
        prop_assert_eq!((sealed.seq(), sealed.bytes(), rest.len()), (Some(Seq(seq)), bytes, 0));
    }

    #[test]
    fn any_bytes_decode_without_a_panic(bytes in proptest::collection::vec(any::<u8>(), 0..300)) {
        if let Ok((sealed, rest)) = Sealed::split(&bytes) {
            prop_assert_eq!(sealed.bytes().len() + rest.len(), bytes.len());
        }
    }

    #[test]
    fn no_single_flipped_bit_passes_and_no_cut_does(event in any_event(), flip in any::<prop::sample::Index>()) {
        let mut buffer = [0; RECORD_MAX];
        let bytes = Record { seq: Seq(77), at: Millis(123_456), event }.encode(&mut buffer).unwrap().to_vec();
        let mut damaged = bytes.clone();
        let bit = flip.index(bytes.len() * 8);
        damaged[bit / 8] ^= 1 << (bit % 8);
        prop_assert!(Sealed::split(&damaged).is_err());
        prop_assert!(Sealed::split(&bytes[..flip.index(bytes.len())]).is_err());
    }
}

#[test]
fn the_longest_plan_fits_a_record() {
    for longest in [plans::longest(), plans::longest_early()] {
        let record = Record { seq: Seq(u32::MAX), at: Millis(u64::MAX), event: Event::Plan(plan(longest)) };
        let mut buffer = [0; RECORD_MAX];
        let used = record.encode(&mut buffer).unwrap().len();
        assert!(used <= RECORD_MAX, "{used}");
    }
}

/// These bytes lie in journals and ledgers: a change here is a change of format.
#[test]
fn the_bytes_of_a_reading_are_these_for_ever() {
    let record =
        Record { seq: Seq(300), at: Millis(70_000), event: Event::Reading(Counts::new(-2).unwrap()) };
    let mut buffer = [0; RECORD_MAX];
    let bytes = record.encode(&mut buffer).unwrap();
    let body: Vec<u8> = [&[7u8][..], &[0xac, 0x02], &[0xf0, 0xa2, 0x04], &[2], &[3]].concat();
    assert_eq!(&bytes[..bytes.len() - 4], body);
    assert_eq!(bytes[bytes.len() - 4..], CRC.checksum(&body).to_le_bytes());
}

/// The check value of CRC-32/ISCSI for the digits 1 to 9: catalogue of parametrised CRC algorithms (Cook), also
/// RFC 3720, where the polynomial is called CRC32C. From memory.
#[test]
fn the_check_sum_is_the_catalogue_s_crc_32_iscsi() {
    assert_eq!(CRC.checksum(b"123456789"), 0xe306_9283);
}

#[test]
fn a_record_of_an_unknown_kind_keeps_its_number() {
    let mut bytes = std::vec![4u8, 9, 0, 200, 1];
    bytes.extend(CRC.checksum(&bytes).to_le_bytes());
    let (sealed, _) = Sealed::split(&bytes).unwrap();
    assert_eq!(sealed.seq(), Some(Seq(9)));
    assert_eq!(sealed.record(), Err(DecodeError::Unknown));
}
