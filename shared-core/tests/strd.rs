//! Mean and standard deviation of NIST's univariate data sets, read as gauge text, against the certified values.
//!
//! Source: NIST Statistical Reference Datasets, https://www.itl.nist.gov/div898/strd/univ/homepage.html.

use donelight_core::counts::Resolution;
use donelight_core::moments::Moments;

/// The set's certified `mean` or `sd` as printed, from the header line `# certified mean=…`.
fn certified<'a>(table: &'a str, what: &str) -> &'a str {
    let prefix = format!("# certified {what}=");
    let line = table.lines().find_map(|line| line.strip_prefix(prefix.as_str())).unwrap();
    line.split(' ').next().unwrap()
}

fn mean_and_deviation(table: &str, resolution: &str) -> (f64, f64) {
    let resolution: Resolution = resolution.parse().unwrap();
    let mut moments = Moments::default();
    for line in table.lines().filter(|line| !line.starts_with('#')).skip(1) {
        moments.add(resolution.read(line.as_bytes(), "").unwrap()).unwrap();
    }
    assert_eq!(moments.n().get().to_string(), certified(table, "n"));
    (moments.mean(resolution).unwrap(), moments.standard_deviation(resolution).unwrap())
}

/// Written with as many decimals, the computed value shows the very digits that NIST certifies.
fn assert_digits(computed: f64, certified: &str) {
    let decimals = certified.split_once('.').map_or(0, |(_, fraction)| fraction.len());
    assert_eq!(format!("{computed:.decimals$}"), certified);
}

#[test]
fn measured_sets_agree_to_every_certified_digit() {
    for (table, resolution) in [
        (include_str!("../../tests/reference/nist_lew.csv"), "1"),
        (include_str!("../../tests/reference/nist_lottery.csv"), "1"),
        (include_str!("../../tests/reference/nist_mavro.csv"), "0.00001"),
        (include_str!("../../tests/reference/nist_michelso.csv"), "0.01"),
    ] {
        let (mean, deviation) = mean_and_deviation(table, resolution);
        assert_digits(mean, certified(table, "mean"));
        assert_digits(deviation, certified(table, "sd"));
    }
}

/// The sets made to defeat naive sums: their exact results are the nearest doubles here, not merely close to them.
#[test]
fn ill_conditioned_sets_are_exact() {
    for (table, resolution) in [
        (include_str!("../../tests/reference/nist_numacc1.csv"), "1"),
        (include_str!("../../tests/reference/nist_numacc2.csv"), "0.1"),
        (include_str!("../../tests/reference/nist_numacc3.csv"), "0.1"),
        (include_str!("../../tests/reference/nist_numacc4.csv"), "0.1"),
    ] {
        let (mean, deviation) = mean_and_deviation(table, resolution);
        assert_eq!(mean, certified(table, "mean").parse::<f64>().unwrap());
        assert_eq!(deviation, certified(table, "sd").parse::<f64>().unwrap());
    }
}
