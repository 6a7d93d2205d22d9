//! What sizes rest on, against `sizes.csv`, which prints nine decimals: relative widths and powers, at n and one piece before.

use donelight_core::capability::Index;
use donelight_core::interval::{Kind, Method};
use donelight_core::quantity::{Confidence, Millionths, Precision};
use donelight_core::sizing::{Design, power, precision};

use crate::{Point, relative_error};

/// Rows: `task,method,delta,side,level,c0_or_index,c1,goal_relwidth,goal_power,n,at_n,at_n_minus_1,…`.
pub(crate) fn points() -> Vec<Point> {
    include_str!("../../../tests/reference/sizes.csv").lines().skip(2).flat_map(row).collect()
}

fn row(line: &str) -> Vec<Point> {
    let fields: Vec<&str> = line.split(',').collect();
    let number = |column: usize| fields[column].parse::<f64>().unwrap();
    let millionths = |column: usize| (number(column) * 1e6).round() as u32;
    let confidence = |column| Confidence::from_millionths(millionths(column)).unwrap();
    let (index, method) = match fields[1] {
        "Cp/chi2" => (Index::Cp, Method::ChiSquare),
        "Cpl_Cpu/nct" => (Index::Cpu, Method::NoncentralT),
        "Cpk/bissell" => (Index::Cpk, Method::Bissell),
        "Cpk/exact_conservative" => (Index::Cpk, Method::Exact),
        "Cpm/boyles" => (Index::Cpm, Method::Boyles),
        other => panic!("unknown method {other}"),
    };
    let offset = fields[2].parse().unwrap_or(0.0);
    let design = Design::new(index, method).unwrap().with_offset(offset).unwrap();
    let (what, n, achieved, before) = if fields[0] == "precision" {
        let goal = Precision::Relative(Millionths(millionths(7)));
        let kind: Kind = fields[3].parse().unwrap();
        let size = precision::smallest(&design, number(5), goal, confidence(4), kind).unwrap();
        ("width", size.n, size.achieved, size.achieved_before)
    } else {
        let alpha = Millionths(millionths(4));
        let size = power::smallest(&design, number(5), number(6), alpha, confidence(8)).unwrap();
        ("power", size.n, size.achieved, size.achieved_before)
    };
    assert_eq!(f64::from(n.get()), number(9), "{line}");
    [(10, achieved), (11, before.unwrap())]
        .map(|(column, computed)| Point {
            function: format!("{what} of {index} by {method}"),
            a: Some(number(9)),
            b: None,
            place: format!("{} {} {} {}", fields[9], fields[3], fields[4], fields[5]),
            relative: relative_error(computed, number(column)),
            absolute: (computed - number(column)).abs(),
        })
        .into()
}
