//! The link between host and station: the host asks, the station answers, one request at a time.
//!
//! ```text
//! frame = 00 | COBS( version: 1 byte | number: u32 LE | postcard message | CRC-32/ISCSI of all before: u32 LE ) | 00
//! ```
//!
//! The answer carries the request's number. Its upper half is a token that the host draws for each session, so that two
//! hosts that share a line tell their answers apart; the lower half counts. A frame that fails any check is dropped whole; whoever waits for it asks
//! again, for less at once if it can, and asking again never changes anything twice. After an error the next zero byte begins afresh. Messages only
//! ever grow at their end: postcard numbers them by position, and an unknown one gets [`Reply::Refused`].

use serde::{Deserialize, Serialize};

use crate::{
    chain::Digest,
    plan::{Fault, Plan},
    record::{CRC, Gap, Millis, Refusal, Seq},
    station::{Held, Progress},
    text::Text,
};

/// The version of this protocol.
pub const VERSION: u8 = 2;

/// The longest message with its version, number and check sum.
pub const MESSAGE_MAX: usize = 1024;

/// The longest frame: COBS adds a byte in 254 and one, and a zero stands at either end.
pub const FRAME_MAX: usize = MESSAGE_MAX + MESSAGE_MAX / 254 + 1 + 2;

/// Version and number.
const HEAD: usize = 1 + 4;

/// Most bytes of records in one reply: what is left of the message beside its other parts.
pub const RECORDS_MAX: usize = MESSAGE_MAX - 32;

/// A station's unchangeable number: the flash's unique id.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub struct StationId(pub [u8; 8]);

impl core::fmt::Display for StationId {
    fn fmt(&self, f: &mut core::fmt::Formatter<'_>) -> core::fmt::Result {
        self.0.iter().try_for_each(|byte| write!(f, "{byte:02x}"))
    }
}

/// What the host asks.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[allow(clippy::large_enum_variant, reason = "no heap to box a plan on; requests live one at a time")]
#[non_exhaustive]
pub enum Request {
    /// Who are you?
    Hello,
    /// How does the study stand?
    Status,
    /// Begin a study by this plan.
    Load {
        /// The plan.
        plan: Plan,
        /// Give up a study that is not done.
        replace: bool,
    },
    /// The records from this number on, as many as fit.
    Records {
        /// The first one wanted.
        from: Seq,
    },
    /// All records up to this one are committed in the ledger; the station may release them.
    Received {
        /// The last committed one.
        through: Seq,
    },
    /// The time is this, in milliseconds since 1970-01-01 00:00 UTC.
    SetClock {
        /// Now.
        unix_ms: u64,
    },
    /// Show which station you are: both lamps in turn for some seconds.
    Blink,
    /// The records from this number on, in so many bytes at most, yet one record at least: where longer frames do not
    /// arrive whole, shorter ones may.
    RecordsWithin {
        /// The first one wanted.
        from: Seq,
        /// Bytes of records.
        bytes: u16,
    },
}

/// What the station answers.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[allow(clippy::large_enum_variant, reason = "no heap to box a status on; replies live one at a time")]
#[non_exhaustive]
pub enum Reply<'a> {
    /// To `Hello`.
    Hello(Hello),
    /// To `Status`.
    Status(Status),
    /// To `Load`, `SetClock`: recorded under this number.
    Recorded(Seq),
    /// To `Records`, `RecordsWithin`: records one behind the other, without a gap. If the first one's number is not the one asked for,
    /// those between are not to be had; if there are none, none from that number on are.
    Records {
        /// The chain's digest before the first of them.
        before: Digest,
        /// Whole records, in order.
        #[serde(borrow)]
        records: &'a [u8],
    },
    /// To `Received`, `Blink`.
    Done,
    /// Not done, for this reason.
    Refused(Reason),
}

/// Who the station is.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Hello {
    /// Its unchangeable number.
    pub station: StationId,
    /// Name and version of what runs on it.
    pub firmware: Text<32>,
    /// The number that the next record will get.
    pub next: Seq,
    /// The first record that is still in the journal, or `next`.
    pub oldest: Seq,
    /// The chain's digest behind the last record.
    pub head: Digest,
}

/// How the station and its study stand.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Status {
    /// The study, if a plan was ever loaded.
    pub study: Option<StudyStatus>,
    /// What the operator must look at.
    pub held: Option<Held>,
    /// How often the station has started.
    pub boots: u32,
    /// Since the last start.
    pub up: Millis,
    /// So many readings at least fit into the journal before it must be pulled, if none is wider than the widest so far
    /// (six digits at least).
    pub room: u32,
    /// Records that the host has not yet confirmed.
    pub unconfirmed: u32,
    /// Lines, presses and bytes refused since the first start.
    pub refused: u32,
    /// The latest refusal since the last start.
    pub last_refusal: Option<Refusal>,
    /// What is wrong with the journal, if anything.
    pub journal: JournalHealth,
    /// How often records were found that can no longer be read.
    pub gaps: u32,
    /// The latest of these.
    pub lost: Option<Gap>,
}

/// Whether the journal can take what comes.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
#[non_exhaustive]
pub enum JournalHealth {
    /// It can.
    Well,
    /// It will soon be full.
    NearlyFull,
    /// It is full and refuses readings.
    Full,
    /// The flash does not take what is written.
    Faulty,
}

/// The study in figures; doubles travel bit for bit.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct StudyStatus {
    /// The record that began it.
    pub began: Seq,
    /// Its name.
    pub name: Text<40>,
    /// Counts and standing.
    pub progress: Progress,
    /// Mean, in the plan's unit.
    pub mean: Option<f64>,
    /// Standard deviation, in the plan's unit.
    pub standard_deviation: Option<f64>,
    /// The index's estimate.
    pub estimate: Option<f64>,
    /// The interval's lower end.
    pub low: Option<f64>,
    /// The interval's upper end.
    pub high: Option<f64>,
}

/// Why a request is refused.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
#[non_exhaustive]
pub enum Reason {
    /// The request is of a kind, or holds a value, that this station does not know.
    UnknownRequest,
    /// The host speaks another version of the protocol.
    Version {
        /// The station's.
        station: u8,
    },
    /// A study is under way and is not done.
    StudyUnfinished,
    /// The plan has this fault.
    Plan(Fault),
    /// The record could not be kept.
    NotRecorded(Refusal),
    /// The number lies beyond the journal's last record.
    BeyondJournal,
}

impl core::fmt::Display for Reason {
    fn fmt(&self, f: &mut core::fmt::Formatter<'_>) -> core::fmt::Result {
        match self {
            Self::UnknownRequest => f.write_str(
                "the station does not know this request: update the station or use an older command",
            ),
            Self::Version { station } => {
                write!(
                    f,
                    "the station speaks version {station} of the link, this command version {VERSION}: update one"
                )
            }
            Self::StudyUnfinished => {
                f.write_str("a study is under way and is not done: finish it, or give it up with --replace")
            }
            Self::Plan(fault) => fault.fmt(f),
            Self::NotRecorded(refusal) => refusal.fmt(f),
            Self::BeyondJournal => {
                f.write_str("the station has no record of that number: is it another station?")
            }
        }
    }
}

/// Why bytes are no frame for us.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub enum FrameError {
    /// The COBS code, the length or the check sum does not fit.
    Damaged,
    /// The frame is whole but of another version.
    Version {
        /// Its version.
        theirs: u8,
        /// Its number.
        number: u32,
    },
    /// The frame is whole but its message is unknown here.
    Unknown {
        /// Its number.
        number: u32,
    },
    /// The message does not fit [`MESSAGE_MAX`].
    TooLong,
}

/// Puts `message` into a frame at the front of `out` and gives the frame.
///
/// # Errors
/// [`FrameError::TooLong`].
pub fn encode<'b, T: Serialize>(
    number: u32,
    message: &T,
    out: &'b mut [u8; FRAME_MAX],
) -> Result<&'b [u8], FrameError> {
    // COBS works in place here: the message is written behind the place where its code bytes will stand, and each
    // block moves towards the front.
    const AHEAD: usize = FRAME_MAX - 1 - MESSAGE_MAX;
    let region = out.get_mut(AHEAD..AHEAD + MESSAGE_MAX).ok_or(FrameError::TooLong)?;
    let (head, body) = region.split_first_chunk_mut::<HEAD>().ok_or(FrameError::TooLong)?;
    let [n0, n1, n2, n3] = number.to_le_bytes();
    *head = [VERSION, n0, n1, n2, n3];
    let room = body.len() - 4;
    let body = body.get_mut(..room).ok_or(FrameError::TooLong)?;
    let used = HEAD + postcard::to_slice(message, body).map_err(|_| FrameError::TooLong)?.len();
    let sum = CRC.checksum(region.get(..used).ok_or(FrameError::TooLong)?).to_le_bytes();
    region.get_mut(used..used + 4).ok_or(FrameError::TooLong)?.copy_from_slice(&sum);
    cobs_in_place(out, AHEAD, used + 4).ok_or(FrameError::TooLong)
}

/// Encodes `out[from..from + length]` to the front of `out`, between two zeros. `from` must lie behind all code bytes.
fn cobs_in_place(out: &mut [u8; FRAME_MAX], from: usize, length: usize) -> Option<&[u8]> {
    *out.first_mut()? = 0;
    let mut code_at = 1;
    let mut write = 2;
    let mut code = 1u8;
    for read in from..from + length {
        let byte = *out.get(read)?;
        if byte != 0 {
            *out.get_mut(write)? = byte;
            write += 1;
            code += 1;
        }
        if byte == 0 || code == 0xff {
            *out.get_mut(code_at)? = code;
            code_at = write;
            write += 1;
            code = 1;
        }
    }
    *out.get_mut(code_at)? = code;
    *out.get_mut(write)? = 0;
    out.get(..=write)
}

/// Collects a frame's bytes and undoes COBS on the way; bounded, and back in step at every zero.
#[derive(Debug)]
pub struct FrameReader {
    message: heapless::Vec<u8, MESSAGE_MAX>,
    /// Bytes left of the present block; 0: a code byte is due.
    left: u8,
    /// The block before ended without a zero (it was full, or it was the first).
    joined: bool,
    damaged: bool,
    complete: bool,
}

impl Default for FrameReader {
    fn default() -> Self {
        Self { message: heapless::Vec::new(), left: 0, joined: true, damaged: false, complete: false }
    }
}

impl FrameReader {
    /// Takes a byte; gives the unstuffed bytes of a frame when this byte ends one that is neither empty nor damaged.
    /// What is lost here shows as silence: whoever sent it asks again.
    pub fn push(&mut self, byte: u8) -> Option<&[u8]> {
        if self.complete {
            self.restart();
        }
        if byte == 0 {
            let whole = !self.damaged && self.left == 0 && !self.message.is_empty();
            if !whole {
                self.restart();
                return None;
            }
            self.complete = true;
            return Some(&self.message);
        }
        if self.left == 0 {
            if !self.joined && self.message.push(0).is_err() {
                self.damaged = true;
            }
            self.left = byte - 1;
            self.joined = byte == 0xff;
        } else {
            self.left -= 1;
            if self.message.push(byte).is_err() {
                self.damaged = true;
            }
        }
        None
    }

    fn restart(&mut self) {
        self.message.clear();
        self.left = 0;
        self.joined = true;
        self.damaged = false;
        self.complete = false;
    }
}

/// Reads the number and the message of a frame that [`FrameReader`] gave.
///
/// # Errors
/// See [`FrameError`]; the message must fill the frame to its exact end.
pub fn decode<'a, T: Deserialize<'a>>(frame: &'a [u8]) -> Result<(u32, T), FrameError> {
    let (sealed, sum) = frame.split_last_chunk::<4>().ok_or(FrameError::Damaged)?;
    if CRC.checksum(sealed) != u32::from_le_bytes(*sum) {
        return Err(FrameError::Damaged);
    }
    let ([version, number @ ..], body) = sealed.split_first_chunk::<HEAD>().ok_or(FrameError::Damaged)?;
    let number = u32::from_le_bytes(*number);
    if *version != VERSION {
        return Err(FrameError::Version { theirs: *version, number });
    }
    match postcard::take_from_bytes(body) {
        Ok((message, [])) => Ok((number, message)),
        _ => Err(FrameError::Unknown { number }),
    }
}

#[cfg(test)]
mod tests;
