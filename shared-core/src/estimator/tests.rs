use proptest::prelude::*;

use super::*;

fn study(n: u32, cpk: f64, position: Position) -> Study {
    let n = Count::new(n).unwrap();
    Study { n, nu: DegreesOfFreedom::overall(n).unwrap(), cpk, position }
}

proptest! {
    /// The coupling of the module's head: proven, and so it must show.
    #[test]
    fn the_probability_of_a_low_estimate_falls_with_the_offset_down_to_that_of_one_limit(
        n in 2_u32..1000, cpk in 0.1..3.0, factor in 0.3..2.0, offset in 0.0..1.0, more in 0.0..1.0,
    ) {
        let y = cpk * factor;
        let at = |position| study(n, cpk, position).tails(y).lower;
        let (near, far, one) =
            (at(Position::Offset(offset)), at(Position::Offset(offset + more)), at(Position::OneLimit));
        prop_assert!(near >= far - 1e-13 && far >= one - 1e-13, "{near} {far} {one}");
        prop_assert!((at(Position::Offset(60.0)) - one).abs() < 1e-13);
        prop_assert!((0.0..=1.0 + 1e-13).contains(&near));
    }

    /// Two ways to the same number: below zero no draw lies beyond both limits, above the integral counts them once.
    #[test]
    fn the_distribution_is_continuous_through_zero(n in 2_u32..200, cpk in 0.05..0.5, offset in 0.0..1.0) {
        let at = |y| study(n, cpk, Position::Offset(offset)).tails(y).lower;
        let (below, above) = (at(0.0), at(1e-9));
        prop_assert!((below - above).abs() < 1e-6 * above.max(1e-6), "{below} {above}");
    }

    #[test]
    fn the_slope_by_the_true_index_is_that_of_the_tail(n in 3_u32..1000, cpk in 0.5..2.5, factor in 0.6..1.0) {
        let n = Count::new(n).unwrap();
        let nu = DegreesOfFreedom::overall(n).unwrap();
        let step = 1e-5;
        let at = |true_cpk: f64| centred_lower_tail(factor * cpk, n, nu, true_cpk);
        let difference = (at(cpk + step).0 - at(cpk - step).0) / (2.0 * step);
        let (_, slope) = at(cpk);
        prop_assert!((slope - difference).abs() < 1e-4 * (1.0 + difference.abs()), "{slope} {difference}");
    }
}
