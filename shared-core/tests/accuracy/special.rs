//! The special functions against values of 40 and 52 digits.

use donelight_core::special::{Tails, chi_square, noncentral_chi_square, noncentral_t, normal, student_t};

use crate::{Point, relative_error};

pub(crate) fn points() -> Vec<Point> {
    let tables = [
        include_str!("../../../tests/reference/normal.csv"),
        include_str!("../../../tests/reference/special.csv"),
        include_str!("../../../tests/reference/special_wide.csv"),
    ];
    tables.iter().flat_map(|table| table.lines().skip(2)).map(point).collect()
}

/// One row: `fn,a,b,x,value,complement`.
fn point(line: &'static str) -> Point {
    let fields: Vec<&str> = line.split(',').collect();
    let optional = |column: usize| fields[column].parse::<f64>().ok();
    let (function, a, b) = (fields[0], optional(1), optional(2));
    let (nu, second) = (a.unwrap_or(f64::NAN), b.unwrap_or(f64::NAN));
    let x = optional(3).unwrap();
    let (relative, absolute) = match function {
        "norm_cdf" => of_tails(Tails { lower: normal::cdf(x), upper: normal::upper_tail(x) }, &fields),
        "chi2_cdf" => of_tails(chi_square::tails(x, nu), &fields),
        "t_cdf" => of_tails(student_t::tails(x, nu), &fields),
        "nct_cdf" => of_tails(noncentral_t::tails(x, nu, second), &fields),
        "ncx2_cdf" => of_tails(noncentral_chi_square::tails(x, nu, second), &fields),
        _ => {
            let computed = match function {
                "norm_ppf" => normal::quantile(x),
                "erfc" => libm::erfc(x),
                "lgamma" => libm::lgamma(x),
                "chi2_ppf" => chi_square::quantile(x, nu),
                "chi2_isf" => chi_square::upper_quantile(x, nu),
                "t_ppf" => student_t::quantile(x, nu),
                "nct_ppf" => noncentral_t::quantile(x, nu, second),
                "ncx2_ppf" => noncentral_chi_square::quantile(x, nu, second),
                other => panic!("unknown function {other}"),
            };
            let value: f64 = fields[4].parse().unwrap();
            (relative_error(computed, value), (computed - value).abs())
        }
    };
    Point {
        function: function.to_owned(),
        a,
        b,
        place: fields[1..4].join(" ").trim().to_owned(),
        relative,
        absolute,
    }
}

/// The relative error of the smaller tail, the larger absolute error of both.
fn of_tails(tails: Tails, fields: &[&str]) -> (f64, f64) {
    let (lower, upper): (f64, f64) = (fields[4].parse().unwrap(), fields[5].parse().unwrap());
    let relative =
        if lower < upper { relative_error(tails.lower, lower) } else { relative_error(tails.upper, upper) };
    (relative, (tails.lower - lower).abs().max((tails.upper - upper).abs()))
}
