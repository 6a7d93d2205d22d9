//! The process that emulates the board: one JSON object a line to it, one a line from it.

use std::io::{BufRead, BufReader, Write};
use std::path::Path;
use std::process::{Child, ChildStdin, Command, Stdio};
use std::sync::mpsc::{self, Receiver};
use std::thread;
use std::time::Duration;

use serde::Deserialize;
use serde_json::Value;

use super::event::Event;

/// The emulated core makes some 10 million cycles a second; no command of a test needs more than a minute, on a machine
/// that does nothing else.
const PATIENCE: Duration = Duration::from_secs(300);

/// What a command brought.
#[derive(Debug, Deserialize)]
pub(super) struct Answer {
    #[serde(default)]
    error: Option<String>,
    /// What was asked for, if the command asks.
    #[serde(default)]
    pub(super) result: Value,
    /// Simulated time in nanoseconds.
    pub(super) now: u64,
    /// Cycles in which the core was not asleep.
    pub(super) cycles: u64,
    /// What happened meanwhile.
    pub(super) events: Vec<Event>,
}

/// A running emulator; ended when dropped.
#[derive(Debug)]
pub(super) struct Node {
    child: Child,
    stdin: ChildStdin,
    answers: Receiver<String>,
}

impl Node {
    /// Starts it with this image.
    pub(super) fn start(image: &Path) -> Self {
        let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("emulator");
        assert!(folder.join("node_modules").is_dir(), "the emulator is not installed: run tests/run");
        let mut child = Command::new("node")
            .arg(folder.join("board.mjs"))
            .arg(image)
            .stdin(Stdio::piped())
            .stdout(Stdio::piped())
            .spawn()
            .expect("node 20 starts");
        let stdin = child.stdin.take().expect("piped");
        let stdout = child.stdout.take().expect("piped");
        let (send, answers) = mpsc::channel();
        thread::spawn(move || {
            for line in BufReader::new(stdout).lines() {
                let Ok(line) = line else { return };
                if send.send(line).is_err() {
                    return;
                }
            }
        });
        Self { child, stdin, answers }
    }

    /// Gives a command and waits for its answer.
    #[track_caller]
    pub(super) fn command(&mut self, command: &Value) -> Answer {
        writeln!(self.stdin, "{command}").expect("the emulator listens");
        let line = self.answers.recv_timeout(PATIENCE);
        let line = line.unwrap_or_else(|_| panic!("the emulator does not answer {command}"));
        let answer: Answer = serde_json::from_str(&line).unwrap_or_else(|error| panic!("{error}: {line}"));
        if let Some(error) = &answer.error {
            panic!("{command}: {error}");
        }
        answer
    }
}

impl Drop for Node {
    fn drop(&mut self) {
        let _ = self.child.kill();
        let _ = self.child.wait();
    }
}
