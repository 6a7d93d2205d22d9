//! Factors, degrees of freedom and worked examples that others published.

use super::*;
use crate::sigma::effective;
use crate::special::normal;

/// m, d2, d3 and c4 of m pieces: the trade's common table of factors for control charts (ASTM E2587 has it; read in
/// public copies, not in the standard itself).
#[allow(clippy::approx_constant, reason = "as it was published")]
const SHEWHART: [(u8, f64, f64, f64); 23] = [
    (2, 1.1284, 0.8525, 0.7979),
    (3, 1.6926, 0.8884, 0.8862),
    (4, 2.0588, 0.8798, 0.9213),
    (5, 2.3259, 0.8641, 0.9400),
    (6, 2.5344, 0.8480, 0.9515),
    (7, 2.7044, 0.8332, 0.9594),
    (8, 2.8472, 0.8198, 0.9650),
    (9, 2.9700, 0.8078, 0.9693),
    (10, 3.0775, 0.7971, 0.9727),
    (11, 3.1729, 0.7873, 0.9754),
    (12, 3.2585, 0.7785, 0.9776),
    (13, 3.3360, 0.7704, 0.9794),
    (14, 3.4068, 0.7630, 0.9810),
    (15, 3.4718, 0.7562, 0.9823),
    (16, 3.5320, 0.7499, 0.9835),
    (17, 3.5879, 0.7441, 0.9845),
    (18, 3.6401, 0.7386, 0.9854),
    (19, 3.6890, 0.7335, 0.9862),
    (20, 3.7349, 0.7287, 0.9869),
    (21, 3.7783, 0.7242, 0.9876),
    (22, 3.8194, 0.7199, 0.9882),
    (23, 3.8583, 0.7159, 0.9887),
    (24, 3.8953, 0.7121, 0.9892),
];

#[test]
fn the_factors_are_those_of_the_trade_s_tables() {
    for (pieces, d2, d3, c4) in SHEWHART {
        let (ours, spread) = range::factors(size(pieces));
        assert!((ours - d2).abs() < 6e-5 && (spread - d3).abs() < 6e-5, "{pieces}: {ours} {spread}");
        let ours = 1.0 / (1.0 + effective::relative_variance(f64::from(pieces) - 1.0)).sqrt();
        assert!((ours - c4).abs() < 6e-5, "{pieces}: {ours}");
    }
    assert!((range::factors(size(25)).0 - 3.931).abs() < 5e-4);
}

/// The range's distribution, integrated anew: the trapezoidal rule over x, which converges fast for such bells, and Simpson's
/// over w.
#[test]
fn the_factors_are_those_of_the_range_s_distribution() {
    let h = 0.1;
    let grid: Vec<f64> = (-120..=120).map(|i| f64::from(i) * h).collect();
    for pieces in 2..=25_u8 {
        let m = i32::from(pieces);
        let longest = |x: f64| 1.0 - normal::cdf(x).powi(m) - normal::upper_tail(x).powi(m);
        let d2 = h * grid.iter().map(|x| longest(*x)).sum::<f64>();
        let above = |w: f64| {
            let density = |x: f64| (-0.5 * x * x).exp() / (2.0 * core::f64::consts::PI).sqrt();
            let within = |x: f64| (normal::cdf(x + w) - normal::cdf(x)).powi(m - 1);
            1.0 - h * grid.iter().map(|x| f64::from(m) * density(*x) * within(*x)).sum::<f64>()
        };
        let (steps, end) = (1200, 16.0);
        let g = end / f64::from(steps);
        let square: f64 = (0..=steps)
            .map(|i| {
                let weight = if i == 0 || i == steps { 1.0 } else { f64::from(2 + 2 * (i % 2)) };
                let w = f64::from(i) * g;
                weight * 2.0 * w * above(w)
            })
            .sum::<f64>()
            * g
            / 3.0;
        let d3 = (square - d2 * d2).sqrt();
        let (ours, spread) = range::factors(size(pieces));
        assert!((ours / d2 - 1.0).abs() < 1e-13, "{pieces}: {ours} {d2}");
        assert!((spread / d3 - 1.0).abs() < 1e-8, "{pieces}: {spread} {d3}");
    }
}

/// 1/c4² − 1 has closed forms for whole ν: π/2 − 1, 4/π − 1, 3π/8 − 1, 32/(9π) − 1.
#[test]
fn the_relative_variance_of_chi_is_that_of_its_closed_forms() {
    use core::f64::consts::PI;
    let forms = [PI / 2.0, 4.0 / PI, 3.0 * PI / 8.0, 32.0 / (9.0 * PI)];
    for (nu, form) in (1..).zip(forms) {
        let ours = effective::relative_variance(f64::from(nu));
        assert!((ours / (form - 1.0) - 1.0).abs() < 4e-15 / (form - 1.0), "{nu}: {ours}");
    }
    // With mpmath, by the gamma function at 40 digits.
    for (nu, value) in [
        (7.5, 0.068_732_259_965_532_48),
        (59.3, 0.008_466_947_258_020_642),
        (60.0, 0.008_367_763_306_166_86),
        (1e6, 5.000_001_249_999_375e-7),
    ] {
        let ours = effective::relative_variance(nu);
        assert!((ours / value - 1.0).abs() < 1e-13, "{nu}: {ours}");
    }
}

#[test]
fn the_degrees_of_freedom_give_the_relative_variance_back() {
    for i in 0..600 {
        let nu = libm::pow(10.0, f64::from(i) / 100.0);
        let back = effective::degrees_of_freedom(effective::relative_variance(nu));
        assert!((back / nu - 1.0).abs() < 1e-12, "{nu} {back}");
    }
}

/// Duncan's table of d2* and ν, as AIAG's Measurement Systems Analysis prints it in its appendix C (from memory): ν of one
/// range of 2 to 10 pieces, and what each further one adds when there are many; 20 ranges of 5 have 72.7.
#[test]
fn the_degrees_of_freedom_of_mean_ranges_are_those_of_duncan_s_table() {
    let nu = |pieces, ranges| range::mean_range(size(pieces), count(ranges)).unwrap().get();
    let first = [1.0, 2.0, 2.9, 3.8, 4.7, 5.5, 6.3, 7.0, 7.7];
    let further = [0.876, 1.815, 2.738, 3.623, 4.466, 5.267, 6.031, 6.759, 7.454];
    for ((pieces, first), further) in (2..).zip(first).zip(further) {
        assert!((nu(pieces, 1) - first).abs() < 0.051, "{pieces}: {}", nu(pieces, 1));
        let added = (nu(pieces, 100_000) - nu(pieces, 99_900)) / 100.0;
        assert!((added - further).abs() < 6e-4, "{pieces}: {added}");
    }
    assert!((nu(5, 20) - 72.7).abs() < 0.05);
}

/// Cryer & Ryan (1990), from memory: MR̄/d2 is about 60.5 % as efficient as the root of the mean square.
#[test]
fn moving_ranges_have_the_published_efficiency() {
    let nu = |ranges| range::mean_moving_range(count(ranges)).unwrap().get();
    assert!((nu(1) - 1.0).abs() < 1e-12, "one range of two is |N(0, 2)|: {}", nu(1));
    assert!((nu(100_000) / 100_000.0 - 0.605).abs() < 5e-4, "{}", nu(100_000));
}

/// GUM (JCGM 100:2008) G.4.2, from memory: relative uncertainties of 0.25 %, 0.57 % and 0.82 % on 9, 4 and 14 degrees of
/// freedom have 19.0 together.
#[test]
fn satterthwaite_s_formula_gives_the_guide_s_example() {
    let variances = [0.25_f64, 0.57, 0.82].map(|u| u * u);
    let sum: f64 = variances.iter().sum();
    let shares: Vec<_> = variances.iter().map(|v| v / sum).zip([9.0, 4.0, 14.0]).collect();
    assert!((effective::satterthwaite(&shares) - 19.0).abs() < 0.05);
}

/// NIST StRD, analysis of variance, SiRstv: 5 instruments, 5 resistivities each; the data from a public copy, the
/// certified mean squares from memory (and both agree).
#[test]
fn mean_squares_are_those_that_nist_certified() {
    let resistivity = [
        1963052, 1961240, 1961890, 1962569, 1963403, 1963042, 1963825, 1961669, 1963257, 1960422, 1961303,
        1962005, 1962889, 1960343, 1961811, 1962795, 1961748, 1961494, 1961485, 1959885, 1962119, 1961051,
        1961850, 1960052, 1962090,
    ];
    let resolution: Resolution = "0.0001".parse().unwrap();
    let (between, within) = (1.278_656_54e-2, 1.083_182_80e-2);
    let five = size(5);
    let pooled = tally(Sigma::Pooled(five), &resistivity).sample(resolution, &wide()).unwrap();
    assert!((pooled.sigma().powi(2) / within - 1.0).abs() < 1e-14);
    assert_eq!((pooled.n().get(), pooled.nu().get()), (25, 20.0));

    let total = tally(Sigma::Total(five), &resistivity).sample(resolution, &wide()).unwrap();
    let variance = between / 5.0 + within * 4.0 / 5.0;
    assert!((total.sigma().powi(2) / variance - 1.0).abs() < 1e-14);
    let [p, q] = [between / 5.0, within * 4.0 / 5.0].map(|part| part / variance);
    assert!((total.nu().get() * (p * p / 4.0 + q * q / 20.0) - 1.0).abs() < 1e-14);
    assert_eq!(f64::from(total.n().get()), (5.0 / p).floor());
}

/// NIST/SEMATECH e-Handbook 6.3.2.2 (looked up): ten flow rates, MR̄ = 1.8778, centre ± 3 MR̄/1.128 = 55.8041 and 45.8159.
#[test]
fn moving_ranges_give_the_handbook_s_control_limits() {
    let rates = [496, 476, 499, 513, 478, 512, 526, 524, 536, 521];
    let sample = tally(Sigma::MovingRanges, &rates).sample("0.1".parse().unwrap(), &wide()).unwrap();
    assert_eq!(sample.mean(), 50.81);
    assert!((sample.sigma() * range::factors(size(2)).0 - 1.8778).abs() < 5e-5);
    // The handbook takes 1.128 for d2 = 1.12838.
    for (limit, side) in [(55.8041, 3.0), (45.8159, -3.0)] {
        assert!((sample.mean() + side * sample.sigma() - limit).abs() < 2e-3);
    }
}
