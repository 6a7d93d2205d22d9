//! The sums: exact, in the order of the readings, and without a trace of what was taken back.

use num_bigint::BigInt;
use num_rational::BigRational;
use proptest::prelude::*;

use super::*;
use crate::ratio::tests::assert_correctly_rounded;

fn any_sigma() -> impl Strategy<Value = Sigma> {
    proptest::sample::select(every_sigma())
}

/// Readings of all magnitudes, the largest among them, near together or not.
fn readings() -> impl Strategy<Value = Vec<i64>> {
    let reading = prop_oneof![
        4 => -Counts::MAX..=Counts::MAX,
        1 => Just(Counts::MAX),
        1 => Just(-Counts::MAX),
        4 => 999_999_000_000..=Counts::MAX,
        4 => -3_i64..=3,
    ];
    proptest::collection::vec(reading, 0..80)
}

fn resolution() -> impl Strategy<Value = Resolution> {
    (prop_oneof![Just(1), Just(u16::MAX), 1..=u16::MAX], 0..=Resolution::MAX_DECIMALS)
        .prop_map(|(step, decimals)| Resolution::new(step, decimals).unwrap())
}

/// σ² in rational arithmetic, by the definitions: what must be correctly rounded before the root.
fn variance(sigma: Sigma, readings: &[i64], unit: &BigRational) -> Option<BigRational> {
    let whole = |n: usize| BigRational::from_integer(n.into());
    let real: Vec<BigRational> =
        readings.iter().map(|c| BigRational::from_integer((*c).into()) * unit).collect();
    let m = sigma.step() as usize;
    let groups: Vec<&[BigRational]> = real.chunks_exact(m).collect();
    let k = groups.len();
    let mean = |of: &[BigRational]| of.iter().sum::<BigRational>() / whole(of.len());
    let about = |of: &[BigRational], centre: &BigRational| {
        of.iter().map(|x| (x - centre) * (x - centre)).sum::<BigRational>()
    };
    let within: BigRational = groups.iter().map(|g| about(g, &mean(g))).sum();
    match sigma {
        Sigma::Pooled(_) if k > 0 => Some(within / whole(k * (m - 1))),
        Sigma::Total(_) if k > 1 => {
            let means: Vec<BigRational> = groups.iter().map(|g| mean(g)).collect();
            let between = about(&means, &mean(&means)) / whole(k - 1);
            Some(between + within / whole(k * m))
        }
        _ => None,
    }
}

/// The mean range in rational arithmetic.
fn mean_range(sigma: Sigma, readings: &[i64], unit: &BigRational) -> Option<BigRational> {
    let spread = |group: &[i64]| group.iter().max().unwrap() - group.iter().min().unwrap();
    let ranges: Vec<i64> = match sigma {
        Sigma::Ranges(size) => readings.chunks_exact(size.get() as usize).map(spread).collect(),
        Sigma::MovingRanges => readings.windows(2).map(spread).collect(),
        _ => return None,
    };
    let sum: BigInt = ranges.iter().map(|range| BigInt::from(*range)).sum();
    (!ranges.is_empty()).then(|| BigRational::new(sum, ranges.len().into()) * unit)
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(600))]

    #[test]
    fn sigma_is_rounded_once_before_its_root_or_factor(
        sigma in any_sigma(), readings in readings(), resolution in resolution(),
    ) {
        let unit = BigRational::new(resolution.step().into(), BigInt::from(10).pow(resolution.decimals().into()));
        let sample = tally(sigma, &readings).sample(resolution, &wide());
        if let Some(variance) = variance(sigma, &readings, &unit) {
            if let Ok(sample) = sample {
                // The nearest double to the exact variance, then the root of that.
                let near = sample.sigma() * sample.sigma();
                let square = [near.next_down(), near, near.next_up()]
                    .into_iter()
                    .find(|square| square.sqrt() == sample.sigma() && is_nearest(&variance, *square));
                prop_assert!(square.is_some(), "{sample:?}");
                prop_assert_eq!(sample.source(), sigma);
            }
        } else if let Some(mean) = mean_range(sigma, &readings, &unit) {
            if let Ok(sample) = sample {
                let d2 = range::factors(sigma.subgroup().unwrap_or(size(2))).0;
                let near = sample.sigma() * d2;
                let rounded = [near.next_down(), near, near.next_up()]
                    .into_iter()
                    .find(|mean_range| mean_range / d2 == sample.sigma() && is_nearest(&mean, *mean_range));
                prop_assert!(rounded.is_some(), "{sample:?}");
            }
        } else if sigma != Sigma::Overall {
            prop_assert!(sample.is_err());
        }
    }

    #[test]
    fn the_overall_sums_do_not_depend_on_the_choice_of_sigma(sigma in any_sigma(), readings in readings()) {
        let (one, other) = (tally(sigma, &readings), tally(Sigma::Overall, &readings));
        prop_assert_eq!(one.moments(), other.moments());
    }

    #[test]
    fn what_is_added_and_taken_back_leaves_no_trace(
        sigma in any_sigma(), readings in readings(), slip in -Counts::MAX..=Counts::MAX, next in -9_i64..9,
        resolution in resolution(),
    ) {
        let without = tally(sigma, &readings);
        let mut with = without.clone();
        with.add(Counts::new(slip).unwrap()).unwrap();
        with.take_back(Counts::new(slip).unwrap()).unwrap();
        prop_assert_eq!(with.moments(), without.moments());
        prop_assert_eq!(with.sample(resolution, &wide()), without.sample(resolution, &wide()));
        // The sums may lie in another place until the next reading closes the subgroup; then nothing differs.
        let (mut with, mut without) = (with, without);
        with.add(Counts::new(next).unwrap()).unwrap();
        without.add(Counts::new(next).unwrap()).unwrap();
        prop_assert_eq!(with, without);
    }

    #[test]
    fn readings_within_a_subgroup_may_come_in_any_order(
        readings in readings(), pieces in 2_u8..=25, seed: u64, resolution in resolution(),
    ) {
        let mut other = readings.clone();
        for group in other.chunks_exact_mut(pieces.into()) {
            group.sort_by_key(|reading| reading.unsigned_abs().wrapping_mul(seed | 1));
        }
        for sigma in [Sigma::Pooled(size(pieces)), Sigma::Ranges(size(pieces)), Sigma::Total(size(pieces))] {
            let of = |readings| tally(sigma, readings).sample(resolution, &wide());
            prop_assert_eq!(of(&readings), of(&other));
        }
    }

    #[test]
    fn subgroups_that_are_moved_as_a_whole_leave_sigma_within_as_it_is(
        sigma in any_sigma(), readings in proptest::collection::vec(-1000_i64..1000, 0..80), shift in 1_i64..1_000_000,
    ) {
        let moved: Vec<i64> = readings.iter().enumerate()
            .map(|(i, reading)| reading + shift * (i / sigma.step() as usize) as i64).collect();
        if matches!(sigma, Sigma::Pooled(_) | Sigma::Ranges(_)) {
            let one: Resolution = "1".parse().unwrap();
            let of = |readings| tally(sigma, readings).sample(one, &wide()).map(|s| (s.sigma(), s.nu())).ok();
            // Alike readings have no spread overall; moved ones may.
            prop_assert!(of(&readings).is_none() || of(&readings) == of(&moved));
        }
    }

    #[test]
    fn tallies_survive_storage(sigma in any_sigma(), readings in readings(), take_back: bool) {
        let mut before = tally(sigma, &readings);
        if let (true, Some(last)) = (take_back, readings.last()) {
            before.take_back(Counts::new(*last).unwrap()).unwrap();
        }
        let mut buffer = [0; 400];
        let bytes = postcard::to_slice(&before, &mut buffer).unwrap();
        prop_assert_eq!(postcard::from_bytes(bytes), Ok(before));
    }

    #[test]
    fn a_tally_that_comes_from_outside_never_panics(
        sigma in any_sigma(), readings in readings(), flips in proptest::collection::vec(any::<(prop::sample::Index, u8)>(), 1..4),
        resolution in resolution(), counts in -Counts::MAX..=Counts::MAX,
    ) {
        let mut buffer = [0; 400];
        let used = postcard::to_slice(&tally(sigma, &readings), &mut buffer).unwrap().len();
        for (at, bits) in flips {
            buffer[at.index(used)] ^= bits;
        }
        if let Ok(mut tally) = postcard::from_bytes::<Tally>(&buffer[..used]) {
            let counts = Counts::new(counts).unwrap();
            let _ = tally.sample(resolution, &wide());
            let _ = tally.take_back(counts);
            for _ in 0..30 {
                let _ = tally.add(counts);
                let _ = tally.sample(resolution, &wide());
            }
        }
    }
}

fn is_nearest(exact: &BigRational, rounded: f64) -> bool {
    let distance = |x: f64| {
        let difference = BigRational::from_float(x).unwrap() - exact;
        if difference < BigRational::from_integer(0.into()) { -difference } else { difference }
    };
    distance(rounded) <= distance(rounded.next_up()) && distance(rounded) <= distance(rounded.next_down())
}

/// A million readings at alternating ends of the range, at the coarsest resolution: all bounds reached at once.
#[test]
fn the_largest_sums_fit() {
    let coarse = Resolution::new(u16::MAX, 0).unwrap();
    let ends = BigRational::from_integer(BigInt::from(10).pow(12) * 65_535);
    let far = Specification::new(None, Some("999999999999999999".parse().unwrap()), None).unwrap();
    for sigma in
        [Sigma::Pooled(size(2)), Sigma::Pooled(size(25)), Sigma::Total(size(2)), Sigma::Total(size(25))]
    {
        let mut tally = Tally::new(sigma);
        for i in 0..Count::MAX.get() {
            // In pairs, so that there is as much between as within in subgroups of 25.
            let end = if i % 2 == 0 { Counts::MAX } else { -Counts::MAX };
            tally.add(Counts::new(end).unwrap()).unwrap();
        }
        assert_eq!(tally.add(Counts::default()), Err(MomentsError::Full));
        let sample = tally.sample(coarse, &far).unwrap();
        let m = BigRational::from_integer(sigma.step().into());
        let one = BigRational::from_integer(1.into());
        let k = BigRational::from_integer((Count::MAX.get() / sigma.step()).into());
        // Subgroups of 2 have a mean of 0; those of 25 have ±1/25 of the ends, in turn.
        let off = if sigma.step() == 2 { &one - &one } else { &one / &m };
        let within = &ends * &ends * (&one - &off * &off);
        let between = &ends * &ends * &off * &off * &k / (&k - &one);
        let exact = match sigma {
            Sigma::Total(_) => between + within,
            _ => within * &m / (&m - &one),
        };
        let square = sample.sigma() * sample.sigma();
        let nearest =
            [square.next_down(), square, square.next_up()].into_iter().find(|s| is_nearest(&exact, *s));
        assert_eq!(nearest.map(f64::sqrt), Some(sample.sigma()), "{sigma:?}");
        assert_correctly_rounded(&exact, nearest.unwrap());
    }
    let mut ranges = Tally::new(Sigma::MovingRanges);
    for i in 0..Count::MAX.get() {
        ranges.add(Counts::new(if i % 2 == 0 { Counts::MAX } else { -Counts::MAX }).unwrap()).unwrap();
    }
    assert_eq!(ranges.sample(coarse, &far).unwrap().sigma(), 2e12 * 65_535.0 / range::factors(size(2)).0);
}
