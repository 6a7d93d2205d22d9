//! Interval methods against tables computed independently, with mpmath and scipy.

use donelight_core::capability::{Index, Sample, Specification};
use donelight_core::counts::Decimal;
use donelight_core::interval::{self, Evidence, Interval, Kind, Method};
use donelight_core::quantity::{Confidence, Count, DegreesOfFreedom};
use donelight_core::special::noncentral_chi_square;

/// One row: `index,method,status,n,estimate,conf,delta,kind,lower,upper`.
struct Row {
    line: &'static str,
    fields: Vec<&'static str>,
}

impl Row {
    fn all(table: &'static str) -> impl Iterator<Item = Self> {
        table.lines().skip(2).map(|line| Self { line, fields: line.split(',').collect() })
    }

    fn n(&self) -> Count {
        Count::new(self.fields[3].parse().unwrap()).unwrap()
    }

    fn number(&self, column: usize) -> f64 {
        self.fields[column].parse().unwrap()
    }

    fn confidence(&self) -> Confidence {
        Confidence::from_millionths((self.number(5) * 1e6).round() as u32).unwrap()
    }

    fn kind(&self) -> Kind {
        self.fields[7].parse().unwrap()
    }

    /// Both ends, to 1e-11 of themselves; the table prints 15 digits.
    fn assert(&self, interval: Interval) {
        for (computed, exact) in [(interval.low, self.fields[8]), (interval.high, self.fields[9])] {
            match computed {
                None => assert_eq!(exact, "", "{}", self.line),
                Some(computed) => {
                    let exact: f64 = exact.parse().unwrap();
                    assert!((computed - exact).abs() <= 1e-11 * exact.abs(), "{}: {computed}", self.line);
                }
            }
        }
    }
}

#[test]
fn every_interval_of_bissells_table_is_met() {
    let mut rows = 0;
    for row in Row::all(include_str!("../../tests/reference/intervals_bissell.csv")) {
        // A sample with mean 0, sigma 1 and its one limit at three times the index.
        let estimate: Decimal = row.fields[4].parse().unwrap();
        let limit = Decimal::new(3 * estimate.mantissa(), estimate.decimals()).unwrap();
        let specification = Specification::new(None, Some(limit), None).unwrap();
        let sample = Sample::from_summary(row.n(), 0.0, 1.0, &specification).unwrap();
        for index in [Index::Cpk, Index::Cpu] {
            let evidence = Evidence::of(&sample, index).unwrap();
            row.assert(by(Method::Bissell, &evidence, &row));
        }
        rows += 1;
    }
    assert_eq!(rows, 567);
}

fn by(method: Method, evidence: &Evidence, row: &Row) -> Interval {
    interval::of(method, evidence, row.confidence(), row.kind()).unwrap().interval
}

#[test]
fn every_interval_of_the_table_of_methods_is_met() {
    let mut rows = 0;
    for row in Row::all(include_str!("../../tests/reference/intervals.csv")) {
        rows += 1;
        let (index, method) = match row.fields[1] {
            "chi2" => (Index::Cp, Method::ChiSquare),
            "nct" => (Index::Cpl, Method::NoncentralT),
            "exact_conservative" => (Index::Cpk, Method::Exact),
            "boyles_patnaik" => (Index::Cpm, Method::Boyles),
            "ncx2_delta_known" => {
                row.assert(with_the_offset_known(&row));
                continue;
            }
            other => panic!("unknown method {other}"),
        };
        let nu = DegreesOfFreedom::overall(row.n()).unwrap();
        let squared_offset = row.fields[6].parse().map_or(0.0, |delta: f64| delta * delta);
        let evidence = Evidence { index, estimate: row.number(4), n: row.n(), nu, squared_offset };
        row.assert(by(method, &evidence, &row));
        if index == Index::Cpl {
            row.assert(by(method, &Evidence { index: Index::Cpu, ..evidence }, &row));
        }
        // On target, Boyles' degrees of freedom are n, as the conservative interval's always are.
        if index == Index::Cpm && squared_offset == 0.0 {
            row.assert(by(Method::ChiSquare, &evidence, &row));
        }
        if (index, row.kind()) == (Index::Cpk, Kind::Lower) {
            row.assert(by(Method::NoncentralT, &evidence, &row));
        }
    }
    assert_eq!(rows, 5103);
}

/// Cpm's interval if δ were known: no method for use, but a check of the noncentral chi-square quantile.
fn with_the_offset_known(row: &Row) -> Interval {
    let (n, square) = (row.number(3), row.number(6) * row.number(6));
    let risk = row.kind().risk_on_a_side(row.confidence());
    let end = |quantile: f64| row.number(4) * (quantile / (n * (1.0 + square))).sqrt();
    let low = end(noncentral_chi_square::quantile(risk, n, n * square));
    let high = end(noncentral_chi_square::upper_quantile(risk, n, n * square));
    Interval {
        low: (row.kind() != Kind::Upper).then_some(low),
        high: (row.kind() != Kind::Lower).then_some(high),
    }
}
