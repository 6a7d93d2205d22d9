//! A virtual station in a process of its own, with what it tells.

use std::ffi::OsStr;
use std::io::{BufRead, BufReader, Write};
use std::path::Path;
use std::process::{Child, Command, ExitStatus, Stdio};
use std::sync::mpsc::{self, Receiver, RecvTimeoutError};
use std::thread;
use std::time::{Duration, Instant};

use rustix::process::{Pid, Signal};
use serde_json::Value;

use crate::command;

/// A station on a busy machine takes some milliseconds a reading; nothing here waits longer than this for one.
const PATIENCE: Duration = Duration::from_secs(60);

/// `donelight virtual --json …` at work; killed when dropped.
#[derive(Debug)]
pub struct VirtualBench {
    child: Child,
    events: Receiver<String>,
    /// What stood on its first line.
    pub first: Value,
}

impl VirtualBench {
    /// Starts a station on this store with these further arguments.
    ///
    /// # Panics
    /// If it does not start.
    #[track_caller]
    pub fn start<I: AsRef<OsStr>>(store: &Path, arguments: impl IntoIterator<Item = I>) -> Self {
        let mut child = Command::new(command::path())
            .args(["virtual", "--json", "--store"])
            .arg(store)
            .args(arguments)
            .stdin(Stdio::piped())
            .stdout(Stdio::piped())
            .spawn()
            .expect("the station starts");
        let stdout = child.stdout.take().expect("piped");
        let (send, events) = mpsc::channel();
        thread::spawn(move || {
            for line in BufReader::new(stdout).lines() {
                let Ok(line) = line else { return };
                if send.send(line).is_err() {
                    return;
                }
            }
        });
        let mut bench = Self { child, events, first: Value::Null };
        bench.first = bench.next(PATIENCE).expect("its first line");
        bench
    }

    /// The path of its port.
    ///
    /// # Panics
    /// If it named none.
    #[must_use]
    pub fn port(&self) -> &str {
        self.first["port"].as_str().expect("a port")
    }

    /// Its next event; `None` if none comes within `patience`, or if it has ended.
    ///
    /// # Panics
    /// If what comes is not JSON.
    pub fn next(&mut self, patience: Duration) -> Option<Value> {
        match self.events.recv_timeout(patience) {
            Ok(line) => Some(serde_json::from_str(&line).expect("a line of JSON")),
            Err(RecvTimeoutError::Timeout | RecvTimeoutError::Disconnected) => None,
        }
    }

    /// All its events up to the first one that is `wanted`.
    ///
    /// # Panics
    /// If none comes within a minute.
    #[track_caller]
    pub fn events_until(&mut self, wanted: impl Fn(&Value) -> bool) -> Vec<Value> {
        let end = Instant::now() + PATIENCE;
        let mut events = Vec::new();
        while let Some(event) = self.next(end.saturating_duration_since(Instant::now())) {
            events.push(event);
            if events.last().is_some_and(&wanted) {
                return events;
            }
        }
        panic!("what was waited for did not come; the last events: {:?}", events.iter().rev().take(5));
    }

    /// All its events up to the lighting of the done lamp.
    ///
    /// # Panics
    /// If that takes more than a minute.
    #[track_caller]
    pub fn events_until_done(&mut self) -> Vec<Value> {
        self.events_until(|event| event["event"] == "lamp" && event["lamp"] == "done" && event["lit"] == true)
    }

    /// Writes a line to its standard input.
    ///
    /// # Panics
    /// If it does not take it.
    pub fn type_line(&mut self, line: &str) {
        let stdin = self.child.stdin.as_mut().expect("open");
        writeln!(stdin, "{line}").and_then(|()| stdin.flush()).expect("the station reads its input");
    }

    /// Closes its standard input.
    pub fn close_stdin(&mut self) {
        self.child.stdin = None;
    }

    /// Kills it at once (SIGKILL).
    ///
    /// # Panics
    /// If the system refuses.
    pub fn kill(mut self) {
        self.child.kill().expect("it is ours");
        self.child.wait().expect("it is ours");
    }

    /// Asks it to end, as Ctrl-C does.
    ///
    /// # Panics
    /// If it has ended already.
    pub fn interrupt(&self) {
        let process = i32::try_from(self.child.id()).ok().and_then(Pid::from_raw).expect("a process");
        rustix::process::kill_process(process, Signal::INT).expect("it is ours");
    }

    /// Waits for its end, and gives the last events with the exit status.
    ///
    /// # Panics
    /// If it does not end within a minute.
    #[track_caller]
    pub fn end(mut self) -> (Vec<Value>, ExitStatus) {
        let end = Instant::now() + PATIENCE;
        let mut events = Vec::new();
        while Instant::now() < end {
            while let Some(event) = self.next(Duration::from_millis(20)) {
                events.push(event);
            }
            if let Some(status) = self.child.try_wait().expect("it is ours") {
                return (events, status);
            }
        }
        panic!("the station does not end");
    }
}

impl Drop for VirtualBench {
    fn drop(&mut self) {
        let _ = self.child.kill();
        let _ = self.child.wait();
    }
}
