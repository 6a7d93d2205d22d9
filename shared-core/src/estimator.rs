//! The exact distribution of an estimated Cpk, whatever the position of the mean.
//!
//! With Z = (x̄ − μ)√n/σ standard normal, S = σ̂/σ independent of it with νS² chi-square, and ξ = |μ − M|/σ the distance
//! of the mean from the middle of the limits, Ĉpk = min(3c − Z/√n, 3c + 2ξ + Z/√n) / (3S). With s₀ = (3c + ξ)/(3y), for
//! y > 0,
//!
//! P(Ĉpk ≤ y) = P(S > s₀) + E[Φ(−√n(3c − 3yS)) + Φ(−√n(3c + 2ξ − 3yS)); S < s₀].
//!
//! For each draw Ĉpk does not fall with ξ nor with c, so P(Ĉpk ≤ y) does not rise with either; as ξ grows it comes down
//! to the noncentral t of a single limit. Own derivation; Monte Carlo and exact integration agree in
//! `tests/reference/coverage.csv`.

use core::f64::consts::{PI, SQRT_2};

use crate::quantity::{Count, DegreesOfFreedom};
use crate::special::{Tails, chi_square, gamma, noncentral_t, normal, quadrature};

/// Where the mean lies.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Position {
    /// |μ − M|/σ, the distance from the middle of the limits in sigmas; 0 if centred.
    Offset(f64),
    /// So far off, or with one limit only, that the other limit does not matter.
    OneLimit,
}

impl Position {
    /// In the middle of the limits.
    pub const CENTRED: Self = Self::Offset(0.0);
}

/// A study of a process whose Cpk is known: n pieces, ν degrees of freedom behind sigma.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Study {
    /// Pieces behind the mean.
    pub n: Count,
    /// Degrees of freedom behind sigma, from 1 to 10⁶.
    pub nu: DegreesOfFreedom,
    /// The true Cpk, c. Below zero the mean lies beyond a limit, and the offset is −3c at least.
    pub cpk: f64,
    /// Where the mean lies.
    pub position: Position,
}

/// −ln of what the integrals leave out at each end.
const QUALITY: f64 = 38.0;

impl Study {
    /// P(Ĉpk ≤ y) and P(Ĉpk > y).
    ///
    /// Absolute error below 10^-13; the lower tail of a `y` above zero keeps a relative error below 10^-12 down to 10^-20.
    #[must_use]
    pub fn tails(&self, y: f64) -> Tails {
        let root = 3.0 * libm::sqrt(f64::from(self.n.get()));
        let (nu, t, near) = (self.nu.get(), root * y, root * self.cpk);
        if y.is_infinite() {
            let upper = if y < 0.0 { 1.0 } else { 0.0 };
            return Tails { lower: 1.0 - upper, upper };
        }
        let offset = match self.position {
            Position::OneLimit => return noncentral_t::tails(t, nu, near),
            Position::Offset(offset) => offset,
        };
        let far = near + root * offset * (2.0 / 3.0);
        // No draw lies beyond both limits then.
        if y <= 0.0 {
            let (near, far) = (noncentral_t::tails(t, nu, near).lower, noncentral_t::tails(t, nu, far).lower);
            return Tails { lower: near + far, upper: 1.0 - (near + far) };
        }
        if near + far <= 0.0 {
            // Limits without a distance: no estimate is above zero.
            return Tails { lower: 1.0, upper: 0.0 };
        }
        let lower = Both { nu, t, near, far }.lower_tail().tail;
        Tails { lower, upper: 1.0 - lower }
    }
}

impl Study {
    /// The y with P(Ĉpk ≤ y) = `p`, for `p` from 10^-12 to 1 − 10^-12.
    #[must_use]
    pub fn quantile(&self, p: f64) -> f64 {
        self.point(normal::quantile(p), |delta| noncentral_t::quantile(p, self.nu.get(), delta))
    }

    /// The y with P(Ĉpk > y) = `risk`.
    #[must_use]
    pub fn upper_quantile(&self, risk: f64) -> f64 {
        self.point(normal::upper_quantile(risk), |delta| {
            noncentral_t::upper_quantile(risk, self.nu.get(), delta)
        })
    }

    /// The y whose lower tail is that of z: by secants on the normal scale, from above, where the single limit has it.
    fn point(&self, goal: f64, one_limit: impl Fn(f64) -> f64) -> f64 {
        let n = f64::from(self.n.get());
        let root = 3.0 * libm::sqrt(n);
        let start = one_limit(root * self.cpk) / root;
        if self.position == Position::OneLimit || !start.is_finite() {
            return start;
        }
        let miss_at = |y| {
            let Tails { lower, upper } = self.tails(y);
            (if lower < 0.5 { normal::quantile(lower) } else { normal::upper_quantile(upper) }) - goal
        };
        let mut scale = libm::sqrt(1.0 / (9.0 * n) + start * start / (2.0 * self.nu.get()));
        let (mut low, mut high) = (f64::NEG_INFINITY, f64::INFINITY);
        let (mut y, mut miss) = (start, miss_at(start));
        for _ in 0..100 {
            let next = y - miss * scale;
            if miss.abs() <= 1e-9 || miss.is_nan() {
                return next;
            }
            if miss > 0.0 {
                high = y;
            } else {
                low = y;
            }
            let inside = next > low && next < high;
            let next =
                if inside { next } else { 0.5 * (low.max(y - 8.0 * scale) + high.min(y + 8.0 * scale)) };
            let next_miss = miss_at(next);
            let secant = (next - y) / (next_miss - miss);
            if secant > 0.0 && secant.is_finite() {
                scale = secant;
            }
            (y, miss) = (next, next_miss);
        }
        y
    }
}

/// P(Ĉpk ≤ y) of a centred process, and its derivative by the true Cpk. For y above zero.
pub(crate) fn centred_lower_tail(y: f64, n: Count, nu: DegreesOfFreedom, cpk: f64) -> (f64, f64) {
    let root = 3.0 * libm::sqrt(f64::from(n.get()));
    let both = Both { nu: nu.get(), t: root * y, near: root * cpk, far: root * cpk };
    let sums = both.lower_tail();
    (sums.tail, -2.0 * root * sums.density)
}

/// The integral over S with both limits in play.
struct Both {
    nu: f64,
    /// 3√n y, above zero.
    t: f64,
    /// 3√n c: the nearer limit.
    near: f64,
    /// 3√n (c + 2ξ/3): the farther one.
    far: f64,
}

struct LowerTail {
    tail: f64,
    /// E[φ(near − tS); S < s₀]: of one limit.
    density: f64,
}

impl Both {
    /// ln of the density of ln S, without its constant factor.
    fn log_density(&self, u: f64) -> f64 {
        let s = libm::exp(u);
        self.nu * (u - 0.5 * (s - 1.0) * (s + 1.0))
    }

    /// ln of a bound of the integrand that comes near it.
    fn log_integrand(&self, u: f64) -> f64 {
        let beyond = (self.near - self.t * libm::exp(u)).max(0.0);
        self.log_density(u) - 0.5 * beyond * beyond
    }

    /// ln of the s where it is largest below s₀: see the integrand of the noncentral t.
    fn peak(&self, end: f64) -> f64 {
        let square = self.nu + self.t * self.t;
        let linear = self.t * self.near;
        let joint = (linear + libm::sqrt(linear * linear + 4.0 * square * self.nu)) / (2.0 * square);
        let peak = if joint * self.t < self.near { joint } else { (self.near / self.t).max(1.0) };
        libm::log(peak).min(end)
    }

    fn lower_tail(&self) -> LowerTail {
        // s₀: where both limits are reached at once.
        let middle = 0.5 * (self.near + self.far);
        let end = libm::log(middle / self.t);
        let peak = self.peak(end);
        let floor = self.log_integrand(peak) - QUALITY;
        let low = self.edge(peak, -1.0, floor);
        let high = self.edge(peak, 1.0, floor).min(end);
        // One panel carries a normal curve of half-width 8.6 deviations; a wider integrand takes more.
        let rise = self.t * libm::exp(high);
        let sharpness = 0.5 * (high - low) * libm::sqrt(2.0 * self.nu + rise * rise);
        let panels = (1_u32..200).find(|panels| sharpness <= 11.0 * f64::from(*panels)).unwrap_or(200);
        let mut sums = LowerTail { tail: 0.0, density: 0.0 };
        quadrature::visit(low, high, panels, |u, weight| {
            let reached = self.t * libm::exp(u);
            let log_density = self.log_density(u);
            let density = weight * libm::exp(log_density);
            let x = reached - self.near;
            let near = normal::cdf(x);
            let far = if self.far == self.near { near } else { normal::cdf(reached - self.far) };
            sums.tail += density * (near + far);
            sums.density += weight * libm::exp(log_density - 0.5 * x * x);
        });
        let scale = libm::sqrt(self.nu / PI) * libm::exp(-gamma::stirling_error(0.5 * self.nu));
        let beyond = chi_square::tails(self.nu * (middle / self.t) * (middle / self.t), self.nu).upper;
        LowerTail {
            tail: scale * sums.tail + beyond,
            density: scale * sums.density / (SQRT_2 * libm::sqrt(PI)),
        }
    }

    /// How far in one direction the integrand stays above a floor, to a tenth or so, never too near.
    fn edge(&self, peak: f64, direction: f64, floor: f64) -> f64 {
        let mut width = 1.0 / libm::sqrt(self.nu);
        while self.log_integrand(peak + direction * width) > floor {
            width *= 1.25;
        }
        peak + direction * width
    }
}

#[cfg(test)]
mod tests;
