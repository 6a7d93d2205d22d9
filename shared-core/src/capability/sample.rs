//! What the indices need of a sample: mean and sigma, each with what it rests on, and distances to the specification.

use core::fmt;

use super::{Index, Specification};
use crate::counts::Resolution;
use crate::moments::Moments;
use crate::quantity::{Count, DegreesOfFreedom};
use crate::sigma::Sigma;

/// A sample seen against a specification. The mean rests on n pieces, sigma on ν degrees of freedom.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Sample {
    n: Count,
    nu: DegreesOfFreedom,
    mean: f64,
    sigma: f64,
    source: Sigma,
    /// Mean − L.
    above_lower: Option<f64>,
    /// U − mean.
    below_upper: Option<f64>,
    /// U − L.
    width: Option<f64>,
    /// τ̂ = √((1/n) Σ(x − T)²).
    deviation_from_target: Option<f64>,
    /// Mean − T.
    above_target: Option<f64>,
}

/// Why readings or a summary give no capability yet.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub enum SampleError {
    /// Fewer than two pieces.
    TooFew,
    /// All readings alike: sigma is zero.
    NoSpread,
    /// A standard deviation below zero.
    NegativeSpread,
    /// A mean or standard deviation that is infinite or no number, or too far from the limits to compute with.
    NotFinite,
    /// No whole subgroup yet; for total sigma fewer than two.
    TooFewSubgroups,
}

impl fmt::Display for SampleError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Self::TooFew => "fewer than two readings; measure more",
            Self::NoSpread => {
                "all readings are alike; use a gauge with a finer resolution, or check that it is not stuck"
            }
            Self::NegativeSpread => "the standard deviation is below zero; correct it",
            Self::NotFinite => "mean or standard deviation is not a usable number; correct it",
            Self::TooFewSubgroups => {
                "too few whole subgroups: sigma within them needs one, total sigma two; measure more"
            }
        })
    }
}

impl core::error::Error for SampleError {}

/// Why a sample has no estimate of an index.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub enum IndexError {
    /// The index needs the lower limit.
    MissingLower,
    /// The index needs the upper limit.
    MissingUpper,
    /// The index needs the target.
    MissingTarget,
    /// The estimate exceeds the range of doubles.
    NotFinite,
    /// Cpm is made of the distances from the target, all of them: it has no other sigma than the overall one.
    OverallOnly,
}

impl fmt::Display for IndexError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Self::MissingLower => "this index needs a lower limit; give one, or choose cpu or cpk",
            Self::MissingUpper => "this index needs an upper limit; give one, or choose cpl or cpk",
            Self::MissingTarget => "this index needs a target; give one, or choose cpk",
            Self::NotFinite => {
                "the index is too large for a number; check the units of limits and standard deviation"
            }
            Self::OverallOnly => "Cpm has the overall sigma only; choose that, or another index",
        })
    }
}

impl core::error::Error for IndexError {}

impl Sample {
    /// From exact sums, sigma being the overall standard deviation: ν = n − 1. Each distance is rounded once.
    ///
    /// # Errors
    /// [`SampleError::TooFew`], [`SampleError::NoSpread`].
    pub fn from_moments(
        moments: &Moments,
        resolution: Resolution,
        specification: &Specification,
    ) -> Result<Self, SampleError> {
        let n = moments.n();
        let nu = DegreesOfFreedom::overall(n).ok_or(SampleError::TooFew)?;
        let mean = moments.mean(resolution).ok_or(SampleError::TooFew)?;
        let sigma = moments.standard_deviation(resolution).ok_or(SampleError::TooFew)?;
        if sigma <= 0.0 {
            return Err(SampleError::NoSpread);
        }
        let to = |limit| moments.distance_to(limit, resolution);
        Ok(Self {
            n,
            nu,
            mean,
            sigma,
            source: Sigma::Overall,
            above_lower: specification.lower().and_then(to).map(|distance| -distance),
            below_upper: specification.upper().and_then(to),
            width: width(specification),
            deviation_from_target: specification
                .target()
                .and_then(|target| moments.mean_square_about(target, resolution))
                .map(libm::sqrt),
            above_target: specification.target().and_then(to).map(|distance| -distance),
        })
    }

    /// From the mean and the standard deviation (with n − 1) of n pieces measured elsewhere: ν = n − 1.
    ///
    /// # Errors
    /// [`SampleError::TooFew`] below two pieces; a standard deviation that is not above zero, or numbers that are not finite.
    pub fn from_summary(
        n: Count,
        mean: f64,
        standard_deviation: f64,
        specification: &Specification,
    ) -> Result<Self, SampleError> {
        let nu = DegreesOfFreedom::overall(n).ok_or(SampleError::TooFew)?;
        if !mean.is_finite() || !standard_deviation.is_finite() {
            return Err(SampleError::NotFinite);
        }
        if standard_deviation < 0.0 {
            return Err(SampleError::NegativeSpread);
        }
        if standard_deviation == 0.0 {
            return Err(SampleError::NoSpread);
        }
        // τ̂² = (n − 1)/n · s² + (mean − T)², by hypot's exact scaling free of overflow and underflow.
        let ratio = libm::sqrt(nu.get() / f64::from(n.get()));
        let deviation_from_target = specification
            .target()
            .map(|target| libm::hypot(ratio * standard_deviation, mean - target.to_f64()));
        if deviation_from_target.is_some_and(|deviation| !deviation.is_finite()) {
            return Err(SampleError::NotFinite);
        }
        Ok(Self {
            n,
            nu,
            mean,
            sigma: standard_deviation,
            source: Sigma::Overall,
            above_lower: specification.lower().map(|lower| mean - lower.to_f64()),
            below_upper: specification.upper().map(|upper| upper.to_f64() - mean),
            width: width(specification),
            deviation_from_target,
            above_target: specification.target().map(|target| mean - target.to_f64()),
        })
    }

    /// The same sample with another estimate of sigma, its ν, and the pieces that the mean is worth beside it.
    ///
    /// # Errors
    /// A sigma that is not finite and above zero.
    pub fn with_sigma(
        self,
        source: Sigma,
        sigma: f64,
        nu: DegreesOfFreedom,
        behind_mean: Count,
    ) -> Result<Self, SampleError> {
        if !sigma.is_finite() {
            return Err(SampleError::NotFinite);
        }
        if sigma <= 0.0 {
            return Err(SampleError::NoSpread);
        }
        Ok(Self { n: behind_mean, nu, sigma, source, ..self })
    }

    /// Pieces behind the mean.
    #[must_use]
    pub const fn n(&self) -> Count {
        self.n
    }

    /// Degrees of freedom behind sigma.
    #[must_use]
    pub const fn nu(&self) -> DegreesOfFreedom {
        self.nu
    }

    /// The mean, in the unit of the readings.
    #[must_use]
    pub const fn mean(&self) -> f64 {
        self.mean
    }

    /// The estimate of sigma, in the unit of the readings; above zero.
    #[must_use]
    pub const fn sigma(&self) -> f64 {
        self.sigma
    }

    /// δ̂² = (x̄ − T)²/σ̂ₙ², with σ̂ₙ² = τ̂² − (x̄ − T)² the mean square about the mean; infinite if all spread is distance
    /// from the target. `None` without a target.
    #[must_use]
    pub fn squared_offset_from_target(&self) -> Option<f64> {
        let (deviation, offset) = self.deviation_from_target.zip(self.above_target)?;
        // As a ratio, so that nothing overflows; rounding must not make it exceed 1.
        let share = (offset / deviation) * (offset / deviation);
        Some(if share < 1.0 { share / (1.0 - share) } else { f64::INFINITY })
    }

    /// Which sigma it is.
    #[must_use]
    pub const fn source(&self) -> Sigma {
        self.source
    }

    /// The estimate of an index. Cpk and its one-sided parts are negative when the mean lies outside the limits.
    ///
    /// Cpm takes τ̂² = (1/n) Σ(x − T)² (Boyles 1991); Chan, Cheng & Spiring (1988) divide by n − 1. Both from memory.
    ///
    /// # Errors
    /// What the index needs and the specification lacks; [`IndexError::NotFinite`] for a sigma next to nothing.
    pub fn estimate(&self, index: Index) -> Result<f64, IndexError> {
        let cpl =
            || self.above_lower.map(|distance| distance / (3.0 * self.sigma)).ok_or(IndexError::MissingLower);
        let cpu =
            || self.below_upper.map(|distance| distance / (3.0 * self.sigma)).ok_or(IndexError::MissingUpper);
        let estimate = match index {
            Index::Cp => self.width()? / (6.0 * self.sigma),
            Index::Cpl => cpl()?,
            Index::Cpu => cpu()?,
            Index::Cpk => match (cpl(), cpu()) {
                (Ok(cpl), Ok(cpu)) => cpl.min(cpu),
                (Ok(cpl), Err(_)) => cpl,
                (Err(_), cpu) => cpu?,
            },
            Index::Cpm if self.source != Sigma::Overall => return Err(IndexError::OverallOnly),
            Index::Cpm => {
                self.width()? / (6.0 * self.deviation_from_target.ok_or(IndexError::MissingTarget)?)
            }
        };
        if estimate.is_finite() { Ok(estimate) } else { Err(IndexError::NotFinite) }
    }

    /// U − L, or the limit that is missing.
    fn width(&self) -> Result<f64, IndexError> {
        let missing =
            if self.above_lower.is_none() { IndexError::MissingLower } else { IndexError::MissingUpper };
        self.width.ok_or(missing)
    }
}

/// U − L, exact, then rounded once.
fn width(specification: &Specification) -> Option<f64> {
    specification.lower().zip(specification.upper()).map(|(lower, upper)| upper.minus(lower))
}
