//! Tails of the noncentral t distribution for a δ so large that Z hardly matters beside it.
//!
//! P(T > t) = E G((δ − Z)/t), with G the distribution function of S. Beyond δ = 3000 √ν, G is so smooth on the scale of Z/t
//! that Gauss and Hermite's rule of three points, exact for powers up to the fifth, has the expectation to 10^-14 of itself.
//! So there is an answer for any δ, at the cost of three tails of chi-square.

use super::super::chi_square;
use super::{Side, Sums};

/// From here on, in multiples of √ν.
const LEAST_DELTA: f64 = 3000.0;

/// The rule's points and weights.
const RULE: [(f64, f64); 3] =
    [(-1.732_050_807_568_877_2, 1.0 / 6.0), (0.0, 2.0 / 3.0), (1.732_050_807_568_877_2, 1.0 / 6.0)];

/// A tail at t > 0 and what its derivatives are made of; `None` for a δ that is not large enough.
pub(super) fn sums(side: Side, t: f64, nu: f64, delta: f64) -> Option<Sums> {
    if delta < LEAST_DELTA * libm::sqrt(nu) {
        return None;
    }
    let mut sums = Sums::default();
    for (z, weight) in RULE {
        let y = delta - z;
        let x = nu * (y / t) * (y / t);
        let (tails, x_density) = chi_square::tails_and_density(x, nu);
        // T above t is S below y/t.
        sums.tail += weight * tails.on(side.other());
        // By δ, and by t, times t and t², from d ln x = 2 dδ/y and −2 dt/t, and x times the density's own derivative (ν − x)/2 of it.
        let (part, bend) = (weight * x_density, 2.0 * (nu - x));
        sums.density += part * 2.0 / y;
        sums.density_x += part * (bend - 2.0) / (y * y);
        sums.density_ts += part * 2.0;
        sums.density_ttssx += part * (bend + 2.0);
    }
    Some(sums)
}
