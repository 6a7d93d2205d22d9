//! What stopping by precision does to an interval, and the end that makes up for it.
//!
//! A study that stops once n ≥ a·g(Ĉ) stops where the estimate helps it to. Be z = √n(Ĉ − C)/σ at the stop and S the sum
//! of the n influences on Ĉ, σ² the variance of one: E S = 0 whatever the rule (Wald 1944), and n ≈ a·g(C) + (g′/g)·S, so
//! to first order 1/√n moves with S and
//!
//! ```text
//! E z = −½ (g′/g) σ/√n,   the variance and the skewness of z being those of a fixed n
//! ```
//!
//! (the skewness that S gains is what 1/√n takes away; compare Woodroofe 1982, Nonlinear Renewal Theory in Sequential
//! Analysis; from memory, the form for indices is our own). So the end towards which z is shifted is computed with a normal
//! quantile that lies further out by as much. With se² = of mean + of spread = 1/(9n) + Ĉ²/(2ν):
//!
//! - a relative width has g = 1/(9C²) + ½: it stops early where the estimate is high, and the lower end needs
//!   (of mean/se²)·se/Ĉ;
//! - an absolute width has g = 1/9 + C²/2: it stops early where the estimate is low, and the upper end needs
//!   (of spread/se²)·se/Ĉ.
//!
//! A relative two-sided interval loses below what it gains above and is left as it is. How often the intervals then cover
//! the true index is in `COVERAGE.md`.

use crate::{
    capability::Index,
    interval::{Ends, Evidence, Tail, bissell},
    quantity::Precision,
};

/// The ends of an interval at the end of a study that stops once the interval is as narrow as `precision`.
#[must_use]
pub fn ends(precision: Precision, ends: &Ends, evidence: &Evidence) -> Ends {
    match (precision, ends.low, ends.high) {
        (Precision::Relative(goal), Some(low), None) => {
            // At the stop, se/Ĉ is about the goal/z; before it and around zero the shift shall not grow beyond that.
            let reached = if low.z() > 0.0 { goal.to_f64() / low.z() } else { 0.0 };
            let shift = (1.0 - of_spread(evidence)) * relative_error(evidence).min(reached);
            Ends { low: Some(low.moved_out(shift)), high: None }
        }
        (Precision::Absolute(_), low, Some(high)) => {
            let shift = of_spread(evidence) * relative_error(evidence);
            Ends { low, high: Some(moved_up(high, shift)) }
        }
        _ => *ends,
    }
}

fn moved_up(high: Tail, shift: f64) -> Tail {
    if shift.is_finite() { high.moved_out(shift) } else { high }
}

/// se/Ĉ; infinite for an estimate that is not above zero.
fn relative_error(evidence: &Evidence) -> f64 {
    if evidence.estimate > 0.0 { standard_error(evidence) / evidence.estimate } else { f64::INFINITY }
}

/// The share of the variance that comes from sigma; Cp and Cpm have no other.
fn of_spread(evidence: &Evidence) -> f64 {
    let (error, spread) = (standard_error(evidence), error_of_spread(evidence));
    if error > 0.0 { (spread / error) * (spread / error) } else { 0.0 }
}

fn standard_error(evidence: &Evidence) -> f64 {
    match evidence.index {
        Index::Cp | Index::Cpm => error_of_spread(evidence),
        Index::Cpk | Index::Cpl | Index::Cpu => {
            bissell::standard_error(evidence.estimate, evidence.n, evidence.nu)
        }
    }
}

fn error_of_spread(evidence: &Evidence) -> f64 {
    bissell::standard_error_of_spread(evidence.estimate, evidence.nu)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::interval::Kind;
    use crate::quantity::{Confidence, Count, DegreesOfFreedom, Millionths};

    const TENTH: Millionths = Millionths(100_000);

    fn evidence(index: Index, estimate: f64) -> Evidence {
        let n = Count::new(101).unwrap();
        Evidence { index, estimate, n, nu: DegreesOfFreedom::overall(n).unwrap(), squared_offset: 0.0 }
    }

    fn of(kind: Kind) -> Ends {
        Ends::new(Confidence::NINETY_FIVE_PERCENT, kind)
    }

    /// By hand at n = 101 and Ĉ = 1: of mean 1/909, of spread 1/200, so se = 0.078103, a share of the mean of 0.180342, and
    /// 0.180342 · 0.078103 = 0.014085. At a goal of 10 % se/Ĉ counts as 0.1/1.644854 only: 0.010964.
    #[test]
    fn the_lower_end_of_a_relative_stop_lies_further_out_by_half_of_what_the_rule_turns_on() {
        for (goal, expected) in [(Millionths(200_000), 0.014_085), (TENTH, 0.010_964)] {
            let moved = ends(Precision::Relative(goal), &of(Kind::Lower), &evidence(Index::Cpk, 1.0));
            let shift = moved.low.unwrap().z() - of(Kind::Lower).low.unwrap().z();
            assert!((shift - expected).abs() < 1e-6, "{shift}");
            assert_eq!(moved.high, None);
            assert!(moved.low.unwrap().risk() < 0.05);
        }
    }

    #[test]
    fn the_upper_end_of_an_absolute_stop_lies_further_out_and_the_lower_one_stays() {
        let before = of(Kind::TwoSided);
        let moved = ends(Precision::Absolute(TENTH), &before, &evidence(Index::Cpk, 1.0));
        assert_eq!(moved.low, before.low);
        let shift = moved.high.unwrap().z() - before.high.unwrap().z();
        assert!((shift - (1.0 - 0.180_342) * 0.078_103).abs() < 1e-6, "{shift}");
        assert_eq!(
            ends(Precision::Absolute(TENTH), &of(Kind::Lower), &evidence(Index::Cpk, 1.0)),
            of(Kind::Lower)
        );
    }

    #[test]
    fn where_the_estimate_does_not_move_the_stop_nothing_moves() {
        for index in [Index::Cp, Index::Cpm] {
            assert_eq!(
                ends(Precision::Relative(TENTH), &of(Kind::Lower), &evidence(index, 1.0)),
                of(Kind::Lower)
            );
        }
        for kind in [Kind::TwoSided, Kind::Upper] {
            assert_eq!(ends(Precision::Relative(TENTH), &of(kind), &evidence(Index::Cpk, 1.0)), of(kind));
        }
    }

    #[test]
    fn an_estimate_around_zero_moves_no_end_without_bound() {
        for estimate in [-1.0, -1e-300, 0.0, 1e-300, 1e-3] {
            for (precision, kind) in
                [(Precision::Relative(TENTH), Kind::Lower), (Precision::Absolute(TENTH), Kind::Upper)]
            {
                let moved = ends(precision, &of(kind), &evidence(Index::Cpk, estimate));
                let shift = moved.low.or(moved.high).unwrap().z() - 1.644_853_6;
                assert!((-1e-6..0.11).contains(&shift), "{estimate} {shift}");
            }
        }
    }
}
