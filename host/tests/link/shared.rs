//! Two hosts on one line that nobody locks: each sees what the station answers to either.

use std::collections::VecDeque;
use std::io::{self, ErrorKind, Read, Write};
use std::sync::{Arc, Mutex};
use std::time::Instant;

use donelight::link::memory::MemoryLink;
use donelight::link::pull::pull;
use donelight::link::{Session, Transport};

use crate::support::*;

struct Line {
    station: MemoryLink,
    arrived: [VecDeque<u8>; 2],
}

/// One host's end.
struct End {
    line: Arc<Mutex<Line>>,
    host: usize,
}

impl Read for End {
    fn read(&mut self, buffer: &mut [u8]) -> io::Result<usize> {
        let mut line = self.line.lock().unwrap();
        let mut bytes = [0; 64];
        if let Ok(got) = line.station.read(&mut bytes) {
            line.arrived.iter_mut().for_each(|arrived| arrived.extend(&bytes[..got]));
        }
        match line.arrived[self.host].is_empty() {
            true => Err(ErrorKind::TimedOut.into()),
            false => line.arrived[self.host].read(buffer),
        }
    }
}

impl Write for End {
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
        self.line.lock().unwrap().station.write(bytes)
    }

    fn flush(&mut self) -> io::Result<()> {
        Ok(())
    }
}

impl Transport for End {
    fn now(&self) -> Instant {
        self.line.lock().unwrap().station.now()
    }
}

/// Both pull at the same time, into these ledgers.
fn both_pull(paths: [&std::path::Path; 2]) -> MemoryLink {
    let station = station_with_readings(900);
    let line = Arc::new(Mutex::new(Line { station, arrived: Default::default() }));
    std::thread::scope(|scope| {
        for (host, path) in paths.into_iter().enumerate() {
            let end = End { line: Arc::clone(&line), host };
            scope.spawn(move || {
                let mut ledger = open(path);
                let (mut session, _) = Session::open(end).unwrap();
                let pulled = pull(&mut session, &mut ledger, &mut |_| {}).unwrap();
                assert_eq!(pulled.gaps, []);
            });
        }
    });
    Arc::into_inner(line).expect("both have gone").into_inner().unwrap().station
}

#[test]
fn two_hosts_that_pull_at_once_into_their_own_ledgers_both_get_all() {
    let ((_a, first), (_b, second)) = (folder(), folder());
    let mut station = both_pull([&first, &second]);
    // The later one may have set the clock once more.
    let all = journal(&mut station);
    for path in [first, second] {
        let kept = rows(&path);
        assert!(kept.len() >= 903 && kept[..] == all[..kept.len()], "{} of {}", kept.len(), all.len());
    }
}

#[test]
fn two_hosts_that_pull_at_once_into_one_ledger_double_nothing() {
    let (_folder, path) = folder();
    let mut station = both_pull([&path, &path]);
    pull_all(&mut station, &mut open(&path));
    assert_eq!(rows(&path), journal(&mut station));
    assert!(open(&path).verify().unwrap()[0].fits());
}

#[test]
fn two_sessions_never_take_each_others_answers_for_their_own() {
    let station = station_with_readings(30);
    let line = Arc::new(Mutex::new(Line { station, arrived: Default::default() }));
    let [mut one, mut two] = [0, 1].map(|host| {
        let end = End { line: Arc::clone(&line), host };
        Session::open(end).unwrap().0
    });
    for from in 1..30 {
        let from = donelight_core::record::Seq(from);
        let first = one.records(from).unwrap().1.to_vec();
        let other = two.records(from.next()).unwrap().1.to_vec();
        assert_ne!(first, other);
        let seq = |bytes: &[u8]| donelight_core::record::Sealed::split(bytes).unwrap().0.seq();
        assert_eq!((seq(&first), seq(&other)), (Some(from), Some(from.next())));
    }
}
