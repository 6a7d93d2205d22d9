//! The decoders of `shared-core`: what a gauge, a host or a worn flash can feed a station, and a station a host.

use std::ops::ControlFlow;

use donelight::virtual_station::flash::{Flash, RamFlash};
use donelight_core::counts::{Counts, Resolution};
use donelight_core::gauge::{LINE_MAX, LineAssembler};
use donelight_core::journal::STATE_MAX;
use donelight_core::record::{Event, Gap, Millis, RECORD_MAX, Record, Sealed, Seq};
use donelight_core::recorder::{Button, Recorder};
use donelight_core::station::Station;
use donelight_core::wire::{self, FRAME_MAX, FrameReader, MESSAGE_MAX, RECORDS_MAX, Reply, Request};

use super::Decoder;
use super::samples::{self, SECTORS, check_sum, samples};

pub(super) const DECODERS: [Decoder; 9] = [
    Decoder {
        name: "gauge-reading",
        feed: gauge_reading,
        samples: single_lines,
        words: &[b"mm", b",", b".", b"-", b"+", b" ", b"\t", b"e5", b"0000000000", b"%", b"\xc2\xb5m"],
        short: 40_000,
        long: 3_000_000,
    },
    Decoder {
        name: "gauge-line",
        feed: gauge_line,
        samples: || samples().lines.clone(),
        words: &[b"\r\n", b"\n", b"\r", &[PAUSE], &[DEAF], &[SPOILT], b"\n\n\n", &[b'1'; LINE_MAX]],
        short: 30_000,
        long: 1_500_000,
    },
    Decoder {
        name: "frame",
        feed: frame,
        samples: || samples().frames.clone(),
        words: &[b"\0", b"\0\0", b"\xff", b"\x01", b"\xfe", &[1; 254], &[2; 255]],
        short: 25_000,
        long: 1_500_000,
    },
    Decoder {
        name: "request",
        feed: request,
        samples: || samples().requests.clone(),
        words: &[b"\xff\xff\xff\xff\x0f", b"\x80\x00", b"\xff\xff\xff\xff\xff\xff\xff\xff\xff\x01"],
        short: 25_000,
        long: 1_500_000,
    },
    Decoder {
        name: "reply",
        feed: reply,
        samples: || samples().replies.clone(),
        words: &[b"\xff\xff\xff\xff\x0f", b"\x80\x00", b"\0\0\0\0\0\0\xf8\x7f"],
        short: 20_000,
        long: 1_000_000,
    },
    Decoder {
        name: "record",
        feed: record,
        samples: || samples().records.iter().map(|bytes| bytes[1..bytes.len() - 4].to_vec()).collect(),
        words: &[b"\xff\xff\xff\xff\x0f", b"\x80\x00", b"\xff\xff\xff\xff\xff\xff\xff\xff\xff\x01"],
        short: 25_000,
        long: 1_500_000,
    },
    Decoder {
        name: "station-records",
        feed: station_records,
        samples: || samples().flashes.iter().map(|flash| records_of(flash.clone())).collect(),
        words: &[b"\xff\xff\xff\xff\x0f", b"\x06\x02\x00\x04\x00"],
        short: 1_500,
        long: 60_000,
    },
    Decoder {
        name: "station-state",
        feed: station_state,
        samples: || samples().states.clone(),
        words: &[b"\xff\xff\xff\xff\x0f", b"\x80\x00", b"\xff\xff\xff\xff\xff\xff\xff\xff\xff\x01"],
        short: 6_000,
        long: 300_000,
    },
    Decoder {
        name: "flash",
        feed: flash,
        samples: || samples().flashes.clone(),
        words: &[b"DL\x02\xff", b"DC\x02\xff", &[0xff; 256], &[0; 256]],
        short: 600,
        long: 40_000,
    },
];

fn single_lines() -> Vec<Vec<u8>> {
    let lines = samples().lines.iter().flat_map(|lines| lines.split(|byte| b"\r\n".contains(byte)));
    lines.filter(|line| !line.is_empty()).map(Vec::from).chain([b" +12,0050 mm".to_vec()]).collect()
}

/// What is read is shown so that it reads back.
fn gauge_reading(bytes: &[u8]) -> bool {
    let mut taken = false;
    for (resolution, unit) in [("0.001", "mm"), ("5", ""), ("0.000000025", "%"), ("65.535", "degrees")] {
        let resolution: Resolution = resolution.parse().expect("a resolution");
        if let Ok(counts) = resolution.read(bytes, unit) {
            let shown = resolution.show(counts).to_string();
            assert_eq!(resolution.read(shown.as_bytes(), unit), Ok(counts), "{shown}");
            taken = true;
        }
    }
    taken
}

/// These bytes also let time pass, or something happen to the line.
const PAUSE: u8 = 0x10;
const DEAF: u8 = 0x11;
const SPOILT: u8 = 0x12;

/// Lines are never longer than they may be, hold no line end, and are what was sent.
fn gauge_line(bytes: &[u8]) -> bool {
    let mut now = Millis(100);
    let mut assembler = LineAssembler::new(Millis(0));
    let mut lines = 0;
    for byte in bytes {
        match *byte {
            PAUSE => now.0 += 600,
            DEAF => assembler.was_deaf(),
            SPOILT => assembler.spoil(now),
            _ => now.0 += 1,
        }
        let _ = assembler.tick(now);
        if let Some(Ok(line)) = assembler.push(now, *byte) {
            assert!(line.len() <= LINE_MAX && !line.iter().any(|byte| b"\r\n".contains(byte)));
            assert!(bytes.windows(line.len()).any(|sent| sent == line), "a line that nobody sent");
            lines += 1;
        }
    }
    lines > 0
}

/// Whatever went before, a zero and a whole frame behind it are understood.
fn frame(bytes: &[u8]) -> bool {
    let mut reader = FrameReader::default();
    let mut whole = 0;
    for byte in bytes {
        if let Some(frame) = reader.push(*byte) {
            assert!(frame.len() <= MESSAGE_MAX);
            whole += u32::from(wire::decode::<Request>(frame).is_ok());
            whole += u32::from(wire::decode::<Reply<'_>>(frame).is_ok());
        }
    }
    let next = samples::frame(77, &Request::Records { from: Seq(9) });
    let mut found = None;
    for byte in next {
        found = reader.push(byte).map(wire::decode::<Request>).or(found);
    }
    assert_eq!(found, Some(Ok((77, Request::Records { from: Seq(9) }))));
    whole > 0
}

/// What is understood is sent again as it was meant, and a plan fits a record.
fn request(bytes: &[u8]) -> bool {
    let whole = samples::unframed(bytes);
    let Ok((number, request)) = wire::decode::<Request>(&whole) else { return false };
    let again = samples::frame(number, &request);
    let mut reader = FrameReader::default();
    let again = again.iter().find_map(|byte| reader.push(*byte).map(<[u8]>::to_vec)).expect("whole");
    assert_eq!(wire::decode::<Request>(&again), Ok((number, request.clone())));
    if let Request::Load { plan, .. } = request {
        fits_a_record(Event::Plan(plan));
    }
    true
}

pub(super) fn fits_a_record(event: Event) {
    let widest = Record { seq: Seq(u32::MAX), at: Millis(u64::MAX), event };
    widest.encode(&mut [0; RECORD_MAX]).expect("whatever is valid fits a record");
}

/// A reply that is understood is the same when sent again, to the last bit of its doubles.
fn reply(bytes: &[u8]) -> bool {
    let whole = samples::unframed(bytes);
    let Ok((number, reply)) = wire::decode::<Reply<'_>>(&whole) else { return false };
    if let Reply::Refused(reason) = reply {
        assert!(!reason.to_string().is_empty());
    }
    let mut first = [0; FRAME_MAX];
    let first = wire::encode(number, &reply, &mut first).expect("it fitted before");
    let mut reader = FrameReader::default();
    let whole = first.iter().find_map(|byte| reader.push(*byte).map(<[u8]>::to_vec)).expect("whole");
    let (_, again) = wire::decode::<Reply<'_>>(&whole).expect("just encoded");
    let mut second = [0; FRAME_MAX];
    assert_eq!(wire::encode(number, &again, &mut second).expect("it fitted before"), first);
    true
}

/// A record that is read is written and read again as it was.
fn record(bytes: &[u8]) -> bool {
    let _ = Sealed::split(bytes).map(|(sealed, _)| (sealed.seq(), sealed.record()));
    let whole = samples::sealed(bytes);
    let Ok((sealed, rest)) = Sealed::split(&whole) else { return false };
    assert_eq!((sealed.bytes(), rest), (whole.as_slice(), &[] as &[u8]));
    let Ok(record) = sealed.record() else { return false };
    assert_eq!(sealed.seq(), Some(record.seq));
    let mut space = [0; RECORD_MAX];
    let again = record.encode(&mut space).expect("it fitted before");
    assert_eq!(Record::decode(again), Ok(record));
    true
}

/// All records in a flash, one behind the other.
fn records_of(flash: Vec<u8>) -> Vec<u8> {
    let mut records = Vec::new();
    let mut recorder = samples::start(Flash::over(flash)).expect("a sample");
    let visited = recorder.journal().visit(Seq::FIRST, |_, sealed| {
        records.extend(sealed.bytes());
        ControlFlow::Continue(())
    });
    visited.expect("flash without a fault");
    records
}

/// Whatever the records say, the state that they lead to can be stored, and is the same when restored.
fn station_records(bytes: &[u8]) -> bool {
    let mut rest = bytes;
    let mut station = Station::default();
    let mut applied = 0;
    while let Some((length, behind)) = rest.split_first() {
        let length = usize::from(*length).min(behind.len());
        let whole = samples::sealed(&behind[..length]);
        rest = &behind[(length + 4).min(behind.len())..];
        if let Ok(record) = Record::decode(&whole) {
            station.apply(record.seq, &record.event);
            applied += 1;
        }
    }
    look_at(&station);
    stored(&station);
    applied > 0
}

/// All figures of a study.
fn look_at(station: &Station) {
    let _ = (station.last_reading(), station.latest_lost(), station.calls_for_lost());
    let Some(study) = station.study() else { return };
    let resolution = study.plan().resolution;
    let _ = (study.progress(), study.decision(), study.moments().standard_deviation(resolution));
    if let Some(found) = study.estimate() {
        assert!(!found.interval.low.is_some_and(f64::is_nan), "{found:?}");
        assert!(!found.interval.high.is_some_and(f64::is_nan), "{found:?}");
    }
}

fn stored(station: &Station) {
    let mut space = [0; STATE_MAX];
    let used = station.store(&mut space).expect("every state fits a checkpoint");
    assert_eq!(Station::restore(&space[..used]).as_ref(), Some(station));
}

/// A state that is restored takes what comes next, whatever it says.
fn station_state(bytes: &[u8]) -> bool {
    let Some(mut station) = Station::restore(bytes) else { return false };
    look_at(&station);
    let mut seq = station.through().map_or(Seq::FIRST, Seq::next);
    let reading = |counts| Event::Reading(Counts::new(counts).expect("within range"));
    let events = [
        reading(Counts::MAX),
        Event::TakenBack(station.last_reading().unwrap_or(Seq::FIRST)),
        reading(-Counts::MAX),
        reading(0),
        Event::TakenBack(seq),
        Event::Refused { reason: donelight_core::record::Refusal::NoPlan, times: u16::MAX },
        Event::Lost(Gap { first: Seq(5), last: Seq(u32::MAX) }),
        Event::Seen,
        Event::Boot { boot: u32::MAX },
    ];
    for event in events {
        station.apply(seq, &event);
        seq = seq.next();
    }
    look_at(&station);
    true
}

/// A station starts on whatever its flash holds, shows what can be read, and goes on. Once as it is, and once with check
/// sums made to fit, which gets further.
fn flash(bytes: &[u8]) -> bool {
    let mut image = bytes.to_vec();
    image.resize(SECTORS * 4096, 0xff);
    let raw = work(Flash::over(image.clone()));
    seal(&mut image);
    work(Flash::over(image)) | raw
}

fn work(flash: RamFlash) -> bool {
    let Some(mut recorder) = samples::start(flash) else { return false };
    let mut latest = None;
    let mut seen = 0;
    let visited = recorder.journal().visit(Seq::FIRST, |seq, sealed| {
        assert!(latest < Some(seq), "in order, each once");
        let _ = sealed.record();
        latest = Some(seq);
        seen += 1;
        ControlFlow::Continue(())
    });
    visited.expect("flash without a fault");
    let next = recorder.journal().next();
    assert!(latest < Some(next), "no number is given twice");
    for from in [0, 1, 40, next.0.saturating_sub(1), next.0] {
        let mut window = [0; RECORDS_MAX];
        let (_, used) = recorder.journal().window(Seq(from), &mut window).expect("flash without a fault");
        assert!(used <= RECORDS_MAX);
    }
    go_on(&mut recorder);
    look_at(recorder.station());
    seen > 1
}

fn go_on(recorder: &mut Recorder<RamFlash>) {
    let mut now = Millis(0);
    for round in 0..6 {
        now.0 += 250;
        recorder.tick(now);
        recorder.gauge_bytes(now, b"\r\n12.5\r\n2\r\n");
        let requests =
            [Request::Hello, Request::Status, Request::Records { from: Seq(round) }, Request::Blink];
        for byte in requests.iter().flat_map(|request| samples::frame(round, request)) {
            let _ = recorder.host_byte(now, byte);
        }
        let _ = (recorder.lamps(now), recorder.call(now));
    }
    recorder.press(now, Button::TakeBack);
    recorder.press(now, Button::Seen);
    let last = Seq(recorder.journal().next().0.saturating_sub(1));
    recorder.journal().release(last);
}

/// Makes the check sums of pages, records and checkpoints fit, wherever something looks like one.
fn seal(image: &mut [u8]) {
    for slot in image[..2 * 4096].chunks_exact_mut(512).filter(|slot| slot.starts_with(b"DC\x02\xff")) {
        let end = (38 + usize::from(u16::from_le_bytes([slot[36], slot[37]]))).min(507);
        let sum = check_sum(&slot[..end]);
        slot[end..end + 4].copy_from_slice(&sum.to_le_bytes());
    }
    for page in image[2 * 4096..].chunks_exact_mut(256).filter(|page| page.starts_with(b"DL\x02\xff")) {
        let sum = check_sum(&page[..28]);
        page[28..32].copy_from_slice(&sum.to_le_bytes());
        let mut from = 32;
        while from < 256 && !matches!(page[from], 0 | 0xff) {
            let end = from + 1 + usize::from(page[from]);
            if end + 4 > 256 {
                break;
            }
            let sum = check_sum(&page[from..end]);
            page[end..end + 4].copy_from_slice(&sum.to_le_bytes());
            from = end + 4;
        }
    }
}
