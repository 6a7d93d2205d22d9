//! Runs the built command and looks at what it answers.

use std::path::Path;
use std::process::{Command, Output};

use serde_json::Value;

/// What the command said.
#[derive(Debug)]
pub(crate) struct Said {
    pub(crate) code: i32,
    pub(crate) out: String,
    pub(crate) err: String,
}

impl Said {
    fn new(output: Output) -> Self {
        let text = |bytes: Vec<u8>| String::from_utf8(bytes).expect("the command speaks UTF-8");
        let said = Self {
            code: output.status.code().expect("the command ended by itself"),
            out: text(output.stdout),
            err: text(output.stderr),
        };
        assert!(!said.err.contains("panicked"), "{}", said.err);
        said
    }

    /// The one line of JSON on stdout.
    pub(crate) fn json(&self) -> Value {
        assert_eq!(self.out.lines().count(), 1, "{self:?}");
        serde_json::from_str(&self.out).expect("stdout is JSON")
    }

    /// The exit code is as expected.
    #[track_caller]
    pub(crate) fn ends_with(self, code: i32) -> Self {
        assert_eq!(self.code, code, "{self:?}");
        self
    }
}

/// Runs `donelight` with words separated by spaces.
pub(crate) fn donelight(line: &str) -> Said {
    run(&line.split_whitespace().collect::<Vec<_>>(), Path::new("."))
}

/// Runs `donelight` with these arguments in a folder.
pub(crate) fn run(arguments: &[&str], folder: &Path) -> Said {
    let output = Command::new(env!("CARGO_BIN_EXE_donelight"))
        .args(arguments)
        .current_dir(folder)
        .output()
        .expect("the command starts");
    Said::new(output)
}
