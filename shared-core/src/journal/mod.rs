//! The append-only log of records over NOR flash.
//!
//! Flash, from its address 0: two sectors of checkpoints, then a ring of pages. A record is programmed behind the one
//! before it and is durable when [`Journal::append`] returns. Pages are begun in order; a sector is erased before its
//! first page is begun, ahead of need where [`Journal::prepare`] is called in quiet moments, and only once the host
//! has all that it held.
//!
//! What a power cut leaves: half a record, or half a header, at the very end. It is passed over, and nothing is ever
//! written into that page or the one behind it again, since bits of an interrupted write may read differently each time.
//! What is whole there, the page's header and the latest checkpoint included, is programmed once more with the same bytes,
//! so that it stays whole.
//!
//! What has become unreadable otherwise costs what stood in that page from there on, and no more: see [`Patrol`] and
//! [`Salvage`].

mod checkpoint;
mod open;
mod page;
mod read;
mod salvage;
#[cfg(test)]
mod tests;

use core::num::NonZeroU32;

use embedded_storage::nor_flash::MultiwriteNorFlash;

pub use self::{checkpoint::STATE_MAX, open::Opened, read::Patrol, salvage::Salvage};
use self::{
    checkpoint::{Checkpoints, Marks, SLOT, Slot},
    page::{HEADER, Header, PAGE, PAGE_U32, PageNumber, RECORDS_IN_PAGE, fits, is_blank},
};
use crate::chain::Digest;
use crate::counts::Counts;
use crate::record::{self, Event, Millis, RECORD_MAX, Seq};

/// How often an append moves on to a fresh page before it calls the flash faulty.
const ATTEMPTS: usize = 3;

/// Why a record is not in the journal.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub enum AppendError<E> {
    /// No erased page is left: call [`Journal::prepare`] and try again.
    NotPrepared,
    /// The record is longer than [`RECORD_MAX`].
    TooLong,
    /// What was written does not read back, on several pages in a row.
    Faulty,
    /// The flash itself reports an error.
    Flash(E),
}

/// What [`Journal::prepare`] found.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub enum Prepared {
    /// A sector was erased: this took the flash's erase time.
    Erased,
    /// Enough erased pages lie ahead.
    Enough,
    /// The next sector still holds records that the host has not confirmed.
    Full,
}

/// Why a journal cannot be opened.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub enum OpenError<E> {
    /// The flash is smaller than four sectors, or its geometry does not suit pages of 256 bytes.
    Geometry,
    /// The flash holds a journal of another format, and none of this one: nothing was changed.
    Format {
        /// Its format.
        found: u8,
    },
    /// The flash itself reports an error.
    Flash(E),
}

impl<E> From<E> for OpenError<E> {
    fn from(error: E) -> Self {
        Self::Flash(error)
    }
}

/// The log. See the module's documentation.
#[derive(Debug)]
pub struct Journal<F> {
    flash: F,
    checkpoints: Checkpoints,
    /// Bytes of a sector, as a flash address.
    sector: u32,
    /// Pages of a sector.
    sector_pages: NonZeroU32,
    /// Pages of the ring, a whole number of sectors.
    places: NonZeroU32,
    /// The latest page that was begun.
    newest: Option<PageNumber>,
    /// The next page to begin.
    head: PageNumber,
    /// Where the next record goes in the newest page; [`PAGE`] if that page is closed.
    offset: usize,
    /// Pages below this one are erased or written; a multiple of the sector's pages.
    ready_end: PageNumber,
    /// No page below this one is kept; a multiple of the sector's pages.
    tail: PageNumber,
    next: Seq,
    /// Behind the record before `next`.
    digest: Digest,
    released: Seq,
    /// A page to begin searching at, with its first seq.
    cursor: Option<(PageNumber, Seq)>,
    patrol: Option<read::Round>,
}

impl<F: MultiwriteNorFlash> Journal<F> {
    /// The number that the next record will get.
    #[must_use]
    pub fn next(&self) -> Seq {
        self.next
    }

    /// All records up to this one were confirmed by the host (as far as this session or its checkpoint knows).
    #[must_use]
    pub fn released(&self) -> Seq {
        self.released
    }

    /// What all records so far come to.
    #[must_use]
    pub fn digest(&self) -> Digest {
        self.digest
    }

    /// The flash, for tests that look at it.
    pub fn flash(&mut self) -> &mut F {
        &mut self.flash
    }

    /// Appends an event and gives its number. It is durable, and read back, when this returns.
    ///
    /// # Errors
    /// See [`AppendError`]; the journal is as before then, and the number is not used up.
    pub fn append(&mut self, at: Millis, event: &Event) -> Result<Seq, AppendError<F::Error>> {
        let seq = self.next;
        let mut buffer = [0; RECORD_MAX];
        let bytes = record::encode(seq, at, event, &mut buffer).map_err(|_| AppendError::TooLong)?;
        for _ in 0..ATTEMPTS {
            let written = match self.newest {
                Some(page) if fits(self.offset, bytes) => self.write_behind(page, bytes),
                _ => self.write_in_fresh_page(bytes),
            }?;
            if written {
                self.next = seq.next();
                self.digest = self.digest.then(bytes);
                return Ok(seq);
            }
            self.offset = PAGE;
        }
        Err(AppendError::Faulty)
    }

    /// Records up to `through` are committed by the host. They may be erased from now on, when their room is needed.
    pub fn release(&mut self, through: Seq) {
        let last = Seq(self.next.0.saturating_sub(1));
        self.released = self.released.max(through.min(last));
    }

    /// Erases the sector ahead, if the one in use is near its end. Call it in quiet moments, and when an append asks
    /// for it. `state` writes the station's state as of all records so far; it must survive before records go.
    ///
    /// # Errors
    /// The flash's own; or [`AppendError::Faulty`] if the checkpoint does not read back.
    pub fn prepare(
        &mut self,
        state: impl FnOnce(&mut [u8]) -> Option<usize>,
    ) -> Result<Prepared, AppendError<F::Error>> {
        if self.ready_end.0.saturating_sub(self.head.0) >= self.sector_pages() / 2 {
            return Ok(Prepared::Enough);
        }
        let begin = self.ready_end;
        if let Some(occupant) = begin.0.checked_sub(self.places.get()).filter(|p| *p >= self.tail.0) {
            let end = PageNumber(occupant).plus(self.sector_pages());
            if !self.all_released_below(end).map_err(AppendError::Flash)? {
                return Ok(Prepared::Full);
            }
            self.checkpoint(begin, state)?;
            self.tail = end;
            self.cursor = self.cursor.filter(|(page, _)| *page >= end);
        } else {
            self.checkpoint(begin, state)?;
        }
        let address = self.address(begin);
        self.flash.erase(address, address + self.sector).map_err(AppendError::Flash)?;
        self.checkpoints.erased(&mut self.flash).map_err(AppendError::Flash)?;
        self.ready_end = begin.plus(self.sector_pages());
        Ok(Prepared::Erased)
    }

    /// Pages that can still be begun, were all that is released erased.
    ///
    /// # Errors
    /// The flash's own.
    pub fn pages_left(&mut self) -> Result<u32, F::Error> {
        let mut kept = self.tail;
        // The newest page tells a boot where to go on, so its sector stays.
        while let Some(header) = self.next_page(kept.plus(self.sector_pages()))?
            && header.first <= self.released.next()
        {
            kept = self.sector_begin(header.number);
        }
        Ok(kept.plus(self.places.get()).0.saturating_sub(self.head.0))
    }

    /// Whether more than `reserve` pages are left. Cheap but where the journal is nearly full.
    ///
    /// # Errors
    /// The flash's own.
    pub fn has_room(&mut self, reserve: u32) -> Result<bool, F::Error> {
        let without_erasing = self.tail.plus(self.places.get()).0.saturating_sub(self.head.0);
        Ok(without_erasing > reserve || self.pages_left()? > reserve)
    }

    /// How many readings surely fit `pages_left` pages if none is longer than this one: so many digits, and numbers and
    /// times as they may be by then.
    #[must_use]
    pub fn readings_in(&self, pages_left: u32, at: Millis, widest: Counts) -> u32 {
        let seq = Seq(self.next.0.saturating_add(pages_left.saturating_mul(RECORDS_IN_PAGE)));
        let mut buffer = [0; RECORD_MAX];
        let longest =
            record::encode(seq, at, &Event::Reading(widest), &mut buffer).map_or(RECORD_MAX, <[u8]>::len);
        let in_page = u32::try_from((PAGE - HEADER) / longest).unwrap_or(0);
        pages_left.saturating_mul(in_page)
    }

    /// Pages of the whole ring.
    #[must_use]
    pub fn places(&self) -> u32 {
        self.places.get()
    }

    // ---- writing ----

    fn write_behind(&mut self, page: PageNumber, record: &[u8]) -> Result<bool, AppendError<F::Error>> {
        let offset = u32::try_from(self.offset).map_err(|_| AppendError::TooLong)?;
        let written = self.program(self.address(page) + offset, record)?;
        self.offset += record.len();
        Ok(written)
    }

    fn write_in_fresh_page(&mut self, record: &[u8]) -> Result<bool, AppendError<F::Error>> {
        let number = self.blank_page()?;
        let mut page = [0xff; PAGE];
        let header = Header { number, first: self.next, digest: self.digest };
        let used = HEADER + record.len();
        if let Some((head, body)) = page.split_first_chunk_mut::<HEADER>()
            && let Some(body) = body.get_mut(..record.len())
        {
            *head = header.encode();
            body.copy_from_slice(record);
        }
        // Whatever comes of the write, this page is used up.
        self.head = number.plus(1);
        let written = self.program(self.address(number), page.get(..used).unwrap_or_default())?;
        if written {
            self.newest = Some(number);
            self.offset = used;
        }
        Ok(written)
    }

    /// The next page that can be begun. One that is not blank was begun before a power cut: it is left alone.
    fn blank_page(&mut self) -> Result<PageNumber, AppendError<F::Error>> {
        let mut page = [0; PAGE];
        while self.head < self.ready_end {
            self.flash.read(self.address(self.head), &mut page).map_err(AppendError::Flash)?;
            if is_blank(&page) {
                return Ok(self.head);
            }
            self.head = self.head.plus(1);
        }
        Err(AppendError::NotPrepared)
    }

    /// Programs bytes within one page and reads them back.
    fn program(&mut self, address: u32, bytes: &[u8]) -> Result<bool, AppendError<F::Error>> {
        self.flash.write(address, bytes).map_err(AppendError::Flash)?;
        let mut back = [0; PAGE];
        let back = back.get_mut(..bytes.len()).ok_or(AppendError::TooLong)?;
        self.flash.read(address, back).map_err(AppendError::Flash)?;
        Ok(back == bytes)
    }

    fn checkpoint(
        &mut self,
        erasing: PageNumber,
        state: impl FnOnce(&mut [u8]) -> Option<usize>,
    ) -> Result<(), AppendError<F::Error>> {
        let mut slot: Slot = [0; SLOT];
        let marks = Marks { released: self.released, next: self.next, digest: self.digest, erasing };
        match self.checkpoints.write(&mut self.flash, &mut slot, marks, state).map_err(AppendError::Flash)? {
            true => Ok(()),
            false => Err(AppendError::Faulty),
        }
    }

    // ---- places ----

    fn sector_pages(&self) -> u32 {
        self.sector_pages.get()
    }

    fn sector_begin(&self, page: PageNumber) -> PageNumber {
        PageNumber(page.0 - page.0 % self.sector_pages)
    }

    fn address(&self, page: PageNumber) -> u32 {
        2 * self.sector + page.0 % self.places * PAGE_U32
    }
}
