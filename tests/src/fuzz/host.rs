//! The decoders of the host: what a user's files and command lines can hold.

use std::path::Path;

use clap::Parser;
use donelight::cli::Cli;
use donelight::ledger::{Ledger, UnixMillis, Window};
use donelight::level;
use donelight::plan_file::{self, describe};
use donelight::readings::{self, Columns};
use donelight_core::chain::Digest;
use donelight_core::record::{Event, Sealed, Seq};
use donelight_core::wire::Hello;

use super::Decoder;
use super::device::fits_a_record;
use super::samples::{STATION, samples};

pub(super) const DECODERS: [Decoder; 5] = [
    Decoder {
        name: "plan-toml",
        feed: plan_toml,
        samples: plans,
        words: PLAN_WORDS,
        short: 3_000,
        long: 250_000,
    },
    Decoder {
        name: "readings-csv",
        feed: readings_csv,
        samples: tables,
        words: &[
            b",",
            b";",
            b"\t",
            b"\"",
            b"\"\"",
            b"\n",
            b"\r\n",
            b"#",
            b"\xef\xbb\xbf",
            b"\0",
            b"reading",
            b"subgroup",
            b"1,5",
        ],
        short: 4_000,
        long: 500_000,
    },
    Decoder {
        name: "level",
        feed: level_text,
        samples: || ["95%", "0.95", "99,73 %", ".5", "1.33", "4294.967295"].map(Vec::from).to_vec(),
        words: &[b"%", b".", b",", b" ", b"000000", b"\xe2\x80\x89", b"-", b"\xef\xbc\x99"],
        short: 20_000,
        long: 1_500_000,
    },
    Decoder {
        name: "command-line",
        feed: command_line,
        samples: command_lines,
        words: &[
            b"--json",
            b"--index",
            b"cpk",
            b"--confidence",
            b"95%",
            b"--",
            b"=",
            b"--help",
            b"nan",
            b"--within",
        ],
        short: 1_500,
        long: 60_000,
    },
    Decoder {
        name: "ledger-file",
        feed: ledger_file,
        samples: ledgers,
        words: &[b"Done", b"SQLite format 3\0", &[0; 100]],
        short: 300,
        long: 20_000,
    },
];

const PLAN_WORDS: &[&[u8]] = &[
    b"name",
    b"part",
    b"unit",
    b"resolution",
    b"specification",
    b"lower",
    b"upper",
    b"target",
    b"capability",
    b"index",
    b"confidence",
    b"kind",
    b"sigma",
    b"method",
    b"subgroups",
    b"size",
    b"stop",
    b"planned",
    b"precision",
    b"limit",
    b"early",
    b"claim",
    b"against",
    b"gauge",
    b"baud",
    b"watch",
    b"same_in_a_row",
    b"[",
    b"]",
    b"[[",
    b"]]",
    b"{",
    b"}",
    b"=",
    b"\"",
    b"'''",
    b"\"\"\"",
    b"\n",
    b"#",
    b"\\u0000",
    b"\\",
    b"true",
    b"1979-05-27T07:32:00Z",
    b"0x7f",
    b"cpm",
    b"exact",
    b"pooled",
    b"\"10%\"",
];

fn plans() -> Vec<Vec<u8>> {
    let early = "name = \"Bell rims\"\nresolution = \"0.01\"\n[specification]\nlower = \"1\"\nupper = \"2\"\n[capability]\n\
                 index = \"cpl\"\nkind = \"lower\"\nmethod = \"noncentral-t\"\n[subgroups]\nsize = 5\n[stop]\nplanned = 50\n\
                 precision = \"20%\"\nlimit = 60\n";
    [plan_file::EXAMPLE, early].map(|text| text.as_bytes().to_vec()).to_vec()
}

/// A plan that is taken can be told in words and fits a record; of one that is not, every fault has a line and words.
fn plan_toml(bytes: &[u8]) -> bool {
    let text = String::from_utf8_lossy(bytes);
    match plan_file::from_text(&text) {
        Ok(plan) => {
            assert!(!describe::facts(&plan).is_empty());
            fits_a_record(Event::Plan(plan));
            true
        }
        Err(faults) => {
            let lines = text.lines().count().max(1);
            assert!(!faults.is_empty());
            for fault in faults {
                assert!(!fault.message.is_empty());
                assert!((1..=lines + 1).contains(&fault.line), "line {} of {lines}", fault.line);
            }
            false
        }
    }
}

fn tables() -> Vec<Vec<u8>> {
    [
        "reading\n12.001\n12.002\n11.998\n",
        "# lids\nsubgroup;reading;note\n1;12,001;a\n1;12,002;\n2;11,998;\"c;d\"\n2;12,000;e\n",
        "subgroup\treading\n1\t12.001\n1\t12.003\n2\t12.002\n",
        "1,12.001\n1,12.002\n1,12.003\n2,12.001\n",
        "12.001 mm\n12.002 mm\n\n   \n12.003\n",
    ]
    .map(|text| text.as_bytes().to_vec())
    .to_vec()
}

/// A table is taken whole, or every bad row is named.
fn readings_csv(bytes: &[u8]) -> bool {
    let resolution = "0.001".parse().expect("a resolution");
    let columns = match bytes.len() % 4 {
        0 => Columns { readings: Some("2"), subgroups: Some("1") },
        1 => Columns { readings: Some("reading"), subgroups: Some("subgroup") },
        2 => Columns { readings: None, subgroups: Some("subgroup") },
        _ => Columns::default(),
    };
    match readings::from_bytes(bytes, &columns, resolution, "mm") {
        Ok(file) => {
            assert!(!file.readings.is_empty() && file.readings.len() <= bytes.len());
            true
        }
        Err(error) => {
            assert!(!error.to_string().is_empty());
            false
        }
    }
}

/// What is read is shown so that it reads back.
fn level_text(bytes: &[u8]) -> bool {
    let text = String::from_utf8_lossy(bytes);
    let _ = (level::alpha(&text), level::index_value(&text));
    let Ok(found) = level::read(&text) else { return false };
    for shown in [level::plain(found.millionths), level::percent(found.millionths)] {
        assert_eq!(level::read(&shown).map(|level| level.millionths), Ok(found.millionths), "{shown}");
    }
    true
}

fn command_lines() -> Vec<Vec<u8>> {
    [
        "size precision --index cpk --at 1.5 --within 10% --confidence 95% --kind lower --subgroups 5",
        "size power --index cpk --claim 1.5 --against 1.3 --alpha 10% --power 90% --method exact",
        "assess readings.csv --lower 1.95 --upper 2.05 --resolution 0.001 --column reading",
        "assess --summary n=50,mean=2.001,sd=0.01 --lower 1.9 --upper 2.1",
        "virtual --process normal:2,0.01 --rate 40 --seed 3 --json",
        "station pull --ledger ledger.sqlite --port /dev/ttyACM0",
        "ledger verify --ledger ledger.sqlite",
    ]
    .map(|line| line.replace(' ', "\n").into_bytes())
    .to_vec()
}

/// One argument a line.
fn command_line(bytes: &[u8]) -> bool {
    let text = String::from_utf8_lossy(bytes);
    match Cli::try_parse_from(std::iter::once("donelight").chain(text.split('\n').take(64))) {
        Ok(_) => true,
        Err(error) => {
            assert!(!error.render().to_string().is_empty());
            false
        }
    }
}

/// In memory where there is such a folder: no damaged ledger needs to outlast a power failure.
fn folder() -> tempfile::TempDir {
    let memory = Path::new("/dev/shm");
    let made = if memory.is_dir() { tempfile::tempdir_in(memory) } else { tempfile::tempdir() };
    made.expect("a folder")
}

fn ledgers() -> Vec<Vec<u8>> {
    let folder = folder();
    let path = folder.path().join("ledger.sqlite");
    let mut ledger = Ledger::open(Some(&path)).expect("a new one");
    let hello = Hello {
        station: STATION,
        firmware: donelight_core::text::Text::new("fuzz").expect("short"),
        next: Seq(2),
        oldest: Seq(1),
        head: Digest::origin(STATION),
    };
    ledger.meet(&hello, UnixMillis(1)).expect("it is ours");
    let records: Vec<_> = samples()
        .records
        .iter()
        .take(40)
        .map_while(|bytes| Some((Sealed::split(bytes).ok()?.0.seq()?, bytes.as_slice())))
        .scan(Seq(0), |before, (seq, bytes)| (seq > std::mem::replace(before, seq)).then_some((seq, bytes)))
        .collect();
    let window = Window { before: Digest::origin(STATION), records };
    assert!(ledger.commit(STATION, &window, UnixMillis(2)).expect("it is ours").new > 5);
    drop(ledger);
    let kept = std::fs::read(&path).expect("just written");
    let first = include_bytes!("../../../host/tests/fixtures/ledger-schema-1.sqlite").to_vec();
    let mut newer = kept.clone();
    newer[60..64].copy_from_slice(&9_u32.to_be_bytes());
    let mut foreign = kept.clone();
    foreign[68..72].copy_from_slice(b"Cats");
    vec![kept.clone(), kept, first, newer, foreign, b"seq,bytes\n1,0a\n".to_vec()]
}

/// A ledger opens and all of it can be looked at, or it is refused with words and is left as it was.
fn ledger_file(bytes: &[u8]) -> bool {
    let folder = folder();
    let path = folder.path().join("ledger.sqlite");
    std::fs::write(&path, bytes).expect("a file");
    let read = Ledger::open_to_read(Some(&path)).map(|ledger| look_at(&ledger));
    drop(read);
    assert_eq!(std::fs::read(&path).expect("still there"), bytes, "reading changed it");
    match Ledger::open(Some(&path)) {
        Ok(ledger) => {
            look_at(&ledger);
            true
        }
        Err(error) => {
            assert!(!error.to_string().is_empty());
            assert_eq!(std::fs::read(&path).expect("still there"), bytes, "{error}, yet it was changed");
            false
        }
    }
}

fn look_at(ledger: &Ledger) {
    let _ = (ledger.verify(), ledger.studies(), ledger.stations(), ledger.study(None));
    let _ = (ledger.last(STATION), ledger.head(STATION), ledger.clock_is_set(STATION));
}
