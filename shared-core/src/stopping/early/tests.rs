//! What a look decides, and what is no table of looks.

use proptest::prelude::*;

use super::*;

pub(crate) fn look(n: u32, keep: u32, reject: u32) -> Look {
    Look {
        n: Count::new(n).unwrap(),
        keep: Boundary::from_ten_thousandths(keep),
        reject: Boundary::from_ten_thousandths(reject),
    }
}

/// Claim 1.5 against 1.3, three looks, none of which rejects at first.
pub(crate) fn early() -> EarlyDecision {
    EarlyDecision {
        claim: Millionths(1_500_000),
        against: Millionths(1_300_000),
        alpha: Millionths(50_000),
        power: Confidence::NINETY_FIVE_PERCENT,
        spending: Spending::Pocock,
        looks: [look(4, 20_000, 0), look(8, 16_000, 12_000), look(12, 14_000, 14_000)].into_iter().collect(),
    }
}

/// The same question the other way round: a high estimate rejects.
fn mirrored() -> EarlyDecision {
    EarlyDecision {
        claim: Millionths(1_300_000),
        against: Millionths(1_500_000),
        looks: [look(4, 0, 20_000), look(8, 12_000, 16_000), look(12, 14_000, 14_000)].into_iter().collect(),
        ..early()
    }
}

fn count(n: u32) -> Count {
    Count::new(n).unwrap()
}

#[test]
fn a_look_decides_at_its_boundaries_and_nothing_decides_between_looks() {
    use Decision::{ClaimKept, ClaimRejected};
    for (n, estimate, decision) in [
        (3, 9.0, None),
        (4, 2.0, Some(ClaimKept)),
        (4, 1.9999, None),
        (4, -5.0, None),
        (7, 9.0, None),
        (8, 1.6, Some(ClaimKept)),
        (8, 1.2, None),
        (8, 1.199_999, Some(ClaimRejected)),
        (8, 1.599_999, None),
        (11, 0.1, None),
        (12, 1.4, Some(ClaimKept)),
        (12, 1.399_999, Some(ClaimRejected)),
        (13, 1.4, Some(ClaimKept)),
    ] {
        assert_eq!(early().decide(count(n), estimate), decision, "{estimate} after {n}");
    }
    for (n, estimate, decision) in [
        (4, 0.1, None),
        (4, 2.0001, Some(ClaimRejected)),
        (8, 1.2, Some(ClaimKept)),
        (8, 1.6, None),
        (12, 1.4, Some(ClaimKept)),
        (12, 1.4001, Some(ClaimRejected)),
    ] {
        assert_eq!(mirrored().decide(count(n), estimate), decision, "{estimate} after {n}, mirrored");
    }
}

#[test]
fn a_study_is_judged_at_looks_only_and_spent_at_the_last_if_there_is_no_estimate() {
    let early = early();
    for n in [0, 3, 5, 7, 11] {
        assert_eq!(early.judge(count(n), || panic!("no estimate is wanted here")), Standing::Gathering);
    }
    assert_eq!(early.judge(count(8), || Some(1.5)), Standing::Gathering);
    assert_eq!(early.judge(count(8), || Some(1.1)), Standing::Settled);
    assert_eq!(early.judge(count(8), || None), Standing::Gathering);
    assert_eq!(early.judge(count(12), || Some(0.0)), Standing::Settled);
    assert_eq!(early.judge(count(12), || None), Standing::Spent);
}

#[test]
fn a_question_or_a_table_that_is_no_good_is_named() {
    assert_eq!(early().check(), Ok(()));
    assert_eq!(mirrored().check(), Ok(()));
    let with = |change: &dyn Fn(&mut EarlyDecision)| {
        let mut changed = early();
        change(&mut changed);
        changed.check()
    };
    assert_eq!(with(&|e| e.against = e.claim), Err(EarlyError::Question));
    assert_eq!(with(&|e| e.against = Millionths(0)), Err(EarlyError::Question));
    assert_eq!(with(&|e| e.alpha = Millionths(0)), Err(EarlyError::Alpha));
    assert_eq!(with(&|e| e.alpha = Millionths(500_001)), Err(EarlyError::Alpha));
    assert_eq!(with(&|e| e.looks.clear()), Err(EarlyError::Order));
    assert_eq!(with(&|e| e.looks[0].n = Count::ONE), Err(EarlyError::Order));
    assert_eq!(with(&|e| e.looks[1].n = count(4)), Err(EarlyError::Order));
    assert_eq!(with(&|e| e.looks[1] = look(8, 12_000, 12_001)), Err(EarlyError::Boundaries));
    assert_eq!(with(&|e| e.looks[2] = look(12, 14_000, 13_999)), Err(EarlyError::Boundaries));
    assert_eq!(with(&|e| e.looks[2] = look(12, 0, 0)), Err(EarlyError::Boundaries));
    // A table made for the other direction.
    assert_eq!(with(&|e| e.claim = Millionths(1_100_000)), Err(EarlyError::Boundaries));
}

proptest! {
    /// The argument that the worst position of the process is known rests on this: see the host's design.
    #[test]
    fn estimates_that_are_nowhere_lower_never_turn_a_kept_claim_into_a_rejected_one(
        estimates in proptest::array::uniform3(0.8f64..2.2),
        rise in proptest::array::uniform3(0.0f64..0.5),
    ) {
        let verdict = |estimates: [f64; 3]| {
            [4, 8, 12].into_iter().zip(estimates).find_map(|(n, e)| early().decide(count(n), e)).unwrap()
        };
        let raised = std::array::from_fn(|i| estimates[i] + rise[i]);
        if verdict(estimates) == Decision::ClaimKept {
            prop_assert_eq!(verdict(raised), Decision::ClaimKept);
        }
    }

    #[test]
    fn a_look_s_bytes_come_back(n in 0u32..1_000_000, keep in any::<u32>(), reject in any::<u32>()) {
        let look = look(n, keep, reject);
        let mut bytes = [0; 16];
        let used = postcard::to_slice(&look, &mut bytes).unwrap();
        prop_assert_eq!(postcard::from_bytes::<Look>(used), Ok(look));
    }
}
