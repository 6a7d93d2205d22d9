use super::*;
use crate::interval::{Tail, limit, of};
use proptest::prelude::*;

const LEVELS: [u32; 4] = [900_000, 950_000, 990_000, 999_000];

fn level(millionths: u32) -> Confidence {
    Confidence::from_millionths(millionths).unwrap()
}

fn overall(n: u32) -> (Count, DegreesOfFreedom) {
    let n = Count::new(n).unwrap();
    (n, DegreesOfFreedom::overall(n).unwrap())
}

/// What [`Promise::Conservative`](crate::interval::Promise) says of Cpm by chi-square: computed, not proven.
#[test]
fn the_conservative_interval_of_cpm_keeps_its_promise_wherever_the_mean_lies() {
    for n in [2, 3, 4, 5, 7, 10, 15, 30, 100, 300, 1000] {
        let n = Count::new(n).unwrap();
        for confidence in LEVELS {
            for kind in [Kind::TwoSided, Kind::Lower, Kind::Upper] {
                for step in 0..=50 {
                    let offset = 0.1 * f64::from(step);
                    let coverage = of_cpm(level(confidence), kind, n, offset);
                    let promise = level(confidence).to_f64();
                    assert!(coverage >= promise - 1e-12, "{n:?} {confidence} {kind} {offset}: {coverage}");
                    assert!(step > 0 || (coverage - promise).abs() < 1e-12);
                }
            }
        }
    }
}

/// The promises of the defaults that guarantee, for n from 5 and an index from 0.5 to 3 ("not more than 0.3 points
/// below" would do; they are nowhere below).
#[test]
fn the_guaranteed_limits_of_cpk_keep_their_promise_at_every_position_of_the_mean() {
    for n in [5, 8, 12, 30, 100, 1000] {
        let (n, nu) = overall(n);
        for cpk in [0.5, 1.0, 1.67, 3.0] {
            for confidence in LEVELS {
                for (method, kind) in [
                    (Method::NoncentralT, Kind::Lower),
                    (Method::Exact, Kind::Lower),
                    (Method::Exact, Kind::Upper),
                    (Method::Exact, Kind::TwoSided),
                    (Method::Balanced, Kind::TwoSided),
                ] {
                    let span = range_of_cpk(method, level(confidence), kind, n, nu, cpk).unwrap();
                    assert!(span.from >= level(confidence).to_f64() - 1e-9, "{n:?} {cpk} {method} {span:?}");
                }
            }
        }
    }
}

/// What the module of the balanced interval proves and claims.
#[test]
fn the_balanced_interval_covers_exactly_at_both_ends_and_is_narrower_than_the_conservative_one() {
    for n in [3, 5, 10, 30, 300] {
        let (n, nu) = overall(n);
        for cpk in [0.2, 0.5, 1.0, 1.5, 3.0] {
            for confidence in LEVELS {
                let at = |position| {
                    let study = Study { n, nu, cpk, position };
                    of_cpk(Method::Balanced, level(confidence), Kind::TwoSided, &study).unwrap()
                };
                for position in [Position::CENTRED, Position::OneLimit] {
                    assert!(
                        (at(position) - level(confidence).to_f64()).abs() < 1e-9,
                        "{n:?} {cpk} {confidence}"
                    );
                }
            }
            let evidence = Evidence { index: Index::Cpk, estimate: cpk, n, nu, squared_offset: 0.0 };
            let width = |method| {
                let given = of(method, &evidence, level(950_000), Kind::TwoSided).unwrap();
                given.interval.high.unwrap() - given.interval.low.unwrap()
            };
            let (balanced, exact) = (width(Method::Balanced), width(Method::Exact));
            assert!(n.get() < 10 || balanced < exact, "{n:?} {cpk}");
            assert!(n.get() < 10 || balanced < 1.02 * width(Method::Bissell), "{n:?} {cpk}");
        }
    }
}

/// ν and n apart, and a mean beyond its limits: a Cpk below zero has an interval by halves.
#[test]
fn the_balanced_interval_holds_with_few_degrees_of_freedom_and_below_zero() {
    for (n, nu) in [(50, 40.0), (50, 12.5), (12, 3.0), (300, 240.0)] {
        let (n, nu) = (Count::new(n).unwrap(), DegreesOfFreedom::new(nu).unwrap());
        for cpk in [0.3, 1.0, 2.0] {
            let span = range_of_cpk(Method::Balanced, level(950_000), Kind::TwoSided, n, nu, cpk).unwrap();
            assert!(span.from >= 0.95 - 1e-9, "{n:?} {nu:?} {cpk} {span:?}");
        }
        // The mean lies −3c standard deviations beyond a limit at least: then ξ = −3c.
        for cpk in [-0.05, -0.3, -1.0] {
            let one_limit = Study { n, nu, cpk, position: Position::OneLimit };
            let (low, high) = (one_limit.quantile(0.025), one_limit.upper_quantile(0.025));
            let study = Study { position: Position::Offset(-3.0 * cpk), ..one_limit };
            let missed = study.tails(low).lower + study.tails(high).upper;
            assert!(missed <= 0.05 + 1e-9, "{n:?} {nu:?} {cpk} {missed}");
        }
    }
}

#[test]
fn a_coverage_is_not_told_where_it_is_not_known() {
    let (n, nu) = overall(30);
    let study = Study { n, nu, cpk: 1.0, position: Position::CENTRED };
    for method in [Method::ChiSquare, Method::Boyles] {
        assert_eq!(of_cpk(method, level(950_000), Kind::TwoSided, &study), None);
    }
    let (n, nu) = overall(2);
    let study = Study { n, nu, cpk: 1.0, position: Position::CENTRED };
    assert_eq!(of_cpk(Method::Bissell, level(950_000), Kind::Upper, &study), None);
    assert_eq!(of_cpk(Method::Bissell, level(950_000), Kind::Lower, &study), Some(1.0));
    let nu = DegreesOfFreedom::new(0.5).unwrap();
    assert_eq!(of_cpk(Method::Exact, level(950_000), Kind::Upper, &Study { nu, ..study }), None);
}

proptest! {
    /// The thresholds are where the limits themselves, computed another way, meet the true index.
    #[test]
    fn at_the_thresholds_the_limits_are_the_true_index(
        n in 5_u32..1000, cpk in 0.3..3.0, confidence in 900_000_u32..999_000, pick in 0_usize..4,
    ) {
        let method = [Method::Bissell, Method::NoncentralT, Method::Exact, Method::Balanced][pick];
        let (n, nu) = overall(n);
        let confidence = level(confidence);
        let Some(thresholds) = Thresholds::new(method, confidence, Kind::TwoSided, n, nu, cpk) else {
            return Ok(());
        };
        let risk = confidence.risk() / 2.0;
        for (estimate, side) in [(thresholds.low, Side::Upper), (thresholds.high, Side::Lower)] {
            let evidence = Evidence { index: Index::Cpk, estimate: estimate.unwrap(), n, nu, squared_offset: 0.0 };
            // An exact upper limit of an estimate below zero is a little higher than need be.
            if evidence.estimate.is_finite() && (method != Method::Exact || evidence.estimate > 0.0) {
                let met = if method == Method::Balanced {
                    let interval = of(method, &evidence, confidence, Kind::TwoSided).unwrap().interval;
                    (if side == Side::Lower { interval.low } else { interval.high }).unwrap()
                } else {
                    limit(method, &evidence, side, &Tail::of(risk)).unwrap()
                };
                prop_assert!((met - cpk).abs() < 1e-9 * cpk, "{method} {side:?} {evidence:?}: {met}");
            }
        }
    }
}

/// Simulated with 50 000 studies each, standard error 0.1 points (COVERAGE.md, Cp at 5 pieces).
#[test]
fn bissells_interval_of_cp_covers_as_simulated_whatever_the_index() {
    let (n, nu) = overall(5);
    for (kind, simulated) in [(Kind::TwoSided, 0.9637), (Kind::Lower, 0.9508), (Kind::Upper, 0.9617)] {
        for estimate in [0.5, 3.0] {
            let evidence = Evidence { index: Index::Cp, estimate, n, nu, squared_offset: 0.0 };
            let Span { from, to } = range(Method::Bissell, &evidence, level(950_000), kind).unwrap();
            assert!(from == to && (from - simulated).abs() < 0.003, "{kind} {from}");
        }
    }
}

#[test]
fn the_range_of_an_exact_method_is_its_promise_and_of_a_conservative_one_begins_there() {
    let (n, nu) = overall(30);
    let evidence = |index| Evidence { index, estimate: 1.33, n, nu, squared_offset: 0.0 };
    for kind in [Kind::TwoSided, Kind::Lower, Kind::Upper] {
        for index in [Index::Cp, Index::Cpl, Index::Cpu, Index::Cpk, Index::Cpm] {
            let method = Method::default_for(index, kind);
            let Span { from, to } = range(method, &evidence(index), level(950_000), kind).unwrap();
            assert!((from - 0.95).abs() < 1e-8 && to >= from, "{index} {kind} {from} {to}");
        }
    }
    let negative = Evidence { estimate: -0.1, ..evidence(Index::Cpk) };
    assert_eq!(range(Method::Exact, &negative, level(950_000), Kind::Lower), None);
}
