use std::string::ToString;

use proptest::prelude::*;

use super::*;
use crate::counts::{Counts, Resolution};
use crate::moments::Moments;
use crate::quantity::Count;

fn specification(lower: &str, upper: &str, target: &str) -> Result<Specification, SpecificationError> {
    let number = |text: &str| (!text.is_empty()).then(|| text.parse().unwrap());
    Specification::new(number(lower), number(upper), number(target))
}

fn sample(readings: &[i64], specification: &Specification) -> Result<Sample, SampleError> {
    let mut moments = Moments::default();
    for reading in readings {
        moments.add(Counts::new(*reading).unwrap()).unwrap();
    }
    Sample::from_moments(&moments, "0.1".parse().unwrap(), specification)
}

#[test]
fn contradictions_of_a_specification_are_named() {
    assert_eq!(specification("", "", "1"), Err(SpecificationError::NoLimit));
    assert_eq!(specification("2", "1", ""), Err(SpecificationError::LimitsReversed));
    assert_eq!(specification("1.0", "1", ""), Err(SpecificationError::LimitsReversed));
    assert_eq!(specification("1", "2", "0.9"), Err(SpecificationError::TargetOutside));
    assert_eq!(specification("1", "", "0.999999999999"), Err(SpecificationError::TargetOutside));
    assert_eq!(specification("", "2", "2.1"), Err(SpecificationError::TargetOutside));
    assert!(specification("1", "2", "2").is_ok());
}

#[test]
fn a_stored_specification_is_checked_again() {
    let good = specification("1", "2", "1.5").unwrap();
    let mut buffer = [0; 32];
    let bytes = postcard::to_slice(&good, &mut buffer).unwrap();
    assert_eq!(postcard::from_bytes(bytes), Ok(good));
    let reversed = Fields { lower: good.upper, upper: good.lower, target: None };
    let bytes = postcard::to_slice(&reversed, &mut buffer).unwrap();
    assert!(postcard::from_bytes::<Specification>(bytes).is_err());
}

#[test]
fn index_names_are_read_in_any_case() {
    for index in Index::ALL {
        assert_eq!(index.to_string().parse(), Ok(index));
        assert_eq!(index.to_string().to_uppercase().parse(), Ok(index));
    }
    assert_eq!("ppk".parse::<Index>(), Err(UnknownIndex));
}

/// Readings 1 to 5: mean 3, s = √2.5, mean square about 2 is 3.
#[test]
fn the_indices_of_a_few_readings_are_what_they_are_on_paper() {
    let sample = sample(&[10, 20, 30, 40, 50], &specification("0", "12", "2").unwrap()).unwrap();
    let sigma = 2.5_f64.sqrt();
    assert_eq!((sample.n().get(), sample.nu().get()), (5, 4.0));
    assert_eq!((sample.mean(), sample.sigma()), (3.0, sigma));
    assert_eq!(sample.estimate(Index::Cp), Ok(12.0 / (6.0 * sigma)));
    assert_eq!(sample.estimate(Index::Cpl), Ok(3.0 / (3.0 * sigma)));
    assert_eq!(sample.estimate(Index::Cpu), Ok(9.0 / (3.0 * sigma)));
    assert_eq!(sample.estimate(Index::Cpk), sample.estimate(Index::Cpl));
    assert_eq!(sample.estimate(Index::Cpm), Ok(12.0 / (6.0 * 3_f64.sqrt())));
}

#[test]
fn a_mean_outside_the_limits_makes_cpk_negative() {
    let sample = sample(&[10, 20, 30], &specification("", "1.5", "").unwrap()).unwrap();
    assert_eq!(sample.estimate(Index::Cpk), Ok(-0.5 / 3.0));
}

#[test]
fn cpk_takes_the_one_limit_there_is_and_the_others_name_what_they_lack() {
    let readings = [10, 20, 30, 40, 50];
    let lower = sample(&readings, &specification("0", "", "").unwrap()).unwrap();
    assert_eq!(lower.estimate(Index::Cpk), lower.estimate(Index::Cpl));
    assert_eq!(lower.estimate(Index::Cpu), Err(IndexError::MissingUpper));
    assert_eq!(lower.estimate(Index::Cp), Err(IndexError::MissingUpper));
    assert_eq!(lower.estimate(Index::Cpm), Err(IndexError::MissingUpper));
    let upper = sample(&readings, &specification("", "9", "").unwrap()).unwrap();
    assert_eq!(upper.estimate(Index::Cpk), upper.estimate(Index::Cpu));
    assert_eq!(upper.estimate(Index::Cpl), Err(IndexError::MissingLower));
    assert_eq!(upper.estimate(Index::Cp), Err(IndexError::MissingLower));
    let both = sample(&readings, &specification("0", "9", "").unwrap()).unwrap();
    assert_eq!(both.estimate(Index::Cpm), Err(IndexError::MissingTarget));
}

#[test]
fn samples_without_a_sigma_are_refused() {
    let specification = specification("0", "9", "").unwrap();
    assert_eq!(sample(&[], &specification), Err(SampleError::TooFew));
    assert_eq!(sample(&[10], &specification), Err(SampleError::TooFew));
    assert_eq!(sample(&[10, 10, 10], &specification), Err(SampleError::NoSpread));
    let summary = |n, mean, sd| Sample::from_summary(Count::new(n).unwrap(), mean, sd, &specification);
    assert_eq!(summary(1, 5.0, 1.0), Err(SampleError::TooFew));
    assert_eq!(summary(5, 5.0, 0.0), Err(SampleError::NoSpread));
    assert_eq!(summary(5, 5.0, -1.0), Err(SampleError::NegativeSpread));
    assert_eq!(summary(5, f64::NAN, 1.0), Err(SampleError::NotFinite));
    assert_eq!(summary(5, 5.0, f64::INFINITY), Err(SampleError::NotFinite));
    assert_eq!(summary(5, 5.0, 1e-320).unwrap().estimate(Index::Cpk), Err(IndexError::NotFinite));
}

proptest! {
    #[test]
    fn readings_and_their_summary_give_the_same_indices(
        readings in proptest::collection::vec(-2000_i64..2000, 2..50), lower in -3000..0_i64, width in 1..6000_i64,
    ) {
        let limit = |tenths| Some(Decimal::new(tenths, 1).unwrap());
        let target = limit(lower + width / 3);
        let specification = Specification::new(limit(lower), limit(lower + width), target).unwrap();
        if let Ok(from_readings) = sample(&readings, &specification) {
            let (mean, sigma) = (from_readings.mean(), from_readings.sigma());
            let from_summary = Sample::from_summary(from_readings.n(), mean, sigma, &specification).unwrap();
            for index in Index::ALL {
                let (a, b) = (from_readings.estimate(index).unwrap(), from_summary.estimate(index).unwrap());
                // The summary's distances are taken from rounded numbers: their size over sigma sets the error.
                prop_assert!((a - b).abs() <= 1e-13 * (1.0 + 500.0 / sigma), "{}: {} {}", index, a, b);
            }
        }
    }

    #[test]
    fn the_unit_of_measurement_does_not_matter(
        readings in proptest::collection::vec(-2000_i64..2000, 2..50), decimals in 0..=9_u8,
    ) {
        let specification = |decimals| {
            let limit = |mantissa| Some(Decimal::new(mantissa, decimals).unwrap());
            Specification::new(limit(-2500), limit(2500), limit(100)).unwrap()
        };
        let sample = |decimals| {
            let mut moments = Moments::default();
            for reading in &readings {
                moments.add(Counts::new(*reading).unwrap()).unwrap();
            }
            Sample::from_moments(&moments, Resolution::new(1, decimals).unwrap(), &specification(decimals))
        };
        if let (Ok(whole), Ok(scaled)) = (sample(0), sample(decimals)) {
            for index in Index::ALL {
                let (a, b) = (whole.estimate(index).unwrap(), scaled.estimate(index).unwrap());
                prop_assert!((a - b).abs() <= 4.0 * f64::EPSILON * a.abs(), "{}: {} {}", index, a, b);
            }
        }
    }
}
