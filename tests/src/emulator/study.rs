//! What the tests of the emulated board do with the host's own code: load a plan, ask, pull.

use std::path::Path;

use donelight::ledger::{Kept, Ledger};
use donelight::link::pull::pull;
use donelight::link::{LinkError, Session};
use donelight::plan_file;
use donelight_core::plan::Plan;
use donelight_core::record::Seq;
use donelight_core::wire::Status;

use super::Board;

/// The plan in this text.
///
/// # Panics
/// If it is none.
#[must_use]
pub fn plan(toml: &str) -> Plan {
    plan_file::from_text(toml).expect("a plan")
}

impl Board {
    /// Loads a plan over USB.
    ///
    /// # Errors
    /// The station refuses it or does not answer.
    pub fn load(&mut self, plan: &Plan) -> Result<Seq, LinkError> {
        Session::open(self)?.0.load(plan, false)
    }

    /// Asks over USB how the station stands.
    ///
    /// # Panics
    /// If it does not answer.
    #[track_caller]
    pub fn status(&mut self) -> Status {
        let (mut session, _) = Session::open(self).expect("the station answers");
        session.status().expect("the station answers")
    }

    /// Pieces that count in the present study.
    ///
    /// # Panics
    /// If there is none.
    #[track_caller]
    pub fn pieces(&mut self) -> usize {
        self.status().study.expect("a study").progress.n.get() as usize
    }

    /// Pulls all over USB into this ledger, and gives the present study as the ledger holds it.
    ///
    /// # Panics
    /// If it does not get all.
    #[track_caller]
    pub fn pull(&mut self, ledger: &Path) -> Kept {
        let mut ledger = Ledger::open(Some(ledger)).expect("a ledger");
        let (mut session, _) = Session::open(&mut *self).expect("the station answers");
        let pulled = pull(&mut session, &mut ledger, &mut |_| {}).expect("all records");
        assert_eq!((pulled.gaps, pulled.clock_refused), (Vec::new(), None));
        let began = self.status().study.expect("a study").began;
        let studies = ledger.studies().expect("the ledger reads");
        studies.into_iter().find(|kept| kept.study.began() == began).expect("the study is kept")
    }
}

/// The readings that a ledger holds of a study, in order, as the gauge would print them.
#[must_use]
pub fn readings(kept: &Kept) -> Vec<f64> {
    let step = kept.study.plan().resolution.to_f64();
    kept.readings.iter().map(|reading| reading.counts.get() as f64 * step).collect()
}

/// The ledger holds exactly these readings, each once and in this order.
///
/// # Panics
/// If not.
#[track_caller]
pub fn assert_readings(kept: &Kept, expected: &[&str]) {
    let held = readings(kept);
    let half_a_step = kept.study.plan().resolution.to_f64() / 2.0;
    assert_eq!(held.len(), expected.len());
    for (index, (held, expected)) in held.iter().zip(expected).enumerate() {
        let expected: f64 = expected.parse().expect("a number");
        assert!((held - expected).abs() < half_a_step, "reading {}: {held}, not {expected}", index + 1);
    }
}
