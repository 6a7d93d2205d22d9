//! Checkpoints: what must survive when the records that led to it are erased, written before every erase.
//!
//! Two sectors take turns. Each holds slots that are filled one after the other; when one sector is full the other is
//! erased, so a valid checkpoint exists at every moment after the first. The highest number wins.
//!
//! ```text
//! | "DC" | format: 2 | 0xFF | number: u32 | released: u32 | next: u32 | digest: 16 bytes | erased page: u32
//! | length: u16 | state … | CRC-32 of all before: u32 | blank … | done: 0xFF, or 0 once that sector is erased |
//! ```

use embedded_storage::nor_flash::NorFlash;

use super::page::PageNumber;
use crate::chain::Digest;
use crate::record::{CRC, Seq};

/// Bytes of a slot.
pub(super) const SLOT: usize = 512;
const SLOT_U32: u32 = 512;
const HEADER: usize = 4 + 4 + 4 + 4 + Digest::BYTES + 4 + 2;
const SUM: usize = 4;
const DONE: usize = 1;
const MAGIC: [u8; 4] = *b"DC\x02\xff";
/// The most that a state may take.
pub const STATE_MAX: usize = SLOT - HEADER - SUM - DONE;

/// How the journal stands, beside the station's state.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) struct Marks {
    pub(super) released: Seq,
    pub(super) next: Seq,
    /// Behind the record before `next`.
    pub(super) digest: Digest,
    /// The first page of the sector that is to be erased.
    pub(super) erasing: PageNumber,
}

/// The place of the latest checkpoint, and of the next one.
#[derive(Debug)]
pub(super) struct Checkpoints {
    slots_in_sector: u32,
    sector: u32,
    latest: Option<Found>,
    /// Slot of the next checkpoint, counted through both sectors. At the begin of a sector, that sector is erased first.
    next_slot: u32,
}

/// What a valid slot says of itself.
#[derive(Clone, Copy, Debug)]
pub(super) struct Found {
    slot: u32,
    number: u32,
    pub(super) marks: Marks,
    /// The sector that was to be erased is.
    pub(super) done: bool,
    /// Bytes of the state.
    pub(super) length: usize,
}

/// One slot's bytes.
pub(super) type Slot = [u8; SLOT];

fn check(slot: &Slot, index: u32) -> Option<Found> {
    let (magic, rest) = slot.split_first_chunk::<4>()?;
    if *magic != MAGIC {
        return None;
    }
    let (number, rest) = rest.split_first_chunk::<4>()?;
    let (released, rest) = rest.split_first_chunk::<4>()?;
    let (next, rest) = rest.split_first_chunk::<4>()?;
    let (digest, rest) = rest.split_first_chunk::<{ Digest::BYTES }>()?;
    let (erasing, rest) = rest.split_first_chunk::<4>()?;
    let (length, _) = rest.split_first_chunk::<2>()?;
    let length = usize::from(u16::from_le_bytes(*length));
    if length > STATE_MAX {
        return None;
    }
    let (sealed, rest) = slot.split_at_checked(HEADER + length)?;
    let sum = rest.first_chunk::<SUM>()?;
    (CRC.checksum(sealed) == u32::from_le_bytes(*sum)).then_some(Found {
        slot: index,
        number: u32::from_le_bytes(*number),
        marks: Marks {
            released: Seq(u32::from_le_bytes(*released)),
            next: Seq(u32::from_le_bytes(*next)),
            digest: Digest(*digest),
            erasing: PageNumber(u32::from_le_bytes(*erasing)),
        },
        done: slot.last() == Some(&0),
        length,
    })
}

impl Checkpoints {
    /// Looks through both sectors, which begin at address 0, and puts the latest checkpoint's state into `state`. That
    /// checkpoint is programmed once more with the bytes that were read: its write may have been cut off at the very end,
    /// and bits that read differently each time must not undo it later.
    pub(super) fn find<F: NorFlash>(
        flash: &mut F,
        buffer: &mut Slot,
        state: &mut [u8; STATE_MAX],
    ) -> Result<Self, F::Error> {
        #[allow(clippy::cast_possible_truncation, reason = "an erase unit of a NOR flash is far below 4 GiB")]
        let sector = F::ERASE_SIZE as u32;
        let slots_in_sector = sector / SLOT_U32;
        let mut latest: Option<Found> = None;
        for slot in 0..2 * slots_in_sector {
            flash.read(slot * SLOT_U32, buffer)?;
            if let Some(found) = check(buffer, slot)
                && latest.is_none_or(|l| found.number > l.number)
            {
                latest = Some(found);
                for (place, byte) in state.iter_mut().zip(buffer.iter().skip(HEADER)) {
                    *place = *byte;
                }
            }
        }
        if let Some(found) = latest {
            let stored = |space: &mut [u8]| {
                let state = state.get(..found.length)?;
                space.get_mut(..found.length)?.copy_from_slice(state);
                Some(found.length)
            };
            if let Some(used) = encode(buffer, found.number, found.marks, stored) {
                program(flash, found.slot, buffer.get(..used).unwrap_or_default())?;
            }
        }
        // After a boot the other sector is begun: the slot behind the latest may hold half a checkpoint.
        let next_slot = match latest {
            Some(found) if found.slot < slots_in_sector => slots_in_sector,
            _ => 0,
        };
        Ok(Self { slots_in_sector, sector, latest, next_slot })
    }

    /// The latest checkpoint; none was ever written: `None`.
    pub(super) fn latest(&self) -> Option<Found> {
        self.latest
    }

    /// Writes a checkpoint; `state` puts the state into the space it is given and says how much it took. When this
    /// returns, the checkpoint is durable and read back; `false`: it does not read back, or the state does not fit.
    pub(super) fn write<F: NorFlash>(
        &mut self,
        flash: &mut F,
        buffer: &mut Slot,
        marks: Marks,
        state: impl FnOnce(&mut [u8]) -> Option<usize>,
    ) -> Result<bool, F::Error> {
        let number = self.latest.map_or(1, |l| l.number.saturating_add(1));
        let Some(used) = encode(buffer, number, marks, state) else { return Ok(false) };
        let slot = self.next_slot;
        if slot == 0 || slot == self.slots_in_sector {
            let begin = slot * SLOT_U32;
            flash.erase(begin, begin + self.sector)?;
        }
        // Whatever comes of the write, this slot is used up.
        self.next_slot = if slot + 1 < 2 * self.slots_in_sector { slot + 1 } else { 0 };
        program(flash, slot, buffer.get(..used).unwrap_or_default())?;
        flash.read(slot * SLOT_U32, buffer)?;
        match check(buffer, slot) {
            Some(found) if found.number == number => {
                self.latest = Some(found);
                Ok(true)
            }
            _ => Ok(false),
        }
    }

    /// Whether the next checkpoint erases its sector first.
    #[cfg(test)]
    pub(super) fn next_is_fresh(&self) -> bool {
        self.next_slot == 0 || self.next_slot == self.slots_in_sector
    }

    /// Notes with the latest checkpoint that its sector is erased.
    pub(super) fn erased<F: NorFlash>(&mut self, flash: &mut F) -> Result<(), F::Error> {
        let Some(found) = &mut self.latest else { return Ok(()) };
        found.done = true;
        flash.write((found.slot + 1) * SLOT_U32 - 1, &[0])
    }
}

/// Programs a slot's bytes, page by page.
fn program<F: NorFlash>(flash: &mut F, slot: u32, bytes: &[u8]) -> Result<(), F::Error> {
    for (page, offset) in bytes.chunks(256).zip((0u32..).step_by(256)) {
        flash.write(slot * SLOT_U32 + offset, page)?;
    }
    Ok(())
}

fn encode(
    buffer: &mut Slot,
    number: u32,
    marks: Marks,
    state: impl FnOnce(&mut [u8]) -> Option<usize>,
) -> Option<usize> {
    buffer.fill(0xff);
    let (header, body) = buffer.split_first_chunk_mut::<HEADER>()?;
    let length = state(body.get_mut(..STATE_MAX)?)?;
    let length_bytes = u16::try_from(length).ok()?.to_le_bytes();
    let parts: [&[u8]; 7] = [
        &MAGIC,
        &number.to_le_bytes(),
        &marks.released.0.to_le_bytes(),
        &marks.next.0.to_le_bytes(),
        &marks.digest.0,
        &marks.erasing.0.to_le_bytes(),
        &length_bytes,
    ];
    for (place, byte) in header.iter_mut().zip(parts.into_iter().flatten()) {
        *place = *byte;
    }
    let (sealed, rest) = buffer.split_at_mut_checked(HEADER + length)?;
    *rest.first_chunk_mut::<SUM>()? = CRC.checksum(sealed).to_le_bytes();
    Some(HEADER + length + SUM)
}
