//! Confidence intervals of capability indices: what they are, and the one way to compute them. One file a method.

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

pub use method::{Evidence, Method, MethodError, Promise, UnknownMethod, interval as by_method, limit};

use crate::capability::{Index, IndexError, Sample};
use crate::quantity::{Confidence, Count, DegreesOfFreedom};
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

/// The normal quantile z that a confidence and a kind of interval ask for: computed once, used at every reading.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Quantile {
    z: f64,
    kind: Kind,
}

impl Quantile {
    /// z of half the risk for a two-sided interval, of the whole risk for a bound.
    #[must_use]
    pub fn new(confidence: Confidence, kind: Kind) -> Self {
        Self { z: normal::upper_quantile(kind.risk_on_a_side(confidence)), kind }
    }

    /// The plain number, 0 or more.
    #[must_use]
    pub const fn z(&self) -> f64 {
        self.z
    }

    /// The kind of interval that it is for.
    #[must_use]
    pub const fn kind(&self) -> Kind {
        self.kind
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

/// Why there is no interval.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub enum IntervalError {
    /// There is no estimate either.
    Index(IndexError),
    /// No method for this index yet.
    NoMethodYet(Index),
}

impl fmt::Display for IntervalError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Index(error) => error.fmt(f),
            Self::NoMethodYet(index) => write!(f, "no interval for {index} yet; choose cpk, cpl, cpu or cp"),
        }
    }
}

impl core::error::Error for IntervalError {}

impl From<IndexError> for IntervalError {
    fn from(error: IndexError) -> Self {
        Self::Index(error)
    }
}

/// The estimate of an index and its interval.
///
/// # Errors
/// The index needs something the specification lacks, or has no method yet.
pub fn of(
    sample: &Sample,
    index: Index,
    confidence: Confidence,
    kind: Kind,
) -> Result<Estimate, IntervalError> {
    with_quantile(sample, index, &Quantile::new(confidence, kind))
}

/// The same with the quantile at hand, as the station keeps it between readings.
///
/// # Errors
/// As for [`of`].
pub fn with_quantile(sample: &Sample, index: Index, quantile: &Quantile) -> Result<Estimate, IntervalError> {
    around(index, sample.estimate(index)?, sample.n(), sample.nu(), quantile)
}

/// The interval that an estimate from n pieces and ν degrees of freedom has: samples and sample sizes share it.
pub(crate) fn around(
    index: Index,
    estimate: f64,
    n: Count,
    nu: DegreesOfFreedom,
    quantile: &Quantile,
) -> Result<Estimate, IntervalError> {
    let interval = symmetric(estimate, standard_error(index, estimate, n, nu)?, quantile);
    let half_width = interval.half_width(estimate);
    if half_width.is_finite() {
        Ok(Estimate { estimate, interval, half_width })
    } else {
        Err(IndexError::NotFinite.into())
    }
}

/// The standard error of an index at `value`, by the method that this index has.
pub(crate) fn standard_error(
    index: Index,
    value: f64,
    n: Count,
    nu: DegreesOfFreedom,
) -> Result<f64, IntervalError> {
    match index {
        Index::Cpk | Index::Cpl | Index::Cpu => Ok(bissell::standard_error(value, n, nu)),
        Index::Cp => Ok(bissell::standard_error_of_spread(value, nu)),
        Index::Cpm => Err(IntervalError::NoMethodYet(index)),
    }
}

/// Estimate ∓ z standard errors, or the one end that the kind asks for.
fn symmetric(estimate: f64, standard_error: f64, quantile: &Quantile) -> Interval {
    let reach = quantile.z * standard_error;
    Interval {
        low: (quantile.kind != Kind::Upper).then_some(estimate - reach),
        high: (quantile.kind != Kind::Lower).then_some(estimate + reach),
    }
}

#[cfg(test)]
mod tests;
