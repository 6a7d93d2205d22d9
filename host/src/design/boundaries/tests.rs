//! The spending in the known normal case, against published boundaries.

use donelight_core::special::normal;

use super::*;

/// A sum of normal increments with a drift: z = sum/√n, E z = drift·√n. The published tables are about this process.
struct Normal {
    drift: f64,
}

impl Walk for Normal {
    type State = f64;
    type Step = (f64, f64, f64);

    fn range(&self, n: u32) -> (f64, f64) {
        let mean = self.drift * f64::from(n).sqrt();
        (mean - 9.0, mean + 9.0)
    }

    fn reach(&self, _: u32, _: f64, _: f64, n: u32) -> (f64, f64) {
        self.range(n)
    }

    fn spread(&self, _: u32) -> f64 {
        1.0
    }

    fn fibre(&self, _: u32, x: f64, _: f64) -> Vec<(f64, f64)> {
        vec![(x, 1.0)]
    }

    fn start(&self, n: u32, z: &f64) -> f64 {
        density(z - self.drift * f64::from(n).sqrt())
    }

    fn step(&self, from: u32, to: u32) -> Self::Step {
        (f64::from(from).sqrt(), f64::from(to).sqrt(), f64::from(to - from))
    }

    fn density(&self, (before, after, new): &Self::Step, from: &f64, to: &f64) -> f64 {
        let increment = to * after - from * before - self.drift * new;
        density(increment / new.sqrt()) * after / new.sqrt()
    }
}

fn density(z: f64) -> f64 {
    (-0.5 * z * z).exp() / (2.0 * std::f64::consts::PI).sqrt()
}

struct Plain;

impl Scale<Normal> for Plain {
    fn low(&self, _: &Normal, _: u32, x: f64) -> Option<f64> {
        Some(x)
    }

    fn high(&self, _: &Normal, _: u32, x: f64) -> Option<f64> {
        Some(x)
    }

    fn x(&self, _: &Normal, _: u32, boundary: f64) -> f64 {
        boundary
    }
}

/// Equal looks at so many units of information each.
fn equal(count: u32, unit: u32) -> Vec<u32> {
    (1..=count).map(|k| k * unit).collect()
}

fn two_sided(spending: Spending, looks: u32) -> Vec<f64> {
    let null = Normal { drift: 0.0 };
    let error = Error { walk: &null, risk: 0.025 };
    let table = spend(&error, &error, spending, &equal(looks, 100), &Plain, Last::Open);
    assert!(table.defect < 1e-7, "{}", table.defect);
    assert!((table.spent_low - 0.025).abs() < 1e-7 && (table.spent_high - 0.025).abs() < 1e-7);
    for row in &table.rows {
        assert!((row.low.unwrap() + row.high.unwrap()).abs() < 1e-6, "{row:?}");
    }
    table.rows.iter().map(|row| row.high.unwrap()).collect()
}

/// Reboussin, DeMets, Kim & Lan (2000), Programs for computing group sequential boundaries using the Lan-DeMets method,
/// Controlled Clinical Trials 21:190-207: two-sided 5 %, five equal looks. Values from memory, printed to four
/// places by a program whose own integration is good to about 10⁻⁴; the first of each is checked by its definition too.
#[test]
fn the_boundaries_of_five_equal_looks_are_the_published_ones() {
    let obrien_fleming = two_sided(Spending::ObrienFleming, 5);
    let pocock = two_sided(Spending::Pocock, 5);
    for (ours, published) in [
        (obrien_fleming.clone(), [4.8769, 3.3569, 2.6803, 2.2898, 2.0310]),
        (pocock.clone(), [2.4380, 2.4268, 2.4101, 2.3966, 2.3859]),
    ] {
        for (one, other) in ours.iter().zip(published) {
            assert!((one - other).abs() < 1.5e-4, "{ours:?} {published:?}");
        }
    }
    let first = |spent: f64| normal::upper_quantile(spent);
    let quarter = normal::upper_quantile(0.0125) / 0.2f64.sqrt();
    assert!((obrien_fleming[0] - first(2.0 * normal::upper_tail(quarter))).abs() < 1e-6);
    assert!((pocock[0] - first(0.025 * (1.0 + 0.2 * (std::f64::consts::E - 1.0)).ln())).abs() < 1e-6);
}
