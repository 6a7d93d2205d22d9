//! Stations whose flash is worn: it takes nothing more, or does not give back what it took.

use std::cell::Cell;
use std::rc::Rc;

use donelight::ledger::Happening;
use donelight::link::Session;
use donelight::link::memory::MemoryLink;
use donelight::link::pull::pull;
use donelight::virtual_station::flash::{FlashError, RamFlash};
use donelight_core::record::{Refusal, Seq};
use donelight_core::wire::{JournalHealth, Reason};
use embedded_storage::nor_flash::{ErrorType, MultiwriteNorFlash, NorFlash, ReadNorFlash};

use crate::support::*;

/// Flash that takes nothing more once it is worn.
struct Wearing {
    flash: RamFlash,
    worn: Rc<Cell<bool>>,
}

impl ErrorType for Wearing {
    type Error = FlashError;
}

impl ReadNorFlash for Wearing {
    const READ_SIZE: usize = 1;
    fn read(&mut self, offset: u32, bytes: &mut [u8]) -> Result<(), FlashError> {
        self.flash.read(offset, bytes)
    }
    fn capacity(&self) -> usize {
        self.flash.capacity()
    }
}

impl NorFlash for Wearing {
    const WRITE_SIZE: usize = 1;
    const ERASE_SIZE: usize = RamFlash::ERASE_SIZE;
    fn erase(&mut self, from: u32, to: u32) -> Result<(), FlashError> {
        if self.worn.get() { Ok(()) } else { self.flash.erase(from, to) }
    }
    fn write(&mut self, offset: u32, bytes: &[u8]) -> Result<(), FlashError> {
        if self.worn.get() { Ok(()) } else { self.flash.write(offset, bytes) }
    }
}

impl MultiwriteNorFlash for Wearing {}

#[test]
fn a_station_that_can_record_nothing_more_is_pulled_all_the_same() {
    let (_folder, path) = folder();
    let worn = Rc::new(Cell::new(false));
    let flash = Wearing { flash: RamFlash::blank(32), worn: Rc::clone(&worn) };
    let mut station = MemoryLink::start(flash, STATION).unwrap();
    station.pass(1_000);
    Session::open(&mut station).unwrap().0.load(&plan("Lids, lot 7"), false).unwrap();
    for _ in 0..100 {
        station.gauge(b"2.001 mm\r\n");
    }
    worn.set(true);
    station.gauge(b"2.002 mm\r\n");

    let (mut session, _) = Session::open(&mut station).unwrap();
    assert_eq!(session.status().unwrap().journal, JournalHealth::Faulty);
    let pulled = pull(&mut session, &mut open(&path), &mut |_| {}).unwrap();
    assert_eq!(pulled.clock_refused, Some(Reason::NotRecorded(Refusal::FlashFault)));
    assert_eq!(pulled.new, 102);
    assert_eq!(session.status().unwrap().unconfirmed, 0);
    let kept = open(&path).study(None).unwrap();
    assert_eq!(kept.readings.len(), 100);
    assert!(kept.readings.iter().all(|reading| reading.time.is_none()), "nobody told the time");
}

#[test]
fn pages_that_have_become_unreadable_are_gaps_and_are_told() {
    let (_folder, path) = folder();
    let mut station = station_with_readings(200);
    let whole = journal(&mut station);
    // Behind two sectors of checkpoints the pages stand in order; programming zeros makes one unreadable.
    let page = |number: u32| 2 * 4096 + 256 * number;
    let flash = station.recorder().journal().flash();
    let mut header = [0; 1];
    let last = (0..).take_while(|number| {
        flash.read(page(*number), &mut header).unwrap();
        header != [0xff]
    });
    let last = last.last().unwrap();
    for number in [5, last] {
        flash.write(page(number), &[0; 256]).unwrap();
    }
    let left = journal(&mut station);
    assert!(left.len() < whole.len() && left.last().unwrap().0 < whole.last().unwrap().0);

    let mut ledger = open(&path);
    let (mut session, _) = Session::open(&mut station).unwrap();
    let pulled = pull(&mut session, &mut ledger, &mut |_| {}).unwrap();
    drop(session);
    assert_eq!(rows(&path)[..left.len()], left);
    let numbers: Vec<u32> = rows(&path).into_iter().map(|(seq, _)| seq).collect();
    let missing: Vec<u32> = (1..=pulled.through.0).filter(|seq| !numbers.contains(seq)).collect();
    let told: Vec<u32> = pulled.gaps.iter().flat_map(|gap| gap.first.0..=gap.last.0).collect();
    assert_eq!(told, missing);
    assert_eq!(pulled.gaps.len(), 2, "{:?}", pulled.gaps);
    let whats: Vec<_> = ledger.study(None).unwrap().incidents.iter().map(|incident| incident.what).collect();
    assert_eq!(whats, pulled.gaps.iter().map(|gap| Happening::Missing(*gap)).collect::<Vec<_>>());
    let again = pull_all(&mut station, &mut ledger);
    assert!(again.gaps.is_empty(), "told once");
    assert_eq!(pulled.gaps[1].last, Seq(whole.last().unwrap().0));
}
