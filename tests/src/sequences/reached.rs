//! What a sequence has led a station to, so that no test of sequences can be empty.

use std::fmt;

use donelight_core::lamps::Call;
use donelight_core::record::Seq;
use donelight_core::stopping::Standing;
use donelight_core::stopping::early::Decision;
use donelight_twin::Bench;

/// What can be reached, each with the smallest share of the sequences that must, in a thousand; 0 is one at
/// least.
pub const REACHED: [(&str, u64); 15] = [
    ("a reading that counts", 800),
    ("an estimate with its interval", 500),
    ("settled", 200),
    ("spent", 10),
    ("claim kept", 20),
    ("claim rejected", 20),
    ("held", 30),
    ("surplus", 100),
    ("a reading taken back", 200),
    ("a second study", 50),
    ("a refusal on record", 50),
    ("a reading refused just now", 100),
    ("a second boot", 300),
    ("a sector erased that held records", 0),
    ("a full journal", 0),
];

/// What one sequence has reached, in the order of [`REACHED`].
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Reached {
    reached: [bool; REACHED.len()],
    first_study: Option<Seq>,
}

impl Reached {
    /// Looks at the station.
    pub fn look(&mut self, bench: &mut Bench<'_>) {
        let call = bench.call();
        let station = bench.station();
        let study = station.study();
        let progress = study.map(|study| study.progress());
        let standing = |wanted| progress.is_some_and(|progress| progress.standing == wanted);
        let decision = study.and_then(|study| study.decision());
        let held = study.is_some_and(|study| study.held().is_some());
        let counted = progress.is_some_and(|progress| progress.n.get() > 0);
        let known = self.reached[1];
        let boots = station.boots();
        self.first_study = self.first_study.or(study.map(|study| study.began()));
        let now = [
            counted,
            known || counted && study.is_some_and(|study| study.estimate().is_some()),
            standing(Standing::Settled),
            standing(Standing::Spent),
            decision == Some(Decision::ClaimKept),
            decision == Some(Decision::ClaimRejected),
            held,
            progress.is_some_and(|progress| progress.surplus > 0),
            progress.is_some_and(|progress| progress.taken_back > 0),
            self.first_study < study.map(|study| study.began()),
            station.refused() > 0,
            matches!(call, Some(Call::Refused { .. })),
            boots > 1,
            // Before their first use: three sectors of records and one of checkpoints.
            bench.erases() > 4,
            call == Some(Call::Act) && !held,
        ];
        for (reached, now) in self.reached.iter_mut().zip(now) {
            *reached |= now;
        }
    }
}

/// How many sequences have reached what.
#[derive(Clone, Debug, Default)]
pub struct Tally {
    sequences: u64,
    steps: u64,
    reached: [u64; REACHED.len()],
}

impl Tally {
    /// Counts a sequence of so many steps.
    pub fn add(&mut self, steps: usize, reached: Reached) {
        self.sequences += 1;
        self.steps += steps as u64;
        for (count, reached) in self.reached.iter_mut().zip(reached.reached) {
            *count += u64::from(reached);
        }
    }

    /// What all these have counted.
    #[must_use]
    pub fn sum(tallies: &[Self]) -> Self {
        let mut sum = Self::default();
        for tally in tallies {
            sum.sequences += tally.sequences;
            sum.steps += tally.steps;
            for (count, more) in sum.reached.iter_mut().zip(tally.reached) {
                *count += more;
            }
        }
        sum
    }

    /// Everything was reached as often as it must; a single sequence, run again, need not.
    ///
    /// # Panics
    /// If not.
    pub fn assert_reached(&self) {
        for ((what, least), count) in REACHED.iter().zip(self.reached) {
            let enough = self.sequences == 1 || count > 0 && count * 1_000 >= least * self.sequences;
            assert!(enough, "{what}: only {count} of {} sequences", self.sequences);
        }
    }
}

impl fmt::Display for Tally {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        writeln!(f, "{} sequences of {} steps in all, of which so many reached", self.sequences, self.steps)?;
        for ((what, _), count) in REACHED.iter().zip(self.reached) {
            writeln!(f, "  {count:>9} {what}")?;
        }
        Ok(())
    }
}
