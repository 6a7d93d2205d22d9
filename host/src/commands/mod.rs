//! One module a command. Each takes its options and gives an [`Answer`] or a [`Failure`].

mod assess;
mod demo;
mod ledger;
mod plan;
mod report;
mod size;
mod station;
mod virtual_station;

use crate::cli::Command;
use crate::output::{Answer, Console, Failure};

/// Does what the command line says.
///
/// # Errors
/// What the command could not do, with what to do about it.
pub fn run(command: Command, console: &mut Console) -> Result<Answer, Failure> {
    match command {
        Command::Size(size) => size::run(&size),
        Command::Plan(plan) => plan::run(&plan, console),
        Command::Station(station) => station::run(&station, console),
        Command::Ledger(options) => ledger::run(&options),
        Command::Virtual(options) => virtual_station::run(&options, console),
        Command::Assess(options) => assess::run(&options),
        Command::Report(options) => report::run(&options),
        Command::Demo(options) => demo::run(&options, console),
    }
}
