use super::{Design, SizingError, Truth, power, precision, truth};
use crate::capability::Index;
use crate::interval::{Kind, Method, MethodError};
use crate::quantity::{Confidence, Count, Millionths, Precision};
use crate::sigma::{Sigma, SubgroupSize};

const NINETY_FIVE: Confidence = Confidence::NINETY_FIVE_PERCENT;
const TEN_PERCENT: Precision = Precision::Relative(Millionths(100_000));
const FIVE_PERCENT: Millionths = Millionths(50_000);

// Common practice, no source: 212 pieces for Cpk 1.5 to within ±10 % at 95 %.
#[test]
fn two_hundred_and_twelve_pieces_put_a_cpk_of_1_5_between_1_35_and_1_65() {
    let size =
        precision::smallest(&bissell(Index::Cpk), 1.5, TEN_PERCENT, NINETY_FIVE, Kind::TwoSided).unwrap();
    assert_eq!(size.n.get(), 212);
    assert!((size.interval.low.unwrap() - 1.350_02).abs() < 5e-6);
    assert!((size.interval.high.unwrap() - 1.649_98).abs() < 5e-6);
    assert!((size.achieved - 0.099_989).abs() < 5e-7);
    assert!((size.achieved_before.unwrap() - 0.100_227).abs() < 5e-7);
}

// Common practice, no source: 297 pieces to tell a claimed Cpk of 1.5 from 1.3 at 5 % with a power of 95 %.
#[test]
fn two_hundred_and_ninety_seven_pieces_tell_a_cpk_of_1_5_from_1_3() {
    let size = power::smallest(&bissell(Index::Cpk), 1.5, 1.3, FIVE_PERCENT, NINETY_FIVE).unwrap();
    assert_eq!(size.n.get(), 297);
    assert!((size.achieved - 0.950_464).abs() < 5e-7);
    assert!((size.achieved_before.unwrap() - 0.949_852).abs() < 5e-7);
    assert!((size.critical - 1.3937).abs() < 5e-5);
}

#[test]
fn the_mirrored_test_rejects_above_its_critical_value() {
    let size = power::smallest(&bissell(Index::Cpk), 1.3, 1.5, FIVE_PERCENT, NINETY_FIVE).unwrap();
    assert_eq!(size.n.get(), 297);
    assert!((size.achieved - 0.950_408).abs() < 5e-7);
    assert!(size.critical > 1.3 && size.critical < 1.5);
}

#[test]
fn an_absolute_goal_of_0_15_is_the_relative_goal_of_10_percent_at_1_5() {
    let absolute = Precision::Absolute(Millionths(150_000));
    for kind in [Kind::TwoSided, Kind::Lower, Kind::Upper] {
        let relative =
            precision::smallest(&bissell(Index::Cpk), 1.5, TEN_PERCENT, NINETY_FIVE, kind).unwrap();
        let size = precision::smallest(&bissell(Index::Cpk), 1.5, absolute, NINETY_FIVE, kind).unwrap();
        assert_eq!((size.n, size.interval), (relative.n, relative.interval));
        assert!((size.achieved - 1.5 * relative.achieved).abs() < 1e-15);
    }
}

#[test]
fn a_size_of_two_has_no_size_before_it() {
    let size = precision::smallest(
        &bissell(Index::Cpk),
        1.0,
        Precision::Absolute(Millionths(4_000_000)),
        NINETY_FIVE,
        Kind::Lower,
    )
    .unwrap();
    assert_eq!((size.n.get(), size.achieved_before), (2, None));
    let at_two =
        precision::precision_at(Count::new(2).unwrap(), &bissell(Index::Cpk), 1.0, NINETY_FIVE, Kind::Lower)
            .unwrap();
    assert_eq!(size.achieved, at_two.half_width);
}

#[test]
fn the_size_may_be_the_largest_count_and_no_more() {
    // For Cp n = 1 + z²/(2 r²), rounded up: 888 858 for r = 0.147 %, 1 008 576 for r = 0.138 %.
    let just_below = Precision::Relative(Millionths(1_470));
    let size =
        precision::smallest(&bissell(Index::Cp), 1.0, just_below, NINETY_FIVE, Kind::TwoSided).unwrap();
    assert_eq!(size.n.get(), 888_858);
    let beyond = Precision::Relative(Millionths(1_380));
    let refused = precision::smallest(&bissell(Index::Cp), 1.0, beyond, NINETY_FIVE, Kind::TwoSided);
    assert_eq!(refused, Err(SizingError::AboveLimit));
}

#[test]
fn impossible_demands_are_named() {
    let precise =
        |at, precision| precision::smallest(&bissell(Index::Cpk), at, precision, NINETY_FIVE, Kind::TwoSided);
    for at in [0.0, -1.5, f64::NAN, f64::INFINITY, 1000.5] {
        assert_eq!(precise(at, TEN_PERCENT), Err(SizingError::IndexOutOfRange));
    }
    assert_eq!(precise(1.5, Precision::Relative(Millionths(0))), Err(SizingError::NoTolerance));
    let powered =
        |claim, against, alpha| power::smallest(&bissell(Index::Cpk), claim, against, alpha, NINETY_FIVE);
    assert_eq!(powered(1.5, 1.5, FIVE_PERCENT), Err(SizingError::Indistinguishable));
    assert_eq!(powered(1.5, 1.499, FIVE_PERCENT), Err(SizingError::AboveLimit));
    assert_eq!(powered(-1.5, 1.3, FIVE_PERCENT), Err(SizingError::IndexOutOfRange));
    assert_eq!(powered(1.5, 1.3, Millionths(0)), Err(SizingError::AlphaOutOfRange));
    assert_eq!(powered(1.5, 1.3, Millionths(500_001)), Err(SizingError::AlphaOutOfRange));
    let one = power::power_at(Count::ONE, &bissell(Index::Cpk), 1.5, 1.3, FIVE_PERCENT);
    assert_eq!(one, Err(SizingError::TooFew));
}

/// ν = 4n/5: 1/(9n) + 1.5²/(2ν) must fall to (10 % · 1.5 / z)², as by hand: n ≥ (1/9 + 1.5²·5/8)/0.0765…² = 259.1, so 52
/// subgroups of 5.
#[test]
fn a_size_in_subgroups_is_a_whole_number_of_them() {
    let design = bissell(Index::Cpk);
    let within = design.with_sigma(Sigma::Pooled(five())).unwrap();
    let size = precision::smallest(&within, 1.5, TEN_PERCENT, NINETY_FIVE, Kind::TwoSided).unwrap();
    assert_eq!(size.n.get(), 260);
    let fewer = Count::new(255).unwrap();
    let before = precision::precision_at(fewer, &within, 1.5, NINETY_FIVE, Kind::TwoSided).unwrap();
    assert_eq!(size.achieved_before, Some(before.half_width / 1.5));
    assert!(size.achieved <= 0.1 && before.half_width > 0.15);
    let tested = power::smallest(&within, 1.5, 1.3, FIVE_PERCENT, NINETY_FIVE).unwrap();
    assert!(tested.achieved >= 0.95 && tested.achieved_before.unwrap() < 0.95);
    let overall = power::smallest(&bissell(Index::Cpk), 1.5, 1.3, FIVE_PERCENT, NINETY_FIVE).unwrap();
    assert!(tested.n.get().is_multiple_of(5) && tested.n > overall.n);
}

#[test]
fn ranges_take_more_pieces_than_a_pooled_sigma_and_total_sigma_has_no_size() {
    let design = bissell(Index::Cp);
    // The floor of ν is 192.07; see the plan's test for where each sigma reaches it.
    for (sigma, n) in [
        (Sigma::Overall, 194),
        (Sigma::Pooled(five()), 245),
        (Sigma::Ranges(five()), 265),
        (Sigma::MovingRanges, 318),
    ] {
        let within = design.with_sigma(sigma).unwrap();
        let size = precision::smallest(&within, 1.5, TEN_PERCENT, NINETY_FIVE, Kind::TwoSided).unwrap();
        assert_eq!(size.n.get(), n, "{sigma:?}");
    }
    assert_eq!(design.with_sigma(Sigma::Total(five())), Err(SizingError::SigmaTotal));
    let cpm = Design::new(Index::Cpm, Method::ChiSquare).unwrap();
    assert_eq!(cpm.with_sigma(Sigma::MovingRanges), Err(SizingError::OverallOnly));
    assert_eq!(cpm.with_sigma(Sigma::Overall), Ok(cpm));
}

fn five() -> SubgroupSize {
    SubgroupSize::new(5).unwrap()
}

fn bissell(index: Index) -> Design {
    design(index, Method::Bissell)
}

fn design(index: Index, method: Method) -> Design {
    Design::new(index, method).unwrap()
}

// Own computation by exact integration, independent of this code: the 297 design has a size of 5.9 % and a power of
// 96.9 % when centred, 3.9 % and 93.8 % when one limit matters.
#[test]
fn the_design_of_297_pieces_is_told_what_it_really_does() {
    let design = bissell(Index::Cpk);
    let size = power::smallest(&design, 1.5, 1.3, FIVE_PERCENT, NINETY_FIVE).unwrap();
    let Truth { size: risk, power } = truth(&design, size.n, size.critical, 1.5, 1.3).unwrap().unwrap();
    assert!((risk.from - 0.039).abs() < 5e-4 && (risk.to - 0.059).abs() < 5e-4, "{risk:?}");
    assert!((power.from - 0.938).abs() < 5e-4 && (power.to - 0.969).abs() < 5e-4, "{power:?}");
}

#[test]
fn an_exact_test_of_cpk_keeps_its_risk_and_its_power_at_every_position_of_the_mean() {
    let exact = design(Index::Cpk, Method::Exact);
    for (claim, against) in [(1.5, 1.3), (1.3, 1.5), (1.0, 0.7), (1.33, 2.0)] {
        let size = power::smallest(&exact, claim, against, FIVE_PERCENT, NINETY_FIVE).unwrap();
        let truth = truth(&exact, size.n, size.critical, claim, against).unwrap().unwrap();
        assert!((truth.size.to - 0.05).abs() < 1e-10, "{truth:?}");
        assert!((truth.power.from - size.achieved).abs() < 1e-12 && size.achieved >= 0.95, "{truth:?}");
        assert!(size.achieved_before.unwrap() < 0.95);
    }
}

#[test]
fn sigma_within_subgroups_takes_whole_subgroups_and_more_pieces() {
    for (index, method) in [(Index::Cp, Method::ChiSquare), (Index::Cpk, Method::Exact)] {
        let overall = design(index, method);
        let within = overall.with_sigma(Sigma::Pooled(five())).unwrap();
        let size = |design| {
            precision::smallest(&design, 1.33, TEN_PERCENT, NINETY_FIVE, Kind::Lower).unwrap().n.get()
        };
        let (plain, grouped) = (size(overall), size(within));
        // Of five pieces, four degrees of freedom: a quarter more, at most.
        assert!(grouped % 5 == 0 && grouped > plain && grouped <= plain * 5 / 4 + 5, "{plain} {grouped}");
    }
    let cp = design(Index::Cp, Method::ChiSquare);
    // One subgroup may be enough.
    let wide = Precision::Relative(Millionths(3_000_000));
    let within = cp.with_sigma(Sigma::Pooled(five())).unwrap();
    let one = precision::smallest(&within, 1.0, wide, NINETY_FIVE, Kind::Lower).unwrap();
    assert_eq!((one.n.get(), one.achieved_before), (5, None));
    let within = cp.with_sigma(Sigma::Pooled(SubgroupSize::new(3).unwrap())).unwrap();
    let beyond = Precision::Relative(Millionths(1_000));
    let refused = precision::smallest(&within, 1.0, beyond, NINETY_FIVE, Kind::TwoSided);
    assert_eq!(refused, Err(SizingError::AboveLimit));
}

#[test]
fn methods_that_do_not_fit_are_refused_by_name() {
    let unsuited = |method, index| Err(MethodError::Unsuited { method, index }.into());
    assert_eq!(Design::new(Index::Cp, Method::Exact), unsuited(Method::Exact, Index::Cp));
    let boyles = design(Index::Cpm, Method::Boyles);
    let refused = power::smallest(&boyles, 1.5, 1.3, FIVE_PERCENT, NINETY_FIVE).map(|size| size.n);
    assert_eq!(refused, Err(SizingError::NoTest { method: Method::Boyles, index: Index::Cpm }));
    for offset in [-0.1, 101.0, f64::NAN] {
        assert_eq!(boyles.with_offset(offset), Err(SizingError::OffsetOutOfRange));
    }
    let cpm = design(Index::Cpm, Method::ChiSquare);
    assert_eq!(truth(&cpm, Count::new(50).unwrap(), 1.4, 1.5, 1.3), Ok(None));
    let alike = power::smallest(&cpm, 1.5, 1.5, FIVE_PERCENT, NINETY_FIVE).map(|size| size.n);
    assert_eq!(alike, Err(SizingError::Indistinguishable));
}

mod laws {
    use proptest::prelude::*;

    use super::*;

    fn suited() -> impl Strategy<Value = Design> {
        prop_oneof![
            Just((Index::Cp, Method::ChiSquare)),
            Just((Index::Cpm, Method::ChiSquare)),
            Just((Index::Cpu, Method::NoncentralT)),
            Just((Index::Cpk, Method::NoncentralT)),
            Just((Index::Cpk, Method::Exact)),
        ]
        .prop_map(|(index, method)| design(index, method))
    }

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
            let size = precision::smallest(&bissell(index), at, precision, confidence, kind).unwrap();
            let achieved = |n| {
                let estimate = precision::precision_at(Count::new(n).unwrap(), &bissell(index), at, confidence, kind).unwrap();
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
        fn no_smaller_sample_is_precise_enough_by_any_method(
            design in suited(), at in 0.3..3.0, goal in 80_000_u32..1_000_000, level in 500_000_u32..999_999, kind in kind(),
        ) {
            let confidence = Confidence::from_millionths(level).unwrap();
            let precision = Precision::Relative(Millionths(goal));
            let size = precision::smallest(&design, at, precision, confidence, kind).unwrap();
            let n = size.n.get();
            for smaller in (2..n.min(60)).chain((2..n).rev().take(10)) {
                let smaller = Count::new(smaller).unwrap();
                let estimate = precision::precision_at(smaller, &design, at, confidence, kind).unwrap();
                prop_assert!(precision.achieved(estimate.half_width, at) > precision.goal(), "{:?}", smaller);
            }
        }

        #[test]
        fn no_smaller_sample_has_the_power_by_any_method(
            design in suited(), claim in 0.3..3.0, factor in prop_oneof![0.3..0.9, 1.1..3.0],
            alpha in 1_000_u32..=300_000, power in 500_000_u32..999_900,
        ) {
            let goal = Confidence::from_millionths(power).unwrap();
            let (against, alpha) = (claim * factor, Millionths(alpha));
            let size = power::smallest(&design, claim, against, alpha, goal).unwrap();
            let n = size.n.get();
            for smaller in (2..n.min(60)).chain((2..n).rev().take(10)) {
                let achieved = power::power_at(Count::new(smaller).unwrap(), &design, claim, against, alpha).unwrap();
                prop_assert!(achieved < goal.to_f64(), "{}", smaller);
            }
        }

        #[test]
        fn no_smaller_sample_has_the_power(
            index in index(), claim in 0.1..3.0, factor in prop_oneof![0.3..0.9, 1.1..3.0],
            alpha in 1_u32..=500_000, power in 500_000_u32..999_999,
        ) {
            let goal = Confidence::from_millionths(power).unwrap();
            let (against, alpha) = (claim * factor, Millionths(alpha));
            let size = power::smallest(&bissell(index), claim, against, alpha, goal).unwrap();
            let at = |n| power::power_at(Count::new(n).unwrap(), &bissell(index), claim, against, alpha).unwrap();
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
