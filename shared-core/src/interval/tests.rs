use std::string::ToString;

use super::*;
use crate::capability::{Index, IndexError, Sample, Specification};
use crate::quantity::{Count, Precision};

const NINETY_FIVE: Confidence = Confidence::NINETY_FIVE_PERCENT;

fn sample(lower: &str, upper: &str, target: &str) -> Sample {
    let number = |text: &str| (!text.is_empty()).then(|| text.parse().unwrap());
    let specification = Specification::new(number(lower), number(upper), number(target)).unwrap();
    Sample::from_summary(Count::new(50).unwrap(), 0.0, 1.0, &specification).unwrap()
}

fn bissell(sample: &Sample, index: Index, kind: Kind) -> Result<Estimate, MethodError> {
    of(Method::Bissell, &Evidence::of(sample, index)?, NINETY_FIVE, kind)
}

#[test]
fn kinds_are_written_and_read_by_name() {
    for kind in Kind::ALL {
        assert_eq!(kind.to_string().parse(), Ok(kind));
    }
    assert_eq!("both".parse::<Kind>(), Err(UnknownKind));
}

#[test]
fn a_half_width_is_the_longer_side_or_the_distance_of_a_bound() {
    let interval = |low, high| Interval { low, high };
    assert_eq!(interval(Some(1.0), Some(3.5)).half_width(2.0), 1.5);
    assert_eq!(interval(Some(0.0), Some(3.5)).half_width(2.0), 2.0);
    assert_eq!(interval(Some(1.25), None).half_width(2.0), 0.75);
    assert_eq!(interval(None, Some(2.5)).half_width(2.0), 0.5);
    assert_eq!(interval(None, None).half_width(2.0), f64::INFINITY);
}

#[test]
fn a_precision_is_reached_at_its_goal_and_not_above() {
    let quarter = crate::quantity::Millionths(250_000);
    let (relative, absolute) = (Precision::Relative(quarter), Precision::Absolute(quarter));
    assert!(relative.allows(0.5, 2.0) && absolute.allows(0.25, 2.0));
    assert!(!relative.allows(0.5_f64.next_up(), 2.0) && !absolute.allows(0.25_f64.next_up(), 2.0));
    assert_eq!((relative.achieved(0.5, 2.0), absolute.achieved(0.5, 2.0)), (0.25, 0.5));
}

#[test]
fn each_kind_has_the_ends_it_is_named_for_and_a_bound_lies_nearer() {
    let sample = sample("-4", "5", "");
    let of = |kind| bissell(&sample, Index::Cpk, kind).unwrap();
    let (both, lower, upper) = (of(Kind::TwoSided), of(Kind::Lower), of(Kind::Upper));
    assert_eq!((lower.interval.high, upper.interval.low), (None, None));
    assert!(both.interval.low.unwrap() < lower.interval.low.unwrap());
    assert!(lower.interval.low.unwrap() < both.estimate && both.estimate < upper.interval.high.unwrap());
    assert!(upper.interval.high.unwrap() < both.interval.high.unwrap());
    assert!(lower.half_width < both.half_width);
}

#[test]
fn the_interval_of_cp_leaves_out_the_term_of_the_mean() {
    let sample = sample("-4", "4", "");
    let [cp, cpk] = [Index::Cp, Index::Cpk].map(|index| bissell(&sample, index, Kind::TwoSided).unwrap());
    assert_eq!(cp.estimate, cpk.estimate);
    let z = Ends::new(NINETY_FIVE, Kind::TwoSided).low.unwrap().z();
    assert!((cp.half_width - z * cp.estimate / 98_f64.sqrt()).abs() < 1e-15);
    assert!((cpk.half_width.powi(2) - cp.half_width.powi(2) - z * z / 450.0).abs() < 1e-15);
}

#[test]
fn an_index_without_estimate_or_suited_method_has_no_interval() {
    let of = |sample: Sample, index| bissell(&sample, index, Kind::TwoSided);
    assert_eq!(
        of(sample("-4", "4", "0"), Index::Cpm),
        Err(MethodError::Unsuited { method: Method::Bissell, index: Index::Cpm })
    );
    assert_eq!(of(sample("-4", "", ""), Index::Cp), Err(IndexError::MissingUpper.into()));
    // The estimate is a number, its square is not.
    let huge = Specification::new(None, Some("3".parse().unwrap()), None).unwrap();
    let huge = Sample::from_summary(Count::new(9).unwrap(), 0.0, 1e-200, &huge).unwrap();
    assert_eq!(of(huge, Index::Cpk), Err(IndexError::NotFinite.into()));
}

#[test]
fn a_negative_estimate_has_the_width_of_its_mirror_image_and_never_a_relative_precision() {
    let (above, below) = (sample("", "-3", ""), sample("", "3", ""));
    let [above, below] = [above, below].map(|s| bissell(&s, Index::Cpk, Kind::TwoSided).unwrap());
    assert_eq!((above.estimate, below.estimate), (-1.0, 1.0));
    assert_eq!(above.half_width, below.half_width);
    let relative = Precision::Relative(crate::quantity::Millionths(u32::MAX));
    assert!(relative.allows(below.half_width, below.estimate));
    assert!(!relative.allows(above.half_width, above.estimate));
}
