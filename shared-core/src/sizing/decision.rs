//! A test of a claimed index against another value, by any method: its critical value and its power at n pieces.
//!
//! The claim is rejected when the estimate lies beyond the critical value on the side of the other value. With exact
//! methods the probability of a wrong rejection is alpha; with [`Method::Exact`] it is alpha at most and the power what is
//! stated at least, wherever the mean lies: a claim "Cpk is at least c₀" is wrongly rejected most often if the process is
//! centred, and a worse one found least often if a single limit matters; the other way round for "at most".

use super::SizingError;
use super::design::Design;
use crate::capability::Index;
use crate::estimator::{Position, Study};
use crate::interval::{Method, bissell};
use crate::quantity::{Count, DegreesOfFreedom};
use crate::special::{Side, chi_square, noncentral_t, normal};

/// A test of `claim` that must find `against`, at a risk `alpha`.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Decision {
    pub(super) claim: f64,
    pub(super) against: f64,
    pub(super) alpha: f64,
}

/// What n pieces make of a test.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Outcome {
    pub(super) power: f64,
    pub(super) critical: f64,
}

impl Decision {
    /// The side of the critical value on which the claim is rejected.
    fn side(&self) -> Side {
        if self.against < self.claim { Side::Lower } else { Side::Upper }
    }

    pub(super) fn at(&self, n: Count, design: &Design) -> Result<Outcome, SizingError> {
        let nu = design.degrees_of_freedom(n)?;
        match (design.method(), design.index()) {
            (Method::Bissell, index) => Ok(self.by_bissell(n, nu, index)),
            (Method::ChiSquare, Index::Cpm) => Ok(self.by_chi_square(f64::from(n.get()))),
            (Method::ChiSquare, _) => Ok(self.by_chi_square(nu.get())),
            (Method::NoncentralT, _) => Ok(self.by_noncentral_t(n, nu.get())),
            (Method::Exact, _) => Ok(self.exactly(n, nu)),
            (method @ (Method::Boyles | Method::Balanced), index) => {
                Err(SizingError::NoTest { method, index })
            }
        }
    }

    fn by_bissell(&self, n: Count, nu: DegreesOfFreedom, index: Index) -> Outcome {
        let error = |value| match index {
            Index::Cp => bissell::standard_error_of_spread(value, nu),
            _ => bissell::standard_error(value, n, nu),
        };
        let towards = if self.side() == Side::Lower { -1.0 } else { 1.0 };
        let critical = self.claim + towards * normal::upper_quantile(self.alpha) * error(self.claim);
        Outcome { power: normal::cdf(towards * (self.against - critical) / error(self.against)), critical }
    }

    /// ν(C/Ĉ)² is chi-square: a low estimate is a high chi-square.
    fn by_chi_square(&self, nu: f64) -> Outcome {
        let side = self.side().other();
        let quantile = match side {
            Side::Lower => chi_square::quantile(self.alpha, nu),
            Side::Upper => chi_square::upper_quantile(self.alpha, nu),
        };
        let ratio = self.against / self.claim;
        Outcome {
            power: chi_square::tails(quantile * ratio * ratio, nu).on(side),
            critical: self.claim * libm::sqrt(nu / quantile),
        }
    }

    fn by_noncentral_t(&self, n: Count, nu: f64) -> Outcome {
        let root = 3.0 * libm::sqrt(f64::from(n.get()));
        let delta = root * self.claim;
        let t = match self.side() {
            Side::Lower => noncentral_t::quantile(self.alpha, nu, delta),
            Side::Upper => noncentral_t::upper_quantile(self.alpha, nu, delta),
        };
        let power = noncentral_t::tails(t, nu, root * self.against).on(self.side());
        Outcome { power, critical: t / root }
    }

    fn exactly(&self, n: Count, nu: DegreesOfFreedom) -> Outcome {
        let study = |cpk, position| Study { n, nu, cpk, position };
        let (claim_at, against_at) = match self.side() {
            Side::Lower => (Position::CENTRED, Position::OneLimit),
            Side::Upper => (Position::OneLimit, Position::CENTRED),
        };
        let claimed = study(self.claim, claim_at);
        let critical = match self.side() {
            Side::Lower => claimed.quantile(self.alpha),
            Side::Upper => claimed.upper_quantile(self.alpha),
        };
        Outcome { power: study(self.against, against_at).tails(critical).on(self.side()), critical }
    }
}

/// From the least to the most, over all positions of the mean.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Span {
    /// The least.
    pub from: f64,
    /// The most.
    pub to: f64,
}

/// What a test really does, by the exact distribution of the estimate.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Truth {
    /// The probability that the claim is rejected though it holds.
    pub size: Span,
    /// The probability that it is rejected if the index is the other value.
    pub power: Span,
}

/// The true size and power of a test that rejects `claim` when the estimate from n pieces lies beyond `critical` on the
/// side of `against`: over all positions of the mean, which are most and least at a centred mean and at a single limit.
///
/// `None` for Cpm, whose distribution depends on the distance from the target too.
///
/// # Errors
/// [`SizingError::TooFew`].
pub fn truth(
    design: &Design,
    n: Count,
    critical: f64,
    claim: f64,
    against: f64,
) -> Result<Option<Truth>, SizingError> {
    let nu = design.degrees_of_freedom(n)?;
    let side = if against < claim { Side::Lower } else { Side::Upper };
    let rejected = |cpk: f64| {
        let at = |position| Study { n, nu, cpk, position }.tails(critical).on(side);
        match design.index() {
            Index::Cpm => None,
            Index::Cp => {
                let ratio = cpk / critical;
                let probability = chi_square::tails(nu.get() * ratio * ratio, nu.get()).on(side.other());
                Some(Span { from: probability, to: probability })
            }
            Index::Cpl | Index::Cpu => {
                let probability = at(Position::OneLimit);
                Some(Span { from: probability, to: probability })
            }
            Index::Cpk => {
                let (centred, one) = (at(Position::CENTRED), at(Position::OneLimit));
                Some(Span { from: centred.min(one), to: centred.max(one) })
            }
        }
    };
    Ok(rejected(claim).zip(rejected(against)).map(|(size, power)| Truth { size, power }))
}
