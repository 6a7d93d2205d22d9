//! Pulling over a bad line: the ledger then holds whole windows of the journal, and the next pull completes it.

use donelight::link::Session;
use donelight::link::pull::pull;
use donelight_core::record::{Event, Record};
use proptest::prelude::*;

use crate::faulty::{At, Fault, Faulty, faults};
use crate::support::*;

/// Pulls over a line with these faults, then over a good one, and looks at both outcomes.
fn pull_through(there: Vec<At>, back: Vec<At>, readings: u32) {
    let (_folder, path) = folder();
    let mut station = station_with_readings(readings);
    {
        let mut ledger = open(&path);
        let line = Faulty::new(&mut station, there, back);
        let outcome =
            Session::open(line).map(|(mut session, _)| pull(&mut session, &mut ledger, &mut |_| {}));
        drop(ledger);
        let (kept, journal) = (rows(&path), journal(&mut station));
        match outcome {
            Ok(Ok(_)) => assert_eq!(kept, journal, "done means all"),
            Ok(Err(_)) | Err(_) => {
                assert_eq!(kept[..], journal[..kept.len()], "whole windows from the first on")
            }
        }
        let released = station.recorder().journal().released().0;
        assert!(released as usize <= kept.len(), "confirmed {released}, kept {}", kept.len());
    }
    pull_all(&mut station, &mut open(&path));
    assert_eq!(rows(&path), journal(&mut station), "the next pull completes it");
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(120))]

    #[test]
    fn whatever_the_line_does_nothing_is_lost_or_doubled(
        there in faults(160),
        back in faults(4_000),
        readings in 0..220u32,
    ) {
        pull_through(there, back, readings);
    }
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(300))]

    #[test]
    fn a_plan_loaded_over_a_bad_line_begins_one_study_at_most(there in faults(160), back in faults(120)) {
        let mut station = station();
        let line = Faulty::new(&mut station, there, back);
        let outcome = Session::open(line).and_then(|(mut session, _)| session.load(&plan("Lids, lot 7"), false));
        let plans: Vec<u32> = journal(&mut station)
            .iter()
            .filter(|(_, bytes)| matches!(Record::decode(bytes).unwrap().event, Event::Plan(_)))
            .map(|(seq, _)| *seq)
            .collect();
        match outcome {
            Ok(began) => prop_assert_eq!(plans, [began.0]),
            Err(_) => prop_assert!(plans.len() <= 1, "{plans:?}"),
        }
    }
}

#[test]
fn unplugged_after_any_byte_the_next_pull_completes_it() {
    for at in (0..3_900).step_by(61) {
        pull_through(Vec::new(), vec![(at, Fault::Unplug)], 200);
    }
    for at in 0..90 {
        pull_through(vec![(at, Fault::Unplug)], Vec::new(), 60);
    }
}

#[test]
fn a_lost_confirmation_is_made_up_for_by_the_next_pull() {
    let (_folder, path) = folder();
    let mut station = station_with_readings(20);
    let mut ledger = open(&path);
    // Hello, hello, records: some 40 bytes there; then the confirmation is lost, with the port.
    let line = Faulty::new(&mut station, vec![(45, Fault::Unplug)], Vec::new());
    let (mut session, _) = Session::open(line).unwrap();
    pull(&mut session, &mut ledger, &mut |_| {}).unwrap_err();
    drop(session);
    assert!(!rows(&path).is_empty());
    assert_eq!(station.recorder().journal().released().0, 0, "not confirmed");
    assert_eq!(pull_all(&mut station, &mut ledger).new as usize + 22, rows(&path).len());
    assert_eq!(station.recorder().journal().released().0 as usize, rows(&path).len());
}
