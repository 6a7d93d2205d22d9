use super::{SizingError, power, precision};
use crate::capability::Index;
use crate::interval::Kind;
use crate::quantity::{Confidence, Count, Millionths, Precision};

const NINETY_FIVE: Confidence = Confidence::NINETY_FIVE_PERCENT;
const TEN_PERCENT: Precision = Precision::Relative(Millionths(100_000));
const FIVE_PERCENT: Millionths = Millionths(50_000);

// Common practice, no source: 212 pieces for Cpk 1.5 to within ±10 % at 95 %.
#[test]
fn two_hundred_and_twelve_pieces_put_a_cpk_of_1_5_between_1_35_and_1_65() {
    let size = precision::smallest(Index::Cpk, 1.5, TEN_PERCENT, NINETY_FIVE, Kind::TwoSided).unwrap();
    assert_eq!(size.n.get(), 212);
    assert!((size.interval.low.unwrap() - 1.350_02).abs() < 5e-6);
    assert!((size.interval.high.unwrap() - 1.649_98).abs() < 5e-6);
    assert!((size.achieved - 0.099_989).abs() < 5e-7);
    assert!((size.achieved_before.unwrap() - 0.100_227).abs() < 5e-7);
}

// Common practice, no source: 297 pieces to tell a claimed Cpk of 1.5 from 1.3 at 5 % with a power of 95 %.
#[test]
fn two_hundred_and_ninety_seven_pieces_tell_a_cpk_of_1_5_from_1_3() {
    let size = power::smallest(Index::Cpk, 1.5, 1.3, FIVE_PERCENT, NINETY_FIVE).unwrap();
    assert_eq!(size.n.get(), 297);
    assert!((size.achieved - 0.950_464).abs() < 5e-7);
    assert!((size.achieved_before.unwrap() - 0.949_852).abs() < 5e-7);
    assert!((size.critical - 1.3937).abs() < 5e-5);
}

#[test]
fn the_mirrored_test_rejects_above_its_critical_value() {
    let size = power::smallest(Index::Cpk, 1.3, 1.5, FIVE_PERCENT, NINETY_FIVE).unwrap();
    assert_eq!(size.n.get(), 297);
    assert!((size.achieved - 0.950_408).abs() < 5e-7);
    assert!(size.critical > 1.3 && size.critical < 1.5);
}

#[test]
fn an_absolute_goal_of_0_15_is_the_relative_goal_of_10_percent_at_1_5() {
    let absolute = Precision::Absolute(Millionths(150_000));
    for kind in [Kind::TwoSided, Kind::Lower, Kind::Upper] {
        let relative = precision::smallest(Index::Cpk, 1.5, TEN_PERCENT, NINETY_FIVE, kind).unwrap();
        let size = precision::smallest(Index::Cpk, 1.5, absolute, NINETY_FIVE, kind).unwrap();
        assert_eq!((size.n, size.interval), (relative.n, relative.interval));
        assert!((size.achieved - 1.5 * relative.achieved).abs() < 1e-15);
    }
}

#[test]
fn a_size_of_two_has_no_size_before_it() {
    let size = precision::smallest(
        Index::Cpk,
        1.0,
        Precision::Absolute(Millionths(4_000_000)),
        NINETY_FIVE,
        Kind::Lower,
    )
    .unwrap();
    assert_eq!((size.n.get(), size.achieved_before), (2, None));
    let at_two =
        precision::precision_at(Count::new(2).unwrap(), Index::Cpk, 1.0, NINETY_FIVE, Kind::Lower).unwrap();
    assert_eq!(size.achieved, at_two.half_width);
}

#[test]
fn the_size_may_be_the_largest_count_and_no_more() {
    // For Cp n = 1 + z²/(2 r²), rounded up: 888 858 for r = 0.147 %, 1 008 576 for r = 0.138 %.
    let just_below = Precision::Relative(Millionths(1_470));
    let size = precision::smallest(Index::Cp, 1.0, just_below, NINETY_FIVE, Kind::TwoSided).unwrap();
    assert_eq!(size.n.get(), 888_858);
    let beyond = Precision::Relative(Millionths(1_380));
    let refused = precision::smallest(Index::Cp, 1.0, beyond, NINETY_FIVE, Kind::TwoSided);
    assert_eq!(refused, Err(SizingError::AboveLimit));
}

#[test]
fn impossible_demands_are_named() {
    let precise = |at, precision| precision::smallest(Index::Cpk, at, precision, NINETY_FIVE, Kind::TwoSided);
    for at in [0.0, -1.5, f64::NAN, f64::INFINITY, 1000.5] {
        assert_eq!(precise(at, TEN_PERCENT), Err(SizingError::IndexOutOfRange));
    }
    assert_eq!(precise(1.5, Precision::Relative(Millionths(0))), Err(SizingError::NoTolerance));
    let powered = |claim, against, alpha| power::smallest(Index::Cpk, claim, against, alpha, NINETY_FIVE);
    assert_eq!(powered(1.5, 1.5, FIVE_PERCENT), Err(SizingError::Indistinguishable));
    assert_eq!(powered(1.5, 1.499, FIVE_PERCENT), Err(SizingError::AboveLimit));
    assert_eq!(powered(-1.5, 1.3, FIVE_PERCENT), Err(SizingError::IndexOutOfRange));
    assert_eq!(powered(1.5, 1.3, Millionths(0)), Err(SizingError::AlphaOutOfRange));
    assert_eq!(powered(1.5, 1.3, Millionths(500_001)), Err(SizingError::AlphaOutOfRange));
    let one = power::power_at(Count::ONE, Index::Cpk, 1.5, 1.3, FIVE_PERCENT);
    assert_eq!(one, Err(SizingError::TooFew));
}

#[test]
fn cpm_is_refused_by_name() {
    let size = precision::smallest(Index::Cpm, 1.5, TEN_PERCENT, NINETY_FIVE, Kind::TwoSided);
    assert_eq!(size, Err(SizingError::NoMethodYet(Index::Cpm)));
    let size = power::smallest(Index::Cpm, 1.5, 1.3, FIVE_PERCENT, NINETY_FIVE);
    assert_eq!(size, Err(SizingError::NoMethodYet(Index::Cpm)));
}

mod laws {
    use proptest::prelude::*;

    use super::*;

    fn index() -> impl Strategy<Value = Index> {
        prop_oneof![Just(Index::Cpk), Just(Index::Cpl), Just(Index::Cpu), Just(Index::Cp)]
    }

    fn kind() -> impl Strategy<Value = Kind> {
        prop_oneof![Just(Kind::TwoSided), Just(Kind::Lower), Just(Kind::Upper)]
    }

    fn precision() -> impl Strategy<Value = Precision> {
        (any::<bool>(), 40_000_u32..2_000_000).prop_map(|(relative, goal)| {
            if relative {
                Precision::Relative(Millionths(goal))
            } else {
                Precision::Absolute(Millionths(goal))
            }
        })
    }

    proptest! {
        #[test]
        fn no_smaller_sample_is_precise_enough(
            index in index(), at in 0.1..3.0, precision in precision(), level in 500_000_u32..999_999, kind in kind(),
        ) {
            let confidence = Confidence::from_millionths(level).unwrap();
            let size = precision::smallest(index, at, precision, confidence, kind).unwrap();
            let achieved = |n| {
                let estimate = precision::precision_at(Count::new(n).unwrap(), index, at, confidence, kind).unwrap();
                precision.achieved(estimate.half_width, at)
            };
            let n = size.n.get();
            prop_assert_eq!(achieved(n), size.achieved);
            prop_assert!(size.achieved <= precision.goal());
            prop_assert_eq!(size.achieved_before, (n > 2).then(|| achieved(n - 1)));
            for smaller in 2..n.min(3000) {
                prop_assert!(achieved(smaller) > precision.goal(), "{}", smaller);
            }
        }

        #[test]
        fn no_smaller_sample_has_the_power(
            index in index(), claim in 0.1..3.0, factor in prop_oneof![0.3..0.9, 1.1..3.0],
            alpha in 1_u32..=500_000, power in 500_000_u32..999_999,
        ) {
            let goal = Confidence::from_millionths(power).unwrap();
            let (against, alpha) = (claim * factor, Millionths(alpha));
            let size = power::smallest(index, claim, against, alpha, goal).unwrap();
            let at = |n| power::power_at(Count::new(n).unwrap(), index, claim, against, alpha).unwrap();
            let n = size.n.get();
            prop_assert_eq!(at(n), size.achieved);
            prop_assert!(size.achieved >= goal.to_f64());
            prop_assert_eq!(size.achieved_before, (n > 2).then(|| at(n - 1)));
            for smaller in 2..n.min(3000) {
                prop_assert!(at(smaller) < goal.to_f64(), "{}", smaller);
            }
        }
    }
}
