//! Limits by the noncentral t distribution: exact for an index with a single limit, Cpl or Cpu.
//!
//! 3√n Ĉ = (Z + 3√n C)/S is noncentral t with noncentrality 3√n C and ν degrees of freedom. The lower limit is the C with
//! which an estimate as high as this has the probability `risk`, the upper limit the C with which one as low has it
//! (Chou, Owen & Borrego 1990, Lower confidence limits on process capability indices, Journal of Quality Technology
//! 22:223–229; Owen 1968; from memory).
//!
//! Cost, each limit from a standing start, so that it is a function of the sample alone: at most 3.9 million cycles on the
//! emulated Pico for n = 5 to 300 (measured on the real image; `tests/budgets.toml`).
//!
//! For Cpk the lower limit keeps its promise at every position of the mean: see [`super::exact`].

use super::chi_square;
use crate::quantity::{Count, DegreesOfFreedom};
use crate::special::{Side, noncentral_t, normal};

/// The confidence limit on one side: a fraction `risk` lies beyond it. NaN for ν outside 1 to 10⁶.
#[must_use]
pub fn limit(estimate: f64, n: Count, nu: DegreesOfFreedom, side: Side, risk: f64) -> f64 {
    if is_far(estimate, n, nu) {
        far_limit(estimate, n, nu, side, risk)
    } else {
        counted_limit(estimate, n, nu, side, risk).0
    }
}

/// The probability of an estimate at least as far from `end` as this one, if `end` is the true index: the risk with which
/// `end` is the limit on this side.
#[must_use]
pub fn beyond(estimate: f64, n: Count, nu: DegreesOfFreedom, side: Side, end: f64) -> f64 {
    let root = 3.0 * libm::sqrt(f64::from(n.get()));
    noncentral_t::tails(root * estimate, nu.get(), root * end).on(side.other())
}

/// Whether the noncentrality exceeds 100 √ν: an index above some 33, which is a mistake in the limits or the unit rather
/// than a process. The integral would take time in proportion to it.
#[must_use]
pub fn is_far(estimate: f64, n: Count, nu: DegreesOfFreedom) -> bool {
    let noncentrality = 3.0 * libm::sqrt(f64::from(n.get())) * libm::fabs(estimate);
    noncentrality > 100.0 * libm::sqrt(nu.get())
}

/// Far out nearly all of the width comes from sigma, by chi-square; the mean's part, below 2·10⁻⁴ of the variance, is added
/// as variances are. An approximation, whose width is good to about 10⁻⁴ of itself.
fn far_limit(estimate: f64, n: Count, nu: DegreesOfFreedom, side: Side, risk: f64) -> f64 {
    // The lower end of a negative index is the upper end of its mirror image.
    let of_size = if estimate < 0.0 { side.other() } else { side };
    let size = libm::fabs(estimate);
    let of_spread = chi_square::limit(size, nu.get(), of_size, risk) - size;
    let of_mean = normal::upper_quantile(risk) / (3.0 * libm::sqrt(f64::from(n.get())));
    let reach = libm::hypot(of_spread, of_mean);
    match side {
        Side::Lower => estimate - reach,
        Side::Upper => estimate + reach,
    }
}

/// The same, and how many integrals it took: its cost on the device.
#[must_use]
pub fn counted_limit(estimate: f64, n: Count, nu: DegreesOfFreedom, side: Side, risk: f64) -> (f64, u32) {
    let root = 3.0 * libm::sqrt(f64::from(n.get()));
    // A lower limit asks how often a T this high is seen.
    let (delta, integrals) = noncentral_t::noncentrality(side.other(), risk, root * estimate, nu.get());
    (delta / root, integrals)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_limits_far_out_go_on_from_the_integrals() {
        for (n, risk) in [(2_u32, 0.05), (5, 0.025), (30, 0.001), (3_000, 0.05)] {
            let n = Count::new(n).unwrap();
            let nu = DegreesOfFreedom::overall(n).unwrap();
            for side in [Side::Lower, Side::Upper] {
                for estimate in [40.0, -40.0] {
                    assert!(is_far(estimate, n, nu));
                    let (far, near) =
                        (limit(estimate, n, nu, side, risk), counted_limit(estimate, n, nu, side, risk).0);
                    assert!(
                        (far - near).abs() < 2e-4 * (near - estimate).abs(),
                        "{n:?} {side:?} {far} {near}"
                    );
                }
            }
        }
    }

    #[test]
    fn an_index_beyond_all_reason_has_limits_at_once() {
        let n = Count::new(100).unwrap();
        let nu = DegreesOfFreedom::overall(n).unwrap();
        let low = limit(1e9, n, nu, Side::Lower, 0.05);
        assert!((low / 1e9 - 0.882_1).abs() < 1e-3, "{low}");
        assert!(limit(f64::NAN, n, nu, Side::Lower, 0.05).is_nan());
    }
}
