//! A simulated process before a simulated gauge: normal readings, on demand with a drift, outliers or a gauge that
//! sticks, as the text lines that a gauge would send.
//!
//! Piece k's reading is a function of the seed and k alone, so a station that was stopped and started again goes on
//! where it was, and a study can be repeated to the last digit. To hold across versions and machines it uses nothing
//! that may change: the k-th block of ChaCha with 8 rounds (Bernstein 2008, ChaCha, a variant of Salsa20), and the
//! station's own normal quantile.

use chacha20::ChaCha8Rng;
use chacha20::rand_core::{Rng, SeedableRng};
use donelight_core::counts::{Counts, Resolution};
use donelight_core::special::normal;

/// How far an outlier lies off the mean.
pub const OUTLIER_SDS: f64 = 8.0;

/// What a gauge shows when the piece is beyond its range.
const BEYOND_RANGE: &str = "Err";

/// A process as it is asked for; lengths are in the plan's unit.
#[derive(Clone, Debug, PartialEq)]
pub struct Process {
    /// The mean of the first piece.
    pub mean: f64,
    /// The standard deviation, above 0.
    pub sd: f64,
    /// The mean moves by so much from one piece to the next.
    pub drift: f64,
    /// Each so-manieth piece lies [`OUTLIER_SDS`] off, to either side.
    pub outlier_every: Option<u32>,
    /// From this piece on, counted from 1, the gauge shows what it showed of it.
    pub stuck_from: Option<u32>,
    /// Where the random numbers begin.
    pub seed: u64,
}

impl Process {
    /// The line that the gauge sends of piece `k`, counted from 0.
    #[must_use]
    pub fn line(&self, k: u32, resolution: Resolution, unit: &str) -> String {
        let shown = match rounded(self.value(k), resolution) {
            Some(counts) => resolution.show(counts).to_string(),
            None => BEYOND_RANGE.to_owned(),
        };
        let space = if unit.is_empty() { "" } else { " " };
        format!("{shown}{space}{unit}\r\n")
    }

    /// What the piece would measure on an ideal gauge.
    fn value(&self, k: u32) -> f64 {
        let k = self.stuck_from.map_or(k, |stuck| k.min(stuck.saturating_sub(1)));
        let mut random = self.random(k);
        let z = normal::quantile(uniform(random.next_u64()));
        let off = match self.outlier_every {
            Some(every) if (k + 1).is_multiple_of(every) => {
                if random.next_u64() >> 63 == 0 {
                    OUTLIER_SDS
                } else {
                    -OUTLIER_SDS
                }
            }
            _ => 0.0,
        };
        self.mean + self.drift * f64::from(k) + self.sd * (z + off)
    }

    fn random(&self, k: u32) -> ChaCha8Rng {
        let mut key = [0; 32];
        if let Some(seed) = key.first_chunk_mut::<8>() {
            *seed = self.seed.to_le_bytes();
        }
        let mut random = ChaCha8Rng::from_seed(key);
        random.set_block_pos(u64::from(k));
        random
    }
}

/// Above 0 and below 1, from the upper 52 bits.
fn uniform(bits: u64) -> f64 {
    ((bits >> 12) as f64 + 0.5) / (1_u64 << 52) as f64
}

/// To the nearest step, halves away from zero; `None` beyond what a line can say.
fn rounded(value: f64, resolution: Resolution) -> Option<Counts> {
    let counts = (value / resolution.to_f64()).round();
    let most = Counts::MAX as f64 / f64::from(resolution.step());
    if counts.abs() <= most { Counts::new(counts as i64) } else { None }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn process() -> Process {
        Process { mean: 12.0, sd: 0.02, drift: 0.0, outlier_every: None, stuck_from: None, seed: 7 }
    }

    fn micron() -> Resolution {
        "0.001".parse().unwrap()
    }

    fn values(process: &Process, n: u32) -> Vec<f64> {
        (0..n)
            .map(|k| {
                let line = process.line(k, micron(), "mm");
                line.strip_suffix(" mm\r\n").expect("unit and line end").parse().unwrap()
            })
            .collect()
    }

    fn mean_and_sd(values: &[f64]) -> (f64, f64) {
        let n = values.len() as f64;
        let mean = values.iter().sum::<f64>() / n;
        let squares: f64 = values.iter().map(|v| (v - mean).powi(2)).sum();
        (mean, (squares / (n - 1.0)).sqrt())
    }

    #[test]
    fn many_readings_have_the_mean_the_spread_and_the_tails_that_were_asked_for() {
        let n = 40_000;
        let values = values(&process(), n);
        let (mean, sd) = mean_and_sd(&values);
        // Five standard errors: of the mean sd/√n, of the standard deviation sd/√(2n).
        let error = 0.02 / f64::from(n).sqrt();
        assert!((mean - 12.0).abs() < 5.0 * error, "{mean}");
        assert!((sd - 0.02).abs() < 5.0 * error / 2_f64.sqrt(), "{sd}");
        // 2.275 % lie beyond two standard deviations above (normal distribution), give or take five standard errors;
        // rounding to 0.001 moves the edge to 12.0395.
        let beyond = values.iter().filter(|v| **v > 12.0395).count() as f64 / f64::from(n);
        let expected = normal::upper_tail(1.975);
        assert!((beyond - expected).abs() < 5.0 * (expected / f64::from(n)).sqrt(), "{beyond}");
    }

    #[test]
    fn another_seed_gives_other_readings_and_the_same_seed_the_same() {
        let other = Process { seed: 8, ..process() };
        assert_eq!(values(&process(), 50), values(&process(), 50));
        assert_ne!(values(&process(), 50), values(&other, 50));
    }

    #[test]
    fn a_drift_moves_the_mean_from_piece_to_piece() {
        let drifting = Process { drift: -0.5, ..process() };
        for (k, (still, moved)) in values(&process(), 9).into_iter().zip(values(&drifting, 9)).enumerate() {
            assert!((moved - still + 0.5 * k as f64).abs() < 1e-9, "{still} {moved}");
        }
    }

    #[test]
    fn each_so_manieth_piece_is_an_outlier_on_either_side() {
        let wild = Process { outlier_every: Some(5), ..process() };
        let off: Vec<f64> = values(&process(), 200)
            .iter()
            .zip(values(&wild, 200))
            .map(|(still, wild)| wild - still)
            .collect();
        let (mut up, mut down) = (0, 0);
        for (k, off) in off.iter().enumerate() {
            if (k + 1).is_multiple_of(5) {
                assert!((off.abs() - OUTLIER_SDS * 0.02).abs() < 1e-9, "{off}");
                if *off > 0.0 { up += 1 } else { down += 1 }
            } else {
                assert_eq!(*off, 0.0);
            }
        }
        assert!(up > 0 && down > 0 && up + down == 40);
    }

    #[test]
    fn a_stuck_gauge_repeats_the_piece_that_it_stuck_at() {
        let stuck = Process { stuck_from: Some(4), ..process() };
        let (free, stuck) = (values(&process(), 8), values(&stuck, 8));
        assert_eq!(free[..4], stuck[..4]);
        assert_eq!(stuck[3..], [free[3]; 5]);
    }

    #[test]
    fn a_reading_is_on_the_gauges_grid_and_reads_back_as_its_counts() {
        let coarse: Resolution = "0.005".parse().unwrap();
        for k in 0..200 {
            let line = process().line(k, coarse, "");
            let text = line.strip_suffix("\r\n").unwrap();
            let counts = coarse.read(text.as_bytes(), "").unwrap();
            assert!((process().value(k) - 0.005 * counts.get() as f64).abs() <= 0.0025 + 1e-12);
        }
    }

    #[test]
    fn a_piece_beyond_the_gauges_range_shows_as_no_reading() {
        for mean in [1e300, -1e300, 1e10, f64::MAX] {
            let beyond = Process { mean, ..process() };
            assert_eq!(beyond.line(0, micron(), "mm"), "Err mm\r\n");
            assert!(micron().read(b"Err mm", "mm").is_err());
        }
    }

    /// Computed apart from this program: ChaCha8 by the paper's description and the quantile of Python 3.11's
    /// `statistics.NormalDist`.
    #[test]
    fn the_readings_of_a_seed_never_change() {
        let lines: Vec<String> = (0..6).map(|k| process().line(k, micron(), "")).collect();
        assert_eq!(lines.concat(), "12.014\r\n12.005\r\n11.988\r\n12.011\r\n11.984\r\n11.963\r\n");
    }
}
