//! Pulls over bad lines, up to one fault in 50 bytes: each is repeated as a user would until it says that it is complete, and
//! then the ledger holds the journal, byte for byte. `DONELIGHT_LINK_CASE=<number>` runs one case; `DONELIGHT_LONG=1` with
//! `--release` runs the long form. A case's number fixes all but the time of day that the host tells the station.

use std::cell::RefCell;
use std::path::Path;
use std::rc::Rc;
use std::sync::atomic::{AtomicU64, Ordering};
use std::time::Duration;

use donelight::ledger::Ledger;
use donelight::link::memory::MemoryLink;
use donelight::link::pull::{Cause, PullError, Pulled, pull};
use donelight::link::resume::pull_resumed;
use donelight::link::{Patience, Session};
use donelight::plan_file;
use donelight::virtual_station::flash::RamFlash;
use donelight_core::record::Seq;
use donelight_core::wire::{Hello, StationId};
use donelight_tests::bad_line::{BadLine, Faults, Port};
use donelight_tests::random::Random;
use donelight_tests::sequences::is_long;

const CASE_VARIABLE: &str = "DONELIGHT_LINK_CASE";
const SHORT: u64 = 240;
const LONG: u64 = 12_000;
/// More often than this no user would try.
const ATTEMPTS_MAX: u32 = 500;
/// One fault in so many bytes.
const RATES: [u64; 6] = [50, 50, 100, 200, 1_000, 5_000];

const PLAN: &str = "name = \"Lantern lids, lot 7\"\nunit = \"mm\"\nresolution = \"0.001\"\n[specification]\nlower = \"1.95\"\n\
                    upper = \"2.05\"\n[capability]\nindex = \"cpk\"\n[stop]\nplanned = 12\nprecision = \"45%\"\nlimit = 30\n";

/// What all cases came to.
#[derive(Clone, Copy, Debug, Default)]
struct Sum {
    cases: u64,
    attempts: u64,
    records: u64,
    most_attempts: u64,
    faults: Faults,
}

impl Sum {
    fn add(&mut self, other: &Self) {
        self.cases += other.cases;
        self.attempts += other.attempts;
        self.records += other.records;
        self.most_attempts = self.most_attempts.max(other.most_attempts);
        self.faults.add(&other.faults);
    }
}

/// A station with a study of some readings, mostly a few, at times more than its journal can take; but not where each
/// record takes several attempts.
fn station(random: &mut Random, id: StationId, bytes_a_fault: u64) -> MemoryLink {
    let mut station = MemoryLink::start(RamFlash::blank(5), id).expect("a blank flash suits");
    station.pass(1_000);
    let plan = plan_file::from_text(PLAN).expect("a valid plan");
    let loaded = Session::open(&mut station).expect("a good line").0.load(&plan, false);
    assert!(loaded.is_ok());
    let many = bytes_a_fault >= 200 && random.chance(1, 6);
    let readings = if many { random.below(600) } else { random.below(40) };
    for _ in 0..readings {
        station.pass(300);
        let micrometres = random.between(1_990, 2_010);
        station.gauge(format!("{}.{:03} mm\r\n", micrometres / 1_000, micrometres % 1_000).as_bytes());
    }
    station
}

/// The records in the ledger, as any SQLite program sees them.
fn rows(path: &Path, id: StationId) -> Vec<(Seq, Vec<u8>)> {
    let connection = rusqlite::Connection::open(path).expect("a ledger");
    let mut query = connection
        .prepare("SELECT seq, bytes FROM records WHERE station = ?1 ORDER BY seq")
        .expect("its table");
    let rows = query.query_map([id.0], |row| Ok((Seq(row.get(0)?), row.get(1)?))).expect("its rows");
    rows.map(|row| row.expect("a row")).collect()
}

/// A host at work on one station.
struct Host {
    line: Rc<RefCell<BadLine>>,
    id: StationId,
    random: Random,
    attempts: u64,
}

impl Host {
    /// Plugs in and says hello.
    fn meet(&mut self) -> Option<(Session<Port>, Hello)> {
        let number = self.random.bits() as u32;
        Session::open_numbered(Port::open(&self.line), Patience::FIRST, Patience::LATER, number).ok()
    }

    /// One run of the command; `None` if not even a hello came through.
    fn run(&mut self, ledger: &mut Ledger) -> Option<(Hello, Result<Pulled, PullError>)> {
        self.attempts += 1;
        let (mut session, hello) = self.meet()?;
        assert_eq!(hello.station, self.id);
        if self.random.chance(1, 4) {
            let id = self.id;
            let mut find = |_| (0..4).find_map(|_| self.meet()).map(|(session, _)| session);
            let resumed = pull_resumed(session, id, ledger, &mut |_| {}, &mut find, Duration::ZERO);
            return Some((hello, resumed.map(|resumed| resumed.pulled)));
        }
        Some((hello, pull(&mut session, ledger, &mut |_| {})))
    }
}

fn case(number: u64) -> Sum {
    let mut random = Random::new(number.wrapping_mul(0x9e37_79b9_7f4a_7c15));
    let id = StationId(number.to_be_bytes());
    let bytes_a_fault = random.one(&RATES);
    let station = station(&mut random, id, bytes_a_fault);
    let to_measure = random.below(20) as u32;
    let line_random = Random::new(random.bits());
    let line = Rc::new(RefCell::new(BadLine::new(station, id, line_random, bytes_a_fault, to_measure)));
    let memory = Path::new("/dev/shm");
    let folder = if memory.is_dir() { tempfile::tempdir_in(memory) } else { tempfile::tempdir() };
    let folder = folder.expect("a folder");
    let path = folder.path().join("ledger.sqlite");
    let mut ledger = Ledger::open(Some(&path)).expect("a new ledger");
    let mut host = Host { line, id, random, attempts: 0 };
    loop {
        assert!(host.attempts < ATTEMPTS_MAX.into(), "it comes to no end");
        if host.random.chance(1, 6) {
            ledger = Ledger::open(Some(&path)).expect("the same ledger");
        }
        let outcome = host.run(&mut ledger);
        let last = ledger.last(id).expect("it can be read");
        let mut line = host.line.borrow_mut();
        let released = line.station().recorder().journal().released();
        assert!(released <= last, "confirmed {released}, kept {last}");
        let Some((hello, outcome)) = outcome else { continue };
        match outcome {
            Ok(pulled) => {
                assert_eq!(pulled.gaps, [], "nothing is missing");
                assert!(pulled.through.next() >= hello.next, "complete, yet through {}", pulled.through);
                let kept = rows(&path, id);
                assert_eq!(kept.as_slice(), &line.journal()[..kept.len()]);
                assert_eq!(kept.len(), last.0 as usize);
                if kept.len() == line.journal().len() {
                    break;
                }
                // Measured meanwhile. The next one is to be the last.
                line.stop_measuring();
            }
            Err(PullError { cause: Cause::Link(_), kept }) => assert!(kept.through <= last),
            Err(other) => panic!("a bad line is no reason for this: {other}"),
        }
    }
    let verified = ledger.verify().expect("it can be read");
    let [found] = verified.as_slice() else { panic!("{verified:?}") };
    let mut line = host.line.borrow_mut();
    assert!(found.fits() && found.gaps.is_empty() && found.conflicts.is_empty(), "{found:?}");
    assert_eq!(found.head, Some(line.station().recorder().journal().digest()));
    let records = line.journal().len() as u64;
    Sum { cases: 1, attempts: host.attempts, records, most_attempts: host.attempts, faults: line.faults() }
}

/// Runs these cases on all cores; a failure names its case.
fn campaign(numbers: std::ops::Range<u64>) -> Sum {
    let next = AtomicU64::new(numbers.start);
    let cores = std::thread::available_parallelism().map_or(1, std::num::NonZero::get);
    let work = || {
        let mut sum = Sum::default();
        loop {
            let number = next.fetch_add(1, Ordering::Relaxed);
            if number >= numbers.end {
                return sum;
            }
            match std::panic::catch_unwind(|| case(number)) {
                Ok(one) => sum.add(&one),
                Err(panic) => {
                    eprintln!("case {number} failed; {CASE_VARIABLE}={number} runs it alone");
                    next.store(u64::MAX / 2, Ordering::Relaxed);
                    std::panic::resume_unwind(panic);
                }
            }
        }
    };
    std::thread::scope(|scope| {
        let workers: Vec<_> = (0..cores).map(|_| scope.spawn(work)).collect();
        let mut sum = Sum::default();
        for worker in workers {
            sum.add(&worker.join().unwrap_or_else(|panic| std::panic::resume_unwind(panic)));
        }
        sum
    })
}

#[test]
fn over_a_bad_line_each_pull_ends_with_the_journal_in_the_ledger_byte_for_byte() {
    let asked = std::env::var(CASE_VARIABLE).ok();
    let numbers = match asked.as_ref().map(|number| number.parse::<u64>().expect("a case's number")) {
        Some(number) => number..number + 1,
        None => 0..if is_long() { LONG } else { SHORT },
    };
    let began = std::time::Instant::now();
    let wanted = numbers.end - numbers.start;
    let sum = campaign(numbers);
    println!("{sum:#?} in {:.1} s", began.elapsed().as_secs_f64());
    assert_eq!(sum.cases, wanted);
    if asked.is_none() {
        for (name, times) in sum.faults.named() {
            assert!(times >= 10, "{name} came about {times} times only");
        }
    }
}

#[test]
fn a_cases_number_brings_about_the_same_faults_again() {
    for number in [0, 1, 7] {
        let [first, again] = [(), ()].map(|()| case(number));
        assert_eq!((first.faults, first.attempts), (again.faults, again.attempts), "case {number}");
    }
}
