//! Confidence intervals of capability indices: what they are, and the one way to compute them ([`of`]). One file a method.

pub mod balanced;
pub mod bissell;
pub mod boyles;
pub mod chi_square;
pub mod coverage;
pub mod exact;
mod method;
pub mod noncentral_t;

use core::fmt;
use core::str::FromStr;

use serde::{Deserialize, Serialize};

pub use method::{
    Evidence, Method, MethodError, Promise, UnknownMethod, limit, of, reaches_no_further, with_ends,
};

pub(crate) use method::bissell_if_left_out;

use crate::quantity::Confidence;
use crate::special::normal;

/// What an interval bounds. Stored in plans: variants are only ever added at the end.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, Serialize, Deserialize)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
#[serde(rename_all = "kebab-case")]
pub enum Kind {
    /// Both ends, half of the risk beyond each.
    TwoSided,
    /// A lower bound, all the risk below it.
    Lower,
    /// An upper bound, all the risk above it.
    Upper,
}

impl Kind {
    const ALL: [Self; 3] = [Self::TwoSided, Self::Lower, Self::Upper];

    /// The risk that each end of the interval carries: half of it if there are two.
    #[must_use]
    pub fn risk_on_a_side(self, confidence: Confidence) -> f64 {
        match self {
            Self::TwoSided => confidence.risk() / 2.0,
            Self::Lower | Self::Upper => confidence.risk(),
        }
    }

    /// The name as it is written: two-sided, lower, upper.
    #[must_use]
    pub const fn name(self) -> &'static str {
        match self {
            Self::TwoSided => "two-sided",
            Self::Lower => "lower",
            Self::Upper => "upper",
        }
    }
}

impl fmt::Display for Kind {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.pad(self.name())
    }
}

/// A word that names no kind of interval.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub struct UnknownKind;

impl fmt::Display for UnknownKind {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str("unknown kind of interval; write two-sided, lower or upper")
    }
}

impl core::error::Error for UnknownKind {}

impl FromStr for Kind {
    type Err = UnknownKind;

    fn from_str(text: &str) -> Result<Self, UnknownKind> {
        Self::ALL.into_iter().find(|kind| kind.name().eq_ignore_ascii_case(text)).ok_or(UnknownKind)
    }
}

/// A confidence interval: two ends, or one.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Interval {
    /// The lower end; `None` for an upper bound.
    pub low: Option<f64>,
    /// The upper end; `None` for a lower bound.
    pub high: Option<f64>,
}

impl Interval {
    /// How far the interval reaches from the estimate: the longer side of two, or a bound's distance.
    #[must_use]
    pub fn half_width(&self, estimate: f64) -> f64 {
        let down = self.low.map(|low| estimate - low);
        let up = self.high.map(|high| high - estimate);
        match (down, up) {
            (Some(down), Some(up)) => down.max(up),
            (Some(reach), None) | (None, Some(reach)) => reach,
            (None, None) => f64::INFINITY,
        }
    }
}

/// What one end of an interval leaves beyond it: a risk, and the same as a normal quantile. Methods that approximate by the
/// normal distribution take the one, exact ones the other.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Tail {
    risk: f64,
    z: f64,
}

impl Tail {
    /// A tail of so much risk, above 0 and below 1.
    #[must_use]
    pub fn of(risk: f64) -> Self {
        Self { risk, z: normal::upper_quantile(risk) }
    }

    /// The risk.
    #[must_use]
    pub const fn risk(&self) -> f64 {
        self.risk
    }

    /// The normal quantile z that has this risk above it.
    #[must_use]
    pub const fn z(&self) -> f64 {
        self.z
    }

    /// The tail whose quantile lies further out by `shift`.
    #[must_use]
    pub fn moved_out(&self, shift: f64) -> Self {
        let z = self.z + shift;
        Self { risk: normal::upper_tail(z), z }
    }
}

/// The ends that a confidence and a kind of interval ask for, each by its tail: computed once, used at every reading.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Ends {
    /// Below the interval; `None` if it has no lower end.
    pub low: Option<Tail>,
    /// Above the interval; `None` if it has no upper end.
    pub high: Option<Tail>,
}

impl Ends {
    /// Half of the risk at each end of a two-sided interval, all of it at a bound.
    #[must_use]
    pub fn new(confidence: Confidence, kind: Kind) -> Self {
        let tail = Tail::of(kind.risk_on_a_side(confidence));
        Self { low: (kind != Kind::Upper).then_some(tail), high: (kind != Kind::Lower).then_some(tail) }
    }

    /// The risk of both together.
    fn risk(&self) -> f64 {
        self.low.map_or(0.0, |tail| tail.risk) + self.high.map_or(0.0, |tail| tail.risk)
    }
}

/// An estimate with its interval.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Estimate {
    /// The estimate of the index.
    pub estimate: f64,
    /// Its confidence interval.
    pub interval: Interval,
    /// How far the interval reaches from the estimate: see [`Interval::half_width`].
    pub half_width: f64,
}

#[cfg(test)]
mod tests;
