//! Bissell's interval of Cpk against a table computed independently, with mpmath and scipy.

use donelight_core::capability::{Index, Sample, Specification};
use donelight_core::counts::Decimal;
use donelight_core::interval::{self, Kind};
use donelight_core::quantity::{Confidence, Count};

#[test]
fn every_interval_of_the_table_is_met() {
    let mut rows = 0;
    for line in include_str!("../../tests/reference/intervals_bissell.csv").lines().skip(2) {
        let fields: Vec<&str> = line.split(',').collect();
        let n = Count::new(fields[3].parse().unwrap()).unwrap();
        let estimate: Decimal = fields[4].parse().unwrap();
        let confidence = confidence(fields[5]);
        let kind: Kind = fields[7].parse().unwrap();

        // A sample with mean 0, sigma 1 and its one limit at three times the index.
        let limit = Decimal::new(3 * estimate.mantissa(), estimate.decimals()).unwrap();
        let specification = Specification::new(None, Some(limit), None).unwrap();
        let sample = Sample::from_summary(n, 0.0, 1.0, &specification).unwrap();
        for index in [Index::Cpk, Index::Cpu] {
            let computed = interval::of(&sample, index, confidence, kind).unwrap();
            assert_end(computed.interval.low, fields[8], line);
            assert_end(computed.interval.high, fields[9], line);
        }
        rows += 1;
    }
    assert_eq!(rows, 567);
}

fn confidence(fraction: &str) -> Confidence {
    Confidence::from_millionths((fraction.parse::<f64>().unwrap() * 1e6).round() as u32).unwrap()
}

fn assert_end(computed: Option<f64>, exact: &str, line: &str) {
    match computed {
        None => assert_eq!(exact, "", "{line}"),
        Some(computed) => {
            let exact: f64 = exact.parse().unwrap();
            assert!((computed - exact).abs() <= 1e-11 * exact.abs(), "{line}: {computed}");
        }
    }
}
