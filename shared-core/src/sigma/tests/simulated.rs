//! Do the degrees of freedom hold? The estimates of sigma of many normal samples vary as they say.

use super::*;
use crate::special::normal;

/// Splitmix64 (Steele, Lea & Flood 2014), and the normal quantile of its numbers: enough for a test, and the same everywhere.
struct Numbers(u64);

impl Numbers {
    fn normal(&mut self) -> f64 {
        self.0 = self.0.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        normal::quantile((((z ^ (z >> 31)) >> 11) as f64 + 0.5) / 9_007_199_254_740_992.0)
    }
}

/// Mean and variance of σ̂ (or of its square), in sigmas, of samples of n pieces with a share of the variance between
/// subgroups, and the means of the ν and of the pieces behind the mean that came with them.
struct Outcome {
    mean: f64,
    variance: f64,
    nu: f64,
    behind_mean: f64,
    variance_of_mean: f64,
}

const RUNS: u32 = 30_000;

fn simulate(sigma: Sigma, n: u32, between: f64, power: i32) -> Outcome {
    let fine: Resolution = "0.000001".parse().unwrap();
    let mut numbers = Numbers(2026);
    let mut outcome = Outcome { mean: 0.0, variance: 0.0, nu: 0.0, behind_mean: 0.0, variance_of_mean: 0.0 };
    for _ in 0..RUNS {
        let mut tally = Tally::new(sigma);
        let mut middle = 0.0;
        for i in 0..n {
            if i % sigma.step() == 0 {
                middle = between.sqrt() * numbers.normal();
            }
            let x = middle + (1.0 - between).sqrt() * numbers.normal();
            tally.add(Counts::new((x * 1e6).round() as i64).unwrap()).unwrap();
        }
        let sample = tally.sample(fine, &wide()).unwrap();
        let estimate = sample.sigma().powi(power);
        outcome.mean += estimate;
        outcome.variance += estimate * estimate;
        outcome.nu += sample.nu().get();
        outcome.behind_mean += f64::from(sample.n().get());
        outcome.variance_of_mean += sample.mean() * sample.mean();
    }
    let runs = f64::from(RUNS);
    let mean = outcome.mean / runs;
    Outcome {
        mean,
        variance: outcome.variance / runs - mean * mean,
        nu: outcome.nu / runs,
        behind_mean: outcome.behind_mean / runs,
        variance_of_mean: outcome.variance_of_mean / runs,
    }
}

/// The relative variance of σ̂ within 4 of its standard errors of √(2/30 000) = 0.82 %: 3.3 %; the mean of R̄/d2 within 4 of
/// its own.
#[test]
fn estimates_within_subgroups_vary_as_their_degrees_of_freedom_say() {
    for (sigma, n) in [
        (Sigma::Pooled(size(4)), 32),
        (Sigma::Ranges(size(2)), 40),
        (Sigma::Ranges(size(5)), 50),
        (Sigma::MovingRanges, 12),
        (Sigma::MovingRanges, 50),
    ] {
        let Outcome { mean, variance, nu, .. } = simulate(sigma, n, 0.0, 1);
        assert!((nu / sigma.degrees_of_freedom(count(n)).unwrap().get() - 1.0).abs() < 1e-9);
        let expected = effective::relative_variance(nu);
        let found = variance / (mean * mean);
        assert!((found / expected - 1.0).abs() < 0.033, "{sigma:?}: {found} {expected}");
        let unbiased = if matches!(sigma, Sigma::Pooled(_)) { mean * (1.0 + expected).sqrt() } else { mean };
        assert!((unbiased - 1.0).abs() < 4.0 * (variance / f64::from(RUNS)).sqrt(), "{sigma:?}: {mean}");
    }
}

/// Var(σ̂²) = 2σ⁴/ν with the ν of the true mean squares; the ν that is estimated comes near it on average. And the mean is
/// worth about as many pieces as it is said to be.
#[test]
fn total_sigma_varies_as_satterthwaite_says_and_its_mean_is_worth_fewer_pieces() {
    let (m, k) = (4.0, 20.0);
    for between in [0.0, 0.3, 0.7] {
        let Outcome { mean, variance, nu, behind_mean, variance_of_mean } =
            simulate(Sigma::Total(size(4)), 80, between, 2);
        let p = between + (1.0 - between) / m;
        let true_nu = effective::satterthwaite(&[(p, k - 1.0), (1.0 - p, k * (m - 1.0))]);
        assert!((mean - 1.0).abs() < 4.0 * (variance / f64::from(RUNS)).sqrt(), "{between}: {mean}");
        // A χ² on few degrees of freedom has heavier tails than the normal: 4 standard errors are about 4 %.
        assert!((variance * true_nu / 2.0 - 1.0).abs() < 0.04, "{between}: {variance} {true_nu}");
        assert!((nu / true_nu - 1.0).abs() < 0.06, "{between}: {nu} {true_nu}");
        let worth = 1.0 / variance_of_mean;
        assert!((worth / (k / p) - 1.0).abs() < 0.033, "{between}: {worth}");
        // The estimate is never above n and rounded down, hence low where nothing lies between.
        assert!(behind_mean / worth > 0.85 && behind_mean / worth < 1.1, "{between}: {behind_mean} {worth}");
    }
}
