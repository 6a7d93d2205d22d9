//! Plan, load, pull, keep and report.
#![forbid(unsafe_code)]
