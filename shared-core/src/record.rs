//! The records: all that a station ever learns, numbered, timed and sealed.
//!
//! The same bytes stand in the journal's flash, travel on the wire and lie in the host's ledger:
//!
//! ```text
//! | length: 1 byte | postcard (seq, at, event): `length` bytes | CRC-32/ISCSI of all before, little endian: 4 bytes |
//! ```
//!
//! A length is never 0 nor 0xFF, so neither a blank nor a fully programmed flash byte begins a record. Events and
//! reasons only ever grow at their end: postcard numbers them by position.

use crc::{CRC_32_ISCSI, Crc, Table};
use serde::{Deserialize, Serialize};

use crate::{
    counts::{Counts, ReadingError},
    plan::Plan,
};

/// The one check sum of records, pages, checkpoints and frames. A `static`, since its table would otherwise be built
/// anew on the stack.
pub(crate) static CRC: Crc<u32, Table<1>> = Crc::<u32, Table<1>>::new(&CRC_32_ISCSI);

/// The number of a record: from 1, without a gap, for a station's whole life.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub struct Seq(pub u32);

impl Seq {
    /// The first record of a station.
    pub const FIRST: Self = Self(1);

    /// The number behind this one. Four thousand million records are out of any flash's reach.
    #[must_use]
    pub const fn next(self) -> Self {
        Self(self.0.saturating_add(1))
    }
}

impl core::fmt::Display for Seq {
    fn fmt(&self, f: &mut core::fmt::Formatter<'_>) -> core::fmt::Result {
        self.0.fmt(f)
    }
}

/// Numbers, one behind the other, whose records are not to be had.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, Serialize, Deserialize)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub struct Gap {
    /// The first missing number.
    pub first: Seq,
    /// The last missing number.
    pub last: Seq,
}

impl Gap {
    /// The numbers from `first` up to but not including `next`; `None` if there is none.
    #[must_use]
    pub fn between(first: Seq, next: Seq) -> Option<Self> {
        (first < next).then(|| Self { first, last: Seq(next.0.saturating_sub(1)) })
    }

    /// Whether all of `other` lies within.
    #[must_use]
    pub fn holds(self, other: Self) -> bool {
        self.first <= other.first && other.last <= self.last
    }
}

/// Milliseconds since the station's last boot. The host turns them into wall time by the `Clock` records.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub struct Millis(pub u64);

impl Millis {
    /// The time from `earlier` until now; 0 if that lies ahead.
    #[must_use]
    pub const fn since(self, earlier: Self) -> u64 {
        self.0.saturating_sub(earlier.0)
    }
}

/// Why the station did not take what the gauge or the operator gave it.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, Serialize, Deserialize)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
#[non_exhaustive]
pub enum Refusal {
    /// The line is no reading.
    Reading(ReadingError),
    /// The line is longer than any reading.
    LineTooLong,
    /// The line did not end in time.
    LineUnfinished,
    /// The line's beginning was not seen, since the station had only just begun to listen.
    LineCut,
    /// Bytes came faster than they could be taken; the line they belong to is lost.
    GaugeOverrun,
    /// There is no plan that a reading could belong to.
    NoPlan,
    /// The journal is full: pull it.
    JournalFull,
    /// The flash did not take the record.
    FlashFault,
    /// There is no reading to take back.
    NothingToTakeBack,
    /// The study already holds as many pieces as can be counted.
    StudyFull,
    /// A byte came without its stop bit or with the wrong parity; the line it belongs to is lost.
    GaugeGarbled,
    /// The power failed while a record was being written; nobody was told of that record.
    PowerFailed,
}

impl core::fmt::Display for Refusal {
    fn fmt(&self, f: &mut core::fmt::Formatter<'_>) -> core::fmt::Result {
        match self {
            Self::Reading(error) => error.fmt(f),
            Self::LineTooLong => {
                f.write_str("line too long: check the gauge's output format and the baud rate")
            }
            Self::LineUnfinished => {
                f.write_str("line without an end: have the gauge send CR or LF behind the number")
            }
            Self::LineCut => f.write_str("beginning of the line not seen: measure the piece again"),
            Self::GaugeOverrun => f.write_str("bytes came too fast and were lost: measure the piece again"),
            Self::NoPlan => f.write_str("no plan loaded: load one with `donelight station load`"),
            Self::JournalFull => f.write_str("journal full: pull it with `donelight station pull`"),
            Self::FlashFault => {
                f.write_str("the flash did not take the record: pull the log and exchange the board")
            }
            Self::NothingToTakeBack => f.write_str("no reading to take back"),
            Self::StudyFull => f.write_str("the study is full: load a new plan"),
            Self::GaugeGarbled => f.write_str(
                "garbled bytes: check the baud rate, data bits, parity and stop bits of gauge and plan, and the cable",
            ),
            Self::PowerFailed => f.write_str(
                "the power failed while something was being stored: see if the last piece is counted, or measure it again",
            ),
        }
    }
}

/// What happened.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[allow(clippy::large_enum_variant, reason = "no heap to box a plan on; events live one at a time")]
#[non_exhaustive]
pub enum Event {
    /// The station started; times count from 0 again.
    Boot {
        /// How often it has started, this time included.
        boot: u32,
    },
    /// A plan was loaded: a study begins, whatever went before is over.
    Plan(Plan),
    /// A piece was measured.
    Reading(Counts),
    /// Something was not taken, for this reason, so many times since the last such record.
    Refused {
        /// The reason.
        reason: Refusal,
        /// How often, at least once.
        times: u16,
    },
    /// The operator took the reading with this number back.
    TakenBack(Seq),
    /// The operator has looked at what held the study.
    Seen,
    /// The host told the time.
    Clock {
        /// Milliseconds since 1970-01-01 00:00 UTC, at the record's own `at`.
        unix_ms: u64,
    },
    /// The station found that it can no longer read these of its records. What they said of the study it may still know.
    Lost(Gap),
}

/// An event with its number and its time.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Record {
    /// Its number.
    pub seq: Seq,
    /// When, since the boot before it.
    pub at: Millis,
    /// What.
    pub event: Event,
}

/// The length byte and the check sum around a record.
pub(crate) const FRAMING: usize = 1 + 4;

/// The longest record, so that it fits a journal's page behind the page's header.
pub const RECORD_MAX: usize = 224;

/// The shortest record: number, time and event take a byte each at least.
pub const RECORD_MIN: usize = FRAMING + 3;

/// Why bytes are no record.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub enum DecodeError {
    /// No record begins here: the length byte is blank or zero.
    Blank,
    /// The bytes end before the record does.
    Short,
    /// The check sum does not fit.
    CheckSum,
    /// The check sum fits, but this version does not know the content (a newer station's record).
    Unknown,
}

impl core::fmt::Display for DecodeError {
    fn fmt(&self, f: &mut core::fmt::Formatter<'_>) -> core::fmt::Result {
        f.write_str(match self {
            Self::Blank => "no record begins here",
            Self::Short => "the record is cut short",
            Self::CheckSum => "the record's check sum does not fit",
            Self::Unknown => "the record is of a kind that this version does not know: update Donelight",
        })
    }
}

impl core::error::Error for DecodeError {}

/// A record does not fit [`RECORD_MAX`]; no plan that passes its checks is that long.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub struct TooLong;

impl Record {
    /// Writes the record's bytes at the front of `buffer` and gives them.
    ///
    /// # Errors
    /// If they do not fit the buffer or [`RECORD_MAX`].
    pub fn encode<'b>(&self, buffer: &'b mut [u8; RECORD_MAX]) -> Result<&'b [u8], TooLong> {
        encode(self.seq, self.at, &self.event, buffer)
    }

    /// Reads the record at the front of `bytes`.
    ///
    /// # Errors
    /// See [`DecodeError`]; nothing is read beyond what the length byte says.
    pub fn decode(bytes: &[u8]) -> Result<Self, DecodeError> {
        Sealed::split(bytes)?.0.record()
    }
}

/// [`Record::encode`] for an event that stays where it is.
pub(crate) fn encode<'b>(
    seq: Seq,
    at: Millis,
    event: &Event,
    buffer: &'b mut [u8; RECORD_MAX],
) -> Result<&'b [u8], TooLong> {
    let [length, body @ ..] = buffer;
    let room = RECORD_MAX - FRAMING;
    let body = body.get_mut(..room).ok_or(TooLong)?;
    // A tuple's bytes are those of a struct with the same fields.
    let used = postcard::to_slice(&(seq, at, event), body).map_err(|_| TooLong)?.len();
    *length = u8::try_from(used).map_err(|_| TooLong)?;
    let (sealed, rest) = buffer.split_at_mut_checked(1 + used).ok_or(TooLong)?;
    let sum = CRC.checksum(sealed).to_le_bytes();
    rest.get_mut(..4).ok_or(TooLong)?.copy_from_slice(&sum);
    buffer.get(..used + FRAMING).ok_or(TooLong)
}

/// The bytes of one record whose check sum fits, whatever they say.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Sealed<'a>(&'a [u8]);

impl<'a> Sealed<'a> {
    /// Splits the record at the front of `bytes` from what follows it.
    ///
    /// # Errors
    /// See [`DecodeError`], `Unknown` excepted.
    pub fn split(bytes: &'a [u8]) -> Result<(Self, &'a [u8]), DecodeError> {
        let length = match bytes.first() {
            None | Some(0 | 0xff) => return Err(DecodeError::Blank),
            Some(length) => usize::from(*length),
        };
        if length + FRAMING > RECORD_MAX {
            return Err(DecodeError::Blank);
        }
        let (sealed, rest) = bytes.split_at_checked(1 + length).ok_or(DecodeError::Short)?;
        let sum = rest.first_chunk::<4>().ok_or(DecodeError::Short)?;
        if CRC.checksum(sealed) != u32::from_le_bytes(*sum) {
            return Err(DecodeError::CheckSum);
        }
        let (whole, rest) = bytes.split_at_checked(length + FRAMING).ok_or(DecodeError::Short)?;
        Ok((Self(whole), rest))
    }

    /// All its bytes, to be kept as they are.
    #[must_use]
    pub fn bytes(self) -> &'a [u8] {
        self.0
    }

    /// Its number, readable even where the event is of an unknown kind.
    #[must_use]
    pub fn seq(self) -> Option<Seq> {
        postcard::take_from_bytes::<Seq>(self.body()).ok().map(|(seq, _)| seq)
    }

    /// What it says.
    ///
    /// # Errors
    /// [`DecodeError::Unknown`] where this version cannot read the content to its exact end.
    pub fn record(self) -> Result<Record, DecodeError> {
        match postcard::take_from_bytes::<Record>(self.body()) {
            Ok((record, [])) => Ok(record),
            _ => Err(DecodeError::Unknown),
        }
    }

    fn body(self) -> &'a [u8] {
        self.0.get(1..self.0.len().saturating_sub(4)).unwrap_or_default()
    }
}

#[cfg(test)]
mod tests;
