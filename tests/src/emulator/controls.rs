//! What a person sees, presses and does to the board.

/// An output of the board.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Lamp {
    /// Enough and precise enough.
    Done = 16,
    /// The operator is wanted.
    Attention = 17,
    /// A reading was taken.
    Taken = 25,
}

/// An input of the board.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Button {
    /// Take the last reading back.
    TakeBack = 14,
    /// Seen.
    Seen = 15,
}

/// When a planned power cut happens.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Moment {
    /// Before the operation has changed anything.
    Before,
    /// After so many of its bytes; with a seed, about half of the other bits that should change have changed too.
    Inside {
        /// Whole bytes done.
        bytes: u32,
        /// Chooses the bits.
        seed: Option<u32>,
    },
    /// When it is complete, before the image knows.
    After,
}
