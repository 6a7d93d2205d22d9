//! The state machine: what each record does, and that nothing but the records counts.

use std::vec::Vec;

use proptest::prelude::*;

use super::*;
use crate::{
    plan::{Draft, tests as plans},
    quantity::{Millionths, Precision},
    record::Refusal,
    sigma::{Sigma, SubgroupSize},
    stopping::{
        Goal, StoppingRule,
        early::{Decision, tests as early},
    },
};

/// See [`plans::small`].
fn small_plan() -> Event {
    Event::Plan(plans::small())
}

/// The same with sigma within subgroups of 3, or of neighbours: 6 planned, ±60 %.
fn within_plan(sigma: Sigma) -> Event {
    let draft = Draft {
        rule: StoppingRule {
            planned: Count::new(6).unwrap(),
            goal: Goal::Precision(Precision::Relative(Millionths(600_000))),
            limit: Count::new(12).unwrap(),
        },
        same_in_a_row: 4,
        sigma,
        ..plans::draft()
    };
    Event::Plan(Plan::try_from(draft).unwrap())
}

const THREE: SubgroupSize = SubgroupSize::new(3).unwrap();

fn reading(counts: i64) -> Event {
    Event::Reading(Counts::new(counts).unwrap())
}

fn replay(events: &[Event]) -> Station {
    let mut station = Station::default();
    for (i, event) in events.iter().enumerate() {
        station.apply(Seq(i as u32 + 1), event);
    }
    station
}

fn study_of(counts: &[i64]) -> Study {
    let mut events = std::vec![small_plan()];
    events.extend(counts.iter().map(|c| reading(*c)));
    replay(&events).study().unwrap().clone()
}

const SPREAD: [i64; 12] =
    [10_001, 9_999, 10_002, 9_998, 10_003, 9_997, 10_001, 9_999, 10_002, 9_998, 10_000, 10_003];

#[test]
fn a_study_gathers_until_count_and_precision_are_reached_and_then_keeps_surplus_apart() {
    // Bissell's floor at ±50 % and 95 % is 9 pieces (1 + z²/(2r²) = 8.68), so precision comes after the count.
    let settled = (1..=12).find(|n| study_of(&SPREAD[..*n]).standing() == Standing::Settled).unwrap();
    assert!((9..12).contains(&settled), "{settled}");
    let study = study_of(&SPREAD);
    assert_eq!(study.standing(), Standing::Settled);
    assert_eq!(study.progress().n.get() as usize, settled);
    assert_eq!(study.progress().surplus as usize, 12 - settled);
    assert_eq!(study.moments(), study_of(&SPREAD[..settled]).moments());
}

#[test]
fn a_study_is_spent_at_its_limit_without_the_precision() {
    // The mean lies at the lower limit: the estimate is near zero, and no relative width is reached.
    let at_limit: Vec<i64> = SPREAD.iter().map(|c| c - 30).collect();
    assert_eq!(study_of(&at_limit[..11]).standing(), Standing::Gathering);
    assert_eq!(study_of(&at_limit).standing(), Standing::Spent);
}

#[test]
fn equal_readings_hold_the_study_until_someone_has_looked() {
    let stuck = [10_001, 9_999, 10_002, 9_998, 10_003, 10_003, 10_003, 10_003];
    let study = study_of(&stuck);
    assert_eq!(study.held(), Some(Held::GaugeStuck));
    assert_eq!(study.progress().n.get(), 8, "the readings are kept");

    let mut events = std::vec![small_plan()];
    events.extend(SPREAD[..4].iter().chain(&[10_003; 4]).chain(&SPREAD[..4]).map(|c| reading(*c)));
    let held = replay(&events);
    assert_eq!(held.study().unwrap().standing(), Standing::Gathering, "held, though the limit is reached");
    events.push(Event::Seen);
    let seen = replay(&events);
    assert_eq!(seen.study().unwrap().held(), None);
    assert_ne!(seen.study().unwrap().standing(), Standing::Gathering);
}

#[test]
fn the_settling_reading_can_be_taken_back_and_the_study_goes_on() {
    let settled = study_of(&SPREAD).progress().n.get() as usize;
    let mut events = std::vec![small_plan()];
    events.extend(SPREAD[..settled].iter().map(|c| reading(*c)));
    events.push(Event::TakenBack(Seq(settled as u32 + 1)));
    let study = replay(&events).study().unwrap().clone();
    assert_eq!(study.standing(), Standing::Gathering);
    assert_eq!(study.moments(), study_of(&SPREAD[..settled - 1]).moments());
    assert_eq!(study.progress().taken_back, 1);
}

#[test]
fn a_study_in_subgroups_is_judged_at_whole_ones_only() {
    let settled = |sigma| {
        (1..=12).find(|n| {
            let mut events = std::vec![within_plan(sigma)];
            events.extend(SPREAD[..*n].iter().map(|c| reading(*c)));
            replay(&events).study().unwrap().standing() == Standing::Settled
        })
    };
    // ±60 % takes ν ≥ z²/(2r²) = 5.3 at the least: three subgroups of three have 6, and by their ranges 5.6.
    assert_eq!(settled(Sigma::Pooled(THREE)), Some(9));
    assert_eq!(settled(Sigma::Ranges(THREE)), Some(9));
    assert_eq!(settled(Sigma::MovingRanges), Some(10));
}

#[test]
fn only_the_latest_reading_can_be_taken_back_and_only_once() {
    let base = [small_plan(), reading(1), reading(2)];
    let twice =
        [&base[..], &[Event::TakenBack(Seq(3)), Event::TakenBack(Seq(3)), Event::TakenBack(Seq(2))]].concat();
    let study = replay(&twice).study().unwrap().clone();
    assert_eq!((study.progress().n.get(), study.progress().taken_back), (1, 1));
    assert_eq!(replay(&twice).last_reading(), None);
}

#[test]
fn a_new_plan_ends_what_went_before() {
    let events = [small_plan(), reading(1), reading(2), small_plan(), reading(7)];
    let study = replay(&events).study().unwrap().clone();
    assert_eq!((study.began(), study.progress().n.get()), (Seq(4), 1));
}

/// Claim 1.5 against 1.3 at 4, 8 and 12 pieces; 4 equal readings hold it. Counts are thousandths of 9.97 to 10.03.
fn early_plan() -> Event {
    let draft = Draft {
        rule: StoppingRule::deciding_early(early::early()),
        index: crate::capability::Index::Cp,
        same_in_a_row: 4,
        ..plans::draft()
    };
    Event::Plan(Plan::try_from(draft).unwrap())
}

fn early_study(counts: &[i64], then: &[Event]) -> Study {
    let mut events = std::vec![early_plan()];
    events.extend(counts.iter().map(|c| reading(*c)));
    events.extend_from_slice(then);
    replay(&events).study().unwrap().clone()
}

/// Two readings ±d about the middle, over and over: s² = d² n/(n − 1).
fn about_the_middle(d: i64, n: usize) -> Vec<i64> {
    (0..n).map(|i| 10_000 + if i % 2 == 0 { d } else { -d }).collect()
}

#[test]
fn a_claim_is_decided_at_a_look_and_what_comes_after_is_surplus() {
    // Cp = 0.06/(6s): 2.17 at d = 4 after 4 pieces, above 2.
    let kept = early_study(&about_the_middle(4, 6), &[]);
    assert_eq!((kept.standing(), kept.decision()), (Standing::Settled, Some(Decision::ClaimKept)));
    assert_eq!((kept.progress().n.get(), kept.progress().surplus), (4, 2));
    // 0.72 at d = 12: the first look rejects nothing, the second one does (0.78, below 1.2).
    let spread = about_the_middle(12, 9);
    assert_eq!(early_study(&spread[..7], &[]).standing(), Standing::Gathering);
    let rejected = early_study(&spread, &[]);
    assert_eq!(
        (rejected.standing(), rejected.decision()),
        (Standing::Settled, Some(Decision::ClaimRejected))
    );
    assert_eq!((rejected.progress().n.get(), rejected.progress().surplus), (8, 1));
    // Between the boundaries to the end: 1.35 after 8, 1.38 after 12, below 1.4.
    let open = about_the_middle(7, 12);
    assert_eq!(early_study(&open[..11], &[]).standing(), Standing::Gathering);
    assert_eq!(early_study(&open, &[]).decision(), Some(Decision::ClaimRejected));
    // No spread, no estimate, no decision.
    let stuck = Event::Plan(
        Plan::try_from(Draft {
            rule: StoppingRule::deciding_early(early::early()),
            same_in_a_row: 0,
            ..plans::draft()
        })
        .unwrap(),
    );
    let mut events = std::vec![stuck];
    events.extend(std::iter::repeat_n(reading(10_000), 13));
    let study = replay(&events).study().unwrap().clone();
    assert_eq!((study.standing(), study.decision(), study.progress().surplus), (Standing::Spent, None, 1));
}

#[test]
fn a_decision_is_undone_with_the_reading_that_made_it() {
    let study = early_study(&about_the_middle(4, 4), &[Event::TakenBack(Seq(5))]);
    assert_eq!((study.standing(), study.decision()), (Standing::Gathering, None));
    assert_eq!(study.progress().n.get(), 3);
}

#[test]
fn a_look_that_falls_into_a_hold_is_not_missed() {
    // 4 equal readings at the end of the second look's pieces hold the study: Cp is 0.85 there.
    let counts: Vec<i64> = [10_012, 9_988, 10_012, 9_988].into_iter().chain([10_012; 4]).collect();
    let held = early_study(&counts, &[]);
    assert_eq!((held.standing(), held.held()), (Standing::Gathering, Some(Held::GaugeStuck)));
    let late = [reading(9_999), reading(10_001)];
    let later = early_study(&counts, &late);
    assert_eq!((later.progress().n.get(), later.progress().surplus), (8, 2));
    let seen = early_study(&counts, &[&late[..], &[Event::Seen]].concat());
    assert_eq!(seen.decision(), Some(Decision::ClaimRejected));
    // Where the look decides nothing, the readings go on to count.
    let counts: Vec<i64> = [10_007, 9_993, 10_007, 9_993].into_iter().chain([10_008; 4]).collect();
    assert_eq!(early_study(&counts, &late).progress().n.get(), 10);
}

fn any_event() -> impl Strategy<Value = Event> {
    prop_oneof![
        1 => prop_oneof![Just(small_plan()), Just(early_plan())],
        1 => Just(within_plan(Sigma::Pooled(THREE))),
        1 => Just(within_plan(Sigma::Ranges(THREE))),
        1 => Just(within_plan(Sigma::MovingRanges)),
        20 => (9_990i64..10_010).prop_map(reading),
        3 => (1u32..60).prop_map(|seq| Event::TakenBack(Seq(seq))),
        2 => Just(Event::Seen),
        1 => any::<u32>().prop_map(|boot| Event::Boot { boot }),
        1 => (1u16..9).prop_map(|times| Event::Refused { reason: Refusal::LineTooLong, times }),
    ]
}

proptest! {
    #[test]
    fn a_state_that_was_stored_goes_on_as_one_that_was_not(
        events in proptest::collection::vec(any_event(), 0..60),
        at in any::<prop::sample::Index>(),
    ) {
        let whole = replay(&events);
        let cut = if events.is_empty() { 0 } else { at.index(events.len()) };
        let mut bytes = [0; crate::journal::STATE_MAX];
        let used = replay(&events[..cut]).store(&mut bytes).unwrap();
        let mut station = Station::restore(&bytes[..used]).unwrap();
        for (i, event) in events.iter().enumerate().skip(cut) {
            station.apply(Seq(i as u32 + 1), event);
        }
        prop_assert_eq!(station, whole);
    }

    #[test]
    fn records_that_come_again_change_nothing(
        events in proptest::collection::vec(any_event(), 1..60),
        again in any::<prop::sample::Index>(),
    ) {
        let mut station = replay(&events);
        let whole = station.clone();
        let from = again.index(events.len());
        for (i, event) in events.iter().enumerate().skip(from) {
            station.apply(Seq(i as u32 + 1), event);
        }
        prop_assert_eq!(station, whole);
    }

    #[test]
    fn the_study_s_sums_are_those_of_the_readings_that_count(
        events in proptest::collection::vec(any_event(), 0..60),
    ) {
        let mut station = Station::default();
        let mut counted: Vec<(Seq, Counts)> = Vec::new();
        for (i, event) in events.iter().enumerate() {
            let seq = Seq(i as u32 + 1);
            let gathering = station
                .study()
                .is_some_and(|s| s.standing() == Standing::Gathering && !s.decided_though_held());
            match event {
                Event::Plan(_) => counted.clear(),
                Event::Reading(c) if gathering => counted.push((seq, *c)),
                Event::TakenBack(s) if station.last_reading() == Some(*s) => counted.retain(|(q, _)| q != s),
                _ => {}
            }
            station.apply(seq, event);
        }
        let Some(study) = station.study() else { return Ok(()) };
        let mut tally = Tally::new(study.plan().sigma);
        for (_, counts) in &counted {
            tally.add(*counts).unwrap();
        }
        prop_assert_eq!(study.moments(), tally.moments());
        let (resolution, specification) = (study.plan().resolution, study.plan().specification());
        prop_assert_eq!(study.sample(), tally.sample(resolution, specification).ok());
    }
}

#[test]
fn the_largest_state_fits_a_checkpoint() {
    for draft in [plans::longest(), plans::longest_early()] {
        let mut station = replay(&[Event::Plan(Plan::try_from(draft).unwrap())]);
        fill(&mut station);
        let mut bytes = [0; crate::journal::STATE_MAX];
        assert!(station.store(&mut bytes).is_some());
    }
}

/// Every number of the station as long as it can be.
fn fill(station: &mut Station) {
    let study = station.study.as_mut().unwrap();
    for counts in [1_000_000_000_000, -1_000_000_000_000].iter().cycle().take(1_000_000) {
        study.tally.add(Counts::new(*counts).unwrap()).unwrap();
    }
    study.surplus = u32::MAX;
    study.taken_back = u32::MAX;
    study.latest =
        Some(Latest { seq: Seq(u32::MAX), counts: Counts::new(-1_000_000_000_000).unwrap(), surplus: true });
    study.held = Some(Held::GaugeStuck);
    (station.boots, station.refused) = (u32::MAX, u32::MAX);
}

#[test]
fn a_state_of_another_version_is_not_taken_for_one() {
    let station = replay(&[small_plan(), reading(10_001)]);
    let mut bytes = [0; crate::journal::STATE_MAX];
    let used = station.store(&mut bytes).unwrap();
    assert_eq!(Station::restore(&bytes[..used]), Some(station.clone()));
    // The first version stored no format.
    assert_eq!(Station::restore(&bytes[1..used]), None);
    assert_eq!(Station::restore(&[]), None);
    bytes[0] += 1;
    assert_eq!(Station::restore(&bytes[..used]), None);
}
