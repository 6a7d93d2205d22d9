//! The sampling plan: what is measured, what is wanted of it, when it is enough, and how the gauge talks.
//!
//! A [`Draft`] may hold anything and names all its faults at once; a [`Plan`] is a draft without a fault, and is
//! checked again whenever it is decoded, so a station never runs on nonsense.

use serde::{Deserialize, Serialize};

use crate::{
    capability::{Index, Specification},
    counts::{Decimal, Resolution},
    interval::{self, Ends, Estimate, Evidence, Interval, Kind, Method, MethodError, bissell, chi_square},
    quantity::{Confidence, Count, DegreesOfFreedom, Precision},
    record::RECORD_MAX,
    sigma::{self, Sigma},
    special::Side,
    stopping::{Goal, Standing, StoppingRule, early::EarlyError, optional},
    text::Text,
};

/// A serial line's parity bit.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub enum Parity {
    /// No parity bit.
    None,
    /// An even number of ones.
    Even,
    /// An odd number of ones.
    Odd,
}

/// How the gauge sends its lines.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub struct LineSettings {
    /// Bits a second, 300 to 115 200.
    pub baud: u32,
    /// 7 or 8.
    pub data_bits: u8,
    /// The parity bit.
    pub parity: Parity,
    /// 1 or 2.
    pub stop_bits: u8,
}

impl Default for LineSettings {
    fn default() -> Self {
        Self { baud: 9600, data_bits: 8, parity: Parity::None, stop_bits: 1 }
    }
}

/// What a plan is made of, unchecked.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Draft {
    /// The study's name.
    pub name: Text<40>,
    /// The part that is measured; may be empty.
    pub part: Text<24>,
    /// What is measured of it; may be empty.
    pub characteristic: Text<24>,
    /// The unit's word, as the gauge may send it behind the number; may be empty.
    pub unit: Text<8>,
    /// The gauge's digital step, in the unit.
    pub resolution: Resolution,
    /// The lower specification limit, in the unit.
    pub lower: Option<Decimal>,
    /// The upper specification limit, in the unit.
    pub upper: Option<Decimal>,
    /// The target, in the unit.
    pub target: Option<Decimal>,
    /// The index that the study is about.
    pub index: Index,
    /// The confidence of its interval.
    pub confidence: Confidence,
    /// Two-sided, or a bound.
    pub kind: Kind,
    /// When it is enough.
    pub rule: StoppingRule,
    /// How the gauge sends.
    pub gauge: LineSettings,
    /// So many equal readings one after the other hold the study until someone has looked (gauge stuck?); 0: never.
    pub same_in_a_row: u8,
    /// Which standard deviation the index takes. Plans from before there was a choice end above this: overall.
    #[serde(deserialize_with = "sigma::overall_if_left_out")]
    pub sigma: Sigma,
    /// How its interval is computed. Plans from before there was a choice end above this: Bissell's.
    #[serde(deserialize_with = "interval::bissell_if_left_out")]
    pub method: Method,
}

/// One thing wrong with a draft. [`Fault::field`] names the field that has to change.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
#[non_exhaustive]
pub enum Fault {
    /// The study has no name.
    NoName,
    /// The unit is not a plain ASCII word.
    UnitNotAWord,
    /// Neither limit is given.
    NoLimit,
    /// The lower limit is not below the upper one.
    LimitsReversed,
    /// The target is not between the limits.
    TargetOutside,
    /// A limit or the target lies beyond what the resolution can count.
    LimitBeyondRange,
    /// The limits are less than one step of the resolution apart.
    ResolutionTooCoarse,
    /// The index needs a lower limit.
    IndexNeedsLower,
    /// The index needs an upper limit.
    IndexNeedsUpper,
    /// The method does not suit the index and the kind of interval.
    MethodUnsuited,
    /// Fewer than two pieces are planned.
    PlannedTooFew,
    /// More pieces are planned than the limit allows.
    PlannedAboveLimit,
    /// The method takes seconds on a station.
    MethodTooSlow,
    /// The precision is zero.
    PrecisionZero,
    /// The precision cannot be reached within the limit, whatever is measured.
    PrecisionBeyondLimit,
    /// The baud rate is not between 300 and 115 200.
    Baud,
    /// The data bits are neither 7 nor 8.
    DataBits,
    /// The stop bits are neither 1 nor 2.
    StopBits,
    /// One or two equal readings in a row are no sign of a stuck gauge.
    SameInARow,
    /// A claim that equals the value it is to be told from, or an index of zero.
    EarlyQuestion,
    /// The risk of rejecting a true claim is zero or above 50 %.
    EarlyAlpha,
    /// The looks do not ascend, or planned count and limit are not the first and the last of them.
    LooksOutOfOrder,
    /// The boundaries of a look overlap, or the last look leaves something undecided.
    LooksUndecided,
    /// The plan does not fit into a record.
    TooLong,
    /// The planned count ends within a subgroup.
    PlannedNotWhole,
    /// The limit ends within a subgroup.
    LimitNotWhole,
    /// Cpm has the overall sigma only.
    IndexNeedsOverall,
    /// A study that stops by its precision cannot have total sigma.
    SigmaTotal,
    /// A claim that is decided early has the overall sigma only.
    EarlyNeedsOverall,
}

/// The field of a plan that a fault points at.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[allow(missing_docs, reason = "the fields of Draft, described there")]
pub enum Field {
    Name,
    Unit,
    Resolution,
    Lower,
    Upper,
    Target,
    Index,
    Planned,
    Precision,
    Limit,
    Baud,
    DataBits,
    StopBits,
    SameInARow,
    Claim,
    Alpha,
    Looks,
    Sigma,
    Method,
}

impl Fault {
    /// The field that has to change.
    #[must_use]
    pub fn field(self) -> Field {
        match self {
            Self::NoName | Self::TooLong => Field::Name,
            Self::UnitNotAWord => Field::Unit,
            Self::NoLimit | Self::LimitBeyondRange | Self::IndexNeedsLower => Field::Lower,
            Self::LimitsReversed | Self::IndexNeedsUpper => Field::Upper,
            Self::TargetOutside => Field::Target,
            Self::ResolutionTooCoarse => Field::Resolution,
            Self::MethodUnsuited | Self::MethodTooSlow => Field::Method,
            Self::PlannedTooFew | Self::PlannedAboveLimit | Self::PlannedNotWhole => Field::Planned,
            Self::PrecisionZero => Field::Precision,
            Self::PrecisionBeyondLimit | Self::LimitNotWhole => Field::Limit,
            Self::Baud => Field::Baud,
            Self::DataBits => Field::DataBits,
            Self::StopBits => Field::StopBits,
            Self::SameInARow => Field::SameInARow,
            Self::EarlyQuestion => Field::Claim,
            Self::EarlyAlpha => Field::Alpha,
            Self::LooksOutOfOrder | Self::LooksUndecided => Field::Looks,
            Self::IndexNeedsOverall | Self::SigmaTotal | Self::EarlyNeedsOverall => Field::Sigma,
        }
    }
}

impl core::fmt::Display for Fault {
    fn fmt(&self, f: &mut core::fmt::Formatter<'_>) -> core::fmt::Result {
        f.write_str(match self {
            Self::NoName => "the study has no name: give it one",
            Self::UnitNotAWord => "the unit must be a plain word such as mm, without digits, signs or spaces",
            Self::NoLimit => "there is neither a lower nor an upper limit: give at least one",
            Self::LimitsReversed => "the lower limit is not below the upper one: exchange or correct them",
            Self::TargetOutside => "the target lies outside the limits: correct the one or the other",
            Self::LimitBeyondRange => {
                "a limit or the target is too large to be counted in steps of the resolution: check the unit"
            }
            Self::ResolutionTooCoarse => {
                "the limits are less than one step of the resolution apart: use a finer gauge or check the unit"
            }
            Self::IndexNeedsLower => "this index needs a lower limit: give one, or choose cpu or cpk",
            Self::IndexNeedsUpper => "this index needs an upper limit: give one, or choose cpl or cpk",
            Self::MethodUnsuited => {
                "the method does not suit this index and kind of interval: leave it out for the usual one"
            }
            Self::PlannedTooFew => "at least two pieces must be planned",
            Self::PlannedAboveLimit => "more pieces are planned than the limit allows: raise the limit",
            Self::MethodTooSlow => {
                "this method takes seconds on a station: choose bissell or exact here, and let `donelight assess` \
                 compute the balanced interval of the readings"
            }
            Self::PrecisionZero => "the precision must be above zero",
            Self::PrecisionBeyondLimit => {
                "the precision cannot be reached within the limit, whatever is measured: raise the limit or allow \
                 a wider interval"
            }
            Self::Baud => "the baud rate must be between 300 and 115200",
            Self::DataBits => "the data bits must be 7 or 8",
            Self::StopBits => "the stop bits must be 1 or 2",
            Self::SameInARow => "equal readings in a row: 0 for never, or 3 and more",
            Self::EarlyQuestion => {
                "the claim must differ from the value it is to be told from, and both must be above zero"
            }
            Self::EarlyAlpha => "alpha must be above 0 and at most 50 %; give one such as 5%",
            Self::LooksOutOfOrder => {
                "the looks must be ascending numbers of pieces, at least two at the first; planned count and limit are \
                 the first and the last of them"
            }
            Self::LooksUndecided => {
                "the looks' boundaries overlap, or the last look leaves something undecided: have `donelight plan \
                 check` compute them"
            }
            Self::TooLong => {
                "the plan is too long for a record: shorten its texts, or name fewer looks"
            }
            Self::PlannedNotWhole => {
                "the planned pieces are no whole number of subgroups: plan a multiple of their size"
            }
            Self::LimitNotWhole => {
                "the limit is no whole number of subgroups: give a multiple of their size"
            }
            Self::IndexNeedsOverall => "Cpm has the overall sigma only: choose that, or another index",
            Self::SigmaTotal => {
                "a station does not stop by total sigma: it would stop early whenever the subgroups happen to lie near \
                 together, and the interval would cover less than it promises; choose overall, pooled or ranges here \
                 and let `donelight assess` take total sigma of the readings"
            }
            Self::EarlyNeedsOverall => {
                "a claim is decided early by the overall sigma only, for which the looks' boundaries are computed: choose \
                 that, or plan a precision instead of the claim"
            }
        })
    }
}

impl core::error::Error for Fault {}

/// The longest plan in bytes: beside it a record holds its own framing (5 bytes), the event's kind, a number and a time.
const PLAN_MAX: usize = RECORD_MAX - 5 - 1 - 5 - 10;

/// At most so many faults can a draft have at once.
const FAULTS_MAX: usize = 24;

/// All the faults of a draft.
pub type Faults = heapless::Vec<Fault, FAULTS_MAX>;

impl Draft {
    /// Readings are bounded to so many units of the resolution's last decimal (see [`crate::counts`]); a limit beyond
    /// that is a mistake in the unit.
    const LAST_DECIMALS_MAX: f64 = 1e12;

    /// All that is wrong, at once; empty for a valid plan.
    #[must_use]
    pub fn faults(&self) -> Faults {
        let mut faults = Faults::new();
        let mut check = |wrong: bool, fault: Fault| {
            if wrong {
                // Each fault is checked once and there are fewer than FAULTS_MAX of them.
                let _ = faults.push(fault);
            }
        };
        check(self.name.as_str().trim().is_empty(), Fault::NoName);
        check(!self.unit.as_str().bytes().all(|b| b.is_ascii_alphabetic() || b == b'%'), Fault::UnitNotAWord);
        self.check_limits(&mut check);
        self.check_rule(&mut check);
        check(!(300..=115_200).contains(&self.gauge.baud), Fault::Baud);
        check(!matches!(self.gauge.data_bits, 7 | 8), Fault::DataBits);
        check(!matches!(self.gauge.stop_bits, 1 | 2), Fault::StopBits);
        check(matches!(self.same_in_a_row, 1 | 2), Fault::SameInARow);
        let length = postcard::experimental::serialized_size(self);
        check(length.is_ok_and(|length| length > PLAN_MAX), Fault::TooLong);
        faults
    }

    fn check_limits(&self, check: &mut impl FnMut(bool, Fault)) {
        check(self.lower.is_none() && self.upper.is_none(), Fault::NoLimit);
        if let (Some(lower), Some(upper)) = (self.lower, self.upper) {
            check(lower >= upper, Fault::LimitsReversed);
            check(
                lower < upper && upper.to_f64() - lower.to_f64() < self.resolution.to_f64(),
                Fault::ResolutionTooCoarse,
            );
        }
        if let Some(target) = self.target {
            let outside = self.lower.is_some_and(|lower| target < lower)
                || self.upper.is_some_and(|upper| target > upper);
            check(outside, Fault::TargetOutside);
        }
        let countable = |value: Option<Decimal>| value.is_none_or(|v| self.countable(v));
        check(![self.lower, self.upper, self.target].into_iter().all(countable), Fault::LimitBeyondRange);
        let some_limit = self.lower.is_some() || self.upper.is_some();
        let needs_lower = matches!(self.index, Index::Cp | Index::Cpl | Index::Cpm);
        let needs_upper = matches!(self.index, Index::Cp | Index::Cpu | Index::Cpm);
        check(some_limit && needs_lower && self.lower.is_none(), Fault::IndexNeedsLower);
        check(some_limit && needs_upper && self.upper.is_none(), Fault::IndexNeedsUpper);
        check(self.method.promise(self.index, self.kind).is_none(), Fault::MethodUnsuited);
        check(self.method == Method::Balanced, Fault::MethodTooSlow);
        check(self.index == Index::Cpm && self.sigma != Sigma::Overall, Fault::IndexNeedsOverall);
    }

    /// Whether a reading could come near `value`.
    fn countable(&self, value: Decimal) -> bool {
        let last_decimal = self.resolution.to_f64() / f64::from(self.resolution.step());
        libm::fabs(value.to_f64()) <= Self::LAST_DECIMALS_MAX * last_decimal
    }

    fn check_rule(&self, check: &mut impl FnMut(bool, Fault)) {
        let rule = &self.rule;
        match &rule.goal {
            Goal::Precision(precision) => {
                check(rule.planned.get() < 2, Fault::PlannedTooFew);
                check(rule.planned > rule.limit, Fault::PlannedAboveLimit);
                check(!self.sigma.ends_at(rule.planned), Fault::PlannedNotWhole);
                check(!self.sigma.ends_at(rule.limit), Fault::LimitNotWhole);
                check(matches!(self.sigma, Sigma::Total(_)), Fault::SigmaTotal);
                self.check_precision(*precision, check);
            }
            Goal::Decision(early) => {
                let error = early.check().err();
                let (first, last) = (early.looks.first(), early.looks.last());
                let ends = first.map(|look| look.n) == Some(rule.planned)
                    && last.map(|look| look.n) == Some(rule.limit);
                check(error == Some(EarlyError::Question), Fault::EarlyQuestion);
                check(error == Some(EarlyError::Alpha), Fault::EarlyAlpha);
                check(error == Some(EarlyError::Order) || !ends, Fault::LooksOutOfOrder);
                check(error == Some(EarlyError::Boundaries), Fault::LooksUndecided);
                check(self.sigma != Sigma::Overall, Fault::EarlyNeedsOverall);
            }
        }
    }

    fn check_precision(&self, precision: Precision, check: &mut impl FnMut(bool, Fault)) {
        check(precision.goal() == 0.0, Fault::PrecisionZero);
        if let Precision::Relative(goal) = precision {
            let narrowest = self.narrowest_relative_width();
            check(goal.0 > 0 && goal.to_f64() < narrowest, Fault::PrecisionBeyondLimit);
        }
    }

    /// No relative half-width at the limit is below this, whatever the estimate: that of sigma alone.
    fn narrowest_relative_width(&self) -> f64 {
        let nu = match self.index {
            Index::Cpm => DegreesOfFreedom::new(self.rule.limit.get().into()),
            _ => self.sigma.degrees_of_freedom(self.rule.limit),
        };
        // A limit of fewer pieces than one subgroup is a fault of its own.
        let Some(nu) = nu.filter(|nu| nu.get() >= 1.0) else { return 0.0 };
        let ends = Ends::new(self.confidence, self.kind);
        let reach = |side, tail: interval::Tail| match self.method {
            Method::Bissell => tail.z() * bissell::standard_error_of_spread(1.0, nu),
            // Boyles' has up to 2·10⁶ degrees of freedom, far from the target.
            Method::Boyles => 0.0,
            _ => libm::fabs(chi_square::limit(1.0, nu.get(), side, tail.risk()) - 1.0),
        };
        let low = ends.low.map_or(0.0, |tail| reach(Side::Lower, tail));
        let high = ends.high.map_or(0.0, |tail| reach(Side::Upper, tail));
        low.max(high)
    }
}

/// A draft without a fault.
#[derive(Clone, Debug, Serialize, Deserialize)]
#[serde(try_from = "Draft", into = "Draft")]
pub struct Plan {
    draft: Draft,
    specification: Specification,
    ends: Ends,
}

impl PartialEq for Plan {
    fn eq(&self, other: &Self) -> bool {
        self.draft == other.draft
    }
}

impl Eq for Plan {}

impl Plan {
    /// What the plan says.
    #[must_use]
    pub fn draft(&self) -> &Draft {
        &self.draft
    }

    /// The limits and the target.
    #[must_use]
    pub fn specification(&self) -> &Specification {
        &self.specification
    }

    /// The index with its interval, by the plan's method: with a precision as the goal, one that allows for the stop
    /// ([`optional`]). With a claim to be decided early it has no ends: those of a fixed size would cover less than they say,
    /// and those that allow for the looks are the host's to compute.
    ///
    /// # Errors
    /// As for [`interval::limit`].
    pub fn estimate(&self, evidence: &Evidence) -> Result<Estimate, MethodError> {
        if self.rule.early().is_some() {
            let interval = Interval { low: None, high: None };
            return Ok(Estimate { estimate: evidence.estimate, interval, half_width: f64::INFINITY });
        }
        interval::with_ends(self.method, evidence, &self.ends_at_the_stop(evidence))
    }

    fn ends_at_the_stop(&self, evidence: &Evidence) -> Ends {
        match self.rule.precision().filter(|_| self.rule.planned < self.rule.limit) {
            Some(precision) => optional::ends(precision, &self.ends, evidence),
            // The number of pieces is fixed, or a claim is decided.
            None => self.ends,
        }
    }

    /// Judges a study of `n` pieces by the rule, at whole subgroups only: see [`StoppingRule::judge`].
    pub fn judge(&self, n: Count, evidence: impl FnOnce() -> Option<Evidence>) -> Standing {
        if !self.sigma.ends_at(n) {
            return Standing::Gathering;
        }
        self.rule.judge(n, evidence, |evidence, precision| {
            let reach = match precision {
                Precision::Relative(goal) => goal.to_f64() * evidence.estimate,
                Precision::Absolute(goal) => goal.to_f64(),
            };
            // No estimate at or below zero has a relative precision.
            reach > 0.0
                && (self.method == Method::Bissell || self.is_near(evidence, precision))
                && interval::reaches_no_further(
                    self.method,
                    evidence,
                    &self.ends_at_the_stop(evidence),
                    reach,
                )
        })
    }

    /// Whether Bissell's half-width, which costs next to nothing, is at most a quarter above the goal. That is part of the
    /// rule: no other method is asked before.
    fn is_near(&self, evidence: &Evidence, precision: Precision) -> bool {
        let Evidence { index, estimate, n, nu, .. } = *evidence;
        let error = match index {
            Index::Cp | Index::Cpm => bissell::standard_error_of_spread(estimate, nu),
            Index::Cpk | Index::Cpl | Index::Cpu => bissell::standard_error(estimate, n, nu),
        };
        let z = self.ends.low.or(self.ends.high).map_or(0.0, |tail| tail.z());
        precision.achieved(z * error, estimate) <= 1.25 * precision.goal()
    }
}

impl core::ops::Deref for Plan {
    type Target = Draft;

    fn deref(&self) -> &Draft {
        &self.draft
    }
}

impl TryFrom<Draft> for Plan {
    type Error = Fault;

    fn try_from(draft: Draft) -> Result<Self, Fault> {
        if let Some(fault) = draft.faults().first() {
            return Err(*fault);
        }
        match Specification::new(draft.lower, draft.upper, draft.target) {
            Ok(specification) => {
                let ends = Ends::new(draft.confidence, draft.kind);
                Ok(Self { draft, specification, ends })
            }
            // The draft's own checks are at least as strict.
            Err(_) => Err(Fault::NoLimit),
        }
    }
}

impl From<Plan> for Draft {
    fn from(plan: Plan) -> Self {
        plan.draft
    }
}

#[cfg(test)]
pub(crate) mod tests;
