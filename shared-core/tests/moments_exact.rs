//! Mean and variance of random sets of counts are correctly rounded, and the standard deviation is within one unit in the
//! last place, against exact arithmetic on big integers.
//!
//! 20 000 sets; with `DONELIGHT_LONG=1`, a million:
//! `DONELIGHT_LONG=1 cargo test --release -p donelight-core --test moments_exact -- --nocapture`. Every failure names the
//! set's number, from which alone the set is made.
//!
//! The univariate data sets of NIST are in `strd.rs`.

use std::cmp::Ordering;

use donelight_core::counts::{Counts, Resolution};
use donelight_core::moments::Moments;
use donelight_core::quantity::Count;
use num_bigint::BigInt;

/// Numbers without pattern from a seed: SplitMix64 (Steele, Lea & Flood 2014; from memory).
struct Random(u64);

impl Random {
    fn next(&mut self) -> u64 {
        self.0 = self.0.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let mut mixed = self.0;
        mixed = (mixed ^ (mixed >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        mixed = (mixed ^ (mixed >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        mixed ^ (mixed >> 31)
    }

    /// From `low` to `high`, both possible.
    fn between(&mut self, low: i64, high: i64) -> i64 {
        low + (self.next() % (high - low + 1).unsigned_abs()).cast_signed()
    }

    fn one_in(&mut self, times: u64) -> bool {
        self.next().is_multiple_of(times)
    }
}

/// Readings and how often each of them occurs: what the moments must have come from.
struct Set {
    readings: Vec<i64>,
    times: u32,
    resolution: Resolution,
    moments: Moments,
}

impl Set {
    fn numbered(number: u64) -> Self {
        let random = &mut Random(number);
        let n = match random.next() % 8 {
            0 => 1,
            1 => 2,
            7 => random.between(40, 250),
            _ => random.between(3, 40),
        };
        let reading = Self::reading(random);
        let readings: Vec<i64> = (0..n).map(|_| reading(random)).collect();
        let resolution = match random.next() % 4 {
            // Long products at no decimals: means that lie halfway between two doubles.
            0 => Resolution::new(u16::MAX, 0),
            1 => Resolution::new(1, u8::try_from(random.between(0, 9)).unwrap()),
            _ => {
                let step = u16::try_from(random.between(1, i64::from(u16::MAX))).unwrap();
                Resolution::new(step, u8::try_from(random.between(0, 9)).unwrap())
            }
        };
        let mut moments = Self::taken(&readings, random);
        let most = Count::MAX.get() / u32::try_from(n).unwrap();
        let times = match random.next() % 8 {
            0 => most,
            1 => u32::try_from(random.between(1, i64::from(most))).unwrap(),
            2 => 1 << random.between(0, i64::from(most.ilog2())),
            _ => 1,
        };
        moments = repeated(&moments, times);
        Self { readings, times, resolution: resolution.unwrap(), moments }
    }

    /// A kind of readings: all magnitudes, next to the ends of the type, a far offset with next to no spread, few counts.
    fn reading(random: &mut Random) -> impl Fn(&mut Random) -> i64 + use<> {
        let bits = random.between(1, 39);
        let offset = random.between(-Counts::MAX + 10, Counts::MAX - 10);
        let spread = random.between(0, 3);
        let kind = random.next() % 5;
        move |random| match kind {
            0 => random.between(-(1 << bits), 1 << bits),
            1 => {
                let end = Counts::MAX - random.between(0, 2);
                if random.one_in(2) { end } else { -end }
            }
            2 | 3 => offset + random.between(-spread, spread),
            _ => random.between(-Counts::MAX, Counts::MAX),
        }
    }

    /// The readings taken in: in parts that are merged, with others between that are taken back, in any order.
    fn taken(readings: &[i64], random: &mut Random) -> Moments {
        let counts = |reading| Counts::new(reading).unwrap();
        let (mut whole, mut part) = (Moments::default(), Moments::default());
        let mut voided = Vec::new();
        for reading in readings {
            part.add(counts(*reading)).unwrap();
            if random.one_in(4) {
                let other = random.between(-Counts::MAX, Counts::MAX);
                part.add(counts(other)).unwrap();
                voided.push(other);
            }
            if random.one_in(6) {
                whole.merge(&part).unwrap();
                part = Moments::default();
            }
        }
        whole.merge(&part).unwrap();
        while !voided.is_empty() {
            let which = random.next() as usize % voided.len();
            whole.take_back(counts(voided.swap_remove(which))).unwrap();
        }
        whole
    }
}

/// The same readings several times over, by merging as powers of two.
fn repeated(moments: &Moments, mut times: u32) -> Moments {
    let (mut all, mut power) = (Moments::default(), *moments);
    while times > 0 {
        if times & 1 == 1 {
            all.merge(&power).unwrap();
        }
        times >>= 1;
        if times > 0 {
            let copy = power;
            power.merge(&copy).unwrap();
        }
    }
    all
}

/// A fraction; the denominator is above zero.
struct Fraction {
    top: BigInt,
    bottom: BigInt,
}

/// mantissa · 2^exponent
struct Dyadic {
    mantissa: BigInt,
    exponent: i32,
}

impl Dyadic {
    fn of(x: f64) -> Self {
        let bits = x.abs().to_bits();
        let (raw, fraction) = ((bits >> 52) as i32, bits & ((1 << 52) - 1));
        let (mantissa, exponent) =
            if raw == 0 { (fraction, -1074) } else { (fraction | 1 << 52, raw - 1075) };
        let mantissa = BigInt::from(mantissa);
        Self { mantissa: if x < 0.0 { -mantissa } else { mantissa }, exponent }
    }

    /// Halfway between two doubles.
    fn middle(a: f64, b: f64) -> Self {
        let (a, b) = (Self::of(a), Self::of(b));
        let exponent = a.exponent.min(b.exponent);
        let sum = (a.mantissa << (a.exponent - exponent)) + (b.mantissa << (b.exponent - exponent));
        Self { mantissa: sum, exponent: exponent - 1 }
    }

    fn squared(x: f64) -> Self {
        let Self { mantissa, exponent } = Self::of(x);
        Self { mantissa: &mantissa * &mantissa, exponent: 2 * exponent }
    }
}

impl Fraction {
    fn against(&self, other: &Dyadic) -> Ordering {
        let (mut left, mut right) = (self.top.clone(), &other.mantissa * &self.bottom);
        if other.exponent < 0 {
            left <<= other.exponent.unsigned_abs();
        } else {
            right <<= other.exponent.unsigned_abs();
        }
        left.cmp(&right)
    }

    /// Whether no double is nearer than `rounded`, and of two as near it is the even one; then, whether there were two.
    fn rounds_to(&self, rounded: f64) -> (bool, bool) {
        let below = self.against(&Dyadic::middle(rounded.next_down(), rounded));
        let above = self.against(&Dyadic::middle(rounded, rounded.next_up()));
        let tie = below == Ordering::Equal || above == Ordering::Equal;
        let even = rounded.to_bits() & 1 == 0;
        (below != Ordering::Less && above != Ordering::Greater && (even || !tie), tie)
    }
}

/// How often the hard cases came up.
#[derive(Debug, Default)]
struct Seen {
    tied_means: u32,
    tied_variances: u32,
    full: u32,
    without_spread: u32,
    deviations_not_nearest: u32,
}

/// Checks the set of this number.
fn check(number: u64, seen: &mut Seen) {
    let Set { readings, times, resolution, moments } = Set::numbered(number);
    let n = BigInt::from(readings.len()) * times;
    let sum = readings.iter().map(|reading| BigInt::from(*reading)).sum::<BigInt>() * times;
    let squares = readings.iter().map(|reading| BigInt::from(*reading).pow(2)).sum::<BigInt>() * times;
    let step = BigInt::from(resolution.step());
    let unit = BigInt::from(10).pow(resolution.decimals().into());
    assert_eq!(n, moments.n().get().into(), "set {number}");

    let mean = Fraction { top: &sum * &step, bottom: &n * &unit };
    let (right, tie) = mean.rounds_to(moments.mean(resolution).unwrap());
    assert!(right, "set {number}: mean");
    seen.tied_means += u32::from(tie);
    seen.full += u32::from(moments.n() == Count::MAX);
    if moments.n().get() < 2 {
        assert_eq!(moments.variance(resolution), None);
        assert_eq!(moments.standard_deviation(resolution), None);
        return;
    }
    let scatter = &n * squares - &sum * &sum;
    let variance =
        Fraction { top: &scatter * &step * &step, bottom: &n * (&n - BigInt::from(1)) * &unit * &unit };
    let (right, tie) = variance.rounds_to(moments.variance(resolution).unwrap());
    assert!(right, "set {number}: variance");
    seen.tied_variances += u32::from(tie);
    seen.without_spread += u32::from(scatter == BigInt::ZERO);

    let deviation = moments.standard_deviation(resolution).unwrap();
    let low = if deviation > 0.0 { deviation.next_down() } else { 0.0 };
    let within = variance.against(&Dyadic::squared(low)) != Ordering::Less
        && variance.against(&Dyadic::squared(deviation.next_up())) != Ordering::Greater;
    assert!(within, "set {number}: standard deviation");
    let halves = [Dyadic::middle(low, deviation), Dyadic::middle(deviation, deviation.next_up())].map(
        |Dyadic { mantissa, exponent }| Dyadic { mantissa: &mantissa * &mantissa, exponent: 2 * exponent },
    );
    let nearest =
        variance.against(&halves[0]) != Ordering::Less && variance.against(&halves[1]) != Ordering::Greater;
    seen.deviations_not_nearest += u32::from(!nearest);
}

#[test]
fn random_sets_have_correctly_rounded_means_and_variances_and_deviations_within_a_unit() {
    let sets = if std::env::var_os("DONELIGHT_LONG").is_some() { 1_000_000 } else { 20_000 };
    let mut seen = Seen::default();
    for number in 0..sets {
        check(number, &mut seen);
    }
    println!("{sets} sets: {seen:?}");
    // The hard cases were among them.
    assert!(seen.tied_means > 20 && seen.full > 20 && seen.without_spread > 20, "{seen:?}");
}
