//! How every command answers: in words or as JSON, with an exit code that a script can trust.
//!
//! | exit code | meaning |
//! |---|---|
//! | 0 | done |
//! | 1 | refused by the world (no such file, invalid plan, busy port …), or a claim that was not shown |
//! | 2 | wrong use: options that are unknown, out of range or contradict each other |

use std::io::{self, Write};
use std::process::ExitCode;

use serde_json::{Value, json};

/// What the process tells its caller when it ends.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Exit {
    /// It is done, and a claim, if there was one, is shown.
    Done,
    /// It could not be done, or the claim is not shown.
    Refused,
    /// The command line asks for what makes no sense.
    WrongUse,
}

impl From<Exit> for ExitCode {
    fn from(exit: Exit) -> Self {
        match exit {
            Exit::Done => Self::SUCCESS,
            Exit::Refused => Self::from(1),
            Exit::WrongUse => Self::from(2),
        }
    }
}

/// The end of a command that ran: the same content in words and as JSON.
#[derive(Clone, Debug)]
pub struct Answer {
    /// For people; may have several lines, without a last line end.
    pub text: String,
    /// For scripts.
    pub json: Value,
    /// [`Exit::Done`], or [`Exit::Refused`] for a claim that is not shown.
    pub exit: Exit,
}

impl Answer {
    /// An answer of a command that did what it was asked.
    #[must_use]
    pub fn done(text: impl Into<String>, json: Value) -> Self {
        Self { text: text.into(), json, exit: Exit::Done }
    }
}

/// What an error type says to become a [`Failure`]; `Display` is the message.
pub trait Explain: std::error::Error {
    /// A short, stable name for scripts, such as `file-missing`.
    fn kind(&self) -> &'static str;
    /// What the reader can do about it, as a sentence.
    fn help(&self) -> String;
    /// [`Exit::Refused`], unless the command line itself is wrong.
    fn exit(&self) -> Exit {
        Exit::Refused
    }
    /// More for scripts: an object whose members join the JSON error, such as a list of faults.
    fn details(&self) -> Option<Value> {
        None
    }
}

/// The end of a command that could not do what it was asked.
#[derive(Clone, Debug, PartialEq)]
pub struct Failure {
    /// See [`Explain::kind`].
    pub kind: &'static str,
    /// What is wrong.
    pub message: String,
    /// What to do.
    pub help: String,
    /// See [`Explain::exit`].
    pub exit: Exit,
    /// See [`Explain::details`].
    pub details: Option<Value>,
}

impl<E: Explain> From<E> for Failure {
    fn from(error: E) -> Self {
        Self {
            kind: error.kind(),
            message: error.to_string(),
            help: error.help(),
            exit: error.exit(),
            details: error.details(),
        }
    }
}

impl Failure {
    fn json(&self) -> Value {
        let mut error = json!({ "kind": self.kind, "message": self.message, "help": self.help });
        if let (Some(error), Some(Value::Object(details))) = (error.as_object_mut(), &self.details) {
            error.extend(details.clone());
        }
        json!({ "error": error })
    }

    fn text(&self) -> String {
        if self.help.is_empty() {
            format!("error: {}\n", self.message)
        } else {
            format!("error: {}\n\n{}\n", self.message, self.help)
        }
    }
}

/// Where a command speaks: stdout for answers, stderr for errors.
#[derive(Debug)]
pub struct Console {
    json: bool,
    closed: bool,
    broken: Option<io::ErrorKind>,
}

impl Console {
    /// `json`: every answer is one line of JSON.
    #[must_use]
    pub const fn new(json: bool) -> Self {
        Self { json, closed: false, broken: None }
    }

    /// Whether answers are JSON; then nothing else may go to stdout.
    #[must_use]
    pub const fn json(&self) -> bool {
        self.json
    }

    /// Whether the reader of stdout has gone (`donelight … | head`); a command that runs for long should then end.
    #[must_use]
    pub const fn closed(&self) -> bool {
        self.closed
    }

    /// Says one thing now, while the command goes on: `text` for people, `json` for scripts.
    pub fn say(&mut self, text: &str, json: &Value) {
        if self.json { self.write(&format!("{json}\n")) } else { self.write(&format!("{text}\n")) }
    }

    /// Says how the command ended and gives the exit code.
    #[must_use]
    pub fn finish(mut self, result: Result<Answer, Failure>) -> ExitCode {
        let exit = match result {
            Ok(answer) => {
                self.say(&answer.text, &answer.json);
                answer.exit
            }
            Err(failure) => {
                self.complain(&failure);
                failure.exit
            }
        };
        match self.broken {
            None => exit.into(),
            Some(kind) => {
                // Best effort: if stderr is gone too, the exit code still tells.
                let _ = writeln!(
                    io::stderr(),
                    "error: the answer could not be written to standard output: {kind}"
                );
                Exit::Refused.into()
            }
        }
    }

    /// Passes on what clap says: help and version on stdout, usage errors on stderr.
    #[must_use]
    pub fn finish_usage(mut self, usage: &clap::Error) -> ExitCode {
        if !usage.use_stderr() {
            self.write(&usage.render().to_string());
            return Exit::Done.into();
        }
        let rendered = usage.render().to_string();
        let _ = io::stderr().write_all(rendered.as_bytes());
        if self.json {
            let message = rendered.lines().next().unwrap_or_default().trim_start_matches("error: ");
            let help = rendered.lines().skip(1).map(str::trim).filter(|line| !line.is_empty());
            let failure = Failure {
                kind: "usage",
                message: message.to_owned(),
                help: help.collect::<Vec<_>>().join(" "),
                exit: Exit::WrongUse,
                details: None,
            };
            self.write(&format!("{}\n", failure.json()));
        }
        Exit::WrongUse.into()
    }

    fn complain(&mut self, failure: &Failure) {
        let _ = io::stderr().write_all(failure.text().as_bytes());
        if self.json {
            self.write(&format!("{}\n", failure.json()));
        }
    }

    /// A reader that has gone is no error; anything else (a full disk behind stdout) is kept for the end.
    fn write(&mut self, text: &str) {
        if self.closed || self.broken.is_some() {
            return;
        }
        let mut stdout = io::stdout().lock();
        match stdout.write_all(text.as_bytes()).and_then(|()| stdout.flush()) {
            Ok(()) => {}
            Err(error) if error.kind() == io::ErrorKind::BrokenPipe => self.closed = true,
            Err(error) => self.broken = Some(error.kind()),
        }
    }
}
