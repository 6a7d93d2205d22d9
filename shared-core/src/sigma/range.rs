//! Ranges as estimates of sigma: the mean d2 and the standard deviation d3 of the range of m standard normal readings, and
//! the degrees of freedom of mean ranges.

use core::f64::consts::FRAC_2_SQRT_PI;

use super::{SubgroupSize, effective};
use crate::quantity::{Count, DegreesOfFreedom};

/// d2 and d3 for m = 2 to 25.
///
/// Own computation to 20 digits: d2 = ∫ 1 − Φᵐ − (1 − Φ)ᵐ, and d3 from P(W ≤ w) = m ∫ φ(x)(Φ(x + w) − Φ(x))ᵐ⁻¹ dx
/// (Tippett 1925, On the extreme individuals and the range of samples taken from a normal population, Biometrika
/// 17:364–387, from memory). The tests compute them again, and hold them to a published table.
#[allow(
    clippy::excessive_precision,
    reason = "as they were computed; some have a digit more than a double holds"
)]
const FACTORS: [(f64, f64); 24] = [
    (FRAC_2_SQRT_PI, 0.852_502_466_427_421_7),
    (1.692_568_750_643_268_9, 0.888_368_004_045_204_3),
    (2.058_750_746_007_928_3, 0.879_808_202_824_983_3),
    (2.325_928_947_281_039, 0.864_081_941_099_504_1),
    (2.534_412_721_222_942_6, 0.848_039_686_117_495_3),
    (2.704_356_751_213_809, 0.833_205_335_622_293_7),
    (2.847_200_612_090_555_5, 0.819_831_489_791_944),
    (2.970_026_324_418_474, 0.807_834_274_553_322_5),
    (3.077_505_461_670_345_7, 0.797_050_673_519_411_2),
    (3.172_872_703_816_000_3, 0.787_314_620_550_328_2),
    (3.258_455_279_743_826, 0.778_478_341_203_383_8),
    (3.335_980_354_098_255, 0.770_416_202_063_754_8),
    (3.406_763_108_199_953, 0.763_023_095_624_790_3),
    (3.471_826_889_882_074_9, 0.756_211_429_727_943_9),
    (3.531_982_786_109_576, 0.749_908_089_409_915_9),
    (3.587_883_961_765_381_7, 0.744_051_783_960_731_4),
    (3.640_063_757_937_444, 0.738_590_853_377_818_8),
    (3.688_963_023_207_649_3, 0.733_481_495_518_868_4),
    (3.734_950_119_596_641, 0.728_686_345_707_305_2),
    (3.778_335_829_842_621, 0.724_173_340_717_499),
    (3.819_384_643_362_832_7, 0.719_914_808_434_223_4),
    (3.858_323_423_285_007, 0.715_886_735_491_814_5),
    (3.895_348_148_451_356, 0.712_068_175_147_937_2),
    (3.930_629_219_507_113, 0.708_440_765_888_655),
];

/// What a range of `size` pieces is to be divided by to estimate sigma, and the standard deviation of such a range in sigmas.
#[must_use]
pub fn factors(size: SubgroupSize) -> (f64, f64) {
    // A size is 2 to 25; each has its row.
    FACTORS.get(size.get() as usize - 2).copied().unwrap_or((f64::NAN, f64::NAN))
}

/// d2 of two pieces, 2/√π.
pub(super) const D2_OF_TWO: f64 = FRAC_2_SQRT_PI;

/// The ν of the mean of k ranges, by Patnaik (1950): the χ_ν that varies as much, d3²/(k d2²).
///
/// R̄/d2 is free of bias, while a root of mean squares on ν is low by about 1/(4ν): an interval that takes the one for the
/// other lies so much too low. At ν = 73 (20 subgroups of 5) that is 0.04 standard errors: a lower 95 % bound then covers
/// about 0.4 points more, an upper one 0.4 points less.
#[must_use]
pub fn mean_range(size: SubgroupSize, ranges: Count) -> Option<DegreesOfFreedom> {
    let (d2, d3) = factors(size);
    let k = f64::from(ranges.get());
    (k > 0.0).then(|| effective::degrees_of_freedom(d3 * d3 / (d2 * d2 * k))).and_then(DegreesOfFreedom::new)
}

/// The ν of the mean of N moving ranges of two neighbours each, which overlap: as for [`mean_range`], with
/// Var(MR̄)/σ² = (N·v + 2(N − 1)·c)/N², v = 2 − 4/π, c = 1/3 + (2√3 − 4)/π.
///
/// c is the covariance of two ranges that share a piece: E|D·D'| of normal differences with variance 2 and correlation −1/2.
/// For N → ∞, ν → 0.605 N. Cryer & Ryan (1990), The estimation of sigma for an X chart: MR̄/d2 or S/c4?, Journal of
/// Quality Technology 22:187–192, give the same efficiency (from memory).
#[must_use]
pub fn mean_moving_range(ranges: Count) -> Option<DegreesOfFreedom> {
    const VARIANCE: f64 = 0.726_760_455_264_837_3;
    const COVARIANCE: f64 = 0.162_751_579_441_754_75;
    let count = f64::from(ranges.get());
    (count > 0.0)
        .then(|| {
            let of_mean = (VARIANCE + 2.0 * COVARIANCE * (count - 1.0) / count) / count;
            effective::degrees_of_freedom(of_mean / (D2_OF_TWO * D2_OF_TWO))
        })
        .and_then(DegreesOfFreedom::new)
}
