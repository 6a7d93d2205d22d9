//! The integrand of a tail of the noncentral t distribution, and its trapezoidal rule.

use super::flank::Flank;
use super::{PI, SQRT_2, Side, gamma};

/// √(ν/π) e^−δ(ν/2) exp(ν g(u)) Φ(±(δ − t e^u)), with g(u) = u − (e^2u − 1)/2: over all u, it sums to a tail at t > 0.
pub(super) struct Integrand {
    pub(super) side: Side,
    pub(super) t: f64,
    pub(super) nu: f64,
    pub(super) delta: f64,
    /// Where the sum starts: near the peak.
    centre: f64,
    /// The distance of two nodes.
    pub(super) step: f64,
    /// ln δ/t, where the normal integral is 1/2; `None` for a δ too small for that, or below zero.
    crossing: Option<f64>,
}

/// A tail and, if asked for, the integrals that its derivatives are made of; x = tS − δ.
#[derive(Default)]
pub(super) struct Sums {
    pub(super) tail: f64,
    /// What rounding has added to the tail.
    pub(super) lost: f64,
    /// E φ(x).
    pub(super) density: f64,
    /// E x φ(x).
    pub(super) density_x: f64,
    /// E tS φ(x).
    pub(super) density_ts: f64,
    /// E t²S² x φ(x).
    pub(super) density_ttssx: f64,
    /// How many nodes it took, each an expm1, an erfc and one exp, or two with slopes.
    pub(super) nodes: u32,
}

/// −ln of the rule's relative error: 10^-15, with a factor 4 for what the bound of the growth leaves out.
const QUALITY: f64 = 36.0;

/// Nodes on either side, far more than any tail takes.
const MOST_NODES: u32 = 100_000;

impl Integrand {
    /// For t above zero.
    pub(super) fn new(side: Side, t: f64, nu: f64, delta: f64) -> Self {
        let short = (delta - t) / t;
        let log_ratio = if short.abs() < 0.5 { libm::log1p(short) } else { libm::log(delta / t) };
        let crossing = (delta > 0.01).then_some(log_ratio);
        let mut integrand = Self { side, t, nu, delta, centre: 0.0, step: 0.0, crossing };
        let (peak, s) = integrand.reach(0.0);
        integrand.centre = libm::log(s);
        // The bound holds for any strip. The best is where the growth, about a square in y, equals the quality.
        let widest = 0.6;
        let step_of = |y: f64, growth: f64| 2.0 * PI * y / (QUALITY + growth);
        let first = libm::sqrt(QUALITY / (nu + 0.5 * delta * delta)).min(widest);
        let growth = (integrand.reach(first).0 - peak).max(0.0);
        let second = (first * libm::sqrt(QUALITY / growth.max(1e-9))).min(widest);
        let second_growth = (integrand.reach(second).0 - peak).max(0.0);
        integrand.step = step_of(first, growth).max(step_of(second, second_growth));
        integrand
    }

    /// The logarithm of the integrand's largest size at a distance `y` from the real axis, and the real part (as s)
    /// where it is.
    ///
    /// |Φ(x + iη)| ≤ 1 if x > |η|, else ≤ e^((η² − x²)/2). So in one region of s the growth is that of the density
    /// alone, in the other that of the density times the normal one; both have their peak in closed form.
    fn reach(&self, y: f64) -> (f64, f64) {
        let Self { side, t, nu, delta, .. } = *self;
        let (sine, cosine) = libm::sincos(y);
        let double = 1.0 - 2.0 * sine * sine;
        let density = |s: f64| nu * (libm::log(s) - 0.5 * (s * s * double - 1.0));
        let joint = |s: f64| {
            let squares = t * s * (t * s * double - 2.0 * delta * cosine) + delta * delta;
            density(s) - 0.5 * squares
        };
        let density_peak = 1.0 / libm::sqrt(double);
        let (square, linear) = ((nu + t * t) * double, t * delta * cosine);
        let root = libm::sqrt(linear * linear + 4.0 * square * nu);
        let joint_peak =
            if linear > 0.0 { (linear + root) / (2.0 * square) } else { 2.0 * nu / (root - linear) };
        let (edge, density_at, joint_at) = match side {
            Side::Lower => {
                let edge = delta / (t * (cosine - sine));
                (edge, density_peak.max(edge), joint_peak.min(edge))
            }
            Side::Upper => {
                let edge = delta / (t * (cosine + sine));
                (edge, density_peak.min(edge), joint_peak.max(edge))
            }
        };
        if edge <= 0.0 {
            return match side {
                Side::Lower => (density(density_peak), density_peak),
                Side::Upper => (joint(joint_peak), joint_peak),
            };
        }
        let (of_density, of_joint) = (density(density_at), joint(joint_at));
        if of_density > of_joint { (of_density, density_at) } else { (of_joint, joint_at) }
    }

    /// The trapezoidal sums, from the peak outwards: the integrand has one peak, so a negligible term ends its side.
    pub(super) fn sums<const SLOPES: bool>(&self) -> Sums {
        let scale = self.step * libm::sqrt(self.nu / PI) * libm::exp(-gamma::stirling_error(0.5 * self.nu));
        let mut sums = Sums::default();
        let flank = Flank::of(self);
        for (direction, first) in [(1.0, 0), (-1.0, 1)] {
            for k in first..MOST_NODES {
                let u = self.centre + direction * f64::from(k) * self.step;
                if direction < 0.0 && u < flank.begin {
                    flank.add::<SLOPES>(u, self, &mut sums);
                    break;
                }
                let term = self.add::<SLOPES>(u, &mut sums);
                if term <= 5e-18 * sums.tail {
                    break;
                }
            }
        }
        Sums {
            nodes: sums.nodes,
            lost: 0.0,
            // Rounding may take it above.
            tail: (scale * 0.5 * sums.tail).min(1.0),
            density: scale * INVERSE_ROOT * sums.density,
            density_x: scale * INVERSE_ROOT * sums.density_x,
            density_ts: scale * INVERSE_ROOT * sums.density_ts,
            density_ttssx: scale * INVERSE_ROOT * sums.density_ttssx,
        }
    }

    /// Adds the node at u; returns its part of the tail.
    fn add<const SLOPES: bool>(&self, u: f64, sums: &mut Sums) -> f64 {
        let Node { s, x, fall } = self.node(u);
        let log_density = self.nu * fall;
        let term = libm::exp(log_density) * libm::erfc(self.side.sign() * x / SQRT_2);
        // Kahan's compensation: δ of hundreds at small ν takes thousands of nodes.
        let corrected = term - sums.lost;
        let total = sums.tail + corrected;
        sums.lost = (total - sums.tail) - corrected;
        sums.tail = total;
        sums.nodes += 1;
        if SLOPES {
            let density = libm::exp(log_density - 0.5 * x * x);
            sums.density += density;
            sums.density_x += density * x;
            let ts = self.t * s;
            sums.density_ts += density * ts;
            sums.density_ttssx += density * ts * ts * x;
        }
        term
    }
}

/// 1/√(2π).
const INVERSE_ROOT: f64 = 0.398_942_280_401_432_7;

/// What the integrand is made of at one u.
struct Node {
    /// e^u.
    s: f64,
    /// ts − δ.
    x: f64,
    /// g(u) = u − (e^2u − 1)/2, never above zero.
    fall: f64,
}

impl Integrand {
    fn node(&self, u: f64) -> Node {
        // Near there, ts − δ = δ(e^(u − ln δ/t) − 1): no difference of two large numbers.
        let (s, x) = match self.crossing {
            Some(crossing) if u - crossing > -0.7 => {
                let x = self.delta * libm::expm1(u - crossing);
                ((x + self.delta) / self.t, x)
            }
            _ => {
                let s = libm::exp(u);
                (s, self.t * s - self.delta)
            }
        };
        let fall = if u.abs() > 0.35 { u - 0.5 * (s * s - 1.0) } else { fall_near_zero(u) };
        Node { s, x, fall }
    }
}

/// −(v²/2! + v³/3! + …)/2 with v = 2u, for |u| ≤ 0.35: nothing cancels.
fn fall_near_zero(u: f64) -> f64 {
    // 2/(k + 2)!, even and odd k apart: two short chains instead of a long one.
    const EVEN: [f64; 8] = [
        1.0,
        2.0 / 24.0,
        2.0 / 720.0,
        2.0 / 40_320.0,
        2.0 / 3_628_800.0,
        2.0 / 479_001_600.0,
        2.0 / 87_178_291_200.0,
        2.0 / 20_922_789_888_000.0,
    ];
    const ODD: [f64; 7] = [
        2.0 / 6.0,
        2.0 / 120.0,
        2.0 / 5_040.0,
        2.0 / 362_880.0,
        2.0 / 39_916_800.0,
        2.0 / 6_227_020_800.0,
        2.0 / 1_307_674_368_000.0,
    ];
    let v = 2.0 * u;
    let square = v * v;
    let even = EVEN.iter().rev().fold(0.0, |sum, c| sum * square + c);
    let odd = ODD.iter().rev().fold(0.0, |sum, c| sum * square + c);
    -0.25 * square * (even + v * odd)
}
