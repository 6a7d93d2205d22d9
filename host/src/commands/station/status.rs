//! A station's status in words and as JSON; doubles keep every bit in JSON.

use donelight_core::record::Gap;
use donelight_core::station::Held;
use donelight_core::stopping::Standing;
use donelight_core::wire::{Hello, JournalHealth, Status, StudyStatus};
use serde_json::{Value, json};

use crate::report::words::SAFETY;

pub(super) fn text(port: &str, hello: &Hello, status: &Status) -> String {
    let mut lines = vec![format!("Station {} on {port}, {}", hello.station, hello.firmware)];
    match &status.study {
        None => lines.push("No plan is loaded: donelight station load PLAN".to_owned()),
        Some(study) => study_lines(study, &mut lines),
    }
    if let Some(held) = status.held {
        lines.push(format!("It waits: {}", held_text(held)));
    }
    lines.push(String::new());
    lines.push(format!("Journal: {}", journal_text(status.journal)));
    lines.push(format!(
        "  records not pulled yet: {}; room for at least {} readings",
        status.unconfirmed, status.room
    ));
    if let Some(Gap { first, last }) = status.lost {
        let often = if status.gaps == 1 { String::new() } else { format!(" (found {} times)", status.gaps) };
        lines.push(format!(
            "  records {first} to {last} can no longer be read{often}: pull the log, press seen, and exchange the board if \
             it happens again"
        ));
    }
    lines.push(format!("Starts so far: {}; running for {}", status.boots, duration(status.up.0)));
    let latest = status.last_refusal.map(|refusal| format!("; the latest: {refusal}")).unwrap_or_default();
    lines.push(format!("Refused so far: {}{latest}", status.refused));
    if status.study.is_some() {
        lines.push(String::new());
        lines.push(SAFETY.to_owned());
    }
    lines.join("\n")
}

fn study_lines(study: &StudyStatus, lines: &mut Vec<String>) {
    let progress = &study.progress;
    let standing = match progress.standing {
        Standing::Gathering => "measure on",
        Standing::Settled => "done: enough pieces, and the plan's goal is reached",
        Standing::Spent => "the plan's limit is reached without its goal",
    };
    lines.push(format!("Study {:?} (record {}): {standing}", study.name.as_str(), study.began));
    lines.push(format!(
        "  {} pieces count, {} planned, at most {}; {} surplus, {} taken back",
        progress.n.get(),
        progress.planned.get(),
        progress.limit.get(),
        progress.surplus,
        progress.taken_back
    ));
    if let (Some(mean), Some(sd)) = (study.mean, study.standard_deviation) {
        lines.push(format!("  mean {mean}, standard deviation {sd} (n \u{2212} 1)"));
    }
    if let Some(estimate) = study.estimate {
        let interval = match (study.low, study.high) {
            (Some(low), Some(high)) => format!(", interval {low:.4} to {high:.4}"),
            (Some(low), None) => format!(", lower bound {low:.4}"),
            (None, Some(high)) => format!(", upper bound {high:.4}"),
            (None, None) => String::new(),
        };
        lines.push(format!("  index {estimate:.4}{interval}"));
    }
}

pub(super) fn json(hello: &Hello, status: &Status) -> Value {
    json!({
        "firmware": hello.firmware.as_str(),
        "next": hello.next.0,
        "oldest": hello.oldest.0,
        "study": status.study.as_ref().map(|study| json!({
            "study": format!("{}:{}", hello.station, study.began),
            "began": study.began.0,
            "name": study.name.as_str(),
            "standing": format!("{:?}", study.progress.standing).to_lowercase(),
            "n": study.progress.n.get(),
            "planned": study.progress.planned.get(),
            "limit": study.progress.limit.get(),
            "surplus": study.progress.surplus,
            "taken_back": study.progress.taken_back,
            "mean": study.mean,
            "sd": study.standard_deviation,
            "estimate": study.estimate,
            "low": study.low,
            "high": study.high,
        })),
        "held": status.held.map(held_name),
        "boots": status.boots,
        "up_ms": status.up.0,
        "room": status.room,
        "unconfirmed": status.unconfirmed,
        "refused": status.refused,
        "last_refusal": status.last_refusal.map(|refusal| refusal.to_string()),
        "gaps": status.gaps,
        "lost": status.lost.map(|gap| json!({ "first": gap.first.0, "last": gap.last.0 })),
        "journal": journal_name(status.journal),
        "note": SAFETY,
    })
}

fn held_text(held: Held) -> &'static str {
    match held {
        Held::GaugeStuck => {
            "the gauge gave the same reading many times in a row; look at it, then press the button"
        }
        _ => "someone must look at it, then press the button",
    }
}

fn held_name(held: Held) -> &'static str {
    match held {
        Held::GaugeStuck => "gauge-stuck",
        _ => "unknown",
    }
}

fn journal_text(health: JournalHealth) -> &'static str {
    match health {
        JournalHealth::Well => "well",
        JournalHealth::NearlyFull => "nearly full: pull it soon with `donelight station pull`",
        JournalHealth::Full => "full, readings are refused: pull it with `donelight station pull`",
        JournalHealth::Faulty => "the flash does not take what is written: pull it and exchange the board",
        _ => "in a state that this command does not know: update it",
    }
}

fn journal_name(health: JournalHealth) -> &'static str {
    match health {
        JournalHealth::Well => "well",
        JournalHealth::NearlyFull => "nearly-full",
        JournalHealth::Full => "full",
        JournalHealth::Faulty => "faulty",
        _ => "unknown",
    }
}

/// Two units at most: "3 d 4 h", "2 min 5 s".
fn duration(milliseconds: u64) -> String {
    let seconds = milliseconds / 1_000;
    let (minutes, hours, days) = (seconds / 60, seconds / 3_600, seconds / 86_400);
    match (days, hours, minutes) {
        (0, 0, 0) => format!("{seconds} s"),
        (0, 0, minutes) => format!("{minutes} min {} s", seconds % 60),
        (0, hours, minutes) => format!("{hours} h {} min", minutes % 60),
        (days, hours, _) => format!("{days} d {} h", hours % 24),
    }
}
