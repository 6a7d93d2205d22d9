use num_bigint::{BigInt, BigUint, Sign};
use num_rational::BigRational;
use num_traits::Signed;
use proptest::prelude::*;

use super::*;

/// No double is nearer to `exact` than `rounded`; of two as near, `rounded` is the even one.
pub(crate) fn assert_correctly_rounded(exact: &BigRational, rounded: f64) {
    let distance = |x: f64| (exact - BigRational::from_float(x).unwrap()).abs();
    let here = distance(rounded);
    for neighbour in [rounded.next_up(), rounded.next_down()] {
        let there = distance(neighbour);
        assert!(here < there || (here == there && rounded.to_bits() & 1 == 0), "{exact} became {rounded:e}");
    }
}

fn big(wide: Wide) -> BigUint {
    (BigUint::from(wide.high) << 128) + BigUint::from(wide.low)
}

fn rational(numerator: Wide, denominator: Wide) -> BigRational {
    let integer = |wide| BigInt::from_biguint(Sign::Plus, big(wide));
    BigRational::new(integer(numerator), integer(denominator))
}

/// Any number of bits up to 254, so that all widths meet all widths.
fn wide() -> impl Strategy<Value = Wide> {
    (any::<u128>(), any::<u128>(), 2_u32..=255).prop_filter_map("zero", |(high, low, drop)| {
        let wide = if drop < 128 {
            Wide { high: high >> drop, low }
        } else {
            Wide { high: 0, low: low >> (drop - 128) }
        };
        (wide.bits() > 0).then_some(wide)
    })
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(4000))]

    #[test]
    fn every_ratio_is_correctly_rounded(numerator in wide(), denominator in wide()) {
        assert_correctly_rounded(&rational(numerator, denominator), ratio(numerator, denominator));
    }

    #[test]
    fn a_ratio_on_or_beside_the_middle_of_two_doubles_is_correctly_rounded(
        mantissa in (1_u64 << 52)..(1 << 53), denominator in 1_u128..1 << 70, nudge in -1_i128..=1,
    ) {
        // (2m + 1)/2 is a tie; the nudge moves the ratio off it by less than a double can tell.
        let tie = u128::from(2 * mantissa + 1) * denominator;
        let numerator = Wide::from(tie.checked_add_signed(nudge).unwrap());
        let denominator = Wide::from(2 * denominator);
        assert_correctly_rounded(&rational(numerator, denominator), ratio(numerator, denominator));
    }

    #[test]
    fn a_product_of_any_two_is_exact(a in any::<u128>(), b in any::<u128>()) {
        prop_assert_eq!(big(Wide::product(a, b)), BigUint::from(a) * BigUint::from(b));
    }

    #[test]
    fn sums_and_differences_are_exact(a in wide(), b in wide()) {
        let sum = a.plus(b);
        prop_assert_eq!(big(sum), big(a) + big(b));
        prop_assert!(sum.minus(b) == a);
    }
}

#[test]
fn zero_is_zero_and_signs_are_kept() {
    assert_eq!(ratio_i128(0, 7).to_bits(), 0);
    assert_eq!(ratio_i128(-1, 3), -1.0 / 3.0);
    assert_eq!(ratio_i128(1, 3), 1.0 / 3.0);
}
