//! The station beside the gauge: what lies between the recorder, which decides, and a board, which is wired.
//!
//! Generic over embedded-hal, embedded-io-async and embedded-storage. `src/bin/pico.rs` is the one board so far.
#![no_std]
#![forbid(unsafe_code)]
#![allow(async_fn_in_trait, reason = "one executor, one core: no future needs to be Send")]

pub mod clock;
pub mod packets;
pub mod panel;
pub mod region;
pub mod ring;
pub mod run;
