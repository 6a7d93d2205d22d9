//! `donelight report`, on a ledger that holds a station's records.

use std::fs;
use std::path::Path;

use donelight::ledger::{Ledger, UnixMillis, Window};
use donelight::plan_file;
use donelight_core::chain::Digest;
use donelight_core::counts::Counts;
use donelight_core::record::{Event, Millis, RECORD_MAX, Record, Refusal, Seq};
use donelight_core::text::Text;
use donelight_core::wire::{Hello, StationId};

use crate::driver::run;

const STATION: StationId = StationId([0xd0, 1, 2, 3, 4, 5, 6, 7]);

/// A made-up process: no random numbers, a standard deviation of about 9.5 thousandths.
fn reading(i: i64) -> Counts {
    let deviation: i64 =
        [7, 11, 5, 3].iter().map(|step| (i * step + i / 17 * (step + 1)) % 17).sum::<i64>() - 32;
    Counts::new(12_000 + deviation).unwrap()
}

fn keep(path: &Path, events: &[Event]) {
    let mut ledger = Ledger::open(Some(path)).unwrap();
    let next = Seq(u32::try_from(events.len()).unwrap() + 1);
    let mut before = Digest::origin(STATION);
    let firmware = Text::new("test 0").unwrap();
    let hello = Hello { station: STATION, firmware, next, oldest: Seq::FIRST, head: before };
    ledger.meet(&hello, UnixMillis(1_767_600_000_000)).unwrap();
    let mut seq = Seq::FIRST;
    for (i, event) in events.iter().enumerate() {
        let mut buffer = [0; RECORD_MAX];
        let record = Record { seq, at: Millis(i as u64 * 1000), event: event.clone() };
        let bytes = record.encode(&mut buffer).unwrap();
        let window = Window { before, records: vec![(seq, bytes)] };
        ledger.commit(STATION, &window, UnixMillis(1_767_600_000_000)).unwrap();
        before = before.then(bytes);
        seq = seq.next();
    }
}

/// A study by the example plan: `n` readings, a refused line, one reading taken back.
fn events(n: i64) -> Vec<Event> {
    events_by(plan_file::EXAMPLE, n)
}

fn events_by(plan: &str, n: i64) -> Vec<Event> {
    let plan = plan_file::from_text(plan).unwrap();
    let mut events =
        vec![Event::Boot { boot: 1 }, Event::Clock { unix_ms: 1_767_596_400_000 }, Event::Plan(plan)];
    events.extend((0..10).map(|i| Event::Reading(reading(i))));
    events.push(Event::Refused { reason: Refusal::LineTooLong, times: 2 });
    events.push(Event::TakenBack(Seq(13)));
    events.extend((10..n).map(|i| Event::Reading(reading(i))));
    events
}

#[test]
fn a_finished_study_is_reported_as_page_csv_and_json_that_agree() {
    let folder = tempfile::tempdir().unwrap();
    keep(&folder.path().join("l.sqlite"), &events(216));
    let line = "report --ledger l.sqlite -o r.html --csv r.csv --json";
    let json = run(&line.split(' ').collect::<Vec<_>>(), folder.path()).ends_with(0).json();
    assert_eq!(json["title"], "Wick tubes, first lot");
    assert_eq!(json["standing"], "settled");
    assert_eq!((json["n"].as_u64(), json["voided"].as_u64()), (Some(212), Some(1)), "{json}");
    assert_eq!(json["surplus"], 3);
    assert_eq!(json["origin"]["First reading"], "2026-01-05T07:00:02.000Z");
    assert_eq!(json["incidents"][0]["what"].as_str().unwrap().split(':').next(), Some("refused 2 times"));

    let page = fs::read_to_string(folder.path().join("r.html")).unwrap();
    assert_eq!(page.matches("<svg ").count(), 3);
    assert!(page.contains("The study is finished") && page.contains("d001020304050607"), "{page}");

    // What is counted, taken from the CSV and assessed by itself, gives the same numbers to the last bit.
    let csv = fs::read_to_string(folder.path().join("r.csv")).unwrap();
    let counted: String = csv
        .lines()
        .filter(|line| !line.contains("surplus") && !line.contains("voided"))
        .map(|line| format!("{line}\n"))
        .collect();
    fs::write(folder.path().join("counted.csv"), counted).unwrap();
    let line = "assess counted.csv --column value --lsl 11.95 --usl 12.05 --target 12 --resolution 0.001 --unit mm --method bissell --json";
    let again = run(&line.split(' ').collect::<Vec<_>>(), folder.path()).ends_with(0).json();
    for key in ["n", "mean", "sd", "estimate", "low", "high", "indices"] {
        assert_eq!(json[key], again[key], "{key}");
    }
}

#[test]
fn a_study_that_is_not_finished_shows_nothing() {
    let folder = tempfile::tempdir().unwrap();
    keep(&folder.path().join("l.sqlite"), &events(100));
    let answer = run(&["report", "--ledger", "l.sqlite"], folder.path()).ends_with(0);
    assert!(answer.out.contains("Not finished. So far, Cpk is estimated at"), "{}", answer.out);
    assert!(answer.out.contains("at least 212 are planned"), "{}", answer.out);
    assert!(answer.out.contains("does not replace the standards in force"), "{}", answer.out);
    run(&["report", "--ledger", "l.sqlite", "--require", "0.5"], folder.path()).ends_with(1);
    keep(&folder.path().join("m.sqlite"), &events(216));
    run(&["report", "--ledger", "m.sqlite", "--require", "0.5"], folder.path()).ends_with(0);
    let upper = plan_file::EXAMPLE.replace("kind = \"two-sided\"", "kind = \"upper\"");
    keep(&folder.path().join("u.sqlite"), &events_by(&upper, 5));
    run(&["report", "--ledger", "u.sqlite", "--require", "0.5"], folder.path()).ends_with(2);
}

#[test]
fn a_plan_without_a_reading_has_a_page_too() {
    let folder = tempfile::tempdir().unwrap();
    keep(&folder.path().join("l.sqlite"), &events(0)[..3]);
    let answer = run(&["report", "--ledger", "l.sqlite", "-o", "r.html"], folder.path()).ends_with(0);
    assert!(answer.out.contains("no estimate of Cpk: fewer than two readings"), "{}", answer.out);
    assert!(fs::read_to_string(folder.path().join("r.html")).unwrap().contains("no estimate"));
}

#[test]
fn what_cannot_be_reported_is_refused_and_the_ledger_is_left_as_it_is() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("l.sqlite");
    keep(&path, &events(50));
    fs::write(folder.path().join("text.sqlite"), "no database at all, but long enough to look at it twice")
        .unwrap();
    let before = fs::read(&path).unwrap();
    for (line, code, words) in [
        ("report --ledger none.sqlite", 1, "none.sqlite"),
        ("report --ledger text.sqlite", 1, "text.sqlite"),
        ("report other --ledger l.sqlite", 1, "Wick tubes"),
        ("report --ledger l.sqlite -o l.sqlite", 2, "is named twice"),
        ("report --ledger l.sqlite -o same --csv same", 2, "is named twice"),
        ("report --ledger l.sqlite -o no/such/r.html", 1, "Make the folder first"),
    ] {
        let said = run(&line.split(' ').collect::<Vec<_>>(), folder.path());
        assert_eq!(said.code, code, "{line}: {said:?}");
        assert!(said.err.contains(words), "{line}: {words} is not in\n{}", said.err);
    }
    assert_eq!(fs::read(&path).unwrap(), before);
}
