//! The flank of the integrand towards s = 0, where for small ν it falls slowly: all its nodes at once.
//!
//! Nodes go down from s by a factor e^−h, and there the integrand is s^ν times a power series in s. So each power's sum over
//! the nodes is a geometric series, and nothing is left out.

use core::f64::consts::PI;

use super::super::{Side, normal};
use super::integrand::{Integrand, Sums};

/// Where the flank begins.
pub(super) struct Flank {
    /// ln s of the highest point from which the series serves.
    pub(super) begin: f64,
    /// The powers it takes are more than this.
    least_powers: f64,
    /// Whether the normal factor is 1 there.
    flat: bool,
}

/// Φ is 1 to a double's last digit from here on.
const FLAT: f64 = 8.6;

impl Flank {
    /// The series is that of e^(−(ν + t²)s²/2 + tδs): short while the first part is below 1 and the second is small, or
    /// for a δ below zero, when its terms alternate, below 1. Where the normal factor is 1 to the last digit, it is that of
    /// e^(−νs²/2) alone.
    pub(super) fn of(integrand: &Integrand) -> Self {
        let &Integrand { side, t, nu, delta, .. } = integrand;
        if side == Side::Upper && delta > FLAT {
            let begin = (1.0 / libm::sqrt(nu)).min((delta - FLAT) / t);
            return Self { begin: libm::log(begin), least_powers: 0.0, flat: true };
        }
        let reach = if delta < 0.0 { 1.0 } else { 8.0 };
        let begin = (1.0 / libm::sqrt(nu + t * t)).min(reach / (t * delta.abs()));
        Self { begin: libm::log(begin), least_powers: begin * t * delta.abs(), flat: false }
    }

    /// Adds the node at u and all below.
    pub(super) fn add<const SLOPES: bool>(&self, u: f64, integrand: &Integrand, sums: &mut Sums) {
        let &Integrand { side, t, nu, delta, step, .. } = integrand;
        let s = libm::exp(u);
        let front = libm::exp(nu * (u + 0.5));
        // Two neighbouring coefficients, times s^j, of 2Φ(±(δ − ts)) e^(−νs²/2) and of e^(−(ts − δ)²/2 − νs²/2): each is
        // made of the one before and its own two before, since the functions solve such differential equations.
        let mut tail = [0.0, front * 2.0 * normal::cdf(side.sign() * delta)];
        let mut density = [0.0, if self.flat { 0.0 } else { front * libm::exp(-0.5 * delta * delta) }];
        let to_tail = -side.sign() * t * s * libm::sqrt(2.0 / PI);
        let (linear, square, nu_square) = (t * delta * s, (nu + t * t) * s * s, nu * s * s);
        let mut falls = Falls { fall: -libm::expm1(-nu * step), one: -libm::expm1(-step) };
        let mut power = 0.0;
        while power < MOST_POWERS {
            sums.tail += tail[1] / falls.fall;
            if SLOPES {
                let [zeroth, first, second, third] = falls.moments(density[1], t * s);
                sums.density += zeroth;
                sums.density_ts += first;
                sums.density_x += first - delta * zeroth;
                sums.density_ttssx += third - delta * second;
            }
            let left = tail[0].abs() + tail[1].abs() + density[1].abs();
            if power > self.least_powers && left <= 1e-18 * sums.tail {
                break;
            }
            power += 1.0;
            tail = [tail[1], (to_tail * density[1] - nu_square * tail[0]) / power];
            density = [density[1], (linear * density[1] - square * density[0]) / power];
            falls = falls.next();
        }
    }
}

/// The series takes some 50 powers at most.
const MOST_POWERS: f64 = 100.0;

/// What a power loses from node to node: 1 − e^(−(ν + j)h) for a j, and for j = 1 without ν.
#[derive(Clone, Copy)]
struct Falls {
    fall: f64,
    one: f64,
}

impl Falls {
    fn next(self) -> Self {
        Self { fall: self.fall + self.one * (1.0 - self.fall), ..self }
    }

    /// The sums over the nodes of a density's power, and of it times ts, its square and its cube.
    fn moments(self, density: f64, ts: f64) -> [f64; 4] {
        let (first, second) = (self.next(), self.next().next());
        let third = second.next();
        [
            density / self.fall,
            density * ts / first.fall,
            density * ts * ts / second.fall,
            density * ts * ts * ts / third.fall,
        ]
    }
}
