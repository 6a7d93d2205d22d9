//! Numbers that must not be mixed: pieces, degrees of freedom, confidence, goals in millionths.

use serde::{Deserialize, Serialize};

/// A number of pieces, from 0 to [`Count::MAX`].
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
#[serde(try_from = "u32", into = "u32")]
pub struct Count(u32);

impl Count {
    /// No piece yet.
    pub const ZERO: Self = Self(0);
    /// One piece.
    pub const ONE: Self = Self(1);
    /// One million pieces: with [`crate::counts::Counts`] bounded too, all sums fit their integers.
    pub const MAX: Self = Self(1_000_000);

    /// `None` above [`Count::MAX`].
    #[must_use]
    pub const fn new(n: u32) -> Option<Self> {
        if n <= Self::MAX.0 { Some(Self(n)) } else { None }
    }

    /// The plain number.
    #[must_use]
    pub const fn get(self) -> u32 {
        self.0
    }

    /// One piece more, unless that exceeds [`Count::MAX`].
    #[must_use]
    pub const fn next(self) -> Option<Self> {
        Self::new(self.0 + 1)
    }

    /// One piece fewer, unless there is none.
    #[must_use]
    pub const fn previous(self) -> Option<Self> {
        match self.0.checked_sub(1) {
            Some(n) => Some(Self(n)),
            None => None,
        }
    }
}

impl From<Count> for u32 {
    fn from(count: Count) -> Self {
        count.0
    }
}

/// A number above its type's bound, or below it.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct OutOfRange;

impl core::fmt::Display for OutOfRange {
    fn fmt(&self, f: &mut core::fmt::Formatter<'_>) -> core::fmt::Result {
        f.write_str("number out of range")
    }
}

impl core::error::Error for OutOfRange {}

impl TryFrom<u32> for Count {
    type Error = OutOfRange;

    fn try_from(n: u32) -> Result<Self, OutOfRange> {
        Self::new(n).ok_or(OutOfRange)
    }
}

/// The degrees of freedom ν behind an estimate of sigma: positive, finite, not always whole (Satterthwaite 1946).
///
/// For the overall standard deviation ν = n − 1, but nothing else may assume that.
#[derive(Clone, Copy, Debug, PartialEq, PartialOrd)]
pub struct DegreesOfFreedom(f64);

impl DegreesOfFreedom {
    /// `None` unless `nu` is finite and above 0.
    #[must_use]
    pub fn new(nu: f64) -> Option<Self> {
        (nu.is_finite() && nu > 0.0).then_some(Self(nu))
    }

    /// ν = n − 1, for the overall standard deviation; `None` below two pieces.
    #[must_use]
    pub fn overall(n: Count) -> Option<Self> {
        n.previous().and_then(|before| Self::new(f64::from(before.get())))
    }

    /// The plain number.
    #[must_use]
    pub const fn get(self) -> f64 {
        self.0
    }
}

/// A fraction or an index in whole millionths: 10 % is 100 000, an index width of 0.15 is 150 000.
///
/// Goals and levels are typed by people as short decimals; this keeps them exact on the wire and in the journal.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
pub struct Millionths(pub u32);

impl Millionths {
    /// As a double: one division, correctly rounded.
    #[must_use]
    pub fn to_f64(self) -> f64 {
        f64::from(self.0) / 1e6
    }
}

/// A confidence level: 50 % or more, below 100 %, in millionths.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
#[serde(try_from = "u32", into = "u32")]
pub struct Confidence(u32);

impl Confidence {
    /// The level that the trade takes when nothing is said (common practice, no source).
    pub const NINETY_FIVE_PERCENT: Self = Self(950_000);

    /// `None` unless 50 % ≤ level ≤ 99.9999 %.
    #[must_use]
    pub const fn from_millionths(level: u32) -> Option<Self> {
        if level >= 500_000 && level <= 999_999 { Some(Self(level)) } else { None }
    }

    /// The level in millionths.
    #[must_use]
    pub const fn millionths(self) -> u32 {
        self.0
    }

    /// The level as a fraction of one.
    #[must_use]
    pub fn to_f64(self) -> f64 {
        f64::from(self.0) / 1e6
    }

    /// The risk 1 − level, from whole millionths, so that nothing cancels.
    #[must_use]
    pub fn risk(self) -> f64 {
        f64::from(1_000_000 - self.0) / 1e6
    }
}

impl From<Confidence> for u32 {
    fn from(confidence: Confidence) -> Self {
        confidence.0
    }
}

impl TryFrom<u32> for Confidence {
    type Error = OutOfRange;

    fn try_from(level: u32) -> Result<Self, OutOfRange> {
        Self::from_millionths(level).ok_or(OutOfRange)
    }
}

/// How near the interval must come to the estimate: a goal for its half-width.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Precision {
    /// A fraction of the estimate: 10 % is 100 000 millionths.
    Relative(Millionths),
    /// A width of the index itself: 0.15 is 150 000 millionths.
    Absolute(Millionths),
}

impl Precision {
    /// The goal: a fraction or a width of the index.
    #[must_use]
    pub fn goal(self) -> f64 {
        match self {
            Self::Relative(goal) | Self::Absolute(goal) => goal.to_f64(),
        }
    }

    /// The half-width in the goal's own terms; infinite for a fraction of an estimate that is not above zero.
    #[must_use]
    pub fn achieved(self, half_width: f64, estimate: f64) -> f64 {
        match self {
            Self::Relative(_) if estimate > 0.0 => half_width / estimate,
            Self::Relative(_) => f64::INFINITY,
            Self::Absolute(_) => half_width,
        }
    }

    /// Whether the half-width reaches the goal.
    #[must_use]
    pub fn allows(self, half_width: f64, estimate: f64) -> bool {
        self.achieved(half_width, estimate) <= self.goal()
    }
}
