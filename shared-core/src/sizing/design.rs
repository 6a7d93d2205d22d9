//! What a sample size is computed for: an index, a method, and how the pieces are taken.

use super::{SizingError, search};
use crate::capability::Index;
use crate::interval::{Evidence, Kind, Method, MethodError};
use crate::quantity::{Count, DegreesOfFreedom};

/// The design of a study, before its size is known.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Design {
    index: Index,
    method: Method,
    subgroup: u32,
    squared_offset: f64,
}

impl Design {
    /// A study of an index by a method, sigma being the overall standard deviation (ν = n − 1).
    ///
    /// # Errors
    /// [`MethodError::Unsuited`] if the method does not suit the index.
    pub fn new(index: Index, method: Method) -> Result<Self, SizingError> {
        match method.promise(index, Kind::TwoSided) {
            Some(_) => Ok(Self { index, method, subgroup: 1, squared_offset: 0.0 }),
            None => Err(MethodError::Unsuited { method, index }.into()),
        }
    }

    /// The same with sigma pooled within subgroups of m pieces: n is a multiple of m, ν = n(m − 1)/m.
    ///
    /// # Errors
    /// [`SizingError::SubgroupOutOfRange`] unless m lies from 2 to 1000.
    pub fn with_subgroups_of(self, pieces: u32) -> Result<Self, SizingError> {
        if (2..=1000).contains(&pieces) {
            Ok(Self { subgroup: pieces, ..self })
        } else {
            Err(SizingError::SubgroupOutOfRange)
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

    /// The degrees of freedom that n pieces give sigma.
    ///
    /// # Errors
    /// [`SizingError::TooFew`] if they give none.
    pub fn degrees_of_freedom(&self, n: Count) -> Result<DegreesOfFreedom, SizingError> {
        let subgroups = n.get() / self.subgroup;
        let nu = match self.subgroup {
            1 => n.get().saturating_sub(1),
            pieces => subgroups * (pieces - 1),
        };
        DegreesOfFreedom::new(f64::from(nu)).ok_or(SizingError::TooFew)
    }

    /// What n pieces would say if the estimate came out at `estimate`.
    pub(super) fn evidence(&self, estimate: f64, n: Count) -> Result<Evidence, SizingError> {
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
        let pieces = |subgroups: u32| Count::new(subgroups * self.subgroup).ok_or(SizingError::AboveLimit);
        let first = if self.subgroup == 1 { 2 } else { 1 };
        let most = Count::MAX.get() / self.subgroup;
        pieces(search(first, most, |subgroups| meets(pieces(subgroups)?))?)
    }

    /// The next smaller n that this design can have.
    pub(super) fn before(&self, n: Count) -> Option<Count> {
        Count::new(n.get().checked_sub(self.subgroup)?)
    }
}
