//! What the end-to-end tests share.
#![forbid(unsafe_code)]

pub mod bad_line;
pub mod budgets;
pub mod command;
pub mod emulator;
pub mod fuzz;
pub mod nist;
pub mod panics;
pub mod random;
pub mod sequences;
pub mod study;
pub mod twin;
#[cfg(unix)]
pub mod virtual_bench;
