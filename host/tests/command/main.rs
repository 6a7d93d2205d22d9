//! The built command, run as a script or a person runs it: its answers, errors and exit codes.

mod assess;
mod demo;
mod driver;
mod output;
mod plan;
mod report;
mod size;
