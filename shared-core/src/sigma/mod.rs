//! Sigma: which standard deviation the indices take, and how many degrees of freedom it rests on.
//!
//! The overall one is that of all readings. One within subgroups tells what the process could do if it stayed where it
//! is for the length of a subgroup; the total adds what lies between the subgroups. The mean always rests on all pieces,
//! sigma within on the whole subgroups only: n and ν are apart.
//!
//! [`Tally`] keeps the exact sums; [`range`] has what turns ranges into sigma.

mod effective;
pub mod range;
mod tally;

use core::fmt;

use serde::{Deserialize, Deserializer, Serialize, de};

pub use tally::Tally;

use crate::quantity::{Count, DegreesOfFreedom};

/// How many pieces a subgroup has: 2 to 25, as far as the trade's tables of factors for ranges go.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub struct SubgroupSize(u8);

impl SubgroupSize {
    /// The fewest pieces that have a spread.
    pub const MIN: Self = Self(2);
    /// The most.
    pub const MAX: Self = Self(25);

    /// `None` unless 2 ≤ `pieces` ≤ 25.
    #[must_use]
    pub const fn new(pieces: u8) -> Option<Self> {
        if pieces >= Self::MIN.0 && pieces <= Self::MAX.0 { Some(Self(pieces)) } else { None }
    }

    /// The plain number.
    #[must_use]
    pub const fn get(self) -> u32 {
        self.0 as u32
    }
}

impl fmt::Display for SubgroupSize {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        self.0.fmt(f)
    }
}

impl core::str::FromStr for SubgroupSize {
    type Err = SigmaError;

    fn from_str(text: &str) -> Result<Self, SigmaError> {
        text.trim().parse().ok().and_then(Self::new).ok_or(SigmaError::SizeOutOfRange)
    }
}

/// Which standard deviation the indices take. Stored in plans: variants are only ever added at the end.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Hash, Serialize, Deserialize)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
#[serde(try_from = "(u8, u8)", into = "(u8, u8)")]
pub enum Sigma {
    /// s of all n readings: ν = n − 1.
    #[default]
    Overall,
    /// Within k subgroups of m pieces: the root of the mean of their variances, ν = k(m − 1).
    Pooled(SubgroupSize),
    /// Within subgroups: mean range / d2, with the ν of [`range::mean_range`].
    Ranges(SubgroupSize),
    /// For single pieces: mean moving range of neighbours / d2, with the ν of [`range::mean_moving_range`].
    MovingRanges,
    /// The root of the sum of the components of variance within and between subgroups, with the ν of Satterthwaite (1946).
    Total(SubgroupSize),
}

/// Why a word and a subgroup size are no sigma.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub enum SigmaError {
    /// The word names none.
    Unknown,
    /// A subgroup of fewer than 2 or more than 25 pieces.
    SizeOutOfRange,
    /// This sigma needs the size of the subgroups.
    NeedsSize,
    /// This sigma knows no subgroups.
    TakesNoSize,
}

impl fmt::Display for SigmaError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Self::Unknown => "unknown sigma; write overall, pooled, ranges, moving-ranges or total",
            Self::SizeOutOfRange => "a subgroup has 2 to 25 pieces; give a whole number such as 5",
            Self::NeedsSize => "this sigma needs the size of the subgroups; give one such as 5",
            Self::TakesNoSize => {
                "this sigma knows no subgroups; leave their size out, or choose pooled, ranges or total"
            }
        })
    }
}

impl core::error::Error for SigmaError {}

impl Sigma {
    /// The words, in the order in which they are listed.
    pub const WORDS: [&'static str; 5] = ["overall", "pooled", "ranges", "moving-ranges", "total"];

    /// From its word and the size of the subgroups. Without a word: pooled if there are subgroups, else overall.
    ///
    /// # Errors
    /// Each contradiction has its own [`SigmaError`].
    pub fn new(word: Option<&str>, size: Option<SubgroupSize>) -> Result<Self, SigmaError> {
        let Some(word) = word else { return Ok(size.map_or(Self::Overall, Self::Pooled)) };
        let known = Self::WORDS.into_iter().find(|known| known.eq_ignore_ascii_case(word));
        match (known, size) {
            (None, _) => Err(SigmaError::Unknown),
            (Some("overall"), None) => Ok(Self::Overall),
            (Some("moving-ranges"), None) => Ok(Self::MovingRanges),
            (Some("pooled"), Some(size)) => Ok(Self::Pooled(size)),
            (Some("ranges"), Some(size)) => Ok(Self::Ranges(size)),
            (Some("total"), Some(size)) => Ok(Self::Total(size)),
            (Some(_), Some(_)) => Err(SigmaError::TakesNoSize),
            (Some(_), None) => Err(SigmaError::NeedsSize),
        }
    }

    /// The word for it.
    #[must_use]
    pub const fn word(self) -> &'static str {
        match self {
            Self::Overall => "overall",
            Self::Pooled(_) => "pooled",
            Self::Ranges(_) => "ranges",
            Self::MovingRanges => "moving-ranges",
            Self::Total(_) => "total",
        }
    }

    /// The size of its subgroups.
    #[must_use]
    pub const fn subgroup(self) -> Option<SubgroupSize> {
        match self {
            Self::Overall | Self::MovingRanges => None,
            Self::Pooled(size) | Self::Ranges(size) | Self::Total(size) => Some(size),
        }
    }

    /// Whether it leaves out what lies between subgroups: the trade then speaks of capability (Cp, Cpk), else of
    /// performance (Pp, Ppk).
    #[must_use]
    pub const fn is_within(self) -> bool {
        matches!(self, Self::Pooled(_) | Self::Ranges(_) | Self::MovingRanges)
    }

    /// Studies with it end with a whole subgroup: at multiples of this many pieces.
    #[must_use]
    pub const fn step(self) -> u32 {
        match self.subgroup() {
            Some(size) => size.get(),
            None => 1,
        }
    }

    /// Whether n pieces are a whole number of subgroups.
    #[must_use]
    pub const fn ends_at(self, n: Count) -> bool {
        n.get().is_multiple_of(self.step())
    }

    /// The degrees of freedom that n pieces give it, an incomplete last subgroup left out; `None` if there are none.
    ///
    /// [`Sigma::Total`] gets them from the readings: between those of the subgroup means and n − 1, and this is n − 1.
    #[must_use]
    pub fn degrees_of_freedom(self, n: Count) -> Option<DegreesOfFreedom> {
        let subgroups = n.get() / self.step();
        match self {
            Self::Overall => DegreesOfFreedom::overall(n),
            Self::Pooled(size) => DegreesOfFreedom::new(f64::from(subgroups * (size.get() - 1))),
            Self::Ranges(size) => range::mean_range(size, Count::new(subgroups)?),
            Self::MovingRanges => range::mean_moving_range(n.previous()?),
            Self::Total(_) if subgroups < 2 => None,
            Self::Total(size) => DegreesOfFreedom::overall(Count::new(subgroups * size.get())?),
        }
    }
}

impl From<Sigma> for (u8, u8) {
    fn from(sigma: Sigma) -> Self {
        match sigma {
            Sigma::Overall => (0, 0),
            Sigma::Pooled(SubgroupSize(size)) => (1, size),
            Sigma::Ranges(SubgroupSize(size)) => (2, size),
            Sigma::MovingRanges => (3, 0),
            Sigma::Total(SubgroupSize(size)) => (4, size),
        }
    }
}

impl TryFrom<(u8, u8)> for Sigma {
    type Error = SigmaError;

    fn try_from((code, size): (u8, u8)) -> Result<Self, SigmaError> {
        let word = Self::WORDS.get(usize::from(code)).copied().ok_or(SigmaError::Unknown)?;
        let size = match size {
            0 => None,
            size => Some(SubgroupSize::new(size).ok_or(SigmaError::SizeOutOfRange)?),
        };
        Self::new(Some(word), size)
    }
}

/// Reads the sigma at the end of a plan. Plans from before there was a choice end where it would stand: overall.
pub(crate) fn overall_if_left_out<'de, D: Deserializer<'de>>(deserializer: D) -> Result<Sigma, D::Error> {
    struct Stored;

    impl<'de> de::Visitor<'de> for Stored {
        type Value = Sigma;

        fn expecting(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
            f.write_str("a code and a subgroup size, or nothing more")
        }

        fn visit_seq<A: de::SeqAccess<'de>>(self, mut stored: A) -> Result<Sigma, A::Error> {
            // A byte fails to be read only where the bytes end.
            let Ok(Some(code)) = stored.next_element::<u8>() else { return Ok(Sigma::Overall) };
            let size = stored.next_element::<u8>()?.unwrap_or_default();
            Sigma::try_from((code, size)).map_err(de::Error::custom)
        }
    }

    deserializer.deserialize_tuple(2, Stored)
}

#[cfg(test)]
mod tests;
