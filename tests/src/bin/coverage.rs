//! Writes `shared-core/COVERAGE.md`: how often the interval at the end of a study holds the true index, by simulation.
//!
//! `cargo run --release -p donelight-tests --bin coverage [STUDIES]`, in the workspace's folder. The same number of
//! studies writes the same file.

use std::process::ExitCode;

use donelight::plan_file;
use donelight::simulation::{Extent, Outcome, Process, simulate};

/// Of each process. A coverage of 95 % is then known to within a standard error of 0.07 points.
const STUDIES: u32 = 100_000;
/// Beside the intervals, wherever the program is run.
const FILE: &str = concat!(env!("CARGO_MANIFEST_DIR"), "/../shared-core/COVERAGE.md");
const SEED: u64 = 1;

/// True indices, and the mean's distance from the middle in standard deviations.
const INDICES: [f64; 4] = [0.5, 1.0, 2.0, 3.0];
const OFFSETS: [f64; 3] = [0.0, 0.25, 1.0];

const KINDS: [&str; 3] = ["two-sided", "lower", "upper"];

/// Studies that end at a fixed number of pieces.
const COUNTS: [u32; 5] = [5, 10, 30, 100, 300];
/// Studies that look from the fifth piece on and end once the interval is as narrow as this: parts of the estimate, and
/// widths of the index.
const PRECISIONS: [&str; 6] = ["50%", "30%", "20%", "10%", "0.6", "0.2"];
/// Of Cpm, whose relative width does not depend on its estimate; and the simulation has no short way for it.
const FEW_PRECISIONS: [&str; 3] = ["50%", "20%", "0.6"];

/// What a default may lack of its promise, in points.
const SHORTFALL: f64 = 0.3;

const INTRODUCTION: &str = "\
How often the 95 % interval at the end of a study holds the true index, by the method that a plan takes if it names
none: of Cpk Bissell's two-sided interval, the noncentral t below, the exact distribution above; of Cpu the noncentral t, of
Cp and Cpm chi-square. Every study runs reading by reading through
the core's own code, as on the station, until its plan's rule ends it. Lowest and highest over true indices of 0.5, 1,
2 and 3, each (Cpk, Cpm) with the mean 0, 0.25 and 1 standard deviation off the middle or the target; the process is normal and
stable, the gauge so fine that rounding plays no part. A lowest value that lies, beyond two
standard errors of the simulation, more than 0.3 points below the promise is set in bold.
";

fn main() -> ExitCode {
    let studies = match std::env::args().nth(1).map(|text| text.parse()) {
        None => STUDIES,
        Some(Ok(studies)) if studies > 0 => studies,
        Some(_) => {
            eprintln!("error: the one argument is the number of studies of each process, such as {STUDIES}");
            return ExitCode::from(2);
        }
    };
    match std::fs::write(FILE, page(Extent { seed: SEED, studies })) {
        Ok(()) => ExitCode::SUCCESS,
        Err(error) => {
            eprintln!("error: {FILE} is not written: {error}");
            ExitCode::FAILURE
        }
    }
}

fn page(extent: Extent) -> String {
    let Extent { seed, studies } = extent;
    let error = 100.0 * (0.95 * 0.05 / f64::from(studies)).sqrt();
    let mut page = format!(
        "# Coverage of the intervals, by simulation\n\nWritten by `cargo run --release -p donelight-tests --bin coverage \
         {studies}` (seed {seed}); do not edit.\n\n{INTRODUCTION}\nStudies of each process: {studies}; standard error of a \
         coverage of 95 %: {error:.2} points.\n"
    );
    page.push_str("\n## Ended at a fixed number of pieces\n\n| index | kind | pieces | lowest, at | highest, at |\n|---|---|---|---|---|\n");
    for (index, kind) in questions() {
        for n in COUNTS {
            let outcomes = tried(index, kind, n, "1000%", n, extent);
            page.push_str(&format!("| {index} | {kind} | {n} | {}\n", range(&outcomes)));
        }
    }
    page.push_str(
        "\n## Ended by the precision, looked at from the fifth piece on\n\n| index | kind | precision | lowest, at | highest, at | mean pieces |\n|---|---|---|---|---|---|\n",
    );
    for (index, kind) in questions() {
        for &precision in if index == "Cpm" { &FEW_PRECISIONS[..] } else { &PRECISIONS[..] } {
            let outcomes = tried(index, kind, 5, precision, 20_000, extent);
            let pieces = outcomes.iter().map(|outcome| outcome.n().mean());
            let (least, most) = pieces.fold((f64::INFINITY, 0.0_f64), |(a, b), n| (a.min(n), b.max(n)));
            page.push_str(&format!(
                "| {index} | {kind} | {precision} | {} {least:.0} to {most:.0} |\n",
                range(&outcomes)
            ));
        }
    }
    page
}

fn questions() -> impl Iterator<Item = (&'static str, &'static str)> {
    ["Cpk", "Cpu", "Cp", "Cpm"].into_iter().flat_map(|index| KINDS.map(|kind| (index, kind)))
}

/// The plan, measured on each process.
fn tried(index: &str, kind: &str, planned: u32, precision: &str, limit: u32, extent: Extent) -> Vec<Outcome> {
    eprintln!("{index}, {kind}, from {planned} pieces on, {precision}");
    let text = plan_file::EXAMPLE
        .replace("\"0.001\"", "\"0.000001\"")
        .replace("index = \"cpk\"", &format!("index = \"{}\"", index.to_lowercase()))
        .replace("kind = \"two-sided\"", &format!("kind = \"{kind}\""))
        .replace("planned = 212", &format!("planned = {planned}"))
        .replace("precision = \"10%\"", &format!("precision = \"{precision}\""))
        .replace("limit = 240", &format!("limit = {limit}"));
    let plan = plan_file::from_text(&text).expect("the plan is valid");
    let offsets = if matches!(index, "Cpk" | "Cpm") { &OFFSETS[..] } else { &OFFSETS[..1] };
    INDICES
        .iter()
        .flat_map(|&true_index| offsets.iter().map(move |&offset| Process { true_index, offset }))
        .map(|process| simulate(&plan, process, extent, &|_| ()).expect("the process is possible"))
        .collect()
}

/// The lowest and the highest coverage, each with its process: two cells of a table.
fn range(outcomes: &[Outcome]) -> String {
    let coverage = |outcome: &&Outcome| outcome.coverage().value;
    let by_coverage = |a: &&Outcome, b: &&Outcome| coverage(a).total_cmp(&coverage(b));
    let cell = |outcome: Option<&Outcome>| {
        outcome.map_or_else(String::new, |outcome| {
            let Process { true_index, offset } = outcome.process();
            let percent = 100.0 * outcome.coverage().value;
            let error = 100.0 * outcome.coverage().standard_error;
            let mark = if percent + 2.0 * error < 95.0 - SHORTFALL { "**" } else { "" };
            format!("{mark}{percent:.2} %{mark} at {true_index}, {offset} off")
        })
    };
    format!("{} | {} |", cell(outcomes.iter().min_by(by_coverage)), cell(outcomes.iter().max_by(by_coverage)))
}
