//! How far each function can be trusted: its errors against values of 52 digits, kept in `ACCURACY.md` beside the crate.
//! The test fails when an entry worsens. `DONELIGHT_WRITE_ACCURACY=1 cargo test -p donelight-core --test accuracy` writes
//! the table anew.

use std::fmt::Write;

use donelight_core::special::{Tails, chi_square, noncentral_chi_square, noncentral_t, normal, student_t};

const HEAD: &str = "# Accuracy\n\n\
    Relative errors against values computed independently with mpmath at 52 digits (`tests/reference/special.csv`,\n\
    `normal.csv`) and 40 digits (`special_wide.csv`). Of a distribution function, the smaller tail counts; the last\n\
    column is the largest absolute error of either tail. `a` is ν, `b` the noncentrality δ or λ. Two digits, rounded up.\n\
    Made by `tests/accuracy.rs`, which fails when an entry worsens; libm's own functions are listed because all rests on\n\
    them.\n\n\
    | function | points | a from, to | largest b | worst | where | median | absolute |\n\
    |---|---:|---|---:|---:|---|---:|---:|\n";

/// The largest error that the project allows, by function: relative, absolute.
const ALLOWED: [(&str, f64, f64); 13] = [
    ("norm_cdf", 1e-13, 1e-15),
    ("norm_ppf", 1e-15, f64::INFINITY),
    ("erfc", 1e-15, 1e-15),
    ("lgamma", 1e-15, f64::INFINITY),
    ("chi2_cdf", 1e-12, 1e-14),
    ("chi2_ppf", 1e-12, f64::INFINITY),
    ("chi2_isf", 1e-12, f64::INFINITY),
    ("t_cdf", 1e-12, 1e-14),
    ("t_ppf", 1e-12, f64::INFINITY),
    ("nct_cdf", 1e-11, 1e-14),
    ("nct_ppf", 1e-12, f64::INFINITY),
    ("ncx2_cdf", 1e-12, 1e-14),
    ("ncx2_ppf", 1e-12, f64::INFINITY),
];

struct Point {
    function: &'static str,
    a: Option<f64>,
    b: Option<f64>,
    place: String,
    relative: f64,
    absolute: f64,
}

fn relative_error(computed: f64, exact: f64) -> f64 {
    if exact == 0.0 { computed.abs() } else { ((computed - exact) / exact).abs() }
}

fn points() -> Vec<Point> {
    let tables = [
        include_str!("../../tests/reference/normal.csv"),
        include_str!("../../tests/reference/special.csv"),
        include_str!("../../tests/reference/special_wide.csv"),
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
    Point { function, a, b, place: fields[1..4].join(" ").trim().to_owned(), relative, absolute }
}

/// The relative error of the smaller tail, the larger absolute error of both.
fn of_tails(tails: Tails, fields: &[&str]) -> (f64, f64) {
    let (lower, upper): (f64, f64) = (fields[4].parse().unwrap(), fields[5].parse().unwrap());
    let relative =
        if lower < upper { relative_error(tails.lower, lower) } else { relative_error(tails.upper, upper) };
    (relative, (tails.lower - lower).abs().max((tails.upper - upper).abs()))
}

/// Two digits, rounded up, so that the written number is a bound.
fn rounded_up(error: f64) -> String {
    if error == 0.0 {
        return "0".to_owned();
    }
    let unit = 10_f64.powi(error.log10().floor() as i32 - 1);
    format!("{:.1e}", (error / unit).ceil() * unit)
}

/// The table's rows: the function, then what is written about it.
fn rows(points: &[Point]) -> Vec<String> {
    let of = |function: &str| {
        let mut own: Vec<&Point> = points.iter().filter(|point| point.function == function).collect();
        own.sort_by(|left, right| left.relative.total_cmp(&right.relative));
        let absolute = own.iter().map(|point| point.absolute).fold(0.0, f64::max);
        let worst = own.last().expect("every function has points");
        let (from, to) = own
            .iter()
            .filter_map(|point| point.a)
            .fold((f64::INFINITY, f64::NEG_INFINITY), |(from, to), a| (from.min(a), to.max(a)));
        let range = if from <= to { format!("{from}, {to}") } else { String::new() };
        let largest = own.iter().filter_map(|point| point.b).reduce(f64::max);
        let mut row = format!("| {function} | {} | {range} | ", own.len());
        write!(row, "{} | ", largest.map_or(String::new(), |b| b.to_string())).unwrap();
        write!(row, "{} | {} | ", rounded_up(worst.relative), worst.place).unwrap();
        let shown = if function.ends_with("cdf") { rounded_up(absolute) } else { String::new() };
        write!(row, "{} | {shown} |", rounded_up(own[own.len() / 2].relative)).unwrap();
        row
    };
    ALLOWED.iter().map(|(function, ..)| of(function)).collect()
}

#[test]
fn every_value_of_the_tables_is_met_to_what_the_project_allows() {
    let points = points();
    assert_eq!(points.len(), 934 + 230);
    for Point { function, place, relative, absolute, .. } in &points {
        let &(_, most_relative, most_absolute) =
            ALLOWED.iter().find(|(name, ..)| name == function).expect("every function has a bound");
        let far = function == &"norm_cdf" && place.parse::<f64>().unwrap().abs() > 8.5;
        // Rounding z / √2 alone costs a far normal tail z² half-units.
        let most_relative = if far { 1e-12 } else { most_relative };
        assert!(*relative <= most_relative, "{function} {place}: {relative:e}");
        // Of quantiles and of functions without tails, only the relative error counts.
        assert!(*absolute <= most_absolute, "{function} {place}: {absolute:e}");
    }
}

#[test]
fn no_entry_of_the_accuracy_table_worsens() {
    let rows = rows(&points());
    if std::env::var_os("DONELIGHT_WRITE_ACCURACY").is_some() {
        let text = format!("{HEAD}{}\n", rows.join("\n"));
        std::fs::write(concat!(env!("CARGO_MANIFEST_DIR"), "/ACCURACY.md"), text).unwrap();
        return;
    }
    let kept = include_str!("../ACCURACY.md");
    for row in rows {
        let cells: Vec<&str> = row.split('|').map(str::trim).collect();
        let before = kept.lines().find(|line| line.starts_with(&format!("| {} |", cells[1])));
        let before: Vec<&str> = before.expect("every function has a row").split('|').map(str::trim).collect();
        for (name, column) in [("worst", 5), ("median", 7), ("absolute", 8)] {
            let number = |cells: &[&str]| cells[column].parse::<f64>().unwrap_or(0.0);
            assert!(number(&cells) <= number(&before), "{} {name} worsens: {row}", cells[1]);
        }
    }
}
