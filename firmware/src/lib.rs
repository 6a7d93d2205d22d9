//! The station beside the gauge.
#![no_std]
#![forbid(unsafe_code)]
