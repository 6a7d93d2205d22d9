//! One bench for device and host: a station's [`Recorder`](donelight_core::recorder::Recorder) over flash in memory takes a
//! sequence of [`Step`]s, and all that it does goes into a [`Digest`]. The same code compiled for the Cortex-M0 and for the
//! host must give the same digest; where one bit of a state, a figure, a lamp, an answer or the flash differs, it differs.
#![no_std]
#![forbid(unsafe_code)]

mod bench;
mod digest;
mod flash;
mod step;

pub use bench::{Bench, STATION, run};
pub use digest::Digest;
pub use flash::{Chip, Memory};
pub use step::{NoStep, SEQUENCE_MAX, Step, Steps, push};
