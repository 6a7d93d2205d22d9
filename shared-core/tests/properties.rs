//! Laws of the special functions over all of their stated ranges, and what they answer outside: NaN, never a panic.

use donelight_core::special::{
    Side, Tails, chi_square, noncentral_chi_square, noncentral_t, normal, student_t,
};
use proptest::prelude::*;

/// ν from 1 to 10⁶: small whole numbers, whole and any.
fn degrees() -> impl Strategy<Value = f64> {
    prop_oneof![
        (1_u32..=30).prop_map(f64::from),
        (0.0..13.8_f64).prop_map(|log| log.exp().floor()),
        (0.0..13.8_f64).prop_map(f64::exp),
    ]
}

/// δ from −1000 to 1000, and none.
fn noncentralities() -> impl Strategy<Value = f64> {
    prop_oneof![Just(0.0), -3.0..3.0_f64, -40.0..40.0_f64, -1000.0..1000.0_f64]
}

/// From 1/2 down to 10^-300, evenly in the logarithm or in itself.
fn tails() -> impl Strategy<Value = f64> {
    prop_oneof![(-690.0..-0.7_f64).prop_map(f64::exp), (-30.0..-0.7_f64).prop_map(f64::exp), 0.001..0.5_f64]
}

/// Any double at all.
fn anything() -> impl Strategy<Value = f64> {
    prop_oneof![
        any::<u64>().prop_map(f64::from_bits),
        -10.0..10.0_f64,
        prop_oneof![
            Just(0.0),
            Just(-0.0),
            Just(1.0),
            Just(f64::INFINITY),
            Just(f64::NEG_INFINITY),
            Just(f64::NAN),
            Just(f64::MIN_POSITIVE),
            Just(5e-324),
            Just(f64::MAX),
        ],
    ]
}

fn close(computed: f64, exact: f64, tolerance: f64) -> bool {
    (computed - exact).abs() <= tolerance * exact.abs()
}

/// Both tails of a distribution are probabilities and fill one.
fn assert_tails(Tails { lower, upper }: Tails) -> Result<(), TestCaseError> {
    prop_assert!((0.0..=1.0).contains(&lower) && (0.0..=1.0).contains(&upper), "{lower} {upper}");
    prop_assert!((lower + upper - 1.0).abs() <= 2e-16, "{lower} {upper}");
    Ok(())
}

/// The point to the right has the larger lower and the smaller upper tail, but for the last digits.
fn assert_order(left: Tails, right: Tails) -> Result<(), TestCaseError> {
    prop_assert!(left.lower <= right.lower * (1.0 + 1e-13), "{left:?} {right:?}");
    prop_assert!(left.upper * (1.0 + 1e-13) >= right.upper, "{left:?} {right:?}");
    Ok(())
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(2000))]

    #[test]
    fn tails_of_a_noncentral_t_are_probabilities_in_order(
        nu in degrees(), delta in noncentralities(), z in -40.0..40.0_f64, stretch in -20.0..3.0_f64, further in -20.0..3.0_f64,
    ) {
        let t = delta + z * stretch.exp() * (1.0 + delta * delta / (2.0 * nu)).sqrt();
        let right = t + (t.abs() + 1.0) * further.exp();
        let (at, beyond) = (noncentral_t::tails(t, nu, delta), noncentral_t::tails(right, nu, delta));
        assert_tails(at)?;
        assert_tails(beyond)?;
        assert_order(at, beyond)?;
        let mirrored = noncentral_t::tails(-t, nu, -delta);
        prop_assert_eq!((at.lower, at.upper), (mirrored.upper, mirrored.lower));
    }

    /// A larger δ moves all of the probability up.
    #[test]
    fn tails_of_a_noncentral_t_follow_the_noncentrality(
        nu in degrees(), delta in noncentralities(), t in -100.0..100.0_f64, more in 1e-6..2.0_f64,
    ) {
        let (at, more) = (noncentral_t::tails(t, nu, delta), noncentral_t::tails(t, nu, delta + more));
        assert_order(more, at)?;
    }

    /// T with two degrees of freedom more is T with a larger chi: P(χ > x) grows with ν.
    #[test]
    fn tails_of_a_noncentral_t_follow_the_degrees_of_freedom(
        nu in degrees(), delta in noncentralities(), t in 0.0..100.0_f64,
    ) {
        prop_assume!(nu < 9e5);
        let more = noncentral_t::tails(t * (1.0 + 2.0 / nu).sqrt(), nu + 2.0, delta);
        assert_order(noncentral_t::tails(t, nu, delta), more)?;
    }

    #[test]
    fn a_quantile_of_a_noncentral_t_leaves_its_tail_down_to_the_smallest(
        nu in degrees(), delta in noncentralities(), tail in tails(),
    ) {
        let low = noncentral_t::quantile(tail, nu, delta);
        let high = noncentral_t::upper_quantile(tail, nu, delta);
        prop_assert!(low < high || tail > 0.499, "{} {}", low, high);
        // Rounding t, or the z on whose scale it is sought, moves a tail by its logarithm's slope.
        let tolerance = 1e-12 + 5e-15 * tail.ln().abs() + 1e-15 * tail.ln().abs() * delta.abs();
        for (t, side) in [(low, Side::Lower), (high, Side::Upper)] {
            if t.is_finite() && t.abs() < 1e150 {
                let back = noncentral_t::tails(t, nu, delta).on(side);
                prop_assert!(close(back, tail, tolerance), "{t}: {back} {side:?}");
            }
            prop_assert!(!t.is_nan());
        }
    }

    #[test]
    fn a_noncentrality_leaves_the_tail_down_to_the_smallest(
        nu in degrees(), t in -300.0..300.0_f64, tail in tails(), above in any::<bool>(), complement in any::<bool>(),
    ) {
        let side = if above { Side::Upper } else { Side::Lower };
        let tail = if complement { 1.0 - tail } else { tail };
        prop_assume!(tail < 1.0);
        let (delta, _) = noncentral_t::noncentrality(side, tail, t, nu);
        let back = noncentral_t::tails(t, nu, delta).on(side);
        prop_assert!(close(back, tail, 1e-12 + 2e-15 * tail.ln().abs() * (1.0 + delta.abs())), "{delta} {back}");
    }

    #[test]
    fn students_t_is_even_and_its_quantiles_odd(nu in degrees(), tail in tails()) {
        let t = student_t::quantile(tail, nu);
        prop_assert_eq!(student_t::upper_quantile(tail, nu), -t);
        let tails = student_t::tails(t, nu);
        let mirrored = student_t::tails(-t, nu);
        prop_assert_eq!((tails.lower, tails.upper), (mirrored.upper, mirrored.lower));
        if t.abs() < 1e150 {
            prop_assert!(close(tails.lower, tail, 1e-12 + 5e-15 * tail.ln().abs()), "{t} {}", tails.lower);
        }
    }

    #[test]
    fn tails_of_a_chi_square_are_probabilities_in_order(
        nu in degrees(), z in -9.0..40.0_f64, further in -20.0..1.0_f64,
    ) {
        let root = (1.0 - 2.0 / (9.0 * nu) + z * (2.0 / (9.0 * nu)).sqrt()).max(1e-4);
        let x = nu * root * root * root;
        let (at, beyond) = (chi_square::tails(x, nu), chi_square::tails(x * (1.0 + further.exp()), nu));
        assert_tails(at)?;
        assert_tails(beyond)?;
        assert_order(at, beyond)?;
        if nu < 9e5 {
            assert_order(chi_square::tails(x, nu + 0.5), at)?;
        }
    }

    #[test]
    fn a_quantile_of_a_chi_square_leaves_its_tail_down_to_the_smallest(nu in degrees(), tail in tails()) {
        let (low, high) = (chi_square::quantile(tail, nu), chi_square::upper_quantile(tail, nu));
        prop_assert!(low < high || tail > 0.499);
        let tolerance = 1e-12 + 1e-15 * (tail.ln().abs() + (nu * tail.ln().abs()).sqrt());
        if low > 1e-290 {
            prop_assert!(close(chi_square::tails(low, nu).lower, tail, tolerance), "{low}");
        }
        prop_assert!(close(chi_square::tails(high, nu).upper, tail, tolerance), "{high}");
    }

    /// Down to 10^-100, as stated.
    #[test]
    fn a_quantile_of_a_noncentral_chi_square_leaves_its_tail(
        nu in degrees(), lambda in prop_oneof![Just(0.0), 0.0..10.0_f64, 0.0..3e4_f64], log_tail in -230.0..-0.7_f64,
    ) {
        prop_assume!(nu < 1e4);
        let tail = log_tail.exp();
        let low = noncentral_chi_square::quantile(tail, nu, lambda);
        let high = noncentral_chi_square::upper_quantile(tail, nu, lambda);
        prop_assert!(low < high || tail > 0.499);
        for (x, side) in [(low, Side::Lower), (high, Side::Upper)] {
            let tails = noncentral_chi_square::tails(x, nu, lambda);
            assert_tails(tails)?;
            prop_assert!(close(tails.on(side), tail, 2e-12), "{x} {} {side:?}", tails.on(side));
        }
    }

    #[test]
    fn a_normal_quantile_leaves_its_tail(tail in tails()) {
        let z = normal::upper_quantile(tail);
        prop_assert_eq!(normal::quantile(tail), -z);
        prop_assert!(close(normal::upper_tail(z), tail, 1e-14 + 1e-15 * z * z));
        prop_assert_eq!(normal::upper_tail(z), normal::cdf(-z));
    }

    /// Whatever the arguments: probabilities or NaN, and NaN only if an argument is NaN or outside the range.
    #[test]
    fn no_argument_makes_a_panic_or_a_nan_within_the_ranges(x in anything(), nu in anything(), other in anything()) {
        let t = noncentral_t::tails(x, nu, other);
        let within = (1.0..=1e6).contains(&nu);
        prop_assert_eq!(t.lower.is_nan(), x.is_nan() || !within || other.is_nan() || other.abs() > 1e50, "{:?}", t);
        let chi = chi_square::tails(x, nu);
        prop_assert_eq!(chi.lower.is_nan(), x.is_nan() || !(0.5..=2e6).contains(&nu));
        let shifted = noncentral_chi_square::tails(x, nu, other);
        prop_assert_eq!(shifted.lower.is_nan(), x.is_nan() || !within || !(0.0..=1e6).contains(&other));
        for tails in [t, chi, shifted] {
            if !tails.lower.is_nan() {
                assert_tails(tails)?;
            }
        }
        let p_within = (0.0..=1.0).contains(&x);
        let quantiles = [
            (noncentral_t::quantile(x, nu, other), within && p_within && other.abs() <= 1e50),
            (noncentral_t::upper_quantile(x, nu, other), within && p_within && other.abs() <= 1e50),
            (chi_square::quantile(x, nu), (0.5..=2e6).contains(&nu) && p_within),
            (chi_square::upper_quantile(x, nu), (0.5..=2e6).contains(&nu) && p_within),
            (noncentral_chi_square::quantile(x, nu, other), within && p_within && (0.0..=1e6).contains(&other)),
            (normal::quantile(x), p_within),
        ];
        for (which, (quantile, defined)) in quantiles.into_iter().enumerate() {
            prop_assert_eq!(quantile.is_nan(), !defined, "{}: {}", which, quantile);
        }
        for side in [Side::Lower, Side::Upper] {
            let (delta, _) = noncentral_t::noncentrality(side, x, other, nu);
            prop_assert_eq!(delta.is_nan(), !(within && x > 0.0 && x < 1.0 && other.abs() <= 1e50), "{}", delta);
        }
    }
}
