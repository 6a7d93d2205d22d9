//! The append-only log of records over NOR flash.
//!
//! Flash, from its address 0: two sectors of checkpoints, then a ring of pages. A record is programmed behind the one
//! before it and is durable when [`Journal::append`] returns. Pages are begun in order; a sector is erased before its
//! first page is begun, ahead of need where [`Journal::prepare`] is called in quiet moments, and only once the host
//! has all that it held.
//!
//! What a power cut leaves: half a record, or half a header, at the very end. It is passed over, and nothing is ever
//! written into that page or the one behind it again, since bits of an interrupted write may read differently each time.
//! The last whole record is programmed once more with the same bytes, so that it stays whole.

mod checkpoint;
mod page;
#[cfg(test)]
mod tests;

use core::ops::ControlFlow;

use embedded_storage::nor_flash::MultiwriteNorFlash;

pub use self::checkpoint::STATE_MAX;
use self::{
    checkpoint::{Checkpoints, SLOT, Slot},
    page::{HEADER, Header, PAGE, PAGE_U32, PageNumber, Records, fits},
};
use crate::record::{self, Event, Millis, RECORD_MAX, Sealed, Seq};

/// Readings that surely fit a page: the header's 16 bytes aside, a reading takes at most 20 bytes for the first
/// 16 million readings, 16 to 18 as a rule.
const READINGS_IN_PAGE: u32 = 12;

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
    /// Pages of the ring, a whole number of sectors.
    places: u32,
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
    released: Seq,
    /// What was released as of the last checkpoint of this session. One from an earlier session may be half written
    /// and only look whole, so no erase relies on it.
    checkpointed: Option<Seq>,
    /// A page to begin searching at, with its first seq.
    cursor: Option<(PageNumber, Seq)>,
}

impl<F: MultiwriteNorFlash> Journal<F> {
    /// Finds the journal in `flash`, whatever its content, and gives the latest checkpoint's state in `state`, with its
    /// length if there is one.
    ///
    /// # Errors
    /// A geometry that does not fit, or the flash's own error.
    pub fn open(
        mut flash: F,
        state: &mut [u8; STATE_MAX],
    ) -> Result<(Self, Option<usize>), OpenError<F::Error>> {
        let sector = u32::try_from(F::ERASE_SIZE).map_err(|_| OpenError::Geometry)?;
        let sectors = u32::try_from(flash.capacity() / F::ERASE_SIZE).map_err(|_| OpenError::Geometry)?;
        let fits = F::WRITE_SIZE == 1 && F::READ_SIZE == 1 && F::ERASE_SIZE.is_multiple_of(2 * SLOT);
        if !fits || sectors < 4 {
            return Err(OpenError::Geometry);
        }
        let mut slot: Slot = [0; SLOT];
        let checkpoints = Checkpoints::find(&mut flash, &mut slot)?;
        let mut length = None;
        let (mut next, mut released) = (Seq::FIRST, Seq(0));
        if let Some((found, bytes)) = checkpoints.latest(&mut flash, &mut slot)? {
            next = found.next;
            released = found.released;
            if let Some(space) = state.get_mut(..bytes.len()) {
                space.copy_from_slice(bytes);
                length = Some(bytes.len());
            }
        }
        let mut journal = Self {
            flash,
            checkpoints,
            sector,
            places: (sectors - 2) * (sector / PAGE_U32),
            newest: None,
            head: PageNumber(0),
            offset: PAGE,
            ready_end: PageNumber(0),
            tail: PageNumber(0),
            next,
            released,
            checkpointed: None,
            cursor: None,
        };
        journal.scan()?;
        Ok((journal, length))
    }

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
        if let Some(occupant) = begin.0.checked_sub(self.places).filter(|p| *p >= self.tail.0) {
            let end = PageNumber(occupant).plus(self.sector_pages());
            if !self.all_released_below(end).map_err(AppendError::Flash)? {
                return Ok(Prepared::Full);
            }
            self.checkpoint(state)?;
            self.tail = end;
            self.cursor = self.cursor.filter(|(page, _)| *page >= end);
        }
        let address = self.address(begin);
        self.flash.erase(address, address + self.sector).map_err(AppendError::Flash)?;
        self.ready_end = begin.plus(self.sector_pages());
        Ok(Prepared::Erased)
    }

    /// Pages that can still be begun, were all that is released erased.
    ///
    /// # Errors
    /// The flash's own.
    pub fn pages_left(&mut self) -> Result<u32, F::Error> {
        let mut kept = self.tail;
        loop {
            let end = kept.plus(self.sector_pages());
            if end.0 > self.newest.map_or(0, |n| n.0) || !self.all_released_below(end)? {
                break;
            }
            kept = end;
        }
        Ok(kept.plus(self.places).0.saturating_sub(self.head.0))
    }

    /// Whether more than `reserve` pages are left. Cheap but where the journal is nearly full.
    ///
    /// # Errors
    /// The flash's own.
    pub fn has_room(&mut self, reserve: u32) -> Result<bool, F::Error> {
        let without_erasing = self.tail.plus(self.places).0.saturating_sub(self.head.0);
        Ok(without_erasing > reserve || self.pages_left()? > reserve)
    }

    /// About how many readings can still be taken with `pages_left`.
    #[must_use]
    pub fn readings_in(pages_left: u32) -> u32 {
        pages_left.saturating_mul(READINGS_IN_PAGE)
    }

    /// Pages of the whole ring.
    #[must_use]
    pub fn places(&self) -> u32 {
        self.places
    }

    /// The first record that is still kept, or the next one's number if none is.
    ///
    /// # Errors
    /// The flash's own.
    pub fn oldest(&mut self) -> Result<Seq, F::Error> {
        Ok(self.next_page(self.tail)?.map_or(self.next, |header| header.first.min(self.next)))
    }

    /// Copies whole records, from number `from` or the first kept one behind it, to the front of `out`; gives the bytes
    /// used. None fit or none are there: 0.
    ///
    /// # Errors
    /// The flash's own.
    pub fn read(&mut self, from: Seq, out: &mut [u8]) -> Result<usize, F::Error> {
        let mut used = 0;
        self.visit(from, |_, sealed| {
            let bytes = sealed.bytes();
            match out.get_mut(used..used + bytes.len()) {
                Some(space) => {
                    space.copy_from_slice(bytes);
                    used += bytes.len();
                    ControlFlow::Continue(())
                }
                None => ControlFlow::Break(()),
            }
        })?;
        Ok(used)
    }

    /// Shows all records from `from` on to `visitor`, in order, until it breaks.
    ///
    /// # Errors
    /// The flash's own.
    pub fn visit(
        &mut self,
        from: Seq,
        mut visitor: impl FnMut(Seq, Sealed<'_>) -> ControlFlow<()>,
    ) -> Result<(), F::Error> {
        let mut page = [0; PAGE];
        let mut here = self.page_holding(from)?;
        while let Some(header) = here {
            self.cursor = Some((header.number, header.first));
            let behind = self.next_page(header.number.plus(1))?;
            let end = behind.map_or(self.next, |next| next.first);
            self.flash.read(self.address(header.number), &mut page)?;
            for (seq, sealed) in Records::of(&page, header, end) {
                if seq >= from && visitor(seq, sealed).is_break() {
                    return Ok(());
                }
            }
            here = behind;
        }
        Ok(())
    }

    // ---- finding ----

    /// Finds the newest page, the oldest, and where to go on.
    fn scan(&mut self) -> Result<(), F::Error> {
        let mut newest: Option<Header> = None;
        for place in 0..self.places {
            if let Some(header) = self.header_at_place(place)?
                && newest.is_none_or(|n| header.number > n.number)
            {
                newest = Some(header);
            }
        }
        let Some(newest) = newest else { return Ok(()) };
        let sector_begin = newest.number.0 - newest.number.0 % self.sector_pages();
        self.newest = Some(newest.number);
        self.ready_end = PageNumber(sector_begin).plus(self.sector_pages());
        // The page behind the newest may have been begun when the power went: it is left alone.
        self.head = newest.number.plus(2).min(self.ready_end);
        self.tail = PageNumber(self.ready_end.0.saturating_sub(self.places));
        if let Some(oldest) = self.next_page(self.tail)? {
            self.tail = PageNumber(oldest.number.0 - oldest.number.0 % self.sector_pages());
        }
        self.settle(newest)
    }

    /// Reads the newest page's last number and programs what is whole in it once more.
    fn settle(&mut self, newest: Header) -> Result<(), F::Error> {
        let mut page = [0; PAGE];
        let address = self.address(newest.number);
        self.flash.read(address, &mut page)?;
        let mut records = Records::of(&page, newest, Seq(u32::MAX));
        let last = records.by_ref().map(|(seq, _)| seq).last();
        let whole = PAGE - records.rest().len();
        if let Some(bytes) = page.get(..whole) {
            self.flash.write(address, bytes)?;
        }
        self.next = self.next.max(last.map_or(newest.first, Seq::next));
        Ok(())
    }

    /// The last page whose first seq is not above `from`, or the first page there is.
    fn page_holding(&mut self, from: Seq) -> Result<Option<Header>, F::Error> {
        let begin = match self.cursor {
            Some((page, first)) if first <= from && page >= self.tail => page,
            _ => self.tail,
        };
        let mut here = self.next_page(begin)?;
        while let Some(header) = here {
            match self.next_page(header.number.plus(1))? {
                Some(next) if next.first <= from => here = Some(next),
                _ => break,
            }
        }
        Ok(here)
    }

    /// The first readable page from `page` on.
    fn next_page(&mut self, page: PageNumber) -> Result<Option<Header>, F::Error> {
        let Some(newest) = self.newest else { return Ok(None) };
        for number in page.0..=newest.0 {
            let header = self.header_at_place(number % self.places)?;
            if let Some(header) = header.filter(|h| h.number.0 == number) {
                return Ok(Some(header));
            }
        }
        Ok(None)
    }

    fn header_at_place(&mut self, place: u32) -> Result<Option<Header>, F::Error> {
        let mut bytes = [0; HEADER];
        self.flash.read(self.address(PageNumber(place)), &mut bytes)?;
        Ok(Header::decode(&bytes).filter(|header| header.number.0 % self.places == place))
    }

    fn all_released_below(&mut self, end: PageNumber) -> Result<bool, F::Error> {
        // The newest page tells a boot where to go on, so its sector stays.
        Ok(match self.next_page(end)? {
            Some(header) => header.first <= self.released.next(),
            None => false,
        })
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
        let header = Header { number, first: self.next };
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
            if page.iter().all(|byte| *byte == 0xff) {
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
        state: impl FnOnce(&mut [u8]) -> Option<usize>,
    ) -> Result<(), AppendError<F::Error>> {
        if self.checkpointed == Some(self.released) {
            return Ok(());
        }
        let mut slot: Slot = [0; SLOT];
        let marks = (self.released, self.next);
        match self.checkpoints.write(&mut self.flash, &mut slot, marks, state).map_err(AppendError::Flash)? {
            true => {
                self.checkpointed = Some(self.released);
                Ok(())
            }
            false => Err(AppendError::Faulty),
        }
    }

    fn sector_pages(&self) -> u32 {
        self.sector / PAGE_U32
    }

    fn address(&self, page: PageNumber) -> u32 {
        2 * self.sector + page.0 % self.places * PAGE_U32
    }
}
