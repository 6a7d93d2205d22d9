//! Deciding early: looks and boundaries for a claim about an index against another value, with the estimate's exact law.
//!
//! The claim is rejected with a risk of at most alpha although it is true, and with a chance of at least the power if the
//! index is the other value. At every look one boundary keeps the claim and one rejects it; each spends its risk over the
//! looks (Lan & DeMets 1983), the one under the claim, the other under the other value.
//!
//! **The worst position.** Move the mean of a process between two limits, each reading's deviation kept: the estimate of
//! Cpk at index c and at a distance ξ of the mean from the middle (in sigma) is min(3c − z, 3c + 2ξ + z)/(3s), which does
//! not fall as ξ or c grows, at all looks at once. A study whose estimates are nowhere lower leaves high no later and low
//! no earlier; so the chance to end low falls with ξ and c, and the chance to end high grows. The risk of ending low is
//! therefore largest for a process in the middle (and the smallest index that it is meant for), the risk of ending high
//! for one of which a single limit matters (and the largest). Each side's boundary is computed for its own worst case,
//! and both promises hold for every position of the mean, for every better index than the claim and every worse one than
//! the other value.
//!
//! **Error.** The law at each look is a two-dimensional integral recursion ([`estimate`], [`walk`]); what it loses or gains
//! of mass is measured in every design and told ([`Design::error`]). Boundaries are rounded to ten-thousandths to the safe
//! side, and what is told of a design is computed with the rounded ones.

mod boundaries;
mod error;
mod estimate;
mod laws;
pub mod limits;
mod quadrature;
mod spending;
mod walk;

use donelight_core::capability::Index;
use donelight_core::quantity::{Confidence, Millionths};
use donelight_core::special::normal;
use donelight_core::stopping::early::{EarlyDecision, LOOKS_MAX, Spending};

pub use error::DesignError;
use laws::Laws;

/// Between which limits the process may stand.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Limits {
    /// There is one limit, or the index looks at one only.
    One,
    /// There are two, and the mean may be anywhere between them.
    Two,
}

/// What is claimed, and what shall be told from it.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Question {
    /// The index.
    pub index: Index,
    /// The specification's limits.
    pub limits: Limits,
    /// The value that is claimed.
    pub claim: Millionths,
    /// The value that shall be noticed.
    pub against: Millionths,
    /// The risk of rejecting a true claim, at most.
    pub alpha: Millionths,
    /// The chance of rejecting the claim at the other value, at least.
    pub power: Confidence,
    /// How the risks are spent.
    pub spending: Spending,
}

/// A table of looks, and what it does.
#[derive(Clone, Debug)]
pub struct Design {
    /// The question and the table.
    pub early: EarlyDecision,
    /// The risk of rejecting a true claim, in the worst position.
    pub true_alpha: f64,
    /// The chance of rejecting the claim at the other value, in the worst position.
    pub true_power: f64,
    /// How far these two may be off by the integration.
    pub error: f64,
    /// What it does where the process stands; for Cpk with two limits in the middle and near one of them.
    pub courses: Vec<Course>,
    /// The fixed size that keeps the same promises in the worst position.
    pub fixed: u32,
}

impl Design {
    /// The part of the fixed size that is saved on average, at the value and in the place where it is least.
    #[must_use]
    pub fn saving(&self) -> f64 {
        let most = self
            .courses
            .iter()
            .flat_map(|course| [course.at_claim.expected, course.at_against.expected])
            .fold(0.0, f64::max);
        1.0 - most / f64::from(self.fixed)
    }
}

/// What a design does to a process.
#[derive(Clone, Debug)]
pub struct Course {
    /// Where it stands.
    pub place: Place,
    /// If the claim holds exactly.
    pub at_claim: Fate,
    /// If the index is the other value.
    pub at_against: Fate,
}

/// How studies end.
#[derive(Clone, Debug)]
pub struct Fate {
    /// The chance that the claim is rejected.
    pub rejected: f64,
    /// Pieces on average.
    pub expected: f64,
    /// The chance to have stopped by each look.
    pub stopped: Vec<f64>,
}

/// Where a process stands, in words that a reader needs.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Place {
    /// In the middle between the limits.
    Middle,
    /// Near one limit, or there is only one.
    NearOneLimit,
    /// It does not matter.
    Anywhere,
}

/// The risk of rejecting a true claim, if nothing is said (common practice, no source).
pub const ALPHA: Millionths = Millionths(50_000);

/// How the risks are spent, if nothing is said.
pub const SPENDING: Spending = Spending::Pocock;

/// Looks, if nothing is said.
pub const LOOKS: usize = 8;

/// Looks stand at least so many pieces apart, and the first one comes no earlier.
pub const LEAST_DISTANCE: u32 = 8;

/// The last look, at most.
pub const MOST_PIECES: u32 = 20_000;

/// The design whose looks are these.
///
/// # Errors
/// See [`DesignError`].
pub fn with_looks(question: &Question, looks: &[u32]) -> Result<Design, DesignError> {
    let laws = Laws::new(question)?;
    check_looks(looks)?;
    let table = laws.spend(looks);
    let last = looks.last().copied().unwrap_or_default();
    if let Some(row) = table.rows.last().filter(|row| row.n < last) {
        return Err(DesignError::LooksNotNeeded { enough: row.n });
    }
    laws.meets(&table)?;
    laws.design(&table)
}

/// The design with `count` equally spaced looks, the last of them as early as the promises allow.
///
/// # Errors
/// See [`DesignError`].
pub fn smallest(question: &Question, count: usize) -> Result<Design, DesignError> {
    let laws = Laws::new(question)?;
    if !(2..=LOOKS_MAX).contains(&count) {
        return Err(DesignError::LookCount);
    }
    let fixed = laws.fixed()?;
    let spaced = |last: u32| -> Result<Vec<u32>, DesignError> {
        let part = |k: usize| (f64::from(last) * k as f64 / count as f64).round() as u32;
        let looks: Vec<u32> = (1..=count).map(part).collect();
        check_looks(&looks).map_err(|error| match error {
            DesignError::LookDistance => DesignError::FixedIsSmall { fixed },
            other => other,
        })?;
        Ok(looks)
    };
    // The power's normal quantile grows about in proportion to √n: so few steps lead next to the answer.
    let z = |risk: f64| normal::upper_quantile(risk);
    let beta = question.power.risk();
    let slope = (z(question.alpha.to_f64()) + z(beta)) / f64::from(fixed).sqrt();
    let wider = match question.spending {
        Spending::ObrienFleming => 1.0 + 0.01 * count as f64,
        Spending::Pocock => 1.25 + 0.02 * count as f64,
    };
    let mut last = (f64::from(fixed) * wider) as u32;
    for _ in 0..4 {
        let reached = z(laws.left_over(&laws.spend(&spaced(last)?)).max(1e-12));
        let root = f64::from(last).sqrt() + (z(beta) - reached) / slope;
        let next = (root * root).ceil().clamp(f64::from(fixed), f64::from(fixed) * 4.0) as u32;
        if next.abs_diff(last) <= 1 {
            break;
        }
        last = next;
    }
    let meets = |last: u32| spaced(last).map(|looks| laws.meets(&laws.spend(&looks)).is_ok());
    while !meets(last)? {
        last += 1;
    }
    while meets(last - 1)? {
        last -= 1;
    }
    laws.design(&laws.spend(&spaced(last)?))
}

fn check_looks(looks: &[u32]) -> Result<(), DesignError> {
    if !(2..=LOOKS_MAX).contains(&looks.len()) {
        return Err(DesignError::LookCount);
    }
    let before = std::iter::once(0).chain(looks.iter().copied());
    if before.zip(looks).any(|(before, &n)| n < before.saturating_add(LEAST_DISTANCE)) {
        return Err(DesignError::LookDistance);
    }
    if looks.last().is_some_and(|&last| last > MOST_PIECES) {
        return Err(DesignError::TooMany);
    }
    Ok(())
}

#[cfg(test)]
mod tests;
