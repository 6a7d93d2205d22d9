//! The degrees of freedom of an estimate of sigma that is no root of a sum of squares: those of the χ that varies as
//! much in relation to its mean.
//!
//! Patnaik (1950), The use of mean range as an estimator of variance in statistical tests, Biometrika 37:78–87, fits
//! c·χ_ν/√ν to a mean range by mean and variance; from memory.

/// The ν of a sum of independent mean squares, from each one's share of the sum (together 1) and its own ν: the χ² that
/// varies as much.
///
/// Satterthwaite (1946), An approximate distribution of estimates of variance components, Biometrics Bulletin 2:110–114;
/// from memory. It lies between the smallest of the ν that have a share and the sum of all.
pub(super) fn satterthwaite(shares: &[(f64, f64)]) -> f64 {
    1.0 / shares.iter().map(|(share, nu)| share * share / nu).sum::<f64>()
}

/// (the standard deviation of χ_ν / its mean)² = 1/c4² − 1, with c4 = √(2/ν) Γ((ν + 1)/2) / Γ(ν/2).
///
/// For ν of 1 and more; relative error below 10^-13.
pub(super) fn relative_variance(nu: f64) -> f64 {
    // With 1 + v = ν Γ(ν/2)² / (2 Γ((ν + 1)/2)²) and Γ(x + 1) = x Γ(x): 1 + v(ν) = (1 + e)(1 + v(ν + 2)),
    // e = 1/(ν(ν + 2)). Upwards to where the series holds, then back down; nothing is subtracted.
    const STEPS: u8 = 30;
    if nu >= 2.0 * f64::from(STEPS) {
        return series(1.0 / nu);
    }
    let at = |step| nu + 2.0 * f64::from(step);
    (0..STEPS).rev().fold(series(1.0 / at(STEPS)), |variance, step| {
        let e = 1.0 / (at(step) * at(step + 1));
        variance + e + e * variance
    })
}

/// The same as a series in 1/ν: below 2·10^-14 off from ν = 60 on. Its coefficients follow from the recurrence above.
fn series(x: f64) -> f64 {
    const COEFFICIENTS: [f64; 8] = [
        1.0 / 2.0,
        1.0 / 8.0,
        -1.0 / 16.0,
        -5.0 / 128.0,
        23.0 / 256.0,
        53.0 / 1024.0,
        -593.0 / 2048.0,
        -5165.0 / 32768.0,
    ];
    x * COEFFICIENTS.iter().rev().fold(0.0, |sum, c| sum * x + c)
}

/// The ν whose χ has this relative variance. For variances up to that of ν = 1, π/2 − 1.
pub(super) fn degrees_of_freedom(variance: f64) -> f64 {
    let mut nu = 0.5 / variance + 0.25;
    // Newton's steps with the slope of the first two terms of the series: each leaves less than a third of the error.
    for _ in 0..40 {
        let x = 1.0 / nu;
        let step = (relative_variance(nu) - variance) / (x * x * (0.5 + 0.25 * x));
        nu = (nu + step).max(1.0);
        if step.abs() <= 1e-14 * nu {
            break;
        }
    }
    nu
}
