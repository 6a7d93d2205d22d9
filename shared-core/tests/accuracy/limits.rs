//! Confidence limits against `intervals.csv` and `intervals_bissell.csv`, which print 15 digits.

use donelight_core::capability::Index;
use donelight_core::interval::{self, Evidence, Kind, Method};
use donelight_core::quantity::{Confidence, Count, DegreesOfFreedom};

use crate::{Point, relative_error};

/// Rows: `index,method,status,n,estimate,conf,delta,kind,lower,upper`.
pub(crate) fn points() -> Vec<Point> {
    let tables = [
        include_str!("../../../tests/reference/intervals.csv"),
        include_str!("../../../tests/reference/intervals_bissell.csv"),
    ];
    tables.iter().flat_map(|table| table.lines().skip(2)).flat_map(limits).collect()
}

/// The limits of a row by all methods that must give them.
fn limits(line: &str) -> Vec<Point> {
    let fields: Vec<&str> = line.split(',').collect();
    let number = |column: usize| fields[column].parse::<f64>().unwrap();
    let ways: &[(Index, Method)] = match fields[1] {
        "chi2" => &[(Index::Cp, Method::ChiSquare)],
        "nct" => &[(Index::Cpl, Method::NoncentralT), (Index::Cpu, Method::NoncentralT)],
        "exact_conservative" => &[(Index::Cpk, Method::Exact)],
        "boyles_patnaik" if fields[6] == "0" || fields[6] == "0.0" => {
            &[(Index::Cpm, Method::Boyles), (Index::Cpm, Method::ChiSquare)]
        }
        "boyles_patnaik" => &[(Index::Cpm, Method::Boyles)],
        "bissell_1990" | "bissell" => &[(Index::Cpk, Method::Bissell)],
        // No method for use: a check of the noncentral chi-square (`intervals.rs`).
        "ncx2_delta_known" => &[],
        other => panic!("unknown method {other}"),
    };
    let n = Count::new(fields[3].parse().unwrap()).unwrap();
    let kind: Kind = fields[7].parse().unwrap();
    let confidence = Confidence::from_millionths((number(5) * 1e6).round() as u32).unwrap();
    let offset = fields[6].parse().unwrap_or(0.0);
    let nu = DegreesOfFreedom::overall(n).unwrap();
    let ends = ways.iter().flat_map(|(index, method)| {
        let evidence =
            Evidence { index: *index, estimate: number(4), n, nu, squared_offset: offset * offset };
        let computed = interval::of(*method, &evidence, confidence, kind).unwrap().interval;
        [(computed.low, 8), (computed.high, 9)].map(|(end, column)| (*index, *method, end, column))
    });
    let point = |(index, method, end, column): (Index, Method, Option<f64>, usize)| {
        let (end, exact) = (end?, number(column));
        let place = format!("{} {} {} {}", fields[3], fields[4], fields[5], fields[7]);
        Some(Point {
            function: format!("{index} by {method}"),
            a: Some(number(3)),
            b: None,
            place,
            relative: relative_error(end, exact),
            absolute: (end - exact).abs(),
        })
    };
    ends.filter_map(point).collect()
}
