//! How long 100 000 simulated studies of 300 pieces take, against the budget in `budgets.toml`.
//!
//! The plan looks from the second piece on, so that every reading could end its study; its precision of 8.5 % takes
//! about 300 pieces at a Cpk of 1.33.

use std::process::ExitCode;
use std::time::Instant;

use donelight::plan_file;
use donelight::simulation::{Extent, Process, simulate};
use donelight_tests::budgets;

fn main() -> ExitCode {
    let text = plan_file::EXAMPLE
        .replace("planned = 212", "planned = 2")
        .replace("precision = \"10%\"", "precision = \"8.5%\"")
        .replace("limit = 240", "limit = 400");
    let plan = plan_file::from_text(&text).expect("the plan is valid");
    let process = Process { true_index: 1.33, offset: 0.0 };
    let extent = Extent { seed: 1, studies: 100_000 };

    let begin = Instant::now();
    let outcome = simulate(&plan, process, extent, &|_| ()).expect("the process is possible");
    let took = begin.elapsed();

    let pieces = outcome.n().mean();
    assert!(pieces >= 300.0, "{pieces}");
    let cores = std::thread::available_parallelism().map_or(1, usize::from);
    println!(
        "simulation: {} studies of {pieces:.1} pieces in {took:.2?} on {cores} cores",
        outcome.studies()
    );
    budgets::at_most("host.simulation_milliseconds_max", took.as_secs_f64() * 1e3)
}
