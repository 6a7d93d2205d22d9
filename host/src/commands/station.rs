//! `donelight station`: find stations, load plans, pull records, set clocks.

mod status;

use std::path::Path;
use std::time::Duration;

use donelight_core::wire::{Hello, StationId};
use indicatif::{ProgressBar, ProgressStyle};
use serde_json::{Value, json};

use crate::cli::Station;
use crate::ledger::{Gap, Ledger, UnixMillis};
use crate::link::pull::{Cause, Progress, PullError, Pulled};
use crate::link::resume::{self, Resumed};
use crate::link::{LinkError, Session, Transport, discover, serial};
use crate::output::{Answer, Console, Failure};
use crate::plan_file;

/// Answers `donelight station …`.
///
/// # Errors
/// No such port, no answer, a refusal of the station, a ledger that cannot be written …
pub(super) fn run(station: &Station, console: &Console) -> Result<Answer, Failure> {
    match station {
        Station::List => list(),
        Station::Status { port } => status(port.port.as_deref()),
        Station::Load { plan, replace, port } => load(plan, *replace, port.port.as_deref()),
        Station::Pull { ledger, port } => pull(ledger.as_deref(), port.port.as_deref(), console),
        Station::Clock { port } => clock(port.port.as_deref()),
        Station::Blink { port } => blink(port.port.as_deref()),
    }
}

/// A station that has said hello.
struct Met {
    port: String,
    hello: Hello,
    session: Session<Box<dyn Transport>>,
}

impl Met {
    fn at(port: Option<&str>) -> Result<Self, Failure> {
        let port = discover::choose(port)?;
        let transport = serial::open(&port)?;
        match Session::open(transport) {
            Ok((session, hello)) => Ok(Self { port, hello, session }),
            Err(error) => Err(on(&port, error)),
        }
    }

    fn json(&self, more: Value) -> Value {
        let mut json = json!({ "port": self.port, "station": self.hello.station.to_string() });
        if let (Some(json), Value::Object(more)) = (json.as_object_mut(), more) {
            json.extend(more);
        }
        json
    }

    fn set_clock(&mut self) -> Result<UnixMillis, Failure> {
        self.session.set_clock(|| UnixMillis::now().to_wire()).map_err(|error| on(&self.port, error))?;
        Ok(UnixMillis::now())
    }
}

/// A failure on this port, which the user may not have named.
fn on(port: &str, error: LinkError) -> Failure {
    let mut failure = Failure::from(error);
    failure.message = format!("{port}: {}", failure.message);
    failure
}

fn list() -> Result<Answer, Failure> {
    let stations = discover::attached()?;
    let lines: Vec<String> = stations
        .iter()
        .map(|station| {
            format!("{}  station {}", station.port, station.serial.as_deref().unwrap_or("unknown"))
        })
        .collect();
    let text = if lines.is_empty() {
        "No station is attached to USB. (A virtual station is not listed: name its port with --port.)"
            .to_owned()
    } else {
        lines.join("\n")
    };
    let stations: Vec<Value> =
        stations.iter().map(|station| json!({ "port": station.port, "station": station.serial })).collect();
    Ok(Answer::done(text, json!({ "stations": stations })))
}

fn status(port: Option<&str>) -> Result<Answer, Failure> {
    let mut met = Met::at(port)?;
    let status = met.session.status().map_err(|error| on(&met.port, error))?;
    Ok(Answer::done(
        status::text(&met.port, &met.hello, &status),
        met.json(status::json(&met.hello, &status)),
    ))
}

fn load(file: &Path, replace: bool, port: Option<&str>) -> Result<Answer, Failure> {
    let plan = plan_file::read(file)?;
    let mut met = Met::at(port)?;
    // First the clock, so that all records of the study get their wall time.
    let time = met.set_clock()?;
    let began = met.session.load(&plan, replace).map_err(|error| on(&met.port, error))?;
    let station = met.hello.station;
    let text = format!(
        "Station {station} on {} now measures {:?}: {}{} pieces, at most {}.\nIts clock is set to {time}. The study's \
         number is {station}:{began}.\n\nMeasure until the done light is on, then: donelight station pull",
        met.port,
        plan.name.as_str(),
        if plan.rule.early().is_some() { "a first look after " } else { "" },
        plan.rule.planned.get(),
        plan.rule.limit.get(),
    );
    let json = json!({
        "began": began.0,
        "study": format!("{station}:{began}"),
        "name": plan.name.as_str(),
        "clock": time.to_string(),
    });
    Ok(Answer::done(text, met.json(json)))
}

fn pull(ledger: Option<&Path>, port: Option<&str>, console: &Console) -> Result<Answer, Failure> {
    // The ledger first: a station whose records could not be kept is not even asked.
    let mut ledger = Ledger::open(ledger)?;
    let met = Met::at(port)?;
    let bar = if console.json() { ProgressBar::hidden() } else { progress_bar() };
    let mut show = |progress: Progress| {
        bar.set_length(progress.total.into());
        bar.set_position(progress.done.into());
    };
    let Met { port, hello, session } = met;
    let mut find = |station| resume::find_again(station, &port);
    let patience = resume::RETURN_WITHIN;
    let outcome = resume::pull_resumed(session, hello.station, &mut ledger, &mut show, &mut find, patience);
    bar.finish_and_clear();
    let Resumed { pulled, breaks } = outcome.map_err(|error| broken_off(&port, error))?;
    let json = json!({
        "port": port,
        "station": hello.station.to_string(),
        "ledger": ledger.path().to_string_lossy(),
        "new": pulled.new,
        "breaks": breaks,
        "through": pulled.through.0,
        "gaps": pulled.gaps.iter().map(|gap| json!({ "first": gap.first.0, "last": gap.last.0 })).collect::<Vec<_>>(),
        "clock_refused": pulled.clock_refused.map(|reason| reason.to_string()),
    });
    Ok(Answer::done(pulled_text(hello.station, &ledger, &pulled, breaks), json))
}

/// On a terminal only; shown after the first tenth of a second.
fn progress_bar() -> ProgressBar {
    let style = ProgressStyle::with_template("{bar:40} {pos} of {len} records  {eta}");
    let bar = ProgressBar::new(0).with_style(style.unwrap_or_else(|_| ProgressStyle::default_bar()));
    bar.enable_steady_tick(Duration::from_millis(100));
    bar
}

fn broken_off(port: &str, error: PullError) -> Failure {
    let on_the_link = matches!(error.cause, Cause::Link(_));
    let mut failure = Failure::from(error);
    if on_the_link {
        failure.message = format!("{port}: {}", failure.message);
    }
    failure
}

fn pulled_text(station: StationId, ledger: &Ledger, pulled: &Pulled, breaks: u32) -> String {
    let new = match pulled.new {
        0 => "no new record".to_owned(),
        1 => "1 new record".to_owned(),
        new => format!("{new} new records"),
    };
    let mut lines = vec![format!(
        "Station {station}: {new}, through {}, kept in {}",
        pulled.through,
        ledger.path().display()
    )];
    if breaks > 0 {
        lines.push(format!(
            "The station had gone in between and was found again ({breaks}x); nothing is lost or doubled."
        ));
    }
    for Gap { first, last } in &pulled.gaps {
        lines.push(format!(
            "Records {first} to {last} are missing: the station no longer has them. Readings may be among them; they may \
             be in another ledger."
        ));
    }
    if let Some(reason) = pulled.clock_refused {
        lines.push(format!("The station's clock could not be set: {reason}"));
    }
    lines.join("\n")
}

fn clock(port: Option<&str>) -> Result<Answer, Failure> {
    let mut met = Met::at(port)?;
    let time = met.set_clock()?;
    let text = format!("The clock of station {} on {} is set to {time}.", met.hello.station, met.port);
    Ok(Answer::done(text, met.json(json!({ "clock": time.to_string() }))))
}

fn blink(port: Option<&str>) -> Result<Answer, Failure> {
    let mut met = Met::at(port)?;
    met.session.blink().map_err(|error| on(&met.port, error))?;
    let text = format!("The lamps of station {} on {} blink in turn now.", met.hello.station, met.port);
    Ok(Answer::done(text, met.json(json!({ "blinking": true }))))
}
