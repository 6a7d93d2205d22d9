//! The journal over a flash that loses power: see `flash_model`.

use core::ops::ControlFlow;
use std::vec::Vec;

use proptest::prelude::*;

use super::*;
use crate::flash_model::{Cut, Flash, SECTORS};
use crate::record::{Gap, Sealed};
use crate::wire::StationId;

const STATION: StationId = StationId([7; 8]);

fn open(flash: Flash) -> Journal<Flash> {
    opened(flash).0
}

fn opened(flash: Flash) -> (Journal<Flash>, Salvage) {
    let (journal, opened) =
        Journal::open(flash, STATION, &mut [0; STATE_MAX]).expect("the model's geometry suits");
    (journal, opened.salvage)
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
    let (mut again, opened) = Journal::open(journal.flash().clone(), STATION, &mut state).unwrap();
    assert_eq!(opened.state.map(|length| &state[..length]), Some(&b"state"[..]));
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
    let mut digest = Digest::origin(STATION);
    loop {
        let (before, used) = journal.window(from, &mut window).unwrap();
        assert_eq!(before, digest, "the chain goes on at {from}");
        let mut rest = &window[..used];
        if used == 0 {
            break;
        }
        while let Ok((sealed, behind)) = Sealed::split(rest) {
            assert_eq!(sealed.seq(), Some(from));
            digest = digest.then(sealed.bytes());
            from = from.next();
            rest = behind;
        }
        assert_eq!(rest, [], "whole records only");
    }
    assert_eq!((from, digest), (Seq(201), journal.digest()));
}

#[test]
fn records_written_in_mid_round_are_not_missing_from_it() {
    let mut journal = open(Flash::blank());
    for mark in 0..3_000 {
        if !append(&mut journal, mark).unwrap() {
            break;
        }
        // A round's step behind each record: its end falls before, into and behind every page.
        assert!(matches!(journal.patrol().unwrap(), Patrol::Going | Patrol::Done), "behind record {mark}");
    }
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

/// Where page `number` begins in the model's flash, for the ring's first round.
fn page_at(number: usize) -> usize {
    2 * 4096 + 256 * number
}

fn fill(appends: u64) -> Flash {
    let mut journal = open(Flash::blank());
    for mark in 0..appends {
        assert!(append(&mut journal, mark).unwrap());
    }
    journal.flash().clone()
}

/// All rounds of the patrol up to its end.
fn missing(journal: &mut Journal<Flash>) -> Vec<Gap> {
    let mut gaps = Vec::new();
    loop {
        match journal.patrol().unwrap() {
            Patrol::Going => {}
            Patrol::Missing(gap) => gaps.push(gap),
            Patrol::Done => return gaps,
        }
    }
}

/// Numbers from 1 up to `next` that are not in the journal, as gaps.
fn gaps_in(journal: &mut Journal<Flash>) -> Vec<Gap> {
    let mut gaps = Vec::new();
    let mut due = Seq::FIRST;
    for (seq, _) in content(journal) {
        gaps.extend(Gap::between(due, seq));
        due = seq.next();
    }
    gaps.extend(Gap::between(due, journal.next()));
    gaps
}

#[test]
fn a_corrupted_page_costs_what_stood_in_it_and_no_more_and_the_patrol_names_it() {
    let whole = content(&mut open(fill(400)));
    for (page, at) in [(0, 0), (7, 3), (7, 31), (7, 40), (7, 200), (15, 100), (20, 20)] {
        let mut flash = fill(400);
        flash.bytes[page_at(page) + at] ^= 0x10;
        let (mut journal, salvage) = opened(flash);
        assert_eq!(salvage, Salvage::default(), "page {page} byte {at}");
        let kept = content(&mut journal);
        assert!(kept.len() + 20 >= whole.len() && kept.len() < whole.len(), "page {page} byte {at}");
        assert!(kept.iter().all(|record| whole.contains(record)));
        let gaps = gaps_in(&mut journal);
        assert_eq!(gaps.len(), 1, "page {page} byte {at}: {gaps:?}");
        assert_eq!(missing(&mut journal), gaps);
        assert_eq!(missing(&mut journal), gaps, "in the next round again");
        journal.release(gaps[0].last);
        assert_eq!(missing(&mut journal), [], "the host knows");
    }
}

#[test]
fn a_window_ends_before_a_gap_and_the_chain_goes_on_behind_it() {
    let mut journal = open(fill(100));
    let mut digests = Vec::from([Digest::origin(STATION)]);
    journal
        .visit(Seq::FIRST, |_, sealed| {
            digests.push(digests[digests.len() - 1].then(sealed.bytes()));
            ControlFlow::Continue(())
        })
        .unwrap();
    let mut flash = journal.flash().clone();
    flash.bytes[page_at(2) + 5] ^= 1;
    let mut journal = open(flash);
    let gap = gaps_in(&mut journal)[0];
    let mut buffer = [0; 1000];
    let mut numbers = |from: Seq| {
        let (before, used) = journal.window(from, &mut buffer).unwrap();
        let mut seen = Vec::new();
        let mut rest = &buffer[..used];
        while let Ok((sealed, behind)) = Sealed::split(rest) {
            seen.extend(sealed.seq());
            rest = behind;
        }
        assert_eq!(before, digests[seen[0].0 as usize - 1], "before {}", seen[0]);
        (seen[0], seen[seen.len() - 1])
    };
    assert_eq!(numbers(Seq(5)), (Seq(5), Seq(gap.first.0 - 1)));
    assert_eq!(numbers(gap.first).0, gap.last.next());
}

/// Whatever becomes of the newest pages, by what stood in `before`: no number is given twice, and all numbers that were
/// acknowledged and are gone are in the skipped gap.
fn assert_none_twice(damaged: Flash, before: &[(Seq, Event)], id: &str) {
    let (mut journal, salvage) = opened(damaged);
    let kept = content(&mut journal);
    for record in &kept {
        assert!(before.contains(record), "{id}: {record:?} was never written so");
    }
    let last = before.last().unwrap().0;
    assert!(journal.next() > last, "{id}: {} would be given twice, {last} was", journal.next());
    if kept.last().is_none_or(|(seq, _)| *seq < last) {
        assert!(salvage.skipped.is_some_and(|gap| gap.last >= last), "{id}: {salvage:?}");
    }
    assert!(journal.next().0 - last.0 <= 3 * RECORDS_IN_PAGE, "{id}: {} after {last}", journal.next());
    for mark in 900_000..900_030 {
        assert!(append(&mut journal, mark).unwrap(), "{id}");
    }
    let after = content(&mut journal);
    assert_eq!(after.len(), kept.len() + 30, "{id}: it goes on");
    let mut again = open(journal.flash().clone());
    assert_eq!(content(&mut again), after, "{id}: and is found again");
}

#[test]
fn no_number_is_given_twice_when_the_newest_pages_cannot_be_read() {
    for appends in [5, 13, 14, 100, 207, 208, 209, 300, 415, 416, 417] {
        let flash = fill(appends);
        let before = content(&mut open(flash.clone()));
        let newest = open(flash.clone()).newest.unwrap().0 as usize;
        for pages in 1..=2.min(newest) {
            for fill in [0x00, 0x5a, 0xfe] {
                let mut damaged = flash.clone();
                let begin = page_at(newest + 1 - pages);
                damaged.bytes[begin..begin + 256 * pages].fill(fill);
                assert_none_twice(damaged, &before, &std::format!("{appends}, {pages} pages of {fill:02x}"));
            }
        }
    }
}

#[test]
fn no_number_is_given_twice_whichever_bit_of_the_newest_page_turns() {
    for appends in [1, 9, 14, 211] {
        let flash = fill(appends);
        let before = content(&mut open(flash.clone()));
        let newest = open(flash.clone()).newest.unwrap().0 as usize;
        for bit in 0..8 * 256 {
            let mut damaged = flash.clone();
            damaged.bytes[page_at(newest) + bit / 8] ^= 1 << (bit % 8);
            let (mut journal, _) = opened(damaged);
            assert!(journal.next() > before.last().unwrap().0, "bit {bit} of {appends}");
            let kept = content(&mut journal);
            assert!(kept.iter().all(|record| before.contains(record)), "bit {bit} of {appends}");
        }
    }
}

/// What a cut erase leaves can be anything; no record was ever written there, so it is no gap, and no write that was cut.
#[test]
fn a_sector_whose_erase_was_cut_off_is_no_gap_whatever_it_reads_like() {
    for appends in [250, 1_000, 1_400] {
        for noise in 0..40u32 {
            let mut journal = open(Flash::blank());
            let mut mark = 0;
            loop {
                match journal.append(Millis(mark), &event(mark)) {
                    Ok(seq) => {
                        journal.release(seq);
                        mark += 1;
                    }
                    Err(AppendError::NotPrepared) if mark >= appends => break,
                    Err(AppendError::NotPrepared) => {
                        assert_eq!(journal.prepare(|_| Some(0)), Ok(Prepared::Erased))
                    }
                    Err(error) => panic!("{error:?}"),
                }
            }
            // The checkpoint is written, and the power goes within the erase.
            let spared = if journal.checkpoints.next_is_fresh() { 4096 } else { 0 };
            journal.flash().fuel = spared + 700;
            assert!(append(&mut journal, mark).is_err());
            let sector = journal.address(journal.ready_end) as usize;
            let mut flash = journal.flash().clone();
            flash.fuel = usize::MAX;
            let mut state = noise;
            for byte in &mut flash.bytes[sector..sector + 4096] {
                state = state.wrapping_mul(1_664_525).wrapping_add(1_013_904_223);
                *byte = match noise % 4 {
                    0 => 0,
                    1 => *byte | (state >> 24) as u8,
                    _ => (state >> 24) as u8,
                };
            }
            let (mut again, salvage) = opened(flash);
            assert_eq!(salvage, Salvage::default(), "{appends} {noise}");
            assert_eq!(again.next(), journal.next());
            assert!(append(&mut again, mark).unwrap());
            assert_eq!(content(&mut again).last().unwrap().1, event(mark));
            assert_eq!(missing(&mut again), []);
        }
    }
}

#[test]
fn header_bits_of_the_newest_page_that_read_1_instead_of_0_cost_nothing() {
    let flash = fill(211);
    let before = content(&mut open(flash.clone()));
    let newest = open(flash.clone()).newest.unwrap().0 as usize;
    for bit in 0..8 * HEADER {
        let mut damaged = flash.clone();
        damaged.bytes[page_at(newest) + bit / 8] |= 1 << (bit % 8);
        let (mut journal, salvage) = opened(damaged);
        assert_eq!(salvage.skipped, None, "bit {bit}");
        assert_eq!(content(&mut journal), before, "bit {bit}");
        assert_eq!(journal.flash().bytes, flash.bytes, "bit {bit} is programmed again");
    }
}

#[test]
fn a_journal_of_another_format_is_refused_and_left_as_it_is() {
    let mut flash = Flash::blank();
    flash.bytes[page_at(0)..page_at(0) + 4].copy_from_slice(b"DL\x01\xff");
    let mut state = [0; STATE_MAX];
    let refused = Journal::open(flash.clone(), STATION, &mut state).unwrap_err();
    assert_eq!(refused, OpenError::Format { found: 1 });
    // One damaged byte in a journal of this format is no other format.
    let mut flash = fill(100);
    flash.bytes[page_at(3) + 2] = 1;
    assert!(Journal::open(flash, STATION, &mut state).is_ok());
}

#[test]
fn fifty_thousand_readings_fit_a_mebibyte() {
    let mut flash = Flash::blank();
    flash.bytes.resize(1 << 20, 0xff);
    let mut journal = open(flash);
    let left = journal.pages_left().unwrap();
    let six_digits = Counts::new(-999_999).unwrap();
    let told = journal.readings_in(left, Millis(1 << 33), six_digits);
    assert!(told >= 50_000, "{told}");
    let mut taken = 0;
    loop {
        // Times as far on as told, the widest counts.
        let at = Millis((1 << 33) - 1);
        match journal.append(at, &Event::Reading(six_digits)) {
            Ok(_) => taken += 1,
            Err(AppendError::NotPrepared) if journal.prepare(|_| Some(0)).unwrap() == Prepared::Full => break,
            Err(AppendError::NotPrepared) => {}
            Err(error) => panic!("{error:?}"),
        }
    }
    assert!(taken >= told, "{told} were told, {taken} fit");
    std::println!("told {told}, taken {taken}");
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
