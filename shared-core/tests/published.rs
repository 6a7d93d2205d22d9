//! The worked example and the table of NIST/SEMATECH e-Handbook of Statistical Methods, 6.1.6 (What is process
//! capability?), https://www.itl.nist.gov/div898/handbook/pmc/section1/pmc16.htm.

use donelight_core::capability::{Index, Sample, Specification};
use donelight_core::quantity::Count;
use donelight_core::special::normal;

/// Rows as `key,quantity,inputs,published,…`; the quantity may be quoted.
fn published(quantity: &str) -> Vec<(&'static str, f64)> {
    let table = include_str!("../../tests/reference/published_indices.csv");
    let mark = format!("hb616,{quantity},");
    let rows = table.lines().filter_map(|line| line.strip_prefix(mark.as_str()));
    rows.map(|row| {
        let mut fields = row.split(',');
        (fields.next().unwrap(), fields.next().unwrap().parse().unwrap())
    })
    .collect()
}

#[test]
fn the_worked_example_of_the_handbook_is_met() {
    // The Handbook does not use n here.
    let n = Count::new(50).unwrap();
    let limit = |text: &str| Some(text.parse().unwrap());
    let specification = Specification::new(limit("8"), limit("20"), None).unwrap();
    let sample = Sample::from_summary(n, 16.0, 2.0, &specification).unwrap();
    for index in [Index::Cp, Index::Cpu, Index::Cpl, Index::Cpk] {
        let rows = published(index.name());
        assert_eq!(rows.len(), 1);
        for (inputs, value) in rows {
            assert_eq!(inputs, "USL=20 LSL=8 mean=16 s=2");
            assert!((sample.estimate(index).unwrap() - value).abs() <= 0.5e-4, "{index}");
        }
    }
}

/// The Handbook prints Cp to two decimals and the fraction to one or two digits (0.6e-6 for 0.636e-6): hence 6 %.
#[test]
fn the_rejected_fractions_of_the_handbook_are_met() {
    let rows = published("\"reject fraction, centred normal\"");
    assert_eq!(rows.len(), 4);
    for (inputs, fraction) in rows {
        let cp: f64 = inputs.strip_prefix("Cp=").unwrap().parse().unwrap();
        let computed = 2.0 * normal::upper_tail(3.0 * cp);
        assert!((computed / fraction - 1.0).abs() < 0.06, "{inputs}: {computed}");
    }
}
