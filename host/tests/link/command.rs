//! `donelight station …` as scripts and people run it, on a station at a pseudo-terminal.

use std::fs;
use std::os::unix::fs::{MetadataExt, PermissionsExt};
use std::os::unix::process::CommandExt;
use std::path::Path;
use std::process::{Command, Output, Stdio};
use std::time::Duration;

use donelight::link::serial;
use donelight::plan_file;
use donelight_core::record::{Millis, Seq};
use donelight_core::station::Study;
use donelight_core::stopping::Standing;
use serde_json::Value;

use crate::support::*;
use crate::terminal::OnTerminal;

const COMMAND: &str = env!("CARGO_BIN_EXE_donelight");

/// Runs the command and gives its exit code, its JSON and what it said to people.
fn run(command: &mut Command) -> (i32, Value, String) {
    said(command.arg("--json").output().unwrap())
}

fn said(output: Output) -> (i32, Value, String) {
    let err = String::from_utf8(output.stderr).unwrap();
    assert!(!err.contains("panicked"), "{err}");
    let json = serde_json::from_slice(&output.stdout)
        .unwrap_or_else(|_| panic!("no JSON: {output:?}", output = output.stdout));
    (output.status.code().unwrap(), json, err)
}

fn donelight(arguments: &[&str]) -> (i32, Value, String) {
    run(Command::new(COMMAND).args(arguments))
}

/// The command as a user who has no special rights, also where the tests run as root.
fn as_a_plain_user(folder: &Path) -> Command {
    if fs::metadata(folder).unwrap().uid() != 0 {
        return Command::new(COMMAND);
    }
    // Where root's build lies, others may not look.
    let copy = folder.join("donelight");
    if !copy.exists() {
        // In a process of its own: a file that this one held open to write could not be run ("text file busy") while
        // another test's child has just been forked with it.
        assert!(Command::new("cp").arg(COMMAND).arg(&copy).status().unwrap().success());
    }
    let mut command = Command::new(copy);
    command.uid(65_534).gid(65_534);
    command
}

fn set_mode(path: &Path, mode: u32) {
    fs::set_permissions(path, fs::Permissions::from_mode(mode)).unwrap();
}

fn kind(json: &Value) -> &str {
    json["error"]["kind"].as_str().unwrap_or("no error")
}

/// A number in a line of JSON, read by the standard library, which rounds correctly.
fn number(json: &Value, key: &str) -> u64 {
    json["study"][key].to_string().parse::<f64>().unwrap().to_bits()
}

#[test]
fn the_whole_way_from_plan_to_report_over_a_terminal() {
    let (folder, path) = folder();
    let plan_path = folder.path().join("plan.toml");
    fs::write(&plan_path, plan_file::EXAMPLE).unwrap();
    let (plan, ledger) = (plan_path.to_str().unwrap(), path.to_str().unwrap());

    let station = OnTerminal::serve(station());
    let (code, json, _) = donelight(&["station", "status", "--port", station.port()]);
    assert_eq!((code, &json["study"], json["boots"].as_u64()), (0, &Value::Null, Some(1)), "{json}");
    let (code, json, _) = donelight(&["station", "load", plan, "--port", station.port()]);
    assert_eq!((code, json["began"].as_u64()), (0, Some(3)), "the clock comes first: {json}");
    let mut station = station.stop();
    for i in 0..100 {
        station.pass(300);
        station.gauge(format!("1{}.{:03}\r\n", 2 - i % 2, (i * 17 % 23 + i % 2 * 988) % 1000).as_bytes());
    }

    let study = station.recorder().station().study().cloned().unwrap();
    let station = OnTerminal::serve(station);
    let (code, json, _) = donelight(&["station", "status", "--port", station.port()]);
    assert_eq!(code, 0);
    same_bits(&json, &study);
    let (code, json, err) = donelight(&["station", "load", plan, "--port", station.port()]);
    assert_eq!((code, kind(&json)), (1, "study-unfinished"), "{json}");
    assert!(err.contains("--replace") && err.contains(station.port()), "{err}");
    let (code, json, _) = donelight(&["station", "pull", "--ledger", ledger, "--port", station.port()]);
    assert_eq!((code, json["new"].as_u64()), (0, Some(104)), "{json}");
    let (code, json, _) = donelight(&["report", "--ledger", ledger]);
    assert_eq!((code, json["n"].as_u64()), (0, Some(100)), "{json}");
    assert!(json["origin"]["First reading"].as_str().unwrap().starts_with("20"), "{json}");
    let (code, json, _) = donelight(&["station", "load", plan, "--replace", "--port", station.port()]);
    assert_eq!((code, json["began"].as_u64()), (0, Some(106)), "{json}");
    for word in ["clock", "blink"] {
        let (code, json, _) = donelight(&["station", word, "--port", station.port()]);
        assert_eq!((code, json["station"].as_str()), (0, Some(STATION.to_string().as_str())));
    }
    let mut station = station.stop();
    let now = station.station_time();
    let mut done = |after| station.recorder().lamps(Millis(now.0 + after)).done;
    assert!((0..1_000).any(&mut done) && !(0..1_000).all(&mut done), "it blinks");
}

fn same_bits(json: &Value, study: &Study) {
    let resolution = study.plan().resolution;
    let estimate = study.estimate().unwrap();
    let expected = [
        ("mean", study.moments().mean(resolution).unwrap()),
        ("sd", study.moments().standard_deviation(resolution).unwrap()),
        ("estimate", estimate.estimate),
        ("low", estimate.interval.low.unwrap()),
        ("high", estimate.interval.high.unwrap()),
    ];
    for (key, value) in expected {
        assert_eq!(number(json, key), value.to_bits(), "{key} {value} in {json}");
    }
    assert_eq!(study.standing(), Standing::Gathering);
    assert_eq!(json["study"]["standing"], "gathering");
}

#[test]
fn ports_that_cannot_be_used_are_refused_with_what_to_do() {
    let station = OnTerminal::serve(station());
    let folder = tempfile::tempdir().unwrap();
    set_mode(folder.path(), 0o755);
    let status = ["station", "status", "--port"];
    let on = |port: &str| donelight(&[&status[..], &[port]].concat());

    let (code, json, err) = on("/dev/no-such-port");
    assert_eq!((code, kind(&json)), (1, "port-missing"));
    assert!(err.contains("/dev/no-such-port") && err.contains("station list"), "{err}");
    let (code, json, _) = on("/dev/null");
    assert_eq!((code, kind(&json)), (1, "port-not-serial"));

    let held = serial::open(station.port()).unwrap();
    let (code, json, err) = on(station.port());
    assert_eq!((code, kind(&json)), (1, "port-busy"));
    assert!(err.contains("in use by another program"), "{err}");
    drop(held);

    set_mode(station.path(), 0o000);
    let (code, json, err) = run(as_a_plain_user(folder.path()).args(status).arg(station.port()));
    assert_eq!((code, kind(&json)), (1, "port-permission"), "{json}");
    assert!(!cfg!(target_os = "linux") || err.contains("dialout"), "{err}");
    station.stop();
}

#[test]
fn a_ledger_that_may_not_be_written_is_refused_before_the_station_is_asked() {
    let (folder, path) = folder();
    let records = folder.path().join("records");
    fs::create_dir(&records).unwrap();
    let kept = records.join("kept.sqlite");
    pull_all(&mut station_with_readings(40), &mut open(&kept));
    drop(path);
    set_mode(folder.path(), 0o755);
    set_mode(&kept, 0o444);
    set_mode(&records, 0o555);
    let station = OnTerminal::serve(station_with_readings(60));
    set_mode(station.path(), 0o666);
    for file in [kept.clone(), records.join("new.sqlite")] {
        let mut command = as_a_plain_user(folder.path());
        let (code, json, err) =
            run(command.args(["station", "pull", "--port", station.port(), "--ledger"]).arg(&file));
        assert_eq!((code, kind(&json)), (1, "ledger-permission"), "{json}");
        assert!(err.contains("write access"), "{err}");
    }
    let mut station = station.stop();
    assert_eq!(station.recorder().journal().released(), Seq(0), "nothing is confirmed");
    // Reading it is another matter.
    let (code, json, _) = run(as_a_plain_user(folder.path()).args(["report", "--ledger"]).arg(&kept));
    assert_eq!(code, 0, "{json}");
    assert_eq!(json["title"], "Lids, lot 7");
    set_mode(&records, 0o755);
}

#[test]
fn a_full_disk_breaks_the_pull_off_and_nothing_is_lost() {
    let (_folder, path) = folder();
    let ledger = path.to_str().unwrap();
    let station = OnTerminal::serve(station_with_readings(3_000));
    // No file may grow beyond 128 × 512 bytes; what would be a signal becomes a failing write, as on a full disk.
    let script = "trap '' XFSZ; ulimit -f 128; exec \"$@\"";
    let (code, json, err) = run(Command::new("sh").args([
        "-c",
        script,
        "sh",
        COMMAND,
        "station",
        "pull",
        "--port",
        station.port(),
        "--ledger",
        ledger,
    ]));
    assert_eq!(code, 1, "{json}");
    assert!(["disk-full", "ledger-io"].contains(&kind(&json)), "{json}");
    assert!(err.contains("full") && err.contains("nothing is lost"), "{err}");
    let mut station = station.stop();
    let kept = rows(&path);
    let journal_before = journal(&mut station);
    assert!(!kept.is_empty() && kept.len() < 3_000, "{}", kept.len());
    assert_eq!(kept[..], journal_before[..kept.len()]);
    assert!(station.recorder().journal().released().0 as usize <= kept.len());

    let station = OnTerminal::serve(station);
    let (code, json, _) = donelight(&["station", "pull", "--port", station.port(), "--ledger", ledger]);
    assert_eq!(code, 0, "{json}");
    assert_eq!(rows(&path), journal(&mut station.stop()));
}

#[test]
fn a_killed_pull_is_completed_by_the_next() {
    let (_folder, path) = folder();
    let ledger = path.to_str().unwrap();
    let mut station = OnTerminal::serve(station_with_readings(2_000));
    let mut grown = Vec::new();
    for milliseconds in [5, 15, 25, 35, 45, 60, 80] {
        let mut pull = Command::new(COMMAND)
            .args(["station", "pull", "--port", station.port(), "--ledger", ledger])
            .stdout(Stdio::null())
            .spawn()
            .unwrap();
        std::thread::sleep(Duration::from_millis(milliseconds));
        pull.kill().unwrap();
        pull.wait().unwrap();
        let mut stopped = station.stop();
        let kept = if fs::metadata(&path).is_ok_and(|file| file.len() > 0) {
            drop(open(&path));
            rows(&path)
        } else {
            Vec::new()
        };
        assert_eq!(kept[..], journal(&mut stopped)[..kept.len()]);
        assert!(stopped.recorder().journal().released().0 as usize <= kept.len());
        grown.push(kept.len());
        station = OnTerminal::serve(stopped);
    }
    let (code, json, _) = donelight(&["station", "pull", "--port", station.port(), "--ledger", ledger]);
    assert_eq!(code, 0, "{json}");
    assert_eq!(rows(&path), journal(&mut station.stop()), "after {grown:?}");
}

#[cfg(target_os = "linux")]
#[test]
fn without_a_ledger_named_it_is_the_one_in_the_users_data_folder() {
    let folder = tempfile::tempdir().unwrap();
    let station = OnTerminal::serve(station_with_readings(20));
    let at_home = || {
        let mut command = Command::new(COMMAND);
        command.env("XDG_DATA_HOME", folder.path());
        command
    };
    let (code, json, _) = run(at_home().arg("report"));
    assert_eq!((code, kind(&json)), (1, "ledger-missing"));
    let (code, json, err) = run(at_home().args(["station", "pull", "--port", station.port()]));
    let ledger = folder.path().join("donelight").join("ledger.sqlite");
    assert_eq!((code, json["ledger"].as_str()), (0, ledger.to_str()), "{json}");
    assert_eq!(err, "", "no progress bar where nobody watches");
    let (code, json, _) = run(at_home().arg("report"));
    assert_eq!((code, json["title"].as_str()), (0, Some("Lids, lot 7")));
    station.stop();
}

#[test]
fn without_a_port_the_stations_attached_decide() {
    let (code, json, _) = donelight(&["station", "list"]);
    assert_eq!(code, 0);
    let attached = json["stations"].as_array().unwrap().len();
    let (code, json, _) = donelight(&["station", "status"]);
    match attached {
        0 => assert_eq!((code, kind(&json)), (1, "no-station")),
        1 => assert_ne!(kind(&json), "no-station"),
        _ => assert_eq!((code, kind(&json)), (1, "several-stations")),
    }
}
