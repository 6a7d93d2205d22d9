//! Opening: the journal is found again in whatever the flash holds, in one reading of all headers and a few pages.
//!
//! No number is ever given twice. Where the newest pages cannot be read, as many numbers are passed over as they can have
//! held; a page that was begun in a sector whose erase was itself cut off cannot have held any, and the checkpoint before
//! each erase tells which sector that is.

use core::num::NonZeroU32;

use embedded_storage::nor_flash::MultiwriteNorFlash;

use super::{
    Journal, OpenError, Salvage,
    checkpoint::{Checkpoints, Found, SLOT, STATE_MAX, Slot},
    page::{Header, PAGE, PAGE_U32, PageNumber, RECORDS_IN_PAGE, Records, is_blank, other_format},
    salvage::{self, Tail},
};
use crate::chain::Digest;
use crate::record::{Gap, Seq};
use crate::wire::StationId;

/// What was found in a flash.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Opened {
    /// The length of the latest checkpoint's state, if there is one.
    pub state: Option<usize>,
    /// What stands at the end.
    pub salvage: Salvage,
}

impl<F: MultiwriteNorFlash> Journal<F> {
    /// Finds the journal of this station in `flash`, whatever its content, and gives the latest checkpoint's state in
    /// `state`.
    ///
    /// # Errors
    /// A geometry that does not fit, a journal of another format, or the flash's own error.
    pub fn open(
        mut flash: F,
        station: StationId,
        state: &mut [u8; STATE_MAX],
    ) -> Result<(Self, Opened), OpenError<F::Error>> {
        let sector = u32::try_from(F::ERASE_SIZE).map_err(|_| OpenError::Geometry)?;
        let sectors = u32::try_from(flash.capacity() / F::ERASE_SIZE).map_err(|_| OpenError::Geometry)?;
        let fits = F::WRITE_SIZE == 1 && F::READ_SIZE == 1 && F::ERASE_SIZE.is_multiple_of(2 * SLOT);
        let sector_pages = NonZeroU32::new(sector / PAGE_U32).filter(|_| fits).ok_or(OpenError::Geometry)?;
        let data_sectors =
            sectors.checked_sub(2).filter(|sectors| *sectors >= 2).ok_or(OpenError::Geometry)?;
        let places = NonZeroU32::new(data_sectors * sector_pages.get()).ok_or(OpenError::Geometry)?;
        let mut slot: Slot = [0; SLOT];
        let checkpoints = Checkpoints::find(&mut flash, &mut slot, state)?;
        let checkpoint = checkpoints.latest();
        let mut journal = Self {
            flash,
            checkpoints,
            sector,
            sector_pages,
            places,
            newest: None,
            head: PageNumber(0),
            offset: PAGE,
            ready_end: PageNumber(0),
            tail: PageNumber(0),
            next: checkpoint.map_or(Seq::FIRST, |c| c.marks.next),
            digest: checkpoint.map_or(Digest::origin(station), |c| c.marks.digest),
            released: checkpoint.map_or(Seq(0), |c| c.marks.released),
            cursor: None,
            patrol: None,
        };
        let salvage = journal.scan(checkpoint)?;
        Ok((journal, Opened { state: checkpoint.map(|found| found.length), salvage }))
    }

    /// Finds the newest page, the oldest, and where to go on.
    fn scan(&mut self, checkpoint: Option<Found>) -> Result<Salvage, OpenError<F::Error>> {
        let mut newest: Option<Header> = None;
        let mut other = None;
        for place in 0..self.places.get() {
            let bytes = self.bytes_at_place(place)?;
            match Header::decode(&bytes).filter(|header| header.number.0 % self.places == place) {
                Some(header) if newest.is_none_or(|n| header.number > n.number) => newest = Some(header),
                Some(_) => {}
                None => other = other.or(other_format(&bytes)),
            }
        }
        if let (None, None, Some(found)) = (newest, checkpoint, other) {
            return Err(OpenError::Format { found });
        }
        let mut salvage = Salvage::default();
        if let Some(newest) = newest {
            self.take_up(newest, &mut salvage)?;
        }
        self.look_ahead(checkpoint, &mut salvage)?;
        self.head = self.head.min(self.ready_end);
        // Where nothing can be read, nothing is kept.
        self.tail = match self.newest {
            Some(_) => PageNumber(self.ready_end.0.saturating_sub(self.places.get())),
            None => self.sector_begin(self.head),
        };
        if let Some(oldest) = self.next_page(self.tail)? {
            self.tail = self.sector_begin(oldest.number);
        }
        Ok(salvage)
    }

    /// Finds the newest page's end, and programs what is whole in it once more.
    fn settle(&mut self, newest: Header, salvage: &mut Salvage) -> Result<(), F::Error> {
        let mut page = [0; PAGE];
        let address = self.address(newest.number);
        self.flash.read(address, &mut page)?;
        let mut damaged = 0;
        let (next, digest, whole) = loop {
            let (next, digest, whole) = end_of(&page, newest);
            match salvage::tail(&mut page, whole, next) {
                // The page holds one record more now.
                Tail::Mended { .. } => continue,
                Tail::Blank => {}
                Tail::Torn => salvage.torn = true,
                Tail::Damaged { records } => damaged = records,
            }
            break (next, digest, whole);
        };
        // The header as it was read the first time: its own bits may read differently each time too.
        if let Some(head) = page.first_chunk_mut() {
            *head = newest.encode();
        }
        if let Some(bytes) = page.get(..whole) {
            self.flash.write(address, bytes)?;
        }
        if next >= self.next {
            (self.next, self.digest) = (next, digest);
        }
        self.skip(damaged, salvage);
        Ok(())
    }

    /// Goes on from this page as the newest.
    fn take_up(&mut self, newest: Header, salvage: &mut Salvage) -> Result<(), F::Error> {
        self.newest = Some(newest.number);
        self.ready_end = self.ready_end.max(self.sector_begin(newest.number).plus(self.sector_pages()));
        // The page behind the newest may have been begun when the power went: it is left alone.
        self.head = newest.number.plus(2);
        self.settle(newest, salvage)
    }

    /// Looks at what stands ahead of the newest page that can be read, up to where pages can have been begun.
    fn look_ahead(&mut self, checkpoint: Option<Found>, salvage: &mut Salvage) -> Result<(), F::Error> {
        let pages = self.sector_pages();
        let begin = match (self.newest, checkpoint) {
            (Some(newest), _) => newest.plus(1),
            (None, Some(found)) => {
                self.head = found.marks.erasing;
                PageNumber(found.marks.erasing.0.saturating_sub(pages))
            }
            // Nothing tells a journal from what else was in the flash: it is a new one.
            (None, None) => return Ok(()),
        };
        let claimed = checkpoint.map_or(PageNumber(0), |found| match found.done {
            true => found.marks.erasing.plus(pages),
            false => found.marks.erasing,
        });
        // No journal is further ahead of its newest page than once round; whatever a checkpoint claims, a boot looks no further.
        let reach = begin.plus(self.places.get()).plus(2 * pages);
        let claimed = claimed.min(self.sector_begin(reach));
        // A checkpoint that is not the last one: the sector behind may have been in use too.
        let stale = checkpoint.is_none() || claimed < self.ready_end;
        self.ready_end = self.ready_end.max(claimed);
        let end = if stale { self.ready_end.plus(pages) } else { self.ready_end };
        let mut page = [0; PAGE];
        for number in begin.0..end.0 {
            let number = PageNumber(number);
            self.flash.read(self.address(number), &mut page)?;
            let header = Header { number, first: self.next, digest: self.digest };
            if salvage.skipped.is_none() && salvage::mendable_page(&page, header) {
                self.take_up(header, salvage)?;
                continue;
            }
            let readable = page.first_chunk().is_some_and(|bytes| Header::decode(bytes).is_some());
            if readable || is_blank(&page) {
                continue;
            }
            if salvage.skipped.is_none() && salvage::torn_page(&page, header) {
                salvage.torn = true;
            } else {
                self.skip(RECORDS_IN_PAGE, salvage);
            }
            self.head = self.head.max(number.plus(2));
        }
        Ok(())
    }

    /// Passes over so many numbers.
    fn skip(&mut self, records: u32, salvage: &mut Salvage) {
        let first = salvage.skipped.map_or(self.next, |gap| gap.first);
        self.next = Seq(self.next.0.saturating_add(records));
        salvage.skipped = Gap::between(first, self.next);
    }
}

/// The number and the digest behind the last whole record of a page, and where it ends.
fn end_of(page: &[u8; PAGE], header: Header) -> (Seq, Digest, usize) {
    let mut records = Records::of(page, header, Seq(u32::MAX));
    let (mut next, mut digest) = (header.first, header.digest);
    for (seq, sealed) in records.by_ref() {
        next = seq.next();
        digest = digest.then(sealed.bytes());
    }
    (next, digest, PAGE - records.rest().len())
}
