//! `donelight station pull` killed (SIGKILL) at random moments: the ledger opens and verifies, and the next pull completes it.
//! `DONELIGHT_LONG=1` runs the long form.
#![cfg(unix)]

use std::fs;
use std::ops::ControlFlow;
use std::os::unix::process::ExitStatusExt;
use std::path::{Path, PathBuf};
use std::process::{Child, Command, Stdio};
use std::thread;
use std::time::{Duration, Instant};

use donelight::ledger::Ledger;
use donelight::virtual_station::flash::Flash;
use donelight_core::journal::{Journal, STATE_MAX};
use donelight_core::record::Seq;
use donelight_core::wire::StationId;
use donelight_tests::command::{self, donelight};
use donelight_tests::nist::Set;
use donelight_tests::random::Random;
use donelight_tests::sequences::is_long;
use donelight_tests::study::Study;
use donelight_tests::virtual_bench::VirtualBench;

const SHORT: u32 = 10;
const LONG: u32 = 500;
/// Some ten windows.
const READINGS: usize = 600;

/// Records by number.
type Records = Vec<(u32, Vec<u8>)>;

/// A station that has measured, and the folder with its store.
struct Bench {
    station: VirtualBench,
    folder: tempfile::TempDir,
}

impl Bench {
    fn start() -> Self {
        // A killed process loses nothing that the system has, on whatever disk.
        let memory = Path::new("/dev/shm");
        let folder = if memory.is_dir() { tempfile::tempdir_in(memory) } else { tempfile::tempdir() };
        let folder = folder.unwrap();
        let [store, feed, plan] = ["store", "feed.txt", "plan.toml"].map(|name| folder.path().join(name));
        fs::write(&plan, Study::of(&Set::named("Michelso"), 50, 150).toml()).unwrap();
        let readings = (0..READINGS).map(|i| format!("299.{:02}\n", 70 + (i * 7 + i * i) % 31));
        fs::write(&feed, readings.collect::<String>()).unwrap();
        let arguments = ["--keep-measuring".as_ref(), "--feed".as_ref(), feed.as_os_str()];
        let mut station = VirtualBench::start(&store, arguments);
        let _ = donelight(["station", "load", plan.to_str().unwrap(), "--port", station.port()]).ends_with(0);
        station.events_until(|event| event["event"] == "feed-ended");
        Self { station, folder }
    }

    fn pull(&self, ledger: &Path) -> Child {
        Command::new(command::path())
            .args(["station", "pull", "--json", "--port", self.station.port(), "--ledger"])
            .arg(ledger)
            .stdin(Stdio::null())
            .stdout(Stdio::null())
            .stderr(Stdio::null())
            .spawn()
            .unwrap()
    }

    /// Pulls to the end; gives how long it took.
    fn complete(&self, ledger: &Path) -> Duration {
        let began = Instant::now();
        let arguments =
            ["station", "pull", "--port", self.station.port(), "--ledger", ledger.to_str().unwrap()];
        let _ = donelight(arguments).ends_with(0);
        began.elapsed()
    }

    /// What stands in the station's flash, read without its help.
    fn journal(&self) -> Records {
        let store = self.folder.path().join("store");
        let flash = Flash::over(fs::read(store.join("journal.flash")).unwrap());
        let id = fs::read_to_string(store.join("station.id")).unwrap();
        let id = StationId(u64::from_str_radix(id.trim(), 16).unwrap().to_be_bytes());
        let (mut journal, _) = Journal::open(flash, id, &mut [0; STATE_MAX]).unwrap();
        let mut records = Vec::new();
        let visited = journal.visit(Seq::FIRST, |seq, sealed| {
            records.push((seq.0, sealed.bytes().to_vec()));
            ControlFlow::Continue(())
        });
        visited.unwrap();
        records
    }
}

fn rows(ledger: &Path) -> Records {
    let connection = rusqlite::Connection::open(ledger).unwrap();
    let mut query = connection.prepare("SELECT seq, bytes FROM records ORDER BY seq").unwrap();
    query.query_map([], |row| Ok((row.get(0)?, row.get(1)?))).unwrap().map(Result::unwrap).collect()
}

fn verify(ledger: &Path) {
    let said = donelight(["ledger", "verify", "--json", "--ledger", ledger.to_str().unwrap()]).ends_with(0);
    assert_eq!(said.json()["fits"], true, "{said:?}");
}

/// What the kills met.
#[derive(Debug, Default)]
struct Kills {
    before_any_record: u32,
    midway: u32,
    with_all_records: u32,
    /// Left to the next pull as it was.
    not_looked_at: u32,
    /// It had ended before; that is no kill.
    too_late: u32,
}

impl Kills {
    fn count(&self) -> u32 {
        self.before_any_record + self.midway + self.with_all_records + self.not_looked_at
    }
}

/// Pulls into this ledger until it is killed after `moment`; `false` if it ended before.
fn kill_after(bench: &Bench, ledger: &Path, moment: Duration) -> bool {
    let mut child = bench.pull(ledger);
    thread::sleep(moment);
    child.kill().unwrap();
    child.wait().unwrap().signal() == Some(9)
}

#[test]
fn a_pull_killed_at_any_moment_leaves_a_ledger_that_the_next_pull_completes() {
    let target = if is_long() { LONG } else { SHORT };
    let mut random = Random::new(20);
    let bench = Bench::start();
    let path = |number: u32| -> PathBuf { bench.folder.path().join(format!("ledger-{number}.sqlite")) };
    // The first one also sets the clock; the next one finds it set, as all that are killed do.
    let _ = bench.complete(&path(0));
    let whole = bench.complete(&path(1));
    let (mut kills, mut number) = (Kills::default(), 1);
    while kills.count() < target {
        number += 1;
        let ledger = path(number);
        // At times killed more than once on the way.
        for _ in 0..random.one(&[1, 1, 1, 2, 3]) {
            let moment = whole.mul_f64(random.fraction() * 1.1);
            if !kill_after(&bench, &ledger, moment) {
                kills.too_late += 1;
                continue;
            }
            let begun = fs::metadata(&ledger).is_ok_and(|file| file.len() > 0);
            // Looked at in between, and also left as it was for the next pull to open.
            if begun && random.chance(1, 2) {
                let opened = Ledger::open(Some(&ledger)).unwrap();
                assert!(opened.verify().unwrap().iter().all(donelight::ledger::verify::Verified::fits));
                drop(opened);
                verify(&ledger);
                let (kept, journal) = (rows(&ledger), bench.journal());
                assert_eq!(kept, journal[..kept.len()], "whole windows from the first on");
                match kept.len() {
                    0 => kills.before_any_record += 1,
                    n if n < journal.len() => kills.midway += 1,
                    _ => kills.with_all_records += 1,
                }
            } else if begun {
                kills.not_looked_at += 1;
            } else {
                kills.before_any_record += 1;
            }
        }
        bench.complete(&ledger);
        verify(&ledger);
        assert_eq!(rows(&ledger), bench.journal());
        for file in ["", "-wal", "-shm"].map(|end| ledger.with_extension(format!("sqlite{end}"))) {
            let _ = fs::remove_file(file);
        }
    }
    println!("{kills:?}, {} ledgers, a whole pull took {whole:?}", number - 1);
    if is_long() {
        assert!(kills.midway >= target / 10, "{kills:?}");
    }
}
