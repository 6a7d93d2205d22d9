//! `donelight ledger`: verify what is kept.

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
    }
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
