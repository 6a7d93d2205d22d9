//! What a sample size is computed for: an index, a method, and how the pieces are taken.

use super::{SizingError, search};
use crate::capability::Index;
use crate::interval::{Evidence, Kind, Method, MethodError};
use crate::quantity::{Count, DegreesOfFreedom};
use crate::sigma::Sigma;

/// The design of a study, before its size is known.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Design {
    index: Index,
    method: Method,
    sigma: Sigma,
    squared_offset: f64,
}

impl Design {
    /// A study of an index by a method, sigma being the overall standard deviation (ν = n − 1).
    ///
    /// # Errors
    /// [`MethodError::Unsuited`] if the method does not suit the index.
    pub fn new(index: Index, method: Method) -> Result<Self, SizingError> {
        match method.promise(index, Kind::TwoSided) {
            Some(_) => Ok(Self { index, method, sigma: Sigma::Overall, squared_offset: 0.0 }),
            None => Err(MethodError::Unsuited { method, index }.into()),
        }
    }

    /// The same with another sigma: n is of whole subgroups, ν is [`Sigma::degrees_of_freedom`].
    ///
    /// # Errors
    /// [`SizingError::SigmaTotal`], and [`SizingError::OverallOnly`] for Cpm.
    pub fn with_sigma(self, sigma: Sigma) -> Result<Self, SizingError> {
        match sigma {
            Sigma::Total(_) => Err(SizingError::SigmaTotal),
            sigma if sigma != Sigma::Overall && self.index == Index::Cpm => Err(SizingError::OverallOnly),
            sigma => Ok(Self { sigma, ..self }),
        }
    }

    /// The same with an assumed distance of the mean from the target, |μ − T|/σ; only [`Method::Boyles`] asks for it.
    ///
    /// # Errors
    /// [`SizingError::OffsetOutOfRange`] unless it lies from 0 to 100.
    pub fn with_offset(self, offset: f64) -> Result<Self, SizingError> {
        if (0.0..=100.0).contains(&offset) {
            Ok(Self { squared_offset: offset * offset, ..self })
        } else {
            Err(SizingError::OffsetOutOfRange)
        }
    }

    /// The index.
    #[must_use]
    pub const fn index(&self) -> Index {
        self.index
    }

    /// The method.
    #[must_use]
    pub const fn method(&self) -> Method {
        self.method
    }

    /// The sigma.
    #[must_use]
    pub const fn sigma(&self) -> Sigma {
        self.sigma
    }

    /// The degrees of freedom that n pieces give sigma.
    ///
    /// # Errors
    /// [`SizingError::TooFew`] if they give none.
    pub fn degrees_of_freedom(&self, n: Count) -> Result<DegreesOfFreedom, SizingError> {
        self.sigma.degrees_of_freedom(n).ok_or(SizingError::TooFew)
    }

    /// What n pieces would say if the estimate came out at `estimate`.
    ///
    /// # Errors
    /// [`SizingError::TooFew`] if they give sigma no degrees of freedom.
    pub fn evidence(&self, estimate: f64, n: Count) -> Result<Evidence, SizingError> {
        Ok(Evidence {
            index: self.index,
            estimate,
            n,
            nu: self.degrees_of_freedom(n)?,
            squared_offset: self.squared_offset,
        })
    }

    /// The smallest n that meets a demand which, once met, stays met as n grows: a multiple of the subgroup.
    pub(super) fn smallest(
        &self,
        meets: impl Fn(Count) -> Result<bool, SizingError>,
    ) -> Result<Count, SizingError> {
        let step = self.sigma.step();
        let pieces = |subgroups: u32| Count::new(subgroups * step).ok_or(SizingError::AboveLimit);
        let first = if step == 1 { 2 } else { 1 };
        let most = Count::MAX.get() / step;
        pieces(search(first, most, |subgroups| meets(pieces(subgroups)?))?)
    }

    /// The next smaller n that this design can have.
    pub(super) fn before(&self, n: Count) -> Option<Count> {
        Count::new(n.get().checked_sub(self.sigma.step())?)
    }
}
