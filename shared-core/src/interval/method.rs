//! The methods by which an interval can be computed, which index each suits, and the one way to call them.

use core::fmt;
use core::str::FromStr;

use serde::{Deserializer, Serialize, de};

use super::{
    Ends, Estimate, Interval, Kind, Tail, balanced, bissell, boyles, chi_square, exact, noncentral_t,
};
use crate::capability::{Index, IndexError, Sample};
use crate::quantity::{Confidence, Count, DegreesOfFreedom};
use crate::special::Side;

/// How an interval is computed. Variants are only ever added at the end.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, Serialize)]
#[serde(into = "u8")]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub enum Method {
    /// [`chi_square`]: Cp and Cpm.
    ChiSquare,
    /// [`noncentral_t`]: Cpl and Cpu; for Cpk each end as if one limit mattered.
    NoncentralT,
    /// [`bissell`]: Cpk, Cpl and Cpu, approximate; Cp without the term of the mean.
    Bissell,
    /// [`exact`]: Cpk.
    Exact,
    /// [`boyles`]: Cpm, approximate.
    Boyles,
    /// [`balanced`]: Cpk, two-sided.
    Balanced,
}

/// A method, or Bissell's where the stored bytes end before one.
pub(crate) fn bissell_if_left_out<'de, D: Deserializer<'de>>(deserializer: D) -> Result<Method, D::Error> {
    struct Stored;

    impl<'de> de::Visitor<'de> for Stored {
        type Value = Method;

        fn expecting(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
            f.write_str("a method, or nothing more")
        }

        fn visit_seq<A: de::SeqAccess<'de>>(self, mut stored: A) -> Result<Method, A::Error> {
            // A byte fails to be read only where the bytes end.
            let Ok(Some(code)) = stored.next_element::<u8>() else { return Ok(Method::Bissell) };
            Method::try_from(code).map_err(de::Error::custom)
        }
    }

    deserializer.deserialize_tuple(1, Stored)
}

/// What a method promises of an index.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Promise {
    /// The interval covers with exactly the confidence.
    Exact,
    /// It covers with the confidence or more.
    Conservative,
    /// It covers with about the confidence, more or less.
    Approximate,
}

impl Method {
    /// All methods, in the order in which they are listed.
    pub const ALL: [Self; 6] =
        [Self::ChiSquare, Self::NoncentralT, Self::Bissell, Self::Exact, Self::Balanced, Self::Boyles];

    /// The name as it is written.
    #[must_use]
    pub const fn name(self) -> &'static str {
        match self {
            Self::ChiSquare => "chi-square",
            Self::NoncentralT => "noncentral-t",
            Self::Bissell => "bissell",
            Self::Exact => "exact",
            Self::Boyles => "boyles",
            Self::Balanced => "balanced",
        }
    }

    /// The method that an index gets if none is named: what is exact where there is such, the guaranteed lower limit for a
    /// claim "Cpk is at least", the guaranteed upper limit, and the balanced interval for a two-sided picture of Cpk.
    #[must_use]
    pub const fn default_for(index: Index, kind: Kind) -> Self {
        match (index, kind) {
            (Index::Cp | Index::Cpm, _) => Self::ChiSquare,
            (Index::Cpl | Index::Cpu, _) | (Index::Cpk, Kind::Lower) => Self::NoncentralT,
            (Index::Cpk, Kind::Upper) => Self::Exact,
            (Index::Cpk, Kind::TwoSided) => Self::Balanced,
        }
    }

    /// The method that a plan gets if it names none, and a sample size: the same, but for a two-sided Cpk Bissell's formula,
    /// which costs a station next to nothing.
    #[must_use]
    pub const fn default_of_plan(index: Index, kind: Kind) -> Self {
        match Self::default_for(index, kind) {
            Self::Balanced => Self::Bissell,
            method => method,
        }
    }

    /// What the method promises of an index and a kind of interval; `None` if it does not suit the index.
    #[must_use]
    pub const fn promise(self, index: Index, kind: Kind) -> Option<Promise> {
        Some(match (self, index, kind) {
            (Self::ChiSquare, Index::Cp, _) | (Self::NoncentralT, Index::Cpl | Index::Cpu, _) => {
                Promise::Exact
            }
            (Self::NoncentralT, Index::Cpk, Kind::Lower)
            | (Self::Exact, Index::Cpk, _)
            | (Self::Balanced, Index::Cpk, Kind::TwoSided)
            | (Self::ChiSquare, Index::Cpm, _) => Promise::Conservative,
            (Self::Bissell, Index::Cp | Index::Cpk | Index::Cpl | Index::Cpu, _)
            | (Self::NoncentralT, Index::Cpk, _)
            | (Self::Boyles, Index::Cpm, _) => Promise::Approximate,
            _ => return None,
        })
    }
}

impl From<Method> for u8 {
    /// The code that is stored: the place among the variants.
    fn from(method: Method) -> Self {
        method as Self
    }
}

impl TryFrom<u8> for Method {
    type Error = UnknownMethod;

    fn try_from(code: u8) -> Result<Self, UnknownMethod> {
        Self::ALL.into_iter().find(|method| u8::from(*method) == code).ok_or(UnknownMethod)
    }
}

impl fmt::Display for Method {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.pad(self.name())
    }
}

/// A word that names no method.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub struct UnknownMethod;

impl fmt::Display for UnknownMethod {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str("unknown method; write chi-square, noncentral-t, bissell, exact, boyles or balanced")
    }
}

impl core::error::Error for UnknownMethod {}

impl FromStr for Method {
    type Err = UnknownMethod;

    fn from_str(text: &str) -> Result<Self, UnknownMethod> {
        Self::ALL.into_iter().find(|method| method.name().eq_ignore_ascii_case(text)).ok_or(UnknownMethod)
    }
}

/// Why a method gives no interval.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub enum MethodError {
    /// There is no estimate either.
    Index(IndexError),
    /// The method does not suit the index.
    Unsuited {
        /// The method asked for.
        method: Method,
        /// The index asked for.
        index: Index,
    },
    /// The degrees of freedom behind sigma lie outside 1 to 10⁶.
    DegreesOfFreedom,
    /// The method has no one-sided limits.
    TwoSidedOnly,
}

impl fmt::Display for MethodError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Index(error) => error.fmt(f),
            Self::Unsuited { method, index } => {
                let choose = match index {
                    Index::Cp => "chi-square or bissell",
                    Index::Cpl | Index::Cpu => "noncentral-t or bissell",
                    Index::Cpk => "balanced, exact, noncentral-t or bissell",
                    Index::Cpm => "chi-square or boyles",
                };
                write!(f, "the method {method} does not suit {index}; choose {choose}")
            }
            Self::TwoSidedOnly => {
                f.write_str("the method balanced has two-sided intervals only; for a bound choose exact or noncentral-t")
            }
            Self::DegreesOfFreedom => {
                f.write_str("sigma rests on fewer than 1 or more than a million degrees of freedom; measure more or fewer pieces")
            }
        }
    }
}

impl core::error::Error for MethodError {}

impl From<IndexError> for MethodError {
    fn from(error: IndexError) -> Self {
        Self::Index(error)
    }
}

/// An estimate and what it rests on.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Evidence {
    /// The index that was estimated.
    pub index: Index,
    /// Its estimate.
    pub estimate: f64,
    /// Pieces behind the mean, and behind τ̂ of Cpm.
    pub n: Count,
    /// Degrees of freedom behind sigma.
    pub nu: DegreesOfFreedom,
    /// δ̂², the squared distance of the mean from the target in standard deviations (with n); of Cpm only.
    pub squared_offset: f64,
}

impl Evidence {
    /// What a sample says of an index.
    ///
    /// # Errors
    /// As for [`Sample::estimate`].
    pub fn of(sample: &Sample, index: Index) -> Result<Self, IndexError> {
        Ok(Self {
            index,
            estimate: sample.estimate(index)?,
            n: sample.n(),
            nu: sample.nu(),
            squared_offset: sample.squared_offset_from_target().unwrap_or(0.0),
        })
    }
}

/// One end of an interval, with its tail beyond it.
///
/// # Errors
/// The method does not suit the index, ν lies outside 1 to 10⁶, or the limit exceeds the range of doubles.
pub fn limit(method: Method, evidence: &Evidence, side: Side, tail: &Tail) -> Result<f64, MethodError> {
    let Evidence { index, estimate, n, nu, squared_offset } = *evidence;
    if !(1.0..=1e6).contains(&nu.get()) {
        return Err(MethodError::DegreesOfFreedom);
    }
    let risk = tail.risk();
    let reach = match side {
        Side::Lower => -tail.z(),
        Side::Upper => tail.z(),
    };
    let limit = match (method, index) {
        (Method::ChiSquare, Index::Cp) => chi_square::limit(estimate, nu.get(), side, risk),
        (Method::ChiSquare, Index::Cpm) => chi_square::limit(estimate, f64::from(n.get()), side, risk),
        (Method::NoncentralT, Index::Cpk | Index::Cpl | Index::Cpu) => {
            noncentral_t::limit(estimate, n, nu, side, risk)
        }
        (Method::Bissell, Index::Cpk | Index::Cpl | Index::Cpu) => {
            estimate + reach * bissell::standard_error(estimate, n, nu)
        }
        (Method::Bissell, Index::Cp) => estimate + reach * bissell::standard_error_of_spread(estimate, nu),
        (Method::Exact, Index::Cpk) => exact::limit(estimate, n, nu, side, risk),
        (Method::Boyles, Index::Cpm) => boyles::limit(estimate, n, squared_offset, side, risk),
        (Method::Balanced, Index::Cpk) => return Err(MethodError::TwoSidedOnly),
        _ => return Err(MethodError::Unsuited { method, index }),
    };
    if limit.is_finite() { Ok(limit) } else { Err(IndexError::NotFinite.into()) }
}

/// The interval of an index by a method.
///
/// # Errors
/// As for [`limit`].
pub fn of(
    method: Method,
    evidence: &Evidence,
    confidence: Confidence,
    kind: Kind,
) -> Result<Estimate, MethodError> {
    with_ends(method, evidence, &Ends::new(confidence, kind))
}

/// The same with the ends at hand, as the station keeps them between readings.
///
/// # Errors
/// As for [`limit`].
pub fn with_ends(method: Method, evidence: &Evidence, ends: &Ends) -> Result<Estimate, MethodError> {
    let end = |side, tail: Option<Tail>| tail.map(|tail| limit(method, evidence, side, &tail)).transpose();
    let balanced = (method, evidence.index) == (Method::Balanced, Index::Cpk);
    let interval = if balanced && ends.low.is_some() && ends.high.is_some() {
        both_ends(evidence, ends.risk())?
    } else {
        Interval { low: end(Side::Lower, ends.low)?, high: end(Side::Upper, ends.high)? }
    };
    let estimate = evidence.estimate;
    let half_width = interval.half_width(estimate);
    if half_width.is_finite() {
        Ok(Estimate { estimate, interval, half_width })
    } else {
        Err(IndexError::NotFinite.into())
    }
}

/// Whether an interval reaches no further from the estimate than `reach`, 0 or more: the cheapest way to know it.
///
/// A limit by the noncentral t is found by five integrals or so, each of the probability beyond a limit that was guessed;
/// here the guess is given and one integral is enough. So a station can ask at every reading. The answer is that of
/// [`with_ends`] but for what lies within its rounding.
#[must_use]
pub fn reaches_no_further(method: Method, evidence: &Evidence, ends: &Ends, reach: f64) -> bool {
    let Evidence { index, estimate, n, nu, .. } = *evidence;
    let by_one_integral = method == Method::NoncentralT
        && matches!(index, Index::Cpk | Index::Cpl | Index::Cpu)
        && (1.0..=1e6).contains(&nu.get())
        && !noncentral_t::is_far(estimate, n, nu);
    if !by_one_integral {
        return with_ends(method, evidence, ends).is_ok_and(|found| found.half_width <= reach);
    }
    let holds = |tail: Option<Tail>, side, end| {
        tail.is_none_or(|tail| noncentral_t::beyond(estimate, n, nu, side, end) <= tail.risk())
    };
    holds(ends.low, Side::Lower, estimate - reach) && holds(ends.high, Side::Upper, estimate + reach)
}

/// The balanced interval, whose ends depend on each other.
fn both_ends(evidence: &Evidence, risk: f64) -> Result<Interval, MethodError> {
    let Evidence { estimate, n, nu, .. } = *evidence;
    if !(1.0..=1e6).contains(&nu.get()) {
        return Err(MethodError::DegreesOfFreedom);
    }
    let interval = balanced::interval(estimate, n, nu, risk);
    let finite = |end: Option<f64>| end.is_some_and(f64::is_finite);
    if finite(interval.low) && finite(interval.high) {
        Ok(interval)
    } else {
        Err(IndexError::NotFinite.into())
    }
}

#[cfg(test)]
mod tests;
