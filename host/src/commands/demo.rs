//! `donelight demo`: the whole job with nothing attached, in a made-up workshop. Plan, station, link, ledger and report
//! are the real ones; the pieces are simulated, and time is shortened.

mod bench;
mod folder;
mod show;

use donelight_core::plan::Plan;
use donelight_core::stopping::Standing;
use serde_json::{Value, json};

use self::bench::{Bench, PIECE_MS, STATION};
use self::folder::Files;
use self::show::Show;
use super::report;
use crate::cli;
use crate::files;
use crate::ledger::{Kept, Ledger, UnixMillis};
use crate::link::{LinkError, Session, pull};
use crate::output::{Answer, Console, Exit, Failure};
use crate::plan_file;
use crate::report::{analysis, page, words};

/// The plan that the demo writes and runs by.
const PLAN: &str = include_str!("demo/plan.toml");

/// After so many pieces the gauge's line is disturbed.
const DISTURBED_AFTER: u32 = 60;
/// After so many pieces the power fails.
const CUT_AFTER: u32 = 120;

/// Runs the demo.
///
/// # Errors
/// Its files cannot be written where they are to go; anything else is a fault of this program, and is told as such.
pub(super) fn run(options: &cli::Demo, console: &mut Console) -> Result<Answer, Failure> {
    let files = Files::prepare(options.out.as_deref(), PLAN)?;
    files::write(&files.plan, PLAN.as_bytes())?;
    let plan = plan_file::read(&files.plan)?;
    let mut show = Show::new(console);
    introduce(&mut show, &files, &plan);

    // So that the study ends about now on the bench's clock, which runs ahead.
    let length = u64::from(plan.rule.limit.get()) * PIECE_MS;
    let mut bench = Bench::start(UnixMillis(UnixMillis::now().0.saturating_sub_unsigned(length)))?;
    set_clock(&mut bench)?;
    let (mut session, _) = Session::open(&mut bench.link)?;
    session.load(&plan, false)?;
    let (bench, cut) = measure(bench, &plan, &mut show)?;
    keep_and_report(bench, &cut, &files, &mut show)
}

fn introduce(show: &mut Show<'_>, files: &Files, plan: &Plan) {
    show.line(&format!(
        "How capable is a made-up workshop's lathe of the pivots of tower clock arbors?\n\n\
         Plan      {}\n          Cpk to within 10%: {} pieces planned, {} at most\n\
         Station   virtual, in this process; the plan is loaded over the link\n\
         Gauge     simulated, a piece every {} s of the station's time",
        files.plan.display(),
        plan.rule.planned.get(),
        plan.rule.limit.get(),
        PIECE_MS / 1_000,
    ));
}

fn set_clock(bench: &mut Bench) -> Result<(), LinkError> {
    let now = bench.now().to_wire();
    let (mut session, _) = Session::open(&mut bench.link)?;
    session.set_clock(|| now).map(drop)
}

/// What the power cut did.
struct Cut {
    /// Pieces that the station had taken before.
    before: u32,
    /// Pieces that it found in its journal afterwards.
    after: u32,
}

/// Measures until the study is done, with a disturbed line and a power cut on the way.
fn measure(mut bench: Bench, plan: &Plan, show: &mut Show<'_>) -> Result<(Bench, Cut), Failure> {
    let mut cut = Cut { before: 0, after: 0 };
    show.begin(plan.rule.planned.get());
    // A limit on the demo itself, should the station never come to an end.
    for _ in 0..2 * plan.rule.limit.get() {
        bench.measure();
        let Some(study) = bench.study() else { break };
        let (n, standing) = (study.progress().n.get(), study.standing());
        show.progress(n, study.estimate().as_ref());
        if standing != Standing::Gathering {
            show.end();
            show.line(&format!("  {}", done_text(n, standing)));
            return Ok((bench, cut));
        }
        if n == plan.rule.planned.get() {
            show.incident(&format!(
                "  The {n} planned pieces are in, but the interval is still too wide: measure on."
            ));
        }
        if n == DISTURBED_AFTER {
            let line = bench.disturb();
            show.incident(&format!(
                "  A bit flips on the gauge's line: {line:?} is refused, and put on record."
            ));
        }
        if n == CUT_AFTER && cut.before == 0 {
            cut.before = n;
            show.incident(&format!(
                "  The power fails while the reading of piece {} is being written ...",
                n + 1
            ));
            bench = bench.cut_power()?;
            set_clock(&mut bench)?;
            cut.after = bench.n();
            show.incident(&format!(
                "  ... and is back: all {} pieces are there; piece {} is measured again.",
                cut.after,
                n + 1
            ));
        }
    }
    Err(fault("the station did not come to an end"))
}

fn done_text(n: u32, standing: Standing) -> String {
    match standing {
        Standing::Settled => format!("The done lamp is lit at piece {n}: enough pieces, and precise enough."),
        _ => format!("The plan's limit of {n} pieces is reached without the wanted precision."),
    }
}

/// Pulls the records into the ledger and writes the report.
fn keep_and_report(
    mut bench: Bench,
    cut: &Cut,
    files: &Files,
    show: &mut Show<'_>,
) -> Result<Answer, Failure> {
    if cut.before != cut.after {
        return Err(fault("the station lost or doubled a piece in the power cut"));
    }
    let mut ledger = Ledger::open(Some(&files.ledger))?;
    let (mut session, _) = Session::open(&mut bench.link)?;
    let pulled = pull::pull(&mut session, &mut ledger, &mut |_| {})?;
    let refused = session.status()?.refused;
    show.line(&format!("\nPulled    {} records over the link, each kept once\n", pulled.new));

    let kept = ledger.study(None)?;
    if bench.study() != Some(&kept.study) {
        return Err(fault("the ledger's study is not the station's"));
    }
    let study = report::reported(&kept, ledger.path());
    let analysis = analysis::of(&study);
    files::write(&files.report, page::page(&study, &analysis).as_bytes())?;
    let verdict = words::verdict(&study, &analysis);
    let text = last_words(files, &verdict.headline);
    Ok(Answer::done(text, answer(files, &kept, &verdict.headline, (pulled.new, refused), cut)))
}

fn last_words(files: &Files, verdict: &str) -> String {
    let [plan, ledger, report] = [&files.plan, &files.ledger, &files.report].map(|path| path.display());
    format!(
        "{verdict}\n\n{}\n\nThree files are left:\n  {plan}\n  {ledger}\n  {report}\n\n\
         Open {report} in a browser. Then write a plan of your own:\n  \
         donelight plan new plan.toml",
        words::SAFETY
    )
}

fn answer(files: &Files, kept: &Kept, verdict: &str, (records, refused): (u32, u32), cut: &Cut) -> Value {
    let progress = kept.study.progress();
    let estimate = kept.study.estimate();
    let interval = estimate.map(|estimate| estimate.interval);
    json!({
        "out": files.folder.to_string_lossy(),
        "plan": files.plan.to_string_lossy(),
        "ledger": files.ledger.to_string_lossy(),
        "report": files.report.to_string_lossy(),
        "station": STATION.to_string(),
        "study": kept.key.to_string(),
        "standing": format!("{:?}", progress.standing).to_lowercase(),
        "n": progress.n.get(),
        "planned": progress.planned.get(),
        "limit": progress.limit.get(),
        "estimate": estimate.map(|estimate| estimate.estimate),
        "low": interval.and_then(|interval| interval.low),
        "high": interval.and_then(|interval| interval.high),
        "records": records,
        "refused": refused,
        "power_cut": { "before": cut.before, "after": cut.after },
        "verdict": verdict,
        "note": words::SAFETY,
    })
}

/// Something came out that cannot.
fn fault(what: &str) -> Failure {
    Failure {
        kind: "demo-fault",
        message: what.to_owned(),
        help: "This is a fault in Donelight: please report it.".to_owned(),
        exit: Exit::Refused,
        details: None,
    }
}
