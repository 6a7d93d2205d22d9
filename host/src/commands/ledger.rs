//! `donelight ledger`: verify what is kept, back it up, restore it.

use std::path::Path;

use serde_json::{Value, json};

use crate::cli;
use crate::ledger::Ledger;
use crate::ledger::verify::Verified;
use crate::output::{Answer, Exit, Failure};

/// Answers `donelight ledger …`.
///
/// # Errors
/// A ledger that cannot be read or written.
pub(super) fn run(options: &cli::Ledger) -> Result<Answer, Failure> {
    match options {
        cli::Ledger::Verify { ledger } => verify(ledger.as_deref()),
        cli::Ledger::Backup { out, force, ledger } => backup(out, *force, ledger.as_deref()),
        cli::Ledger::Restore { backup, discard, ledger } => restore(backup, *discard, ledger.as_deref()),
    }
}

fn backup(out: &Path, force: bool, path: Option<&Path>) -> Result<Answer, Failure> {
    let ledger = Ledger::open_to_read(path)?;
    let saved = ledger.backup(out, force)?;
    let fits = saved.stations.iter().all(Verified::fits);
    let mut text = format!(
        "{} records of {} stations, from {}, are in {}",
        saved.records(),
        saved.stations.len(),
        ledger.path().display(),
        out.display()
    );
    if !fits {
        text.push_str("\nNot all of them fit, in the ledger as in the copy:\n");
        text.push_str(&saved.stations.iter().flat_map(lines).collect::<Vec<_>>().join("\n"));
    }
    Ok(Answer {
        text,
        json: json!({
            "ledger": ledger.path().to_string_lossy(),
            "backup": out.to_string_lossy(),
            "records": saved.records(),
            "fits": fits,
            "stations": saved.stations.iter().map(station_json).collect::<Vec<_>>(),
        }),
        exit: if fits { Exit::Done } else { Exit::Refused },
    })
}

fn restore(backup: &Path, discard: bool, path: Option<&Path>) -> Result<Answer, Failure> {
    let (path, saved) = Ledger::restore(backup, path, discard)?;
    Ok(Answer::done(
        format!("{} holds what {} holds: {} records", path.display(), backup.display(), saved.records()),
        json!({
            "ledger": path.to_string_lossy(),
            "backup": backup.to_string_lossy(),
            "records": saved.records(),
            "stations": saved.stations.iter().map(station_json).collect::<Vec<_>>(),
        }),
    ))
}

fn verify(path: Option<&Path>) -> Result<Answer, Failure> {
    let ledger = Ledger::open_to_read(path)?;
    let stations = ledger.verify()?;
    let fits = stations.iter().all(Verified::fits);
    let mut lines: Vec<String> = stations.iter().flat_map(lines).collect();
    if lines.is_empty() {
        lines.push("The ledger holds no station's records yet.".to_owned());
    }
    if !fits {
        lines.push(String::new());
        lines.push(
            "Keep this file for rescue. Go on with a copy from before the change (donelight ledger restore), or with a \
             new ledger, and pull the stations again: they still have what was not confirmed, and often more."
                .to_owned(),
        );
    }
    Ok(Answer {
        text: lines.join("\n"),
        json: json!({
            "ledger": ledger.path().to_string_lossy(),
            "fits": fits,
            "stations": stations.iter().map(station_json).collect::<Vec<_>>(),
        }),
        exit: if fits { Exit::Done } else { Exit::Refused },
    })
}

fn lines(found: &Verified) -> Vec<String> {
    let station = found.station;
    let mut lines = vec![match (&found.misfit, found.head) {
        (Some(misfit), _) => format!(
            "Station {station}: record {} does not fit: {}. Records before it fit; {} are kept in all.",
            misfit.seq, misfit.why, found.records
        ),
        (None, Some(head)) => {
            format!(
                "Station {station}: {} records, through {}, all fit; chain {head}",
                found.records, found.through
            )
        }
        (None, None) => format!("Station {station}: {} records; their check sums fit", found.records),
    }];
    if found.unchained > 0 {
        lines.push(format!(
            "  {} of them were kept before there was a chain: only their check sums are verified",
            found.unchained
        ));
    }
    for gap in &found.gaps {
        lines.push(format!(
            "  gap, from {} to {}: the station no longer had these; the chain goes on behind it by the station's word",
            gap.first, gap.last
        ));
    }
    for seq in &found.conflicts {
        lines.push(format!("  the station once gave another record {seq}; both are kept"));
    }
    lines
}

fn station_json(found: &Verified) -> Value {
    json!({
        "station": found.station.to_string(),
        "fits": found.fits(),
        "records": found.records,
        "unchained": found.unchained,
        "through": found.through.0,
        "chain": found.head.map(|head| head.to_string()),
        "gaps": found.gaps.iter().map(|gap| json!({ "first": gap.first.0, "last": gap.last.0 })).collect::<Vec<_>>(),
        "conflicts": found.conflicts.iter().map(|seq| seq.0).collect::<Vec<_>>(),
        "misfit": found.misfit.map(|misfit| json!({ "seq": misfit.seq.0, "why": misfit.why.to_string() })),
    })
}
