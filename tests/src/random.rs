//! Random numbers that a seed fixes for ever.

/// SplitMix64: Steele, Lea and Flood (2014), Fast splittable pseudorandom number generators, OOPSLA; constants from memory,
/// held to the published first outputs by the test.
#[derive(Clone, Debug)]
pub struct Random(u64);

impl Random {
    /// The numbers of this seed.
    pub fn new(seed: u64) -> Self {
        Self(seed)
    }

    /// The next 64 bits.
    pub fn bits(&mut self) -> u64 {
        self.0 = self.0.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        z ^ (z >> 31)
    }

    /// Below `end`, which is above zero; as even as 64 bits make it.
    pub fn below(&mut self, end: u64) -> u64 {
        ((u128::from(self.bits()) * u128::from(end)) >> 64) as u64
    }

    /// From `low` to `high`, both included.
    pub fn between(&mut self, low: i64, high: i64) -> i64 {
        low + self.below((high - low) as u64 + 1) as i64
    }

    /// True `times` in `of`.
    pub fn chance(&mut self, times: u64, of: u64) -> bool {
        self.below(of) < times
    }

    /// One of these.
    pub fn one<T: Copy>(&mut self, of: &[T]) -> T {
        of[self.below(of.len() as u64) as usize]
    }

    /// Evenly from 0 to 1.
    pub fn fraction(&mut self) -> f64 {
        (self.bits() >> 11) as f64 / (1_u64 << 53) as f64
    }

    /// About normal, mean 0, standard deviation 1, within ±6: the sum of twelve fractions, less six.
    pub fn deviate(&mut self) -> f64 {
        (0..12).map(|_| self.fraction()).sum::<f64>() - 6.0
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// The first outputs for seed 1234567 as Rosetta Code's task "Pseudo-random numbers/Splitmix64" lists them (from memory).
    #[test]
    fn the_numbers_are_those_of_splitmix64() {
        let mut random = Random::new(1_234_567);
        let first = [6_457_827_717_110_365_317, 3_203_168_211_198_807_973, 9_817_491_932_198_370_423];
        assert_eq!([random.bits(), random.bits(), random.bits()], first);
    }
}
