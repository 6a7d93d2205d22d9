//! The command `donelight` and its parts: plan a capability study, load it to a station, pull the station's log, keep
//! it and report it.
//!
//! Whatever device and host must agree on, and every statistic, is in `donelight_core`; this crate reads files, talks
//! to ports and formats.
#![forbid(unsafe_code)]

pub mod cli;
pub mod commands;
pub mod design;
pub mod files;
pub mod ledger;
pub mod level;
pub mod link;
pub mod output;
pub mod plan_file;
pub mod readings;
pub mod report;
pub mod simulation;
pub mod virtual_station;

use std::ffi::OsString;
use std::process::ExitCode;

use clap::Parser;

/// Reads the command line, does what it says and answers on stdout and stderr.
pub fn run(arguments: impl Iterator<Item = OsString>) -> ExitCode {
    let arguments: Vec<OsString> = arguments.collect();
    match cli::Cli::try_parse_from(&arguments) {
        Ok(cli) => {
            let mut console = output::Console::new(cli.json);
            let result = commands::run(cli.command, &mut console);
            console.finish(result)
        }
        Err(usage) => {
            let json = arguments.iter().skip(1).any(|argument| argument == "--json");
            output::Console::new(json).finish_usage(&usage)
        }
    }
}
