use std::string::ToString;

use proptest::prelude::*;

use super::*;
use crate::estimator::{Position, Study};
use crate::special::noncentral_t as distribution;

const INDICES: [Index; 5] = [Index::Cp, Index::Cpl, Index::Cpu, Index::Cpk, Index::Cpm];
const KINDS: [Kind; 3] = [Kind::TwoSided, Kind::Lower, Kind::Upper];

fn evidence(index: Index, estimate: f64, n: u32) -> Evidence {
    let n = Count::new(n).unwrap();
    Evidence { index, estimate, n, nu: DegreesOfFreedom::overall(n).unwrap(), squared_offset: 0.25 }
}

#[test]
fn methods_are_written_and_read_by_name() {
    for method in Method::ALL {
        assert_eq!(method.to_string().parse(), Ok(method));
    }
    assert_eq!("guess".parse::<Method>(), Err(UnknownMethod));
}

#[test]
fn every_default_suits_its_index_and_guarantees_its_confidence() {
    for index in INDICES {
        for kind in KINDS {
            let promise = Method::default_for(index, kind).promise(index, kind);
            assert!(promise.is_some_and(|promise| promise != Promise::Approximate), "{index} {kind}");
        }
    }
}

#[test]
fn a_method_gives_an_interval_exactly_where_it_promises_one() {
    for method in Method::ALL {
        for index in INDICES {
            for kind in KINDS {
                let given = of(method, &evidence(index, 1.2, 30), Confidence::NINETY_FIVE_PERCENT, kind);
                match method.promise(index, kind) {
                    Some(_) => {
                        let given = given.unwrap();
                        assert!(given.interval.low.is_none_or(|low| low < 1.2));
                        assert!(given.interval.high.is_none_or(|high| high > 1.2));
                    }
                    None if (method, index) == (Method::Balanced, Index::Cpk) => {
                        assert_eq!(given, Err(MethodError::TwoSidedOnly));
                    }
                    None => assert_eq!(given, Err(MethodError::Unsuited { method, index })),
                }
            }
        }
    }
    let words = MethodError::Unsuited { method: Method::Boyles, index: Index::Cpk }.to_string();
    assert_eq!(words, "the method boyles does not suit Cpk; choose balanced, exact, noncentral-t or bissell");
}

#[test]
fn degrees_of_freedom_outside_the_range_and_numbers_too_large_are_refused() {
    for nu in [0.5, 2e6] {
        let nu = DegreesOfFreedom::new(nu).unwrap();
        let evidence = Evidence { nu, ..evidence(Index::Cpk, 1.2, 30) };
        assert_eq!(
            limit(Method::Exact, &evidence, Side::Lower, &Tail::of(0.05)),
            Err(MethodError::DegreesOfFreedom)
        );
    }
    for (estimate, method) in [
        (f64::INFINITY, Method::NoncentralT),
        (f64::NAN, Method::NoncentralT),
        (f64::INFINITY, Method::Exact),
        (f64::NAN, Method::Exact),
        (f64::NAN, Method::Bissell),
        (1e300, Method::Bissell),
    ] {
        let refused = limit(method, &evidence(Index::Cpk, estimate, 30), Side::Upper, &Tail::of(0.05));
        assert_eq!(refused, Err(IndexError::NotFinite.into()), "{method} {estimate}");
    }
}

#[test]
fn a_mean_outside_the_limits_has_limits_too() {
    for estimate in [-2.0, -0.3, 0.0, 1e-9] {
        for method in [Method::Exact, Method::NoncentralT, Method::Balanced] {
            let confidence = Confidence::NINETY_FIVE_PERCENT;
            let Interval { low, high } =
                of(method, &evidence(Index::Cpk, estimate, 12), confidence, Kind::TwoSided).unwrap().interval;
            assert!(low.unwrap() < estimate && estimate < high.unwrap(), "{method} {estimate}");
        }
    }
}

proptest! {
    /// A limit is where an estimate this far off has the probability of the risk: in its worst case.
    #[test]
    fn the_limits_of_cpk_are_those_of_its_exact_distribution(
        n in 2_u32..3000, estimate in 0.05..4.0, log_risk in -14.0_f64..-0.7, nu_factor in 0.5_f64..1.0,
    ) {
        let risk = log_risk.exp();
        let n = Count::new(n).unwrap();
        // Within subgroups ν is less than n − 1.
        let nu = DegreesOfFreedom::new((f64::from(n.get() - 1) * nu_factor).max(1.0)).unwrap();
        let evidence = Evidence { n, nu, ..evidence(Index::Cpk, estimate, 2) };
        let study = |cpk, position| Study { n, nu, cpk, position };
        let upper = limit(Method::Exact, &evidence, Side::Upper, &Tail::of(risk)).unwrap();
        let beyond = study(upper, Position::CENTRED).tails(estimate).lower;
        prop_assert!((beyond / risk - 1.0).abs() < 1e-10, "{upper} {beyond} {risk}");
        let lower = limit(Method::Exact, &evidence, Side::Lower, &Tail::of(risk)).unwrap();
        let root = 3.0 * f64::from(n.get()).sqrt();
        let beyond = distribution::tails(root * estimate, nu.get(), root * lower).upper;
        prop_assert!((beyond / risk - 1.0).abs() < 1e-10, "{lower} {beyond} {risk}");
    }

    #[test]
    fn one_integral_tells_what_the_whole_interval_would(
        n in 3_u32..600, estimate in 0.05..4.0, level in 600_000_u32..999_900,
        factor in prop_oneof![0.5..0.999_999, 1.000_001..2.0],
    ) {
        let confidence = Confidence::from_millionths(level).unwrap();
        for kind in KINDS {
            for (index, method) in
                [(Index::Cpu, Method::NoncentralT), (Index::Cpk, Method::Bissell), (Index::Cp, Method::ChiSquare)]
            {
                let evidence = evidence(index, estimate, n);
                let found = of(method, &evidence, confidence, kind).unwrap();
                // At 60 % a bound from a few pieces may lie on the near side of the estimate.
                if found.half_width <= 0.0 {
                    continue;
                }
                let (ends, reach) = (Ends::new(confidence, kind), factor * found.half_width);
                let told = reaches_no_further(method, &evidence, &ends, reach);
                prop_assert_eq!(told, factor > 1.0, "{} {} {}", index, kind, factor);
            }
        }
    }

    #[test]
    fn a_higher_estimate_or_a_lower_risk_moves_every_guaranteed_limit_its_way(
        n in 5_u32..500, estimate in 0.1..3.0, step in 0.01..0.5, risk in 0.001..0.4,
    ) {
        for (index, method) in [
            (Index::Cp, Method::ChiSquare), (Index::Cpu, Method::NoncentralT), (Index::Cpk, Method::Exact),
            (Index::Cpm, Method::Boyles),
        ] {
            for side in [Side::Lower, Side::Upper] {
                let at = |estimate, risk| limit(method, &evidence(index, estimate, n), side, &Tail::of(risk)).unwrap();
                prop_assert!(at(estimate + step, risk) > at(estimate, risk));
                let (wide, narrow) = (at(estimate, 0.5 * risk), at(estimate, risk));
                let outwards = if side == Side::Lower { narrow - wide } else { wide - narrow };
                prop_assert!(outwards > 0.0);
            }
        }
    }
}
