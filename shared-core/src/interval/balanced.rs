//! The two-sided interval of Cpk whose risk is split so that a centred process and one with a single limit in play are
//! both covered with exactly the confidence; every other position of the mean is covered with more.
//!
//! Of a true index c, call an estimate too low or too high if it lies outside t_lo(c) to t_hi(c) (on the scale of T =
//! 3√n Ĉpk); the interval holds every c of which the estimate is neither. Bonferroni's split ([`super::exact`]) guards each
//! end against its own worst case, but no process is both: a mean off centre misses upwards more often, a centred one
//! downwards. Here t_lo and t_hi solve two equations: both misses together have the probability `risk` (1) with a single
//! limit, P(T ≤ t_lo) + P(T ≥ t_hi) by the noncentral t, and (2) with a centred mean, by the distribution of
//! [`crate::estimator`].
//!
//! Theorem: then they have at most `risk` wherever the mean lies. Proof: with δ = 3√n c, x = √n ξ and g = max(Z, −Z − 2x),
//! T = (δ − g)/S. Let H(g) be the probability of a miss given g. It has one minimum and rises on both sides: with v =
//! δ − g > 0 and t_lo > 0, the derivative of P(S ≥ v/t_lo) + P(S ≤ v/t_hi) by v has the sign of
//! (t_lo/t_hi)^ν exp(ν v² (1/t_lo² − 1/t_hi²)/2) − 1, which grows with v; for v ≤ 0 a miss is certain; t_lo ≤ 0 is alike. A
//! single limit has g = Z, so the misses at x exceed its `risk` by D(x) = ∫ₓ^∞ φ(w)[H(w − 2x) − H(−w)] dw. D vanishes at
//! infinity, and at 0 by (2). D′(x) = −2 e^(−2x²) J(x), J(x) = ∫₋ₓ^∞ φ(v) e^(−2xv) H′(v) dv. With m the minimum of H,
//! e^(2xm) J(x) falls with x once x > −m (its derivative has the terms −2∫(v − m)H′(v)… ≤ 0 and …H′(−x) ≤ 0), and is
//! positive before. So J changes its sign at most once, from + to −: D falls, then rises to 0, and is never above 0. ∎
//!
//! Own derivation. Computed coverage (n from 3 to 1000, Cpk 0.2 to 3, confidence 90 to 99 %): nowhere below the
//! confidence by more than 10⁻⁹, at most 97.5 % for 95 %. For n ≥ 10 at 95 % the interval is 1 to 7 % narrower than the
//! exact conservative one and at most 2 % wider than Bissell's, from n = 100 on not 0.3 %; at n = 5 its width is 0.98 to
//! 1.03 of the conservative one's. Below Cpk = 0, where no process is centred within its limits, the risk is halved; there
//! the promise is computed, not proven. It costs 250 to 400 million cycles on an emulated Cortex-M0+ for n = 300
//! (measured): 2 to 3 s at 125 MHz, a method for the host.

use super::{Interval, noncentral_t};
use crate::estimator::{Position, Study};
use crate::quantity::{Count, DegreesOfFreedom};
use crate::special::Side;

/// The two-sided interval: a fraction of at most `risk` of such intervals misses. NaN for ν outside 1 to 10⁶.
#[must_use]
pub fn interval(estimate: f64, n: Count, nu: DegreesOfFreedom, risk: f64) -> Interval {
    let end = |side| Some(limit(estimate, n, nu, side, risk));
    Interval { low: end(Side::Lower), high: end(Side::Upper) }
}

/// One end. The c whose t_hi (for the lower end) or t_lo is the estimate, found through the risk that c's single limit
/// puts beyond it.
fn limit(estimate: f64, n: Count, nu: DegreesOfFreedom, side: Side, risk: f64) -> f64 {
    let cpk_of = |share: f64| noncentral_t::limit(estimate, n, nu, side, share * risk);
    let halved = cpk_of(0.5);
    if halved.is_nan() || halved <= 0.0 || noncentral_t::is_far(estimate, n, nu) {
        return halved;
    }
    // A lower end takes the estimate as t_hi, an upper one as t_lo.
    let excess = |share: f64| {
        let one_limit = Study { n, nu, cpk: cpk_of(share), position: Position::OneLimit };
        let (low, high) = match side {
            Side::Lower => (one_limit.quantile((1.0 - share) * risk), estimate),
            Side::Upper => (estimate, one_limit.upper_quantile((1.0 - share) * risk)),
        };
        centred_misses(&one_limit, low, high) - risk
    };
    // The end that guards against high estimates takes the greater share.
    let share = match side {
        Side::Lower => balance(excess, 0.5, 1.0, risk),
        Side::Upper => balance(|share| -excess(share), 0.0, 0.5, risk),
    };
    cpk_of(share)
}

/// The estimates outside which a true `cpk` would be missed: (t_lo, t_hi) as indices.
#[must_use]
pub fn thresholds(n: Count, nu: DegreesOfFreedom, cpk: f64, risk: f64) -> (f64, f64) {
    let one_limit = Study { n, nu, cpk, position: Position::OneLimit };
    let ends =
        |share: f64| (one_limit.quantile((1.0 - share) * risk), one_limit.upper_quantile(share * risk));
    let excess = |share: f64| {
        let (low, high) = ends(share);
        centred_misses(&one_limit, low, high) - risk
    };
    ends(balance(excess, 0.5, 1.0, risk))
}

/// The probability that the estimate from a centred process lies outside.
fn centred_misses(study: &Study, low: f64, high: f64) -> f64 {
    let centred = Study { position: Position::CENTRED, ..*study };
    centred.tails(low).lower + centred.tails(high).upper
}

/// The share between `low` and `high` at which a falling excess is zero: secants within a bracket, by the Illinois rule
/// (Dowell & Jarratt 1971). The ends themselves, a share of all or nothing, are not looked at.
fn balance(excess: impl Fn(f64) -> f64, low: f64, high: f64, risk: f64) -> f64 {
    const INNER: f64 = 1e-3;
    let (mut left, mut right) = (low.max(INNER), high.min(1.0 - INNER));
    let (mut at_left, mut at_right) = (excess(left), excess(right));
    let (mut share, mut stayed) = (left, None);
    for _ in 0..60 {
        if at_left <= 0.0 {
            return left;
        }
        if at_right >= 0.0 {
            return right;
        }
        let fraction = at_left / (at_left - at_right);
        let next = left + fraction * (right - left);
        let settled = (next - share).abs() < 1e-11;
        share = next;
        let here = excess(share);
        if settled || here.abs() < 1e-12 * risk {
            break;
        }
        // An end that stays twice is weighed down, so that the next step comes from its side.
        if here > 0.0 {
            (left, at_left) = (share, here);
            if stayed == Some(Side::Upper) {
                at_right *= 0.5;
            }
            stayed = Some(Side::Upper);
        } else {
            (right, at_right) = (share, here);
            if stayed == Some(Side::Lower) {
                at_left *= 0.5;
            }
            stayed = Some(Side::Lower);
        }
    }
    share
}
