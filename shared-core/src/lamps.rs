//! The lamps: *done* and *attention*, told apart by rhythm as well as by colour, and *taken*, which winks at each reading
//! that is safely in the journal.
//!
//! *Done* is lit steadily or dark; *attention* only ever flashes. Meanings of the colours follow IEC 60073 (from
//! memory): green for done, yellow for attention. No lamp says anything of a part or a machine.

use crate::record::Millis;

/// What each lamp does at this moment.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub struct Lamps {
    /// Enough pieces, and precise enough.
    pub done: bool,
    /// The operator is wanted.
    pub attention: bool,
    /// A reading was taken just now.
    pub taken: bool,
}

/// Why the attention lamp flashes, the most urgent first.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub enum Call {
    /// Nothing can be recorded, or the study is held: even flashes, two a second.
    Act,
    /// The gauge's line or a press was refused: five quick flashes, within a second.
    Refused {
        /// When.
        since: Millis,
    },
    /// Records can no longer be read: two short flashes every two seconds.
    Lost,
    /// The limit is reached without the precision: long flashes, one in two seconds.
    Spent,
    /// The journal will soon be full: a short flash every four seconds.
    Pull,
}

/// How long a refusal is shown.
pub const REFUSAL_SHOWN_MS: u64 = 1_000;
/// How long the taken lamp winks.
pub const TAKEN_SHOWN_MS: u64 = 120;
/// How long a station shows which one it is.
pub const BLINK_MS: u64 = 10_000;

impl Call {
    /// Whether the attention lamp is lit at `now`.
    #[must_use]
    pub fn lit(self, now: Millis) -> bool {
        let within = |period: u64, lit: u64| now.0 % period < lit;
        match self {
            Self::Act => within(500, 250),
            Self::Refused { since } => now.since(since) % 200 < 100,
            Self::Lost => within(2_000, 450) && within(300, 150),
            Self::Spent => within(2_000, 1_000),
            Self::Pull => within(4_000, 150),
        }
    }
}

/// Both lamps in turn, so that one station is found among many.
#[must_use]
pub fn blink(now: Millis) -> Lamps {
    let first = now.0 % 600 < 300;
    Lamps { done: first, attention: !first, taken: false }
}
