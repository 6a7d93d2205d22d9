//! Reading: records in order, windows for the link, and the patrol that looks for what can no longer be read.

use core::ops::ControlFlow;

use embedded_storage::nor_flash::MultiwriteNorFlash;

use super::{
    Journal,
    page::{HEADER, Header, PAGE, PageNumber, Records},
};
use crate::chain::Digest;
use crate::record::{Gap, Sealed, Seq};

/// Where a round of the patrol stands.
#[derive(Clone, Copy, Debug)]
pub(super) struct Round {
    page: PageNumber,
    /// What that page should begin with.
    expected: Seq,
}

/// What [`Journal::patrol`] found.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub enum Patrol {
    /// One page more is read, and nothing is missing before it.
    Going,
    /// These records cannot be read, and the host has not confirmed them.
    Missing(Gap),
    /// All pages are read; the next call begins anew.
    Done,
}

impl<F: MultiwriteNorFlash> Journal<F> {
    /// The first record that is still kept, or the next one's number if none is.
    ///
    /// # Errors
    /// The flash's own.
    pub fn oldest(&mut self) -> Result<Seq, F::Error> {
        Ok(self.next_page(self.tail)?.map_or(self.next, |header| header.first.min(self.next)))
    }

    /// Copies whole records, one behind the other without a gap, from number `from` or the first readable one behind
    /// it, to the front of `out`; gives the digest before the first of them and the bytes used. None fit or none are
    /// there: 0 bytes, and the digest of all records.
    ///
    /// # Errors
    /// The flash's own.
    pub fn window(&mut self, from: Seq, out: &mut [u8]) -> Result<(Digest, usize), F::Error> {
        let mut page = [0; PAGE];
        let mut used = 0;
        // The digest before the window, the one behind it so far, and the number that goes on from there.
        let mut chain: Option<(Digest, Digest, Seq)> = None;
        let mut here = self.page_holding(from)?;
        while let Some(header) = here {
            self.cursor = Some((header.number, header.first));
            let behind = self.next_page(header.number.plus(1))?;
            let end = behind.map_or(self.next, |next| next.first);
            self.flash.read(self.address(header.number), &mut page)?;
            let mut digest = header.digest;
            for (seq, sealed) in Records::of(&page, header, end) {
                let bytes = sealed.bytes();
                let before = digest;
                digest = digest.then(bytes);
                if seq < from {
                    continue;
                }
                let (first, so_far, due) = chain.unwrap_or((before, before, seq));
                let space = out.get_mut(used..used + bytes.len());
                // A gap, or a page that says otherwise what went before it: the next window begins there.
                let (true, Some(space)) = (due == seq && so_far == before, space) else {
                    return Ok((first, used));
                };
                space.copy_from_slice(bytes);
                used += bytes.len();
                chain = Some((first, digest, seq.next()));
            }
            here = behind;
        }
        Ok((chain.map_or(self.digest, |(first, ..)| first), used))
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

    /// Reads the next page of all that the host has not confirmed, to find out early what cannot be read. Call it in
    /// quiet moments.
    ///
    /// # Errors
    /// The flash's own.
    pub fn patrol(&mut self) -> Result<Patrol, F::Error> {
        let due = self.released.next();
        let Round { page, expected } = match self.patrol {
            Some(round) if round.page >= self.tail => Round { expected: round.expected.max(due), ..round },
            _ => Round { page: self.tail, expected: due },
        };
        let Some(header) = self.next_page(page)? else {
            self.patrol = None;
            return Ok(Gap::between(expected, self.next).map_or(Patrol::Done, Patrol::Missing));
        };
        if let Some(gap) = Gap::between(expected, header.first) {
            self.patrol = Some(Round { page: header.number, expected: header.first });
            return Ok(Patrol::Missing(gap));
        }
        let behind = self.next_page(header.number.plus(1))?;
        let end = behind.map_or(self.next, |next| next.first);
        let mut bytes = [0; PAGE];
        self.flash.read(self.address(header.number), &mut bytes)?;
        let whole = Records::of(&bytes, header, end).last().map_or(header.first, |(seq, _)| seq.next());
        let expected = expected.max(whole);
        if behind.is_some() {
            self.patrol = Some(Round { page: header.number.plus(1), expected });
            return Ok(Patrol::Going);
        }
        // The round ends with the newest page: records that are written into it later are none of its business.
        self.patrol = None;
        Ok(Gap::between(expected, self.next).map_or(Patrol::Done, Patrol::Missing))
    }

    // ---- finding ----

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
    pub(super) fn next_page(&mut self, page: PageNumber) -> Result<Option<Header>, F::Error> {
        let Some(newest) = self.newest else { return Ok(None) };
        for number in page.0..=newest.0 {
            let header = self.header_at_place(number % self.places)?;
            if let Some(header) = header.filter(|h| h.number.0 == number) {
                return Ok(Some(header));
            }
        }
        Ok(None)
    }

    pub(super) fn header_at_place(&mut self, place: u32) -> Result<Option<Header>, F::Error> {
        let bytes = self.bytes_at_place(place)?;
        Ok(Header::decode(&bytes).filter(|header| header.number.0 % self.places == place))
    }

    pub(super) fn bytes_at_place(&mut self, place: u32) -> Result<[u8; HEADER], F::Error> {
        let mut bytes = [0; HEADER];
        self.flash.read(self.address(PageNumber(place)), &mut bytes)?;
        Ok(bytes)
    }

    pub(super) fn all_released_below(&mut self, end: PageNumber) -> Result<bool, F::Error> {
        // The newest page tells a boot where to go on, so its sector stays.
        Ok(match self.next_page(end)? {
            Some(header) => header.first <= self.released.next(),
            None => false,
        })
    }
}
