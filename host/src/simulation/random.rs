//! Random numbers that are a function of their place: piece k of study s has the same deviate whatever was drawn
//! before, and on whichever thread.
//!
//! Philox4x32-10: Salmon, Moraes, Dror and Shaw (2011), Parallel random numbers: as easy as 1, 2, 3, Proceedings of
//! SC11; constants from memory, held to the authors' known answers by the tests. Normal deviates are the core's own
//! normal quantile of a uniform, so they are the same on every machine.

use donelight_core::special::normal;

/// The multipliers of the two halves.
const MULTIPLIERS: [u32; 2] = [0xD251_1F53, 0xCD9E_8D57];
/// What the key grows by from round to round: the golden ratio and √3 − 1, in 32 bits.
const WEYL: [u32; 2] = [0x9E37_79B9, 0xBB67_AE85];
const ROUNDS: u32 = 10;

/// The normal deviates of simulated studies: one key, a block of four words for every two pieces.
#[derive(Clone, Copy, Debug)]
pub(super) struct Deviates {
    key: [u32; 2],
}

impl Deviates {
    pub(super) fn new(seed: u64) -> Self {
        Self { key: halves(seed) }
    }

    /// Standard normal deviates of pieces 2 × `pair` and 2 × `pair` + 1 of a study. No deviate lies beyond ±8.3.
    pub(super) fn pair(self, study: u32, pair: u32) -> [f64; 2] {
        let [a, b, c, d] = philox([pair, study, 0, 0], self.key);
        [normal::quantile(uniform(a, b)), normal::quantile(uniform(c, d))]
    }
}

/// The low half, then the high half.
fn halves(word: u64) -> [u32; 2] {
    [word as u32, (word >> 32) as u32]
}

/// Above 0 and below 1: the middle of one of 2^52 equal parts.
fn uniform(low: u32, high: u32) -> f64 {
    let bits = u64::from(high) << 32 | u64::from(low);
    ((bits >> 12) as f64 + 0.5) / (1_u64 << 52) as f64
}

/// Philox4x32-10.
fn philox(mut counter: [u32; 4], mut key: [u32; 2]) -> [u32; 4] {
    for _ in 0..ROUNDS {
        let [low_0, high_0] = halves(u64::from(MULTIPLIERS[0]) * u64::from(counter[0]));
        let [low_1, high_1] = halves(u64::from(MULTIPLIERS[1]) * u64::from(counter[2]));
        counter = [high_1 ^ counter[1] ^ key[0], low_1, high_0 ^ counter[3] ^ key[1], low_0];
        key = [key[0].wrapping_add(WEYL[0]), key[1].wrapping_add(WEYL[1])];
    }
    counter
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Source: `tests/kat_vectors` of the authors' library Random123, lines `philox4x32 10`; the same three stand in
    /// TensorFlow's and other projects' tests, where they were looked up.
    #[test]
    fn philox_gives_its_authors_known_answers() {
        let ones = u32::MAX;
        for (counter, key, answer) in [
            ([0; 4], [0; 2], [0x6627_e8d5, 0xe169_c58d, 0xbc57_ac4c, 0x9b00_dbd8]),
            ([ones; 4], [ones; 2], [0x408f_276d, 0x41c8_3b0e, 0xa20b_c7c6, 0x6d54_51fd]),
            (
                [0x243f_6a88, 0x85a3_08d3, 0x1319_8a2e, 0x0370_7344],
                [0xa409_3822, 0x299f_31d0],
                [0xd16c_fe09, 0x94fd_cceb, 0x5001_e420, 0x2412_6ea1],
            ),
        ] {
            assert_eq!(philox(counter, key), answer);
        }
    }

    #[test]
    fn a_deviate_never_is_infinite() {
        assert_eq!(uniform(0, 0), 0.5_f64.powi(53));
        assert_eq!(uniform(u32::MAX, u32::MAX), 1.0 - 0.5_f64.powi(53));
        for extreme in [uniform(0, 0), uniform(u32::MAX, u32::MAX)] {
            assert!(normal::quantile(extreme).abs() < 8.3);
        }
    }

    /// The moments of the standard normal distribution are 0, 1, 0, 3; the k-th sample moment of N deviates has the
    /// variance (μ₂ₖ − μₖ²)/N, with μ₆ = 15 and μ₈ = 105. Each may be five standard errors off.
    #[test]
    fn the_deviates_have_the_moments_of_the_normal_distribution() {
        let deviates = Deviates::new(20_261_201);
        let pairs = 500;
        let mut sums = [0.0; 4];
        for study in 0..pairs {
            for z in (0..pairs).flat_map(|pair| deviates.pair(study, pair)) {
                for (power, sum) in (1..).zip(&mut sums) {
                    *sum += z.powi(power);
                }
            }
        }
        let n = 2.0 * f64::from(pairs) * f64::from(pairs);
        for (sum, (expected, variance)) in
            sums.into_iter().zip([(0.0, 1.0), (1.0, 2.0), (0.0, 15.0), (3.0, 96.0_f64)])
        {
            assert!((sum / n - expected).abs() < 5.0 * (variance / n).sqrt(), "{} {expected}", sum / n);
        }
    }

    #[test]
    fn another_seed_study_or_pair_gives_other_deviates() {
        let one = Deviates::new(1).pair(2, 3);
        assert_eq!(one, Deviates::new(1).pair(2, 3));
        for other in
            [Deviates::new(1 << 32).pair(2, 3), Deviates::new(1).pair(3, 2), Deviates::new(1).pair(2, 4)]
        {
            assert_ne!(one, other);
        }
    }
}
