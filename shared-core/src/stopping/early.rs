//! Deciding early: a claim about an index against another value, judged at a few looks that the plan names beforehand.
//!
//! At a look the study stops if the estimate is far enough on the claim's side (the claim is kept), or far enough on the
//! other side (it is rejected); else it goes on, and at the last look it is decided either way. Between looks nothing
//! stops. The boundaries spend the two risks over the looks (Lan & DeMets 1983); the host computes them with the
//! estimate's exact law, and the station only looks them up.
//!
//! The claim is what is rejected with a risk of at most alpha although it is true; the other value is noticed, that is,
//! the claim is rejected, with a chance of at least the power.

use core::fmt;
use core::num::NonZeroU32;
use core::str::FromStr;

use heapless::Vec;
use serde::{Deserialize, Serialize};

use super::Standing;
use crate::quantity::{Confidence, Count, Millionths};

/// At most so many looks. Beyond five or six a further one saves next to nothing.
pub const LOOKS_MAX: usize = 12;

/// How the risks are spent over the looks. Stored in plans: variants are only ever added at the end.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, Serialize, Deserialize)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub enum Spending {
    /// Next to nothing at first, most of it at the end: the last look comes hardly later than a fixed size.
    ObrienFleming,
    /// Nearly in proportion to the pieces: stops earlier on average, and the last look comes later.
    Pocock,
}

impl Spending {
    const ALL: [Self; 2] = [Self::ObrienFleming, Self::Pocock];

    /// The name as it is written: obrien-fleming, pocock.
    #[must_use]
    pub const fn name(self) -> &'static str {
        match self {
            Self::ObrienFleming => "obrien-fleming",
            Self::Pocock => "pocock",
        }
    }
}

impl fmt::Display for Spending {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.pad(self.name())
    }
}

/// A word that names no way of spending.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub struct UnknownSpending;

impl fmt::Display for UnknownSpending {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str("unknown way to spend the risks; write pocock or obrien-fleming")
    }
}

impl core::error::Error for UnknownSpending {}

impl FromStr for Spending {
    type Err = UnknownSpending;

    fn from_str(text: &str) -> Result<Self, UnknownSpending> {
        Self::ALL.into_iter().find(|one| one.name().eq_ignore_ascii_case(text)).ok_or(UnknownSpending)
    }
}

/// What is decided about the claim. That it is kept does not prove it: the study would have noticed the other value.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub enum Decision {
    /// The estimate is at the claim's boundary or beyond it.
    ClaimKept,
    /// The estimate is beyond the other boundary.
    ClaimRejected,
}

/// A boundary for the estimate: an index in whole ten-thousandths, above zero, so that the table shows what is applied.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct Boundary(NonZeroU32);

impl Boundary {
    /// `None` for 0, where no boundary can be.
    #[must_use]
    pub const fn from_ten_thousandths(value: u32) -> Option<Self> {
        match NonZeroU32::new(value) {
            Some(value) => Some(Self(value)),
            None => None,
        }
    }

    /// In ten-thousandths, at least 1.
    #[must_use]
    pub const fn ten_thousandths(self) -> u32 {
        self.0.get()
    }

    /// As a double: one division, correctly rounded.
    #[must_use]
    pub fn to_f64(self) -> f64 {
        f64::from(self.0.get()) / 1e4
    }
}

/// One look: after so many pieces, what decides.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(from = "StoredLook", into = "StoredLook")]
pub struct Look {
    /// Pieces.
    pub n: Count,
    /// The claim is kept if the estimate is here or on the claim's side of it; `None`: not at this look.
    pub keep: Option<Boundary>,
    /// The claim is rejected if the estimate is beyond this, on the other value's side; `None`: not at this look.
    pub reject: Option<Boundary>,
}

/// A look's bytes: 0 stands for no boundary.
#[derive(Serialize, Deserialize)]
struct StoredLook {
    n: Count,
    keep: u32,
    reject: u32,
}

impl From<StoredLook> for Look {
    fn from(StoredLook { n, keep, reject }: StoredLook) -> Self {
        Self { n, keep: Boundary::from_ten_thousandths(keep), reject: Boundary::from_ten_thousandths(reject) }
    }
}

impl From<Look> for StoredLook {
    fn from(look: Look) -> Self {
        let stored = |boundary: Option<Boundary>| boundary.map_or(0, Boundary::ten_thousandths);
        Self { n: look.n, keep: stored(look.keep), reject: stored(look.reject) }
    }
}

/// The question, and the table of looks that answers it.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct EarlyDecision {
    /// The index that is claimed.
    pub claim: Millionths,
    /// The index that shall be noticed.
    pub against: Millionths,
    /// The risk of rejecting a true claim, at most.
    pub alpha: Millionths,
    /// The chance of rejecting the claim if the index is `against`, at least.
    pub power: Confidence,
    /// How the risks are spent over the looks.
    pub spending: Spending,
    /// The looks, by ascending pieces.
    pub looks: Vec<Look, LOOKS_MAX>,
}

/// Why a question or its table of looks is no good.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum EarlyError {
    /// Claim and other value are equal, or one of them is zero.
    Question,
    /// Alpha is zero or above 50 %.
    Alpha,
    /// There is no look, one below two pieces, or they do not ascend.
    Order,
    /// Boundaries overlap, or the last look leaves something undecided.
    Boundaries,
}

impl EarlyDecision {
    /// Whether a low estimate speaks against the claim.
    #[must_use]
    pub fn rejects_low(&self) -> bool {
        self.against < self.claim
    }

    /// What is wrong, if anything. Whether the boundaries hold what the question promises, only the host can compute.
    ///
    /// # Errors
    /// The first thing found.
    pub fn check(&self) -> Result<(), EarlyError> {
        if self.claim == self.against || self.claim.0 == 0 || self.against.0 == 0 {
            return Err(EarlyError::Question);
        }
        if !(1..=500_000).contains(&self.alpha.0) {
            return Err(EarlyError::Alpha);
        }
        let mut before = Count::ONE;
        for look in &self.looks {
            if look.n <= before {
                return Err(EarlyError::Order);
            }
            before = look.n;
        }
        let last = self.looks.last().ok_or(EarlyError::Order)?;
        let apart = |look: &Look| match (look.keep, look.reject) {
            (Some(keep), Some(reject)) if self.rejects_low() => reject <= keep,
            (Some(keep), Some(reject)) => keep <= reject,
            _ => true,
        };
        if self.looks.iter().all(apart) && last.keep.is_some() && last.keep == last.reject {
            Ok(())
        } else {
            Err(EarlyError::Boundaries)
        }
    }

    /// The look that is due after `n` pieces: one named for exactly so many, or the last one from there on.
    #[must_use]
    pub fn look(&self, n: Count) -> Option<&Look> {
        self.looks.iter().find(|look| look.n == n).or_else(|| self.looks.last().filter(|last| n > last.n))
    }

    /// What an estimate from `n` pieces decides; `None` between looks, and at a look where it goes on.
    #[must_use]
    pub fn decide(&self, n: Count, estimate: f64) -> Option<Decision> {
        let look = self.look(n)?;
        let kept = look.keep.map(Boundary::to_f64);
        let rejected = look.reject.map(Boundary::to_f64);
        let low = self.rejects_low();
        if kept.is_some_and(|keep| if low { estimate >= keep } else { estimate <= keep }) {
            Some(Decision::ClaimKept)
        } else if rejected.is_some_and(|reject| if low { estimate < reject } else { estimate > reject }) {
            Some(Decision::ClaimRejected)
        } else {
            None
        }
    }

    /// Where a study of `n` pieces stands. `estimate` is called only at a look.
    pub(super) fn judge(&self, n: Count, estimate: impl FnOnce() -> Option<f64>) -> Standing {
        if self.look(n).is_none() {
            return Standing::Gathering;
        }
        if estimate().and_then(|estimate| self.decide(n, estimate)).is_some() {
            Standing::Settled
        } else if self.looks.last().is_some_and(|last| n >= last.n) {
            // Without an estimate nothing is decided, even at the end.
            Standing::Spent
        } else {
            Standing::Gathering
        }
    }
}

#[cfg(test)]
pub(crate) mod tests;
