//! The station's state: a pure function of its records. Device and host apply the same records to the same code.
//!
//! `Empty` (no study) → `Gathering` → `Settled` or `Spent`; `Held` lies over `Gathering` while the operator must look.
//! What is measured after `Settled` or `Spent` is surplus: kept, and outside the study.

use serde::{Deserialize, Serialize};

use crate::{
    capability::Sample,
    counts::Counts,
    interval::{Estimate, Evidence},
    moments::Moments,
    plan::Plan,
    quantity::Count,
    record::{Event, Gap, Seq},
    sigma::Tally,
    stopping::{Standing, early::Decision},
};

/// Why a study waits for the operator to look.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
#[non_exhaustive]
pub enum Held {
    /// The gauge gave the same reading as often in a row as the plan calls stuck.
    GaugeStuck,
}

/// The counts of a study.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Progress {
    /// Where it stands.
    pub standing: Standing,
    /// Pieces that count.
    pub n: Count,
    /// Pieces planned.
    pub planned: Count,
    /// Pieces at most.
    pub limit: Count,
    /// Readings after the study was settled or spent.
    pub surplus: u32,
    /// Readings that the operator took back.
    pub taken_back: u32,
}

/// The latest reading that can still be taken back.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
struct Latest {
    seq: Seq,
    counts: Counts,
    surplus: bool,
}

/// One study: the plan and what came of it so far.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Study {
    began: Seq,
    plan: Plan,
    tally: Tally,
    standing: Standing,
    surplus: u32,
    taken_back: u32,
    latest: Option<Latest>,
    same_in_a_row: u8,
    held: Option<Held>,
}

impl Study {
    fn new(began: Seq, plan: Plan) -> Self {
        Self {
            began,
            tally: Tally::new(plan.sigma),
            plan,
            standing: Standing::Gathering,
            surplus: 0,
            taken_back: 0,
            latest: None,
            same_in_a_row: 0,
            held: None,
        }
    }

    /// The record that began it.
    #[must_use]
    pub fn began(&self) -> Seq {
        self.began
    }

    /// Its plan.
    #[must_use]
    pub fn plan(&self) -> &Plan {
        &self.plan
    }

    /// The sums of the pieces that count.
    #[must_use]
    pub fn moments(&self) -> &Moments {
        self.tally.moments()
    }

    /// Where it stands.
    #[must_use]
    pub fn standing(&self) -> Standing {
        self.standing
    }

    /// What the operator must look at.
    #[must_use]
    pub fn held(&self) -> Option<Held> {
        self.held
    }

    /// Its counts.
    #[must_use]
    pub fn progress(&self) -> Progress {
        Progress {
            standing: self.standing,
            n: self.moments().n(),
            planned: self.plan.rule.planned,
            limit: self.plan.rule.limit,
            surplus: self.surplus,
            taken_back: self.taken_back,
        }
    }

    /// The sample so far; `None` below two pieces or one whole subgroup, or without spread.
    #[must_use]
    pub fn sample(&self) -> Option<Sample> {
        self.tally.sample(self.plan.resolution, self.plan.specification()).ok()
    }

    /// The estimate of the plan's index and what it rests on; `None` where there is no sample yet.
    #[must_use]
    pub fn evidence(&self) -> Option<Evidence> {
        Evidence::of(&self.sample()?, self.plan.index).ok()
    }

    /// The plan's index with its interval, as of now; `None` where there is no sample yet.
    #[must_use]
    pub fn estimate(&self) -> Option<Estimate> {
        self.plan.estimate(&self.evidence()?).ok()
    }

    /// What is decided about the plan's claim; `None` if it claims nothing, or nothing is decided yet.
    #[must_use]
    pub fn decision(&self) -> Option<Decision> {
        let early = self.plan.rule.early().filter(|_| self.standing == Standing::Settled)?;
        early.decide(self.moments().n(), self.evidence()?.estimate)
    }

    /// Whether a look decides and only the operator's look at what holds the study is wanted: what is measured
    /// meanwhile is surplus, or the look would be missed.
    fn decided_though_held(&self) -> bool {
        self.held.is_some()
            && self.plan.rule.early().is_some()
            && self.plan.judge(self.moments().n(), || self.evidence()) != Standing::Gathering
    }

    fn reading(&mut self, seq: Seq, counts: Counts) {
        let surplus = self.standing != Standing::Gathering || self.decided_though_held();
        let same = self.latest.is_some_and(|latest| latest.counts == counts);
        self.latest = Some(Latest { seq, counts, surplus });
        if surplus {
            self.surplus = self.surplus.saturating_add(1);
            return;
        }
        // The recorder lets no reading through that a full study could not count.
        let _ = self.tally.add(counts);
        self.same_in_a_row = if same { self.same_in_a_row.saturating_add(1) } else { 1 };
        if self.plan.same_in_a_row != 0 && self.same_in_a_row >= self.plan.same_in_a_row {
            self.held = Some(Held::GaugeStuck);
        }
        self.judge();
    }

    fn take_back(&mut self, seq: Seq) {
        let Some(latest) = self.latest.take_if(|latest| latest.seq == seq) else { return };
        self.taken_back = self.taken_back.saturating_add(1);
        self.same_in_a_row = 0;
        if latest.surplus {
            self.surplus = self.surplus.saturating_sub(1);
        } else {
            let _ = self.tally.take_back(latest.counts);
            self.judge();
        }
    }

    fn seen(&mut self) {
        self.held = None;
        self.same_in_a_row = 0;
        if self.standing == Standing::Gathering {
            self.judge();
        }
    }

    fn judge(&mut self) {
        self.standing = match self.held {
            Some(_) => Standing::Gathering,
            None => self.plan.judge(self.moments().n(), || self.evidence()),
        };
    }
}

/// All that a station knows.
#[derive(Clone, Debug, Default, PartialEq, Eq, Serialize, Deserialize)]
pub struct Station {
    through: Option<Seq>,
    boots: u32,
    refused: u32,
    study: Option<Study>,
    gaps: u32,
    /// The gaps, the latest one last.
    lost: heapless::Vec<Gap, 4>,
    /// Nobody has seen yet that records are lost.
    lost_unseen: bool,
}

impl Station {
    /// The first byte of a stored state, another one whenever its form changes. The first form had none and began with a
    /// 0 or a 1, which no form may take again.
    const FORMAT: u8 = 3;

    /// Takes the next record. A number that is not above the last one changes nothing: repeating is harmless.
    pub fn apply(&mut self, seq: Seq, event: &Event) {
        if self.through.is_some_and(|through| seq <= through) {
            return;
        }
        self.through = Some(seq);
        match event {
            Event::Boot { boot } => self.boots = *boot,
            Event::Plan(plan) => self.study = Some(Study::new(seq, plan.clone())),
            Event::Refused { times, .. } => self.refused = self.refused.saturating_add(u32::from(*times)),
            Event::Clock { .. } => {}
            Event::Reading(counts) => {
                if let Some(study) = &mut self.study {
                    study.reading(seq, *counts);
                }
            }
            Event::TakenBack(reading) => {
                if let Some(study) = &mut self.study {
                    study.take_back(*reading);
                }
            }
            Event::Lost(gap) => self.lose(*gap),
            Event::Seen => {
                self.lost_unseen = false;
                if let Some(study) = &mut self.study {
                    study.seen();
                }
            }
        }
    }

    fn lose(&mut self, gap: Gap) {
        self.gaps = self.gaps.saturating_add(1);
        self.lost_unseen = true;
        match self.lost.as_mut_slice() {
            [first, second, third, fourth] => {
                // The oldest two together from now on, with what lies between them.
                *first = Gap { first: first.first.min(second.first), last: first.last.max(second.last) };
                (*second, *third, *fourth) = (*third, *fourth, gap);
            }
            // There is room for a fourth.
            _ => drop(self.lost.push(gap)),
        }
    }

    /// Writes the state at the front of `space` and says how much it took; `None` if it does not fit.
    #[must_use]
    pub fn store(&self, space: &mut [u8]) -> Option<usize> {
        let (format, rest) = space.split_first_mut()?;
        *format = Self::FORMAT;
        postcard::to_slice(self, rest).ok().map(|used| 1 + used.len())
    }

    /// The state that was stored; `None` if another version stored it.
    #[must_use]
    pub fn restore(stored: &[u8]) -> Option<Self> {
        let (format, rest) = stored.split_first()?;
        if *format == Self::FORMAT { postcard::from_bytes(rest).ok() } else { None }
    }

    /// The last record applied.
    #[must_use]
    pub fn through(&self) -> Option<Seq> {
        self.through
    }

    /// How often the station has started.
    #[must_use]
    pub fn boots(&self) -> u32 {
        self.boots
    }

    /// Refusals on record.
    #[must_use]
    pub fn refused(&self) -> u32 {
        self.refused
    }

    /// How often records were found that can no longer be read.
    #[must_use]
    pub fn gaps(&self) -> u32 {
        self.gaps
    }

    /// The latest of these.
    #[must_use]
    pub fn latest_lost(&self) -> Option<Gap> {
        self.lost.last().copied()
    }

    /// Whether this gap is on record; of more than four, the oldest are remembered together with what lies between them.
    #[must_use]
    pub fn knows_lost(&self, gap: Gap) -> bool {
        self.lost.iter().any(|known| known.holds(gap))
    }

    /// Whether records are lost and nobody has pressed the button since.
    #[must_use]
    pub fn calls_for_lost(&self) -> bool {
        self.lost_unseen
    }

    /// The study: the one under way, or the last one.
    #[must_use]
    pub fn study(&self) -> Option<&Study> {
        self.study.as_ref()
    }

    /// The reading that the operator can take back.
    #[must_use]
    pub fn last_reading(&self) -> Option<Seq> {
        self.study.as_ref()?.latest.map(|latest| latest.seq)
    }
}

#[cfg(test)]
mod tests;
