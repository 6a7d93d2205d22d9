//! The command `donelight`, built once and run as a person or a script runs it.

use std::ffi::OsStr;
use std::path::{Path, PathBuf};
use std::process::{Command, Output, Stdio};
use std::sync::OnceLock;
use std::sync::mpsc;
use std::thread;
use std::time::Duration;

use serde_json::Value;

/// A command that talks to a station gives up by itself long before this.
const PATIENCE: Duration = Duration::from_secs(120);

/// Where the built command lies. The first caller builds it, in the profile that the test itself was built in.
///
/// # Panics
/// If it does not build.
pub fn path() -> &'static Path {
    static PATH: OnceLock<PathBuf> = OnceLock::new();
    PATH.get_or_init(|| {
        let cargo = std::env::var_os("CARGO").unwrap_or_else(|| "cargo".into());
        let mut build = Command::new(cargo);
        build.args(["build", "--quiet", "-p", "donelight", "--bin", "donelight", "--message-format=json"]);
        if !cfg!(debug_assertions) {
            build.arg("--release");
        }
        let built = build
            .current_dir(env!("CARGO_MANIFEST_DIR"))
            .stderr(Stdio::inherit())
            .output()
            .expect("cargo starts");
        assert!(built.status.success(), "donelight does not build");
        let text = String::from_utf8(built.stdout).expect("cargo speaks UTF-8");
        text.lines()
            .filter_map(|line| serde_json::from_str::<Value>(line).ok())
            .find_map(|message| message["executable"].as_str().map(PathBuf::from))
            .expect("cargo names the command that it built")
    })
}

/// What a command said, and how it ended.
#[derive(Debug)]
pub struct Said {
    /// The exit code.
    pub code: i32,
    /// What stood on stdout.
    pub out: String,
    /// What stood on stderr.
    pub err: String,
}

impl Said {
    /// The exit code is as expected.
    ///
    /// # Panics
    /// If it is another one.
    #[track_caller]
    #[must_use]
    pub fn ends_with(self, code: i32) -> Self {
        assert_eq!(self.code, code, "{self:?}");
        self
    }

    /// The last line of stdout, as JSON.
    ///
    /// # Panics
    /// If there is none.
    #[track_caller]
    #[must_use]
    pub fn json(&self) -> Value {
        let line = self.out.lines().next_back().unwrap_or_default();
        serde_json::from_str(line).unwrap_or_else(|error| panic!("{error}: {self:?}"))
    }
}

/// Runs `donelight` with these arguments to its end.
///
/// # Panics
/// If it panics itself, is ended by a signal, or takes more than two minutes.
#[track_caller]
pub fn donelight<I: AsRef<OsStr>>(arguments: impl IntoIterator<Item = I>) -> Said {
    let arguments: Vec<_> = arguments.into_iter().map(|argument| argument.as_ref().to_owned()).collect();
    let child = Command::new(path())
        .args(&arguments)
        .stdin(Stdio::null())
        .stdout(Stdio::piped())
        .stderr(Stdio::piped())
        .spawn()
        .expect("the command starts");
    let (send, receive) = mpsc::channel();
    thread::spawn(move || send.send(child.wait_with_output()));
    let output = receive
        .recv_timeout(PATIENCE)
        .unwrap_or_else(|_| panic!("donelight {arguments:?} does not end"))
        .expect("its output can be read");
    said(output)
}

#[track_caller]
fn said(output: Output) -> Said {
    let text = |bytes: Vec<u8>| String::from_utf8(bytes).expect("the command speaks UTF-8");
    let (out, err) = (text(output.stdout), text(output.stderr));
    assert!(!err.contains("panicked"), "{err}");
    Said { code: output.status.code().expect("the command ended by itself"), out, err }
}
