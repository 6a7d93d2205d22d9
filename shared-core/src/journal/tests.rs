//! The journal over a flash that loses power: see `flash_model`.

use core::ops::ControlFlow;
use std::vec::Vec;

use proptest::prelude::*;

use super::*;
use crate::flash_model::{Cut, Flash, SECTORS};

fn open(flash: Flash) -> Journal<Flash> {
    Journal::open(flash, &mut [0; STATE_MAX]).expect("the model's geometry suits").0
}

/// The simplest event whose content tells it from its neighbours.
fn event(mark: u64) -> Event {
    Event::Clock { unix_ms: 1_700_000_000_000 + mark }
}

/// Appends, preparing where asked; `false`: full.
fn append(journal: &mut Journal<Flash>, mark: u64) -> Result<bool, AppendError<Cut>> {
    let at = Millis(mark);
    match journal.append(at, &event(mark)) {
        Err(AppendError::NotPrepared) => {
            if journal.prepare(|_| Some(0))? == Prepared::Full {
                return Ok(false);
            }
            journal.append(at, &event(mark)).map(|_| true)
        }
        other => other.map(|_| true),
    }
}

fn content(journal: &mut Journal<Flash>) -> Vec<(Seq, Event)> {
    let mut all = Vec::new();
    journal
        .visit(Seq::FIRST, |seq, sealed| {
            all.push((seq, sealed.record().expect("this version wrote it").event));
            ControlFlow::Continue(())
        })
        .expect("reading needs no power in this model");
    all
}

#[test]
fn what_was_appended_is_read_back_in_order_after_any_reboot() {
    let mut flash = Flash::blank();
    let mut expected = Vec::new();
    for boot in 0..5 {
        let mut journal = open(flash);
        for i in 0..40 {
            assert!(append(&mut journal, boot * 100 + i).unwrap());
            expected.push((Seq(expected.len() as u32 + 1), event(boot * 100 + i)));
        }
        assert_eq!(content(&mut journal), expected);
        flash = journal.flash().clone();
    }
}

#[test]
fn a_full_journal_refuses_until_the_host_has_confirmed_and_loses_nothing() {
    let mut journal = open(Flash::blank());
    let mut n = 0;
    while append(&mut journal, n).unwrap() {
        n += 1;
        assert!(n < 100_000, "it never fills");
    }
    assert_eq!(content(&mut journal).len() as u64, n, "everything is still there");
    assert!(!append(&mut journal, n).unwrap(), "and still refused");

    journal.release(Seq(n as u32 / 2));
    assert!(append(&mut journal, n).unwrap(), "room was made");
    let kept = content(&mut journal);
    let first_kept = kept.first().unwrap().0;
    assert!(first_kept <= Seq(n as u32 / 2 + 1), "only confirmed records went: {first_kept}");
    assert_eq!(kept.last().unwrap().0, Seq(n as u32 + 1));
    assert_eq!(journal.oldest().unwrap(), first_kept);
}

#[test]
fn confirmed_room_is_used_again_for_ever_with_wear_kept_even() {
    let mut flash = Flash::blank();
    let mut n = 0u64;
    for _ in 0..30 {
        let mut journal = open(flash);
        for _ in 0..300 {
            assert!(append(&mut journal, n).unwrap());
            n += 1;
            journal.release(Seq(n as u32));
        }
        let last = content(&mut journal).last().unwrap().clone();
        assert_eq!(last, (Seq(n as u32), event(n - 1)));
        flash = journal.flash().clone();
    }
    assert!(flash.erases > 40, "the ring went round: {} erases", flash.erases);
}

#[test]
fn the_state_of_the_last_checkpoint_comes_back() {
    let mut journal = open(Flash::blank());
    let mut n = 0;
    while append(&mut journal, n).unwrap() {
        n += 1;
    }
    journal.release(Seq(n as u32));
    let prepared = journal.prepare(|space| {
        space[..5].copy_from_slice(b"state");
        Some(5)
    });
    assert_eq!(prepared, Ok(Prepared::Erased));
    let mut state = [0; STATE_MAX];
    let (mut again, length) = Journal::open(journal.flash().clone(), &mut state).unwrap();
    assert_eq!(length.map(|length| &state[..length]), Some(&b"state"[..]));
    assert_eq!(again.released(), Seq(n as u32));
    assert_eq!(again.next(), Seq(n as u32 + 1));
    assert_eq!(again.oldest().unwrap(), content(&mut again).first().unwrap().0);
}

#[test]
fn a_flash_of_other_content_is_opened_as_an_empty_journal() {
    let mut flash = Flash::blank();
    for (i, byte) in flash.bytes.iter_mut().enumerate() {
        *byte = (i * 31 % 251) as u8;
    }
    let mut journal = open(flash);
    assert_eq!(content(&mut journal), []);
    assert!(append(&mut journal, 7).unwrap());
    assert_eq!(content(&mut journal), [(Seq(1), event(7))]);
}

#[test]
fn records_are_read_in_windows_from_any_number() {
    let mut journal = open(Flash::blank());
    for n in 0..200 {
        append(&mut journal, n).unwrap();
    }
    let mut window = [0; 100];
    let mut from = Seq(1);
    let mut seen = 0;
    loop {
        let used = journal.read(from, &mut window).unwrap();
        let mut rest = &window[..used];
        if used == 0 {
            break;
        }
        while let Ok((sealed, behind)) = Sealed::split(rest) {
            assert_eq!(sealed.seq(), Some(from));
            from = from.next();
            seen += 1;
            rest = behind;
        }
        assert_eq!(rest, [], "whole records only");
    }
    assert_eq!(seen, 200);
    assert_eq!(journal.read(Seq(201), &mut window), Ok(0));
}

/// One session until the power goes: appends with marks from `mark` on, confirming all but `behind` records. Gives the
/// marks acknowledged, and the one that was under way.
fn session(journal: &mut Journal<Flash>, mark: u64, appends: u64, behind: u32) -> (Vec<u64>, Option<u64>) {
    let mut acknowledged = Vec::new();
    for mark in mark..mark + appends {
        match append(journal, mark) {
            Ok(true) => acknowledged.push(mark),
            Ok(false) => {}
            Err(_) => return (acknowledged, Some(mark)),
        }
        journal.release(Seq(journal.next().0.saturating_sub(behind)));
    }
    (acknowledged, None)
}

/// All marks in the journal must be acknowledged ones in order, but that one which was under way when the power went may
/// be there or not; and none that is not confirmed may be missing.
fn check(journal: &mut Journal<Flash>, acknowledged: &[u64], behind: u32, id: &str) {
    let kept = content(journal);
    let marks: Vec<u64> = kept
        .iter()
        .map(|(_, event)| match event {
            Event::Clock { unix_ms } => unix_ms - 1_700_000_000_000,
            other => panic!("{id}: never written: {other:?}"),
        })
        .collect();
    for pair in kept.windows(2) {
        assert_eq!(pair[1].0, pair[0].0.next(), "{id}: numbers without a gap");
    }
    assert!(acknowledged.ends_with(&marks), "{id}: {marks:?} is not the end of {acknowledged:?}");
    assert!(marks.len() >= acknowledged.len().min(behind as usize), "{id}: unconfirmed records are gone");
}

fn sweep(sessions: &[(usize, u64)], behind: u32) -> usize {
    let mut journal = open(Flash::blank());
    let mut acknowledged: Vec<u64> = Vec::new();
    let id = std::format!("{sessions:?} behind {behind}");
    let mut mark = 0;
    for (fuel, appends) in sessions {
        journal.flash().fuel = *fuel;
        let (done, under_way) = session(&mut journal, mark, *appends, behind);
        mark += appends;
        acknowledged.extend(done);
        let mut flash = journal.flash().clone();
        flash.fuel = usize::MAX;
        journal = open(flash);
        if let Some(cut) = under_way
            && content(&mut journal).last().is_some_and(|(_, last)| *last == event(cut))
        {
            acknowledged.push(cut);
        }
        check(&mut journal, &acknowledged, behind, &id);
    }
    acknowledged.len()
}

#[test]
fn a_cut_at_every_byte_of_a_session_loses_nothing_acknowledged_and_doubles_nothing() {
    // 60 records with their page headers take about 1,300 bytes; the first sector's erase 4,096.
    for fuel in 0..6_000 {
        sweep(&[(fuel, 60), (usize::MAX, 30)], 1_000);
    }
}

#[test]
fn a_cut_while_the_ring_goes_round_loses_nothing_that_is_not_confirmed() {
    for fuel in (0..40_000).step_by(97) {
        sweep(&[(fuel, 1_500), (usize::MAX, 700)], 150);
    }
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 400, ..ProptestConfig::default() })]

    #[test]
    fn cuts_one_after_the_other_lose_nothing_acknowledged(
        sessions in proptest::collection::vec((0usize..12_000, 1u64..120), 1..12),
        behind in 1u32..400,
    ) {
        sweep(&sessions, behind);
    }

    #[test]
    fn any_flash_content_opens_without_a_panic_and_takes_records(
        noise in proptest::collection::vec((0usize..SECTORS * 4096, any::<u8>()), 0..200),
        appends in 0u64..300,
    ) {
        let mut journal = open(Flash::blank());
        let (_, _) = session(&mut journal, 0, appends, 1_000);
        let mut flash = journal.flash().clone();
        for (at, byte) in noise {
            flash.bytes[at] = byte;
        }
        let mut journal = open(flash);
        for (seq, _) in content(&mut journal).windows(2).map(|pair| (pair[0].0, pair[1].0)) {
            prop_assert!(seq >= Seq::FIRST);
        }
        prop_assert!(append(&mut journal, 1_000).is_ok());
    }
}
