//! Laws: closed forms that hold at special parameters, recurrences, round trips. The tables are in `tests/accuracy`, laws over
//! all ranges in `tests/properties.rs`.

use proptest::prelude::*;

use super::*;

fn close(computed: f64, exact: f64, tolerance: f64) -> bool {
    (computed - exact).abs() <= tolerance * exact.abs()
}

#[test]
fn stirlings_error_agrees_with_the_gamma_function_of_libm() {
    for a in [0.5, 1.0, 1.5, 2.25, 5.0, 11.9, 12.1, 40.0, 150.0] {
        let exact = libm::lgamma(a) - (a - 0.5) * a.ln() + a - 0.5 * core::f64::consts::TAU.ln();
        assert!((gamma::stirling_error(a) - exact).abs() < 1e-13 * (1.0 + a), "{a}");
    }
    // δ(1) = 1 − ln √(2π), since Γ(1) = 1.
    assert!((gamma::stirling_error(1.0) - (1.0 - 0.5 * core::f64::consts::TAU.ln())).abs() < 2e-16);
}

#[test]
fn what_lies_outside_the_stated_ranges_is_no_number() {
    for nu in [0.0, -1.0, 1e7, f64::NAN, f64::INFINITY] {
        assert!(chi_square::tails(1.0, nu).lower.is_nan() && chi_square::quantile(0.1, nu).is_nan());
        assert!(student_t::tails(1.0, nu).lower.is_nan() && student_t::quantile(0.1, nu).is_nan());
        assert!(noncentral_chi_square::tails(1.0, nu, 1.0).upper.is_nan());
        assert!(noncentral_t::noncentrality(Side::Upper, 0.1, 1.0, nu).0.is_nan());
    }
    for p in [-0.1, 1.1, f64::NAN] {
        assert!(chi_square::quantile(p, 3.0).is_nan() && chi_square::upper_quantile(p, 3.0).is_nan());
        assert!(noncentral_t::quantile(p, 3.0, 1.0).is_nan());
        assert!(noncentral_chi_square::quantile(p, 3.0, 1.0).is_nan());
        assert!(noncentral_t::noncentrality(Side::Lower, p, 1.0, 3.0).0.is_nan());
    }
    assert!(noncentral_t::tails(f64::NAN, 3.0, 1.0).lower.is_nan());
    assert!(noncentral_t::tails(1.0, 3.0, f64::NAN).lower.is_nan());
    assert!(noncentral_chi_square::tails(1.0, 3.0, -1.0).lower.is_nan());
}

#[test]
fn the_ends_of_a_distribution_have_its_whole_probability_on_one_side() {
    let ends = [Tails { lower: 0.0, upper: 1.0 }, Tails { lower: 1.0, upper: 0.0 }];
    assert_eq!([0.0, f64::INFINITY].map(|x| chi_square::tails(x, 3.0)), ends);
    assert_eq!([0.0, f64::INFINITY].map(|x| noncentral_chi_square::tails(x, 3.0, 2.0)), ends);
    assert_eq!([f64::NEG_INFINITY, f64::INFINITY].map(|x| noncentral_t::tails(x, 3.0, 2.0)), ends);
    assert_eq!((chi_square::quantile(0.0, 3.0), chi_square::upper_quantile(0.0, 3.0)), (0.0, f64::INFINITY));
    assert_eq!(noncentral_t::quantile(0.0, 3.0, 1.0), f64::NEG_INFINITY);
    assert_eq!(noncentral_t::upper_quantile(0.0, 3.0, 1.0), f64::INFINITY);
    assert_eq!(noncentral_chi_square::upper_quantile(0.0, 3.0, 1.0), f64::INFINITY);
}

#[test]
fn a_t_of_zero_leaves_the_normal_tail_of_the_noncentrality() {
    for delta in [-30.0, -1.0, 0.0, 0.5, 6.0] {
        let tails = noncentral_t::tails(0.0, 7.0, delta);
        assert!(
            close(tails.lower, normal::cdf(-delta), 1e-15) && close(tails.upper, normal::cdf(delta), 1e-15)
        );
    }
}

/// A noncentral chi-square without noncentrality, or next to none, is a central one.
#[test]
fn no_noncentrality_leaves_the_central_chi_square() {
    for (x, nu) in [(0.3, 1.0), (4.0, 5.0), (300.0, 250.0)] {
        let central = chi_square::tails(x, nu);
        for lambda in [0.0, 1e-300, 1e-40, 1e-18] {
            let tails = noncentral_chi_square::tails(x, nu, lambda);
            assert!(close(tails.lower, central.lower, 1e-14) && close(tails.upper, central.upper, 1e-14));
        }
    }
}

/// What a limit costs on the device: at n = 300 at most two integrals of at most this many nodes, from a standing start.
#[test]
fn a_limit_at_300_pieces_takes_few_integrals_of_few_nodes() {
    let (mut most_nodes, mut most_integrals) = (0, 0);
    for index in [0.5, 1.0, 1.33, 1.67, 2.0, 3.0] {
        for risk in [0.1, 0.05, 0.025, 0.005] {
            for side in [Side::Lower, Side::Upper] {
                let t = 3.0 * 300_f64.sqrt() * index;
                let (delta, integrals) = noncentral_t::noncentrality(side, risk, t, 299.0);
                most_integrals = integrals.max(most_integrals);
                most_nodes = noncentral_t::nodes(side, t, 299.0, delta).max(most_nodes);
            }
        }
    }
    assert!(most_integrals <= 2 && most_nodes <= 90, "{most_integrals} integrals of {most_nodes} nodes");
}

proptest! {
    /// One degree of freedom: a squared normal. Two: an exponential.
    #[test]
    fn a_chi_square_of_one_or_two_degrees_has_a_closed_form(z in 1e-8_f64..8.0) {
        // Rounding z² costs a tail z²/2 times the rounding.
        let tolerance = 1e-14 + 1e-15 * z * z;
        let tails = chi_square::tails(z * z, 1.0);
        prop_assert!(close(tails.upper, 2.0 * normal::upper_tail(z), tolerance));
        prop_assert!(close(tails.lower, libm::erf(z / core::f64::consts::SQRT_2), tolerance));
        prop_assert!(close(chi_square::tails(z * z, 2.0).upper, (-0.5 * z * z).exp(), tolerance));
        prop_assert!(close(chi_square::tails(z * z, 2.0).lower, -(-0.5 * z * z).exp_m1(), tolerance));
    }

    /// P(χ²ν > x) and P(χ²ν+2 > x) differ by twice the density: NIST DLMF 8.8.5 and 8.8.6.
    #[test]
    fn two_degrees_of_freedom_more_add_one_term(log_nu in 0.0..13.0, z in -6.0_f64..6.0) {
        let nu = f64::exp(log_nu);
        let x = nu * (1.0 - 2.0 / (9.0 * nu) + z * (2.0 / (9.0 * nu)).sqrt()).max(0.02).powi(3);
        let (tails, next) = (chi_square::tails(x, nu), chi_square::tails(x, nu + 2.0));
        let term = gamma::poisson(0.5 * nu, 0.5 * x);
        prop_assert!(close(tails.upper + term, next.upper, 1e-13));
        prop_assert!(close(next.lower + term, tails.lower, 1e-13));
    }

    #[test]
    fn a_chi_square_quantile_leaves_its_tail(log_nu in 0.0..13.0, log_tail in -60.0_f64..-0.7) {
        let (nu, tail) = (f64::exp(log_nu), f64::exp(log_tail));
        let (low, high) = (chi_square::quantile(tail, nu), chi_square::upper_quantile(tail, nu));
        // Rounding x alone costs this much: its relative error times x times the density, over the tail.
        let rounding = 2e-16 * (2.0 * nu * -log_tail).sqrt();
        prop_assert!(close(chi_square::tails(low, nu).lower, tail, 1e-13 + rounding), "{low}");
        prop_assert!(close(chi_square::tails(high, nu).upper, tail, 1e-13 + rounding), "{high}");
    }

    /// ν = 1 is Cauchy's distribution; ν = 2 has P(T > t) = 1/(2 + t² + t√(2 + t²)).
    #[test]
    fn students_t_of_one_or_two_degrees_has_a_closed_form(log_t in -20.0..20.0) {
        let t = f64::exp(log_t);
        let upper = (1.0 / t).atan() / core::f64::consts::PI;
        prop_assert!(close(student_t::tails(t, 1.0).upper, upper, 2e-14));
        prop_assert!(close(student_t::tails(-t, 1.0).lower, upper, 2e-14));
        let upper = 1.0 / (2.0 + t * t + t * (2.0 + t * t).sqrt());
        prop_assert!(close(student_t::tails(t, 2.0).upper, upper, 2e-14));
    }

    #[test]
    fn a_noncentral_chi_square_of_one_degree_is_a_squared_shifted_normal(root in 0.01_f64..30.0, shift in 0.01_f64..30.0) {
        let tails = noncentral_chi_square::tails(root * root, 1.0, shift * shift);
        let upper = normal::upper_tail(root - shift) + normal::upper_tail(root + shift);
        if upper > 1e-60 {
            prop_assert!(close(tails.upper, upper, 1e-12), "{upper}");
        }
        let lower = normal::cdf(root - shift) - normal::cdf(-root - shift);
        if lower > 1e-60 && root * shift > 1.0 {
            prop_assert!(close(tails.lower, lower, 1e-12), "{lower}");
        }
    }

    #[test]
    fn a_noncentral_t_is_mirrored_and_its_tails_fill_one(
        log_nu in 0.0..13.8, delta in -100.0_f64..100.0, z in -6.0_f64..6.0,
    ) {
        let nu = f64::exp(log_nu);
        let t = delta + z * (1.0 + delta * delta / (2.0 * nu)).sqrt();
        let (tails, mirrored) = (noncentral_t::tails(t, nu, delta), noncentral_t::tails(-t, nu, -delta));
        prop_assert_eq!(tails, mirrored.mirrored());
        prop_assert!((tails.lower + tails.upper - 1.0).abs() < 1e-15);
        prop_assert!(tails.lower >= 0.0 && tails.upper >= 0.0);
    }

    /// Both tails computed as such, by two different integrals or sums, fill one.
    #[test]
    fn the_two_integrals_of_a_noncentral_t_fill_one(
        log_nu in 0.0..13.8, delta in -100.0_f64..100.0, z in -4.0_f64..4.0,
    ) {
        let nu = f64::exp(log_nu);
        let t = delta + z * (1.0 + delta * delta / (2.0 * nu)).sqrt();
        let both = noncentral_t::tail(Side::Lower, t, nu, delta) + noncentral_t::tail(Side::Upper, t, nu, delta);
        prop_assert!((both - 1.0).abs() < 1e-14, "{both}");
    }

    /// Two derivations of the same numbers: the finite sum for whole degrees of freedom and the trapezoidal rule.
    #[test]
    fn the_sum_of_a_noncentral_t_agrees_with_the_integral(
        nu in 1_u32..=400, delta in prop_oneof![Just(0.0), 0.0..3.0, 0.0..150.0], z in -8.0_f64..8.0, above in any::<bool>(),
    ) {
        let nu = f64::from(nu);
        let t = (delta + z * (1.0 + delta * delta / (2.0 * nu)).sqrt()).abs().max(1e-3);
        let side = if above { Side::Upper } else { Side::Lower };
        if let Some((sum, integral)) = noncentral_t::both_ways(side, t, nu, delta) {
            let [tail, density, density_ts, ..] = integral;
            prop_assert!(close(sum[0], tail, 1e-12), "{} {}", sum[0], tail);
            // The integral's nodes go where the tail is: they miss the density beside a tail next to 1.
            if tail > 0.9 {
                return Ok(());
            }
            // The sum's derivatives are those beside the point, which is enough for slopes.
            prop_assert!(close(sum[1], density, 1e-9) && close(sum[2], density_ts, 1e-9));
            // Differences of the others: E xφ(x) = E tSφ(x) − δE φ(x).
            prop_assert!((sum[3] - integral[3]).abs() <= 1e-9 * (density_ts + delta * density));
            prop_assert!((sum[4] - integral[4]).abs() <= 1e-9 * (integral[4].abs() + t * (t + delta) * density_ts));
        }
    }

    #[test]
    fn the_uniform_expansion_of_a_chi_square_agrees_with_its_series(log_nu in 5.71..13.5, z in -8.0_f64..8.0) {
        let nu = f64::exp(log_nu);
        let x = nu * (1.0 - 2.0 / (9.0 * nu) + z * (2.0 / (9.0 * nu)).sqrt()).powi(3);
        if let Some((uniform, terms)) = chi_square::both_ways(x, nu) {
            let (side, tolerance) = (if z < 0.0 { Side::Lower } else { Side::Upper }, 1e-13);
            prop_assert!(close(uniform.on(side), terms.on(side), tolerance), "{uniform:?} {terms:?}");
        } else {
            prop_assert!(nu < 1000.0);
        }
    }

    #[test]
    fn a_noncentral_t_quantile_leaves_its_tail(log_nu in 0.0..13.8, delta in -10.0_f64..100.0, log_tail in -27.0..-0.7) {
        let (nu, tail) = (f64::exp(log_nu), f64::exp(log_tail));
        let (low, high) = (noncentral_t::quantile(tail, nu, delta), noncentral_t::upper_quantile(tail, nu, delta));
        prop_assert!(close(noncentral_t::tails(low, nu, delta).lower, tail, 1e-12), "{low}");
        prop_assert!(close(noncentral_t::tails(high, nu, delta).upper, tail, 1e-12), "{high}");
    }

    #[test]
    fn a_noncentrality_leaves_the_tail_that_was_asked_for(
        log_nu in 0.0..13.8, t in -10.0..300.0, log_tail in -27.0..-0.05, above in any::<bool>(),
    ) {
        let (nu, tail) = (f64::exp(log_nu), f64::exp(log_tail));
        let side = if above { Side::Upper } else { Side::Lower };
        let (delta, integrals) = noncentral_t::noncentrality(side, tail, t, nu);
        prop_assert!(close(noncentral_t::tails(t, nu, delta).on(side), tail, 1e-12), "{delta}");
        prop_assert!(integrals <= if nu >= 10.0 { 8 } else { 12 }, "{integrals}");
    }

    #[test]
    fn a_noncentral_chi_square_quantile_leaves_its_tail(
        log_nu in 0.0..8.0, log_lambda in -4.0..9.0, log_tail in -27.0..-0.7,
    ) {
        let (nu, lambda, tail) = (f64::exp(log_nu), f64::exp(log_lambda), f64::exp(log_tail));
        let low = noncentral_chi_square::quantile(tail, nu, lambda);
        let high = noncentral_chi_square::upper_quantile(tail, nu, lambda);
        prop_assert!(close(noncentral_chi_square::tails(low, nu, lambda).lower, tail, 1e-12), "{low}");
        prop_assert!(close(noncentral_chi_square::tails(high, nu, lambda).upper, tail, 1e-12), "{high}");
    }
}
