//! What can go wrong around a virtual station: each a clear message, nothing lost, no panic.
#![cfg(unix)]

use std::ffi::OsStr;
use std::fs::{self, OpenOptions, Permissions};
use std::io::{Read, Write};
use std::os::unix::fs::{OpenOptionsExt, PermissionsExt};
use std::path::Path;
use std::process::{Command, Stdio};
use std::thread;
use std::time::{Duration, Instant};

use donelight_core::wire::{self, FRAME_MAX, Request};
use donelight_tests::command::{self, Said, donelight};
use donelight_tests::nist::Set;
use donelight_tests::study::Study;
use donelight_tests::virtual_bench::VirtualBench;
use rustix::fs::OFlags;
use serde_json::Value;

const NOTHING: [&OsStr; 0] = [];

fn virtual_station(store: &Path, more: &[&str]) -> Said {
    let store = store.to_str().unwrap();
    donelight(["virtual", "--json", "--store", store].iter().chain(more))
}

#[track_caller]
fn assert_refused(said: Said, kind: &str, names: &str) {
    let said = said.ends_with(1);
    let error = &said.json()["error"];
    assert_eq!(error["kind"], kind);
    assert!(error["message"].as_str().unwrap().contains(names), "{error}");
    assert!(!error["help"].as_str().unwrap().is_empty());
}

fn status(bench: &VirtualBench) -> Value {
    donelight(["station", "status", "--port", bench.port(), "--json"]).ends_with(0).json()
}

/// A plan for readings like Michelso's, of so many pieces.
fn load(bench: &VirtualBench, folder: &Path, planned: usize) {
    let plan = folder.join("plan.toml");
    fs::write(&plan, Study::of(&Set::named("Michelso"), planned, 150).toml()).unwrap();
    let _ = donelight(["station", "load", plan.to_str().unwrap(), "--port", bench.port()]).ends_with(0);
}

fn is_reading(event: &Value) -> bool {
    event["event"] == "reading"
}

#[test]
fn a_store_in_use_is_refused_and_its_station_goes_on() {
    let folder = tempfile::tempdir().unwrap();
    let first = VirtualBench::start(folder.path(), NOTHING);
    assert_refused(virtual_station(folder.path(), &[]), "store-in-use", folder.path().to_str().unwrap());
    assert_eq!(status(&first)["station"], first.first["station"]);
    first.kill();
    VirtualBench::start(folder.path(), NOTHING).kill();
}

#[test]
fn a_store_that_cannot_be_made_is_refused_by_name() {
    let folder = tempfile::tempdir().unwrap();
    let file = folder.path().join("file");
    fs::write(&file, "").unwrap();
    assert_refused(virtual_station(&file.join("store"), &[]), "store-access", "file");

    let read_only = folder.path().join("read-only");
    fs::create_dir(&read_only).unwrap();
    fs::set_permissions(&read_only, Permissions::from_mode(0o555)).unwrap();
    if fs::write(read_only.join("probe"), "").is_err() {
        assert_refused(virtual_station(&read_only, &[]), "store-access", "read-only");
    } else {
        // Nothing but a file system can refuse root.
        assert_refused(virtual_station(Path::new("/proc/donelight-store"), &[]), "store-access", "/proc");
    }
}

#[cfg(target_os = "linux")]
#[test]
fn a_store_whose_name_is_no_text_is_served_all_the_same() {
    use std::os::unix::ffi::OsStrExt;

    let folder = tempfile::tempdir().unwrap();
    let bench = VirtualBench::start(&folder.path().join(OsStr::from_bytes(b"st\xffre")), NOTHING);
    bench.interrupt();
    assert!(bench.end().1.success());
}

#[test]
fn a_damaged_store_is_refused_and_left_as_it_is() {
    let folder = tempfile::tempdir().unwrap();
    VirtualBench::start(folder.path(), NOTHING).kill();
    let journal = folder.path().join("journal.flash");
    OpenOptions::new().write(true).open(&journal).unwrap().set_len(1_000_000).unwrap();
    assert_refused(virtual_station(folder.path(), &[]), "store-wrong-size", "1000000 bytes");
    assert_eq!(fs::metadata(&journal).unwrap().len(), 1_000_000);
}

#[test]
fn a_feed_that_is_missing_is_refused_by_name() {
    let folder = tempfile::tempdir().unwrap();
    assert_refused(
        virtual_station(folder.path(), &["--feed", "no-such-feed.txt"]),
        "feed-file",
        "no-such-feed.txt",
    );
}

#[test]
fn options_that_contradict_each_other_are_wrong_use() {
    for more in [
        &["--process", "normal:1,1", "--feed", "x"] as &[&str],
        &["--process", "normal:1,0"],
        &["--process", "uniform:1,1"],
        &["--drift", "0.1"],
        &["--process", "normal:1,1", "--rate", "0"],
    ] {
        let _ = virtual_station(Path::new("never-made"), more).ends_with(2);
        assert!(!Path::new("never-made").exists());
    }
}

#[test]
fn rubbish_too_long_and_half_lines_are_refused_counted_and_kept_apart_from_the_readings() {
    let folder = tempfile::tempdir().unwrap();
    let feed = folder.path().join("feed.txt");
    let mut lines = b"299.85\r\n".to_vec();
    lines.extend([0x00, 0xff, 0x80, b'7', b'\n']);
    lines.extend(b"ERR 3\n299,74\n");
    lines.extend([b'1'; 500]);
    lines.extend(b"\n299.901\n\n   \n+299.90 \n1e2\n300.0");
    fs::write(&feed, lines).unwrap();
    let mut bench = VirtualBench::start(&folder.path().join("store"), ["--feed".as_ref(), feed.as_os_str()]);
    load(&bench, folder.path(), 50);
    bench.events_until(|event| event["event"] == "feed-ended");
    let mut refused = 0;
    let end = Instant::now() + Duration::from_secs(30);
    while refused < 6 && Instant::now() < end {
        let events = bench.events_until(|event| event["event"] == "refused");
        refused += events.last().unwrap()["times"].as_u64().unwrap();
    }
    let status = status(&bench);
    assert_eq!((&status["study"]["n"], &status["refused"]), (&3.into(), &6.into()), "{status}");

    let ledger = folder.path().join("ledger.sqlite");
    let ledger = ledger.to_str().unwrap();
    let _ = donelight(["station", "pull", "--ledger", ledger, "--port", bench.port()]).ends_with(0);
    let report = donelight(["report", "--ledger", ledger, "--json"]).ends_with(0).json();
    assert_eq!(report["n"], 3);
    let told: Vec<_> =
        report["incidents"].as_array().unwrap().iter().map(|incident| incident["what"].to_string()).collect();
    for reason in ["beyond ASCII", "decimal number", "too long", "more digits", "without an end"] {
        assert!(told.iter().any(|what| what.contains(reason)), "{reason}: {told:?}");
    }
}

#[test]
fn the_same_seed_gives_the_same_readings_and_another_seed_others() {
    let folder = tempfile::tempdir().unwrap();
    let [first, again, other] = [("a", "3"), ("b", "3"), ("c", "4")].map(|(store, seed)| {
        let arguments = ["--process", "normal:299.85,0.08", "--rate", "1000", "--seed", seed];
        let mut bench = VirtualBench::start(&folder.path().join(store), arguments);
        load(&bench, folder.path(), 30);
        let events = bench.events_until_done();
        let readings = events.iter().filter(|event| is_reading(event));
        readings.map(|event| event["reading"].as_str().unwrap().to_owned()).collect::<Vec<_>>()
    });
    assert_eq!(first.len(), 30);
    assert_eq!(first, again);
    assert_ne!(first, other);
}

#[test]
fn the_buttons_are_lines_on_standard_input_and_its_end_ends_nothing() {
    let folder = tempfile::tempdir().unwrap();
    let arguments = ["--process", "normal:299.85,0.08", "--rate", "1000"];
    let mut bench = VirtualBench::start(&folder.path().join("store"), arguments);
    load(&bench, folder.path(), 20);
    bench.events_until_done();
    bench.type_line("take back");
    let events = bench.events_until_done();
    let kinds: Vec<_> = events.iter().map(|event| event["event"].as_str().unwrap()).collect();
    assert_eq!(kinds, ["taken-back", "lamp", "reading", "lamp"]);
    bench.type_line("make coffee");
    bench.events_until(|event| event["event"] == "no-such-button");
    bench.close_stdin();
    thread::sleep(Duration::from_millis(100));
    let study = &status(&bench)["study"];
    assert_eq!((&study["n"], &study["taken_back"]), (&20.into(), &1.into()));
}

#[test]
fn blink_and_clock_reach_the_station() {
    let folder = tempfile::tempdir().unwrap();
    let mut bench = VirtualBench::start(folder.path(), NOTHING);
    let _ = donelight(["station", "blink", "--port", bench.port(), "--json"]).ends_with(0);
    bench.events_until(|event| event["event"] == "blink" && event["on"] == true);
    let _ = donelight(["station", "clock", "--port", bench.port(), "--json"]).ends_with(0);
    let set = bench.events_until(|event| event["event"] == "clock").pop().unwrap();
    let now = std::time::SystemTime::now().duration_since(std::time::UNIX_EPOCH).unwrap().as_millis();
    let behind = now.abs_diff(u128::from(set["unix_ms"].as_u64().unwrap()));
    assert!(behind < 60_000, "{behind} ms");
}

#[test]
fn a_signal_ends_the_station_cleanly_with_a_last_word() {
    let folder = tempfile::tempdir().unwrap();
    let bench = VirtualBench::start(folder.path(), NOTHING);
    bench.interrupt();
    let (events, status) = bench.end();
    assert!(status.success(), "{status}");
    assert_eq!(events.last().unwrap()["event"], "stopped");
}

#[test]
fn a_listener_that_has_gone_ends_the_station() {
    let folder = tempfile::tempdir().unwrap();
    let mut child = Command::new(command::path())
        .args(["virtual", "--store"])
        .arg(folder.path())
        .stdin(Stdio::null())
        .stdout(Stdio::piped())
        .spawn()
        .unwrap();
    let mut first = [0; 5];
    child.stdout.take().unwrap().read_exact(&mut first).unwrap();
    assert_eq!(&first, b"/dev/");
    let end = Instant::now() + Duration::from_secs(30);
    loop {
        if let Some(status) = child.try_wait().unwrap() {
            assert!(status.success(), "{status}");
            return;
        }
        if Instant::now() > end {
            child.kill().unwrap();
            panic!("the station goes on although nobody listens");
        }
        thread::sleep(Duration::from_millis(10));
    }
}

#[test]
fn a_listener_that_does_not_read_holds_nothing_up() {
    let folder = tempfile::tempdir().unwrap();
    let feed = folder.path().join("feed.txt");
    // 1,500 events are well above the 64 KiB that a pipe holds.
    fs::write(&feed, "299.85\n299.86\n".repeat(750)).unwrap();
    let mut child = Command::new(command::path())
        .args(["virtual", "--json", "--store"])
        .arg(folder.path().join("store"))
        .arg("--keep-measuring")
        .arg("--feed")
        .arg(&feed)
        .stdin(Stdio::null())
        .stdout(Stdio::piped())
        .spawn()
        .unwrap();
    let stdout = child.stdout.as_mut().unwrap();
    let mut line = Vec::new();
    while line.last() != Some(&b'\n') {
        let mut byte = [0];
        stdout.read_exact(&mut byte).unwrap();
        line.extend(byte);
    }
    let first: Value = serde_json::from_slice(&line).unwrap();
    let port = first["port"].as_str().unwrap();
    let plan = folder.path().join("plan.toml");
    fs::write(&plan, Study::of(&Set::named("Michelso"), 50, 150).toml()).unwrap();
    let _ = donelight(["station", "load", plan.to_str().unwrap(), "--port", port]).ends_with(0);
    let end = Instant::now() + Duration::from_secs(60);
    loop {
        let status = donelight(["station", "status", "--port", port, "--json"]).ends_with(0).json();
        if status["study"]["surplus"] == 1_450 {
            break;
        }
        assert!(Instant::now() < end, "{status}");
        thread::sleep(Duration::from_millis(200));
    }
    child.kill().unwrap();
    child.wait().unwrap();
}

#[test]
fn a_client_that_sends_rubbish_or_never_reads_does_not_disturb_the_next_one() {
    let folder = tempfile::tempdir().unwrap();
    let arguments = ["--process", "normal:299.85,0.08", "--rate", "1000"];
    let mut bench = VirtualBench::start(&folder.path().join("store"), arguments);
    let non_blocking = i32::try_from((OFlags::NONBLOCK | OFlags::NOCTTY).bits()).unwrap();
    let open =
        || OpenOptions::new().read(true).write(true).custom_flags(non_blocking).open(bench.port()).unwrap();
    // What modem programs send first, then a frame cut short.
    open().write_all(b"AT\r\0\x05half").unwrap();
    assert!(status(&bench)["study"].is_null());

    let mut frame = [0; FRAME_MAX];
    let hello = wire::encode(1, &Request::Status, &mut frame).unwrap();
    let mut deaf = open();
    let end = Instant::now() + Duration::from_secs(2);
    while Instant::now() < end {
        // Full is fine: the station waits until its replies are read.
        if deaf.write(hello).is_err() {
            thread::sleep(Duration::from_millis(1));
        }
    }
    drop(deaf);
    load(&bench, folder.path(), 20);
    bench.events_until_done();
    assert_eq!(status(&bench)["study"]["n"], 20);
}
