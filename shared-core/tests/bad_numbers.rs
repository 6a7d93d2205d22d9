//! Whatever number comes in as an estimate, an index or degrees of freedom: a typed error or finite numbers, never a panic,
//! never NaN.

use donelight_core::capability::Index;
use donelight_core::interval::{self, Evidence, Kind, Method};
use donelight_core::quantity::{Confidence, Count, DegreesOfFreedom, Millionths, Precision};
use donelight_core::sizing::{Design, power, precision};
use proptest::prelude::*;

const INDICES: [Index; 5] = [Index::Cp, Index::Cpl, Index::Cpu, Index::Cpk, Index::Cpm];
const KINDS: [Kind; 3] = [Kind::TwoSided, Kind::Lower, Kind::Upper];

fn anything() -> impl Strategy<Value = f64> {
    prop_oneof![
        any::<u64>().prop_map(f64::from_bits),
        -3.0..3.0_f64,
        0.0..1000.0_f64,
        prop::sample::select(vec![
            0.0,
            -0.0,
            1.0,
            1000.0,
            1e6,
            1e-300,
            5e-324,
            f64::MAX,
            f64::INFINITY,
            f64::NEG_INFINITY,
            f64::NAN,
        ]),
    ]
}

fn designs() -> impl Strategy<Value = Design> {
    let suited = INDICES.iter().flat_map(|index| Method::ALL.map(|method| Design::new(*index, method)));
    prop::sample::select(suited.flatten().collect::<Vec<Design>>())
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(400))]

    #[test]
    fn an_interval_of_any_estimate_has_finite_ends_or_an_error(
        estimate in anything(), nu in anything(), squared_offset in anything(), index in prop::sample::select(&INDICES[..]),
        method in prop::sample::select(&Method::ALL[..]), kind in prop::sample::select(&KINDS[..]),
        n in prop::sample::select(vec![1, 2, 3, 5, 30, 300, 5000, 1_000_000]), confidence in 500_000_u32..1_000_000,
    ) {
        let n = Count::new(n).unwrap();
        let nu = DegreesOfFreedom::new(nu).or(DegreesOfFreedom::overall(n));
        let confidence = Confidence::from_millionths(confidence);
        if let (Some(nu), Some(confidence)) = (nu, confidence) {
            let evidence = Evidence { index, estimate, n, nu, squared_offset };
            if let Ok(answer) = interval::of(method, &evidence, confidence, kind) {
                for end in [answer.interval.low, answer.interval.high].into_iter().flatten() {
                    prop_assert!(end.is_finite(), "{method:?} {answer:?}");
                }
            }
        }
    }

    #[test]
    fn a_size_for_any_index_values_is_whole_or_an_error(
        design in designs(), claim in anything(), against in anything(), alpha in 0_u32..1_000_000, goal in 500_000_u32..1_000_000,
    ) {
        if let Some(goal) = Confidence::from_millionths(goal) {
            if let Ok(size) = power::smallest(&design, claim, against, Millionths(alpha), goal) {
                prop_assert!(size.achieved >= goal.to_f64() && size.critical.is_finite(), "{size:?}");
            }
            for precision in [Precision::Relative(Millionths(alpha)), Precision::Absolute(Millionths(alpha))] {
                if let Ok(size) = precision::smallest(&design, claim, precision, goal, Kind::TwoSided) {
                    prop_assert!(size.achieved.is_finite(), "{size:?}");
                }
            }
        }
    }
}
