//! The true coverage of intervals against a table computed independently, by exact integration and by Monte Carlo.

use donelight_core::estimator::{Position, Study};
use donelight_core::interval::{Kind, Method, coverage};
use donelight_core::quantity::{Confidence, Count, DegreesOfFreedom};

/// Rows: `index,method,n,true_index,offset,conf,kind,coverage_exact,coverage_mc,mc_se`.
#[test]
fn every_coverage_of_the_table_is_met() {
    let (mut exact_rows, mut simulated_rows) = (0, 0);
    for line in include_str!("../../tests/reference/coverage.csv").lines().skip(2) {
        let fields: Vec<&str> = line.split(',').collect();
        let number = |column: usize| fields[column].parse::<f64>().unwrap();
        let n = Count::new(fields[2].parse().unwrap()).unwrap();
        let nu = DegreesOfFreedom::overall(n).unwrap();
        let confidence = Confidence::from_millionths((number(5) * 1e6).round() as u32).unwrap();
        let kind: Kind = fields[6].parse().unwrap();
        let method = match fields[1] {
            "bissell" => Method::Bissell,
            "nct_both_sides" => Method::NoncentralT,
            "exact_conservative" => Method::Exact,
            "chi2_n_delta0" => Method::ChiSquare,
            "boyles_patnaik" => Method::Boyles,
            other => panic!("unknown method {other}"),
        };
        let computed = if method == Method::ChiSquare {
            coverage::of_cpm(confidence, kind, n, number(4))
        } else if method == Method::Boyles {
            coverage::of_cpm_by_boyles(confidence, kind, n, number(4)).unwrap()
        } else {
            let position = match fields[4] {
                "inf" => Position::OneLimit,
                _ => Position::Offset(number(4)),
            };
            let study = Study { n, nu, cpk: number(3), position };
            coverage::of_cpk(method, confidence, kind, &study).unwrap()
        };
        if !fields[7].is_empty() {
            // Printed to six decimals.
            assert!((computed - number(7)).abs() <= 1e-6, "{line}: {computed}");
            exact_rows += 1;
        }
        if !fields[8].is_empty() {
            // A million studies for Cpk, 200 000 for Cpm.
            let studies = if fields[0] == "Cpm" { 2e5 } else { 1e6 };
            let deviation = (computed * (1.0 - computed) / studies).sqrt();
            assert!((computed - number(8)).abs() <= 4.0 * deviation + 1e-6, "{line}: {computed}");
            simulated_rows += 1;
        }
    }
    assert_eq!((exact_rows, simulated_rows), (8748, 657));
}
