//! Valid bytes that mutations start from: what a station takes and gives through random sequences.

use std::ops::ControlFlow;
use std::sync::OnceLock;

use donelight::virtual_station::flash::RamFlash;
use donelight_core::journal::STATE_MAX;
use donelight_core::record::{Millis, Seq};
use donelight_core::recorder::{Button, Recorder};
use donelight_core::text::Text;
use donelight_core::wire::{self, FRAME_MAX, FrameReader, StationId};
use donelight_twin::Step;

use crate::sequences::{Happening, Sequence};

pub(super) const STATION: StationId = StationId(*b"fuzz\0\x01\x02\x03");
/// Two of checkpoints and four of pages.
pub(super) const SECTORS: usize = 6;
const SEQUENCES: u64 = 48;

/// See the module.
#[derive(Debug, Default)]
pub(super) struct Samples {
    pub(super) lines: Vec<Vec<u8>>,
    /// Whole frames, from and to the host.
    pub(super) frames: Vec<Vec<u8>>,
    /// Messages without version, number and check sum.
    pub(super) requests: Vec<Vec<u8>>,
    pub(super) replies: Vec<Vec<u8>>,
    /// Each with its length and check sum.
    pub(super) records: Vec<Vec<u8>>,
    pub(super) states: Vec<Vec<u8>>,
    pub(super) flashes: Vec<Vec<u8>>,
}

/// What many sequences come to; made once.
pub(super) fn samples() -> &'static Samples {
    static SAMPLES: OnceLock<Samples> = OnceLock::new();
    SAMPLES.get_or_init(|| {
        let mut samples = Samples::default();
        (0..SEQUENCES).for_each(|number| samples.play(number));
        samples
    })
}

/// A station on this flash.
pub(super) fn start(flash: RamFlash) -> Option<Recorder<RamFlash>> {
    Recorder::open(flash, STATION, Text::new("fuzz").unwrap_or_default(), Millis(0)).ok()
}

impl Samples {
    fn play(&mut self, number: u64) {
        let mut recorder = start(RamFlash::blank(SECTORS)).expect("a blank flash suits");
        let mut now = Millis(0);
        Sequence::new(number).for_each_step(|happening, step| match (happening, step) {
            (_, Step::Gauge(bytes)) => {
                self.lines.push(bytes.to_vec());
                recorder.gauge_bytes(now, bytes);
            }
            (Happening::Asks(_), Step::Host(frame)) => self.ask(&mut recorder, now, frame),
            (_, Step::TakeBack) => recorder.press(now, Button::TakeBack),
            (_, Step::Seen) => recorder.press(now, Button::Seen),
            (_, Step::Pass(milliseconds)) => {
                now.0 += u64::from(*milliseconds);
                recorder.tick(now);
            }
            (_, Step::Reboot) => {
                let flash = recorder.journal().flash().clone();
                recorder = start(flash).expect("its own flash");
                now = Millis(0);
            }
            _ => {}
        });
        let visited = recorder.journal().visit(Seq::FIRST, |_, sealed| {
            self.records.push(sealed.bytes().to_vec());
            ControlFlow::Continue(())
        });
        visited.expect("flash without a fault");
        let mut state = vec![0; STATE_MAX];
        let used = recorder.station().store(&mut state).expect("it fits");
        state.truncate(used);
        self.states.push(state);
        self.flashes.push(recorder.journal().flash().medium().clone());
    }

    fn ask(&mut self, recorder: &mut Recorder<RamFlash>, now: Millis, frame: &[u8]) {
        self.frames.push(frame.to_vec());
        self.requests.push(message(frame));
        for byte in frame {
            if let Some(answer) = recorder.host_byte(now, *byte) {
                self.frames.push(answer.to_vec());
                self.replies.push(message(answer));
            }
        }
    }
}

/// What stands in a frame between its number and its check sum.
fn message(frame: &[u8]) -> Vec<u8> {
    let mut reader = FrameReader::default();
    let whole = frame.iter().find_map(|byte| reader.push(*byte).map(<[u8]>::to_vec)).expect("a whole frame");
    whole[HEAD..whole.len() - 4].to_vec()
}

/// Version and number.
const HEAD: usize = 5;

/// What [`FrameReader`] gives of a frame with this message.
pub(super) fn unframed(message: &[u8]) -> Vec<u8> {
    let room = wire::MESSAGE_MAX - HEAD - 4;
    let mut bytes = vec![wire::VERSION, 7, 0, 0, 0];
    bytes.extend(&message[..message.len().min(room)]);
    let sum = check_sum(&bytes);
    bytes.extend(sum.to_le_bytes());
    bytes
}

/// A record with this body.
pub(super) fn sealed(body: &[u8]) -> Vec<u8> {
    let body = &body[..body.len().min(219)];
    let mut bytes = vec![body.len() as u8];
    bytes.extend(body);
    let sum = check_sum(&bytes);
    bytes.extend(sum.to_le_bytes());
    bytes
}

pub(super) fn check_sum(bytes: &[u8]) -> u32 {
    crc::Crc::<u32>::new(&crc::CRC_32_ISCSI).checksum(bytes)
}

/// This message in a frame.
pub(super) fn frame(number: u32, request: &wire::Request) -> Vec<u8> {
    wire::encode(number, request, &mut [0; FRAME_MAX]).expect("it fits").to_vec()
}
