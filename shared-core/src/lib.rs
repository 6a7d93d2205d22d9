//! What a Donelight station and its host must agree on: exact moments of readings, capability indices and their
//! intervals, sample sizes, the sampling plan, the records, the journal, the station's state and the wire.
//!
//! No heap, no clock, no port, no file. Flash is a trait; time is an argument.
#![no_std]
#![forbid(unsafe_code)]
#![cfg_attr(
    not(test),
    deny(
        clippy::unwrap_used,
        clippy::expect_used,
        clippy::panic,
        clippy::unreachable,
        clippy::todo,
        clippy::indexing_slicing,
        clippy::cast_possible_truncation,
        clippy::cast_possible_wrap,
        clippy::cast_sign_loss
    )
)]

#[cfg(test)]
extern crate std;

pub mod capability;
pub mod chain;
pub mod counts;
pub mod estimator;
#[cfg(test)]
mod flash_model;
pub mod gauge;
pub mod interval;
pub mod journal;
pub mod lamps;
pub mod moments;
pub mod plan;
pub mod quantity;
mod ratio;
pub mod record;
pub mod recorder;
pub mod sigma;
pub mod sizing;
pub mod special;
pub mod station;
pub mod stopping;
pub mod text;
pub mod wire;
