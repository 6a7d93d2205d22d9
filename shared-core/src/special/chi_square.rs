//! The chi-square distribution: tails and quantiles, for ν from 0.5 to 2·10⁶, fractions allowed.
//!
//! Tails: the series of the incomplete gamma function below its mode, the continued fraction above (NIST Digital Library
//! of Mathematical Functions, 8.7.1 and 8.9.2; from memory), each times a prefactor that keeps its digits
//! ([`gamma::Poisson`]). About 7 √ν terms near the mode, fewer in the tails; for a ν of hundreds and more the uniform
//! expansion takes their place there ([`uniform`]).
//!
//! Quantiles: exact for ν of 1 and 2, otherwise a start good to a thousandth and one step by the inverse of the tail's
//! Taylor series, or two.
//!
//! Measured against values of 52 digits (ν from 1 to 10⁶, tails to 10⁻¹²): ACCURACY.md.

mod uniform;

use super::gamma::Poisson;
use super::{Side, Tails, normal};

/// A smaller tail than this is taken as this by quantiles.
const SMALLEST_TAIL: f64 = 1e-300;

/// No series or continued fraction within the stated range needs more terms.
const MOST_TERMS: u32 = 50_000;

/// Both tails at `x`.
#[must_use]
pub fn tails(x: f64, nu: f64) -> Tails {
    if x.is_nan() || !in_range(nu) {
        return Tails::NAN;
    }
    if x <= 0.0 {
        return Tails::from_lower(0.0);
    }
    if x > 2.0 * nu + 4000.0 {
        // Less than the smallest double: see `most`.
        return Tails::from_upper(0.0);
    }
    Distribution::new(nu).at(x).tails
}

/// Both tails at `x`, and x times the density; for ν and x above 0 in range.
pub(super) fn tails_and_density(x: f64, nu: f64) -> (Tails, f64) {
    if x <= 0.0 || x > 2.0 * nu + 4000.0 {
        return (tails(x, nu), 0.0);
    }
    let at = Distribution::new(nu).at(x);
    (at.tails, at.x_density)
}

/// The x that a fraction `p` lies below. For a `p` near 1 take [`upper_quantile`] of what is missing.
///
/// For `p` from 0 to 1; 0 and infinity at the ends.
#[must_use]
pub fn quantile(p: f64, nu: f64) -> f64 {
    if p > 0.5 { from_tail(Side::Upper, 1.0 - p, nu) } else { from_tail(Side::Lower, p, nu) }
}

/// The x that a fraction `risk` lies above.
///
/// For `risk` from 0 to 1; infinity and 0 at the ends.
#[must_use]
pub fn upper_quantile(risk: f64, nu: f64) -> f64 {
    if risk > 0.5 { from_tail(Side::Lower, 1.0 - risk, nu) } else { from_tail(Side::Upper, risk, nu) }
}

fn in_range(nu: f64) -> bool {
    (0.5..=2e6).contains(&nu)
}

/// What all points of one ν share.
struct Distribution {
    /// ν/2
    a: f64,
    poisson: Poisson,
}

/// The tails at a point x, and x times the density there.
struct At {
    tails: Tails,
    x_density: f64,
}

impl Distribution {
    fn new(nu: f64) -> Self {
        let a = 0.5 * nu;
        Self { a, poisson: Poisson::new(a) }
    }

    /// At an x above 0.
    fn at(&self, x: f64) -> At {
        let (a, half) = (self.a, 0.5 * x);
        let prefactor = self.poisson.at(half);
        let tails = match uniform::tails(a, half) {
            Some(tails) => tails,
            None if half >= a + 1.0 && self.poisson.is_plain() => {
                Tails::from_upper(finite_upper(a, half, prefactor))
            }
            None => by_terms(a, half, prefactor),
        };
        At { tails, x_density: a * prefactor }
    }

    /// No point that leaves `tail` above it is higher: Laurent & Massart (2000), Adaptive estimation of a quadratic
    /// functional by model selection, Annals of Statistics 28:1302–1338, lemma 1.
    fn most(&self, tail: f64) -> f64 {
        let log = -libm::log(tail);
        2.0 * (self.a + libm::sqrt(2.0 * self.a * log) + log)
    }

    /// A point near the one that leaves `tail` on its side.
    fn start(&self, side: Side, tail: f64) -> f64 {
        let a = self.a;
        let z = side.sign() * normal::upper_quantile(tail);
        let s = 1.0 / (3.0 * libm::sqrt(a));
        if side == Side::Lower {
            // Far below, P Γ(a + 1) = x^a (1 − ax/(a + 1) + …), x here half of the point.
            let log_power = (libm::log(tail) + self.poisson.log_factorial()) / a;
            let power = libm::exp(log_power);
            let r = power / (a + 1.0);
            if r < 0.25 {
                let second = (3.0 * a + 5.0) / (2.0 * (a + 2.0));
                let third = (8.0 * a * a + 33.0 * a + 31.0) / (3.0 * (a + 2.0) * (a + 3.0));
                return 2.0 * power * (1.0 + r * (1.0 + r * (second + r * third)));
            }
        }
        // The cube root is nearly normal (Wilson & Hilferty 1931): its quantile in powers of s, by the method of Cornish &
        // Fisher (1938); own derivation.
        let q = z * z;
        let terms = [
            1.0,
            z,
            -1.0,
            -z * (q - 3.0) / 12.0,
            (q * (q + 4.0) - 7.0) / 15.0,
            -z * (q * (3.0 * q + 40.0) + 45.0) / 96.0,
            (q * (q * (q + 90.0) + 402.0) + 363.0) / 315.0,
        ];
        let root = terms.iter().rev().fold(0.0, |sum, term| sum * s + term);
        // Far out the series goes astray.
        let root = if z * s > 1.0 { 1.0 + s * (z - s) } else { root.max(0.1) };
        2.0 * a * root * root * root
    }
}

/// Both tails by the uniform expansion, where it serves, and by series or continued fraction.
#[cfg(test)]
pub(super) fn both_ways(x: f64, nu: f64) -> Option<(Tails, Tails)> {
    let (a, half) = (0.5 * nu, 0.5 * x);
    let prefactor = Poisson::new(a).at(half);
    Some((uniform::tails(a, half)?, by_terms(a, half, prefactor)))
}

fn by_terms(a: f64, half: f64, prefactor: f64) -> Tails {
    if half < a + 1.0 {
        Tails::from_lower(prefactor * series(a, half))
    } else {
        Tails::from_upper(prefactor * a * continued_fraction(a, half))
    }
}

/// 1 + x/(a + 1) + x²/((a + 1)(a + 2)) + …
fn series(a: f64, x: f64) -> f64 {
    let (mut term, mut sum, mut step) = (1.0, 1.0, a);
    for _ in 0..MOST_TERMS {
        step += 1.0;
        term *= x / step;
        sum += term;
        if term < 1e-17 * sum {
            break;
        }
    }
    sum
}

/// Q for a whole a or half of an odd number: e^−x (1 + x + … + x^(a − 1)/(a − 1)!), or erfc √x + e^−x (√x/Γ(3/2) + …).
fn finite_upper(a: f64, x: f64, prefactor: f64) -> f64 {
    let (inverse, mut term, mut sum, mut k) = (1.0 / x, prefactor, 0.0, a);
    while k > 0.75 {
        term *= k * inverse;
        sum += term;
        k -= 1.0;
    }
    if k > 0.25 { sum + libm::erfc(libm::sqrt(x)) } else { sum }
}

/// 1/(x + 1 − a − 1(1 − a)/(x + 3 − a − 2(2 − a)/(x + 5 − a − …))), by the method of Lentz (1976).
fn continued_fraction(a: f64, x: f64) -> f64 {
    let mut denominator = x + 1.0 - a;
    let (mut c, mut d) = (1e300, 1.0 / denominator);
    let mut value = d;
    for step in 1..MOST_TERMS {
        let step = f64::from(step);
        let numerator = -step * (step - a);
        denominator += 2.0;
        d = 1.0 / (numerator * d + denominator);
        c = denominator + numerator / c;
        value *= d * c;
        if (d * c - 1.0).abs() < 2e-16 {
            break;
        }
    }
    value
}

/// The point that leaves `tail`, at most 1/2, on its side.
fn from_tail(side: Side, tail: f64, nu: f64) -> f64 {
    if !in_range(nu) || !(0.0..=1.0).contains(&tail) {
        return f64::NAN;
    }
    if tail == 0.0 {
        return if side == Side::Lower { 0.0 } else { f64::INFINITY };
    }
    if nu == 1.0 {
        let z = if side == Side::Lower {
            normal::above_median(0.5 * tail)
        } else {
            normal::upper_quantile(0.5 * tail)
        };
        return z * z;
    }
    if nu == 2.0 {
        return if side == Side::Lower { -2.0 * libm::log1p(-tail) } else { -2.0 * libm::log(tail) };
    }
    let tail = tail.max(SMALLEST_TAIL);
    let distribution = Distribution::new(nu);
    let mut x = distribution.start(side, tail);
    for _ in 0..60 {
        let at = distribution.at(x);
        let reached = at.tails.on(side);
        if reached < f64::MIN_POSITIVE {
            // Too far out for any double.
            x *= if side == Side::Upper { 0.95 } else { 2.0 };
            continue;
        }
        let step = Step::new(side, tail, reached, at.x_density, distribution.a, 0.5 * x);
        x += x * libm::expm1(step.log_x);
        if step.settles {
            break;
        }
        if side == Side::Upper {
            // From above, steps along the logarithms never pass the point.
            x = x.min(distribution.most(tail));
        }
    }
    x
}

/// A step along ln x towards where ln of a tail is what it shall be.
struct Step {
    log_x: f64,
    /// Whether no more steps are needed.
    settles: bool,
}

impl Step {
    /// The inverse series of the tail's Taylor series to the fifth term; far away, Newton's step, held short.
    fn new(side: Side, goal: f64, reached: f64, x_density: f64, a: f64, half: f64) -> Self {
        let slope = -side.sign() * x_density / reached;
        let excess = (reached - goal) / goal;
        let miss = if excess.abs() < 0.5 { libm::log1p(excess) } else { libm::log(reached / goal) };
        let newton = -miss / slope;
        // The slope's own derivative is slope · bend, since that of x times the density is (a − x/2) of it.
        let bend = a - half - slope;
        let size = newton.abs() * bend.abs().max(1.0);
        if size >= 0.3 || size.is_nan() {
            return Self { log_x: newton.clamp(-1.5, 1.5), settles: false };
        }
        let bend_1 = -half - slope * bend;
        let two = bend * bend + bend_1;
        let bend_2 = -half - slope * two;
        let three = bend * (bend * bend + 3.0 * bend_1) + bend_2;
        let bend_3 = -half - slope * three;
        let square = bend * bend;
        let four = square * (square + 6.0 * bend_1) + 4.0 * bend * bend_2 + 3.0 * bend_1 * bend_1 + bend_3;
        let (second, third, fourth, fifth) = (bend / 2.0, two / 6.0, three / 24.0, four / 120.0);
        let square = second * second;
        let terms = [
            1.0,
            -second,
            2.0 * square - third,
            -5.0 * second * (square - third) - fourth,
            square * (14.0 * square - 21.0 * third) + 6.0 * second * fourth + 3.0 * third * third - fifth,
        ];
        let log_x = newton * terms.iter().rev().fold(0.0, |sum, term| sum * newton + term);
        Self { log_x, settles: size < SETTLES }
    }
}

/// Where the inverse series leaves nothing that a double could hold.
const SETTLES: f64 = 2e-3;
