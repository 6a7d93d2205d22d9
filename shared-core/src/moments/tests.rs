use std::vec::Vec;

use num_bigint::BigInt;
use num_rational::BigRational;
use proptest::prelude::*;

use super::*;
use crate::ratio::tests::assert_correctly_rounded;

fn moments(readings: &[Counts]) -> Moments {
    let mut moments = Moments::default();
    for reading in readings {
        moments.add(*reading).unwrap();
    }
    moments
}

fn counts(readings: &[i64]) -> Vec<Counts> {
    readings.iter().map(|reading| Counts::new(*reading).unwrap()).collect()
}

/// Readings of all magnitudes, the largest among them, near together or not.
fn readings() -> impl Strategy<Value = Vec<Counts>> {
    let reading = prop_oneof![
        4 => -Counts::MAX..=Counts::MAX,
        1 => Just(Counts::MAX),
        1 => Just(-Counts::MAX),
        4 => 999_999_000_000..=Counts::MAX,
        4 => -3_i64..=3,
    ];
    proptest::collection::vec(reading.prop_map(|counts| Counts::new(counts).unwrap()), 0..40)
}

fn resolution() -> impl Strategy<Value = Resolution> {
    (prop_oneof![Just(1), Just(u16::MAX), 1..=u16::MAX], 0..=Resolution::MAX_DECIMALS)
        .prop_map(|(step, decimals)| Resolution::new(step, decimals).unwrap())
}

fn limit() -> impl Strategy<Value = Decimal> {
    let largest = Decimal::MAX_MANTISSA;
    (
        prop_oneof![Just(largest), Just(-largest), -largest..=largest, -1000..=1000_i64],
        0..=Decimal::MAX_DECIMALS,
    )
        .prop_map(|(mantissa, decimals)| Decimal::new(mantissa, decimals).unwrap())
}

/// The moments in rational arithmetic, from each reading and how often it occurred.
struct Exact {
    readings: Vec<BigRational>,
    times: BigRational,
}

impl Exact {
    fn new(readings: &[Counts], times: u32, resolution: Resolution) -> Self {
        let unit =
            BigRational::new(resolution.step().into(), BigInt::from(10).pow(resolution.decimals().into()));
        let real = |counts: &Counts| BigRational::from_integer(counts.get().into()) * &unit;
        Self { readings: readings.iter().map(real).collect(), times: BigRational::from_integer(times.into()) }
    }

    fn n(&self) -> BigRational {
        BigRational::from_integer(self.readings.len().into()) * &self.times
    }

    fn mean(&self) -> BigRational {
        self.readings.iter().sum::<BigRational>() * &self.times / self.n()
    }

    fn squares_about(&self, centre: &BigRational) -> BigRational {
        self.readings.iter().map(|x| (x - centre) * (x - centre)).sum::<BigRational>() * &self.times
    }
}

fn rational(number: Decimal) -> BigRational {
    BigRational::new(number.mantissa().into(), BigInt::from(10).pow(number.decimals().into()))
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(300))]

    #[test]
    fn results_are_correctly_rounded(
        readings in readings(), doublings in 0_u32..=14, resolution in resolution(), limit in limit(),
    ) {
        let mut moments = moments(&readings);
        for _ in 0..doublings {
            let copy = moments;
            moments.merge(&copy).unwrap();
        }
        let exact = Exact::new(&readings, 1 << doublings, resolution);
        if readings.is_empty() {
            prop_assert_eq!(moments.mean(resolution), None);
            prop_assert_eq!(moments.distance_to(limit, resolution), None);
            prop_assert_eq!(moments.mean_square_about(limit, resolution), None);
        } else {
            let limit_exact = rational(limit);
            assert_correctly_rounded(&exact.mean(), moments.mean(resolution).unwrap());
            let distance = moments.distance_to(limit, resolution).unwrap();
            assert_correctly_rounded(&(&limit_exact - exact.mean()), distance);
            let square = moments.mean_square_about(limit, resolution).unwrap();
            assert_correctly_rounded(&(exact.squares_about(&limit_exact) / exact.n()), square);
        }
        if moments.n().get() < 2 {
            prop_assert_eq!(moments.variance(resolution), None);
            prop_assert_eq!(moments.standard_deviation(resolution), None);
        } else {
            let nu = exact.n() - BigRational::from_integer(1.into());
            let variance = moments.variance(resolution).unwrap();
            assert_correctly_rounded(&(exact.squares_about(&exact.mean()) / nu), variance);
            prop_assert_eq!(moments.standard_deviation(resolution), Some(variance.sqrt()));
        }
    }

    #[test]
    fn order_is_irrelevant(mut readings in readings(), seed: u64) {
        let before = moments(&readings);
        readings.sort_by_key(|counts| counts.get().unsigned_abs().wrapping_mul(seed | 1));
        prop_assert_eq!(moments(&readings), before);
    }

    #[test]
    fn merging_is_reading_one_after_the_other(a in readings(), b in readings()) {
        let mut merged = moments(&a);
        merged.merge(&moments(&b)).unwrap();
        prop_assert_eq!(merged, moments(&[a, b].concat()));
    }

    #[test]
    fn what_is_added_and_taken_back_leaves_no_trace(readings in readings(), counts in -Counts::MAX..=Counts::MAX) {
        let before = moments(&readings);
        let counts = Counts::new(counts).unwrap();
        let mut after = before;
        after.add(counts).unwrap();
        prop_assert_ne!(after, before);
        after.take_back(counts).unwrap();
        prop_assert_eq!(after, before);
    }

    #[test]
    fn moments_survive_storage(readings in readings()) {
        let before = moments(&readings);
        let mut buffer = [0; 64];
        let bytes = postcard::to_slice(&before, &mut buffer).unwrap();
        prop_assert_eq!(postcard::from_bytes(bytes), Ok(before));
    }

    #[test]
    fn sums_that_come_from_outside_never_panic(
        n in 0..=Count::MAX.get(), sum: i64, squares: u128, shift in 0..128_u32,
        resolution in resolution(), limit in limit(), counts in -Counts::MAX..=Counts::MAX,
    ) {
        if let Ok(mut moments) = Moments::try_from((Count::new(n).unwrap(), sum >> (shift / 2), squares >> shift)) {
            let _ = moments.mean(resolution);
            let _ = moments.variance(resolution);
            let _ = moments.distance_to(limit, resolution);
            let _ = moments.mean_square_about(limit, resolution);
            let counts = Counts::new(counts).unwrap();
            let _ = moments.take_back(counts);
            let _ = moments.add(counts);
            let copy = moments;
            let _ = moments.merge(&copy);
        }
    }
}

#[test]
fn mean_and_variance_of_a_few_counts_are_what_they_are_on_paper() {
    let hundredths: Resolution = "0.01".parse().unwrap();
    let moments = moments(&counts(&[100, 102, 104, 110]));
    assert_eq!(moments.mean(hundredths), Some(1.04));
    assert_eq!(moments.variance(hundredths), Some(56.0 / 30_000.0));
    assert_eq!(moments.distance_to("1.5".parse().unwrap(), hundredths), Some(0.46));
    assert_eq!(moments.mean_square_about("1.03".parse().unwrap(), hundredths), Some(0.0015));
}

/// Half of a million readings at each end of the range, at the coarsest resolution: all bounds reached at once.
#[test]
fn the_largest_sums_fit_and_one_reading_more_is_refused() {
    let half = Count::MAX.get() / 2;
    let squares = u128::from(Count::MAX.get()) * 10_u128.pow(24);
    let mut full = Moments::try_from((Count::MAX, 0, squares)).unwrap();
    let before = full;
    let coarse = Resolution::new(u16::MAX, 0).unwrap();
    let fine = Resolution::new(u16::MAX, 9).unwrap();
    let unit = BigRational::from_integer(65_535.into());
    let ends = BigRational::from_integer(BigInt::from(10).pow(12)) * &unit;
    let n = BigRational::from_integer(Count::MAX.get().into());
    let variance = &ends * &ends * &n / (&n - BigRational::from_integer(1.into()));
    assert_correctly_rounded(&variance, full.variance(coarse).unwrap());
    let billion = BigRational::from_integer(BigInt::from(10).pow(9));
    assert_correctly_rounded(&(&variance / (&billion * &billion)), full.variance(fine).unwrap());
    for target in ["999999999999999999", "0.000000000001", "-999999.999999999999"] {
        let target: Decimal = target.parse().unwrap();
        for resolution in [coarse, fine] {
            let scale =
                if resolution == fine { billion.clone() } else { BigRational::from_integer(1.into()) };
            let (end, about) = (&ends / scale, rational(target));
            let square = &end * &end + &about * &about;
            assert_correctly_rounded(&square, full.mean_square_about(target, resolution).unwrap());
        }
    }

    let one = Counts::new(1).unwrap();
    assert_eq!(full.add(one), Err(MomentsError::Full));
    assert_eq!(full.merge(&moments(&[one])), Err(MomentsError::Full));
    assert_eq!(full, before);
    assert_eq!(full.n().get(), 2 * half);

    let lopsided = Moments::try_from((Count::MAX, 10_i64.pow(18), squares)).unwrap();
    assert_eq!(lopsided.variance(coarse), Some(0.0));
    assert_eq!(lopsided.mean(coarse), Some(65_535e12));
}

#[test]
fn what_was_never_added_cannot_be_taken_back() {
    let mut none = Moments::default();
    assert_eq!(none.take_back(Counts::default()), Err(MomentsError::Impossible));
    let mut some = moments(&counts(&[3, 4]));
    let before = some;
    for never in counts(&[5, 6, -3]) {
        assert_eq!(some.take_back(never), Err(MomentsError::Impossible));
        assert_eq!(some, before);
    }
}

#[test]
fn damaged_sums_are_refused() {
    let stored = |n, sum, squares| Moments::try_from((Count::new(n).unwrap(), sum, squares));
    assert_eq!(stored(2, 7, 25), Ok(moments(&counts(&[3, 4]))));
    for (n, sum, squares) in [(0, 1, 1), (0, 0, 2), (2, 7, 24), (2, 8, 25), (1, 2, 5), (1, 0, u128::MAX)] {
        assert_eq!(stored(n, sum, squares), Err(MomentsError::Impossible));
    }
    assert_eq!(stored(Count::MAX.get(), i64::MIN, 1 << 90), Err(MomentsError::Impossible));
}
