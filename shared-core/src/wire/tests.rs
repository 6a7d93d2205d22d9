//! Frames: messages come back, damage never passes, and the next good frame always does.

use std::vec::Vec;

use proptest::prelude::*;

use super::*;
use crate::{plan::tests as plans, quantity::Count, stopping::Standing};

fn frame(number: u32, request: &Request) -> Vec<u8> {
    encode(number, request, &mut [0; FRAME_MAX]).unwrap().to_vec()
}

fn received(reader: &mut FrameReader, bytes: &[u8]) -> Vec<(u32, Request)> {
    bytes.iter().filter_map(|b| reader.push(*b).and_then(|f| decode(f).ok())).collect()
}

fn any_request() -> impl Strategy<Value = Request> {
    prop_oneof![
        Just(Request::Hello),
        Just(Request::Status),
        any::<bool>()
            .prop_map(|replace| Request::Load { plan: Plan::try_from(plans::draft()).unwrap(), replace }),
        any::<u32>().prop_map(|seq| Request::Records { from: Seq(seq) }),
        any::<u32>().prop_map(|seq| Request::Received { through: Seq(seq) }),
        any::<u64>().prop_map(|unix_ms| Request::SetClock { unix_ms }),
        Just(Request::Blink),
        any::<(u32, u16)>().prop_map(|(seq, bytes)| Request::RecordsWithin { from: Seq(seq), bytes }),
    ]
}

/// The check values of Cheshire and Baker (1999), Consistent overhead byte stuffing, IEEE/ACM Transactions on Networking
/// 7:159–172, as commonly tabled; from memory.
#[test]
fn cobs_gives_the_published_examples() {
    let stuffed = |data: &[u8]| {
        let mut out = [0; FRAME_MAX];
        out[6..6 + data.len()].copy_from_slice(data);
        let whole = cobs_in_place(&mut out, 6, data.len()).unwrap();
        whole[1..whole.len() - 1].to_vec()
    };
    assert_eq!(stuffed(&[0]), [1, 1]);
    assert_eq!(stuffed(&[0, 0]), [1, 1, 1]);
    assert_eq!(stuffed(&[0x11, 0x22, 0, 0x33]), [3, 0x11, 0x22, 2, 0x33]);
    assert_eq!(stuffed(&[0x11, 0, 0, 0]), [2, 0x11, 1, 1, 1]);
    let run: Vec<u8> = (1..=254).collect();
    assert_eq!(stuffed(&run)[..2], [0xff, 1]);
}

proptest! {
    #[test]
    fn any_bytes_survive_stuffing(data in proptest::collection::vec(prop_oneof![Just(0u8), any::<u8>()], 1..=MESSAGE_MAX)) {
        let mut out = [0; FRAME_MAX];
        out[6..6 + data.len()].copy_from_slice(&data);
        let frame = cobs_in_place(&mut out, 6, data.len()).unwrap().to_vec();
        prop_assert!(frame[1..frame.len() - 1].iter().all(|b| *b != 0));
        let mut reader = FrameReader::default();
        let got: Vec<Vec<u8>> = frame.iter().filter_map(|b| reader.push(*b).map(<[u8]>::to_vec)).collect();
        prop_assert_eq!(got, [data]);
    }

    #[test]
    fn runs_without_a_zero_survive_stuffing(length in 1usize..=MESSAGE_MAX) {
        let mut out = [0; FRAME_MAX];
        out[6..6 + length].fill(7);
        let frame = cobs_in_place(&mut out, 6, length).unwrap().to_vec();
        let mut reader = FrameReader::default();
        let got: Vec<usize> = frame.iter().filter_map(|b| reader.push(*b).map(<[u8]>::len)).collect();
        prop_assert_eq!(got, [length]);
    }

    #[test]
    fn requests_come_back_with_their_number(number in any::<u32>(), request in any_request()) {
        let got = received(&mut FrameReader::default(), &frame(number, &request));
        prop_assert_eq!(got, [(number, request)]);
    }

    #[test]
    fn any_bytes_are_taken_without_a_panic_and_the_next_frame_is_recovered(
        noise in proptest::collection::vec(any::<u8>(), 0..3000),
        request in any_request(),
    ) {
        let mut reader = FrameReader::default();
        received(&mut reader, &noise);
        prop_assert_eq!(received(&mut reader, &frame(5, &request)), [(5, request)]);
    }

    #[test]
    fn a_damaged_frame_is_never_taken_for_another_message(
        request in any_request(),
        flips in proptest::collection::vec(any::<prop::sample::Index>(), 1..4),
        cut in any::<prop::sample::Index>(),
    ) {
        let whole = frame(9, &request);
        let mut damaged = whole.clone();
        for flip in flips {
            let bit = flip.index(whole.len() * 8);
            damaged[bit / 8] ^= 1 << (bit % 8);
        }
        for bytes in [&damaged[..], &whole[..cut.index(whole.len())]] {
            for got in received(&mut FrameReader::default(), bytes) {
                // Flips may cancel out, or hit only the zeros around the frame.
                prop_assert_eq!(got, (9, request.clone()));
            }
        }
    }
}

#[test]
fn a_run_longer_than_any_message_is_dropped_whole_and_the_next_frame_taken() {
    let mut reader = FrameReader::default();
    let run = std::vec![0xff; 10 * FRAME_MAX];
    assert_eq!(received(&mut reader, &run), []);
    assert_eq!(received(&mut reader, &frame(1, &Request::Blink)), [(1, Request::Blink)]);
}

#[test]
fn another_version_is_told_apart_from_damage() {
    let mut out = [0; FRAME_MAX];
    let body = [VERSION + 1, 0x78, 0x56, 0x34, 0x12, 0];
    out[6..12].copy_from_slice(&body);
    out[12..16].copy_from_slice(&CRC.checksum(&body).to_le_bytes());
    let bytes = cobs_in_place(&mut out, 6, 10).unwrap().to_vec();
    let mut reader = FrameReader::default();
    let outcome = bytes.iter().find_map(|b| reader.push(*b).map(decode::<Request>));
    assert_eq!(outcome, Some(Err(FrameError::Version { theirs: VERSION + 1, number: 0x1234_5678 })));
}

#[test]
fn bytes_behind_the_message_make_it_unknown() {
    let mut out = [0; FRAME_MAX];
    let bytes = encode(3, &(&Request::Hello, 1u8), &mut out).unwrap().to_vec();
    let mut reader = FrameReader::default();
    let outcome = bytes.iter().find_map(|b| reader.push(*b).map(decode::<Request>));
    assert_eq!(outcome, Some(Err(FrameError::Unknown { number: 3 })));
}

#[test]
fn the_longest_reply_and_the_longest_request_fit_a_frame() {
    let number = f64::MIN_POSITIVE;
    let status = Status {
        study: Some(StudyStatus {
            began: Seq(u32::MAX),
            name: Text::new(&"n".repeat(40)).unwrap(),
            progress: Progress {
                standing: Standing::Spent,
                n: Count::MAX,
                planned: Count::MAX,
                limit: Count::MAX,
                surplus: u32::MAX,
                taken_back: u32::MAX,
            },
            mean: Some(number),
            standard_deviation: Some(number),
            estimate: Some(number),
            low: Some(number),
            high: Some(number),
        }),
        held: Some(Held::GaugeStuck),
        boots: u32::MAX,
        up: Millis(u64::MAX),
        room: u32::MAX,
        unconfirmed: u32::MAX,
        refused: u32::MAX,
        last_refusal: Some(Refusal::NoPlan),
        journal: JournalHealth::Faulty,
        gaps: u32::MAX,
        lost: Some(Gap { first: Seq(u32::MAX), last: Seq(u32::MAX) }),
    };
    let records = |records| Reply::Records { before: Digest([0xff; Digest::BYTES]), records };
    let plan = Plan::try_from(plans::longest()).unwrap();
    let mut out = [0; FRAME_MAX];
    assert!(encode(u32::MAX, &Reply::Status(status), &mut out).is_ok());
    assert!(encode(u32::MAX, &records(&[0xff; RECORDS_MAX]), &mut out).is_ok());
    assert!(encode(u32::MAX, &Request::Load { plan, replace: true }, &mut out).is_ok());
    assert!(encode(u32::MAX, &records(&[0xff; MESSAGE_MAX]), &mut out).is_err());
}
