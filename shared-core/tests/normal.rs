//! The normal distribution against a table of 20 digits, computed with mpmath at 52 digits.

use donelight_core::special::normal;

fn relative_error(computed: f64, exact: f64) -> f64 {
    if exact == 0.0 { computed.abs() } else { ((computed - exact) / exact).abs() }
}

#[test]
fn tails_and_quantiles_agree_with_the_table() {
    let mut rows = 0;
    for line in include_str!("../../tests/reference/normal.csv").lines().skip(2) {
        let fields: Vec<&str> = line.split(',').collect();
        let number = |column: usize| fields[column].parse::<f64>().unwrap();
        let (x, value) = (number(3), number(4));
        match fields[0] {
            "norm_cdf" => {
                let tolerance = if x.abs() <= 8.5 { 1e-14 } else { 1.5e-16 * x * x };
                assert!(relative_error(normal::cdf(x), value) <= tolerance, "{line}");
                assert!(relative_error(normal::upper_tail(x), number(5)) <= tolerance, "{line}");
            }
            "norm_ppf" => {
                assert!(relative_error(normal::quantile(x), value) <= 1e-15, "{line}");
                assert!(relative_error(normal::upper_quantile(x), -value) <= 1e-15, "{line}");
            }
            other => panic!("unknown function {other}"),
        }
        rows += 1;
    }
    assert_eq!(rows, 95);
}

#[test]
fn the_ends_are_infinite_and_what_lies_beyond_is_no_number() {
    assert_eq!((normal::quantile(0.0), normal::quantile(1.0)), (f64::NEG_INFINITY, f64::INFINITY));
    for p in [-0.1, 1.1, f64::NAN] {
        assert!(normal::quantile(p).is_nan());
    }
}
