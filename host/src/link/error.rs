//! What goes wrong on the link, and what to do about it.

use std::io;
use std::time::Duration;

use donelight_core::wire::{Reason, VERSION};

use crate::output::{Exit, Explain};

/// Why a request got no useful answer. Whatever was committed or recorded before stays so.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum LinkError {
    /// Not one byte came, ever.
    #[error("no answer within {} s", .waited.as_secs())]
    NoAnswer {
        /// How long it was waited for.
        waited: Duration,
    },
    /// A station that has answered before does so no more.
    #[error("the station no longer answers: no whole answer came within {} s", .waited.as_secs())]
    Silent {
        /// How long it was waited for.
        waited: Duration,
    },
    /// Bytes came, but not the answer.
    #[error("{bytes} bytes came within {} s, but no whole answer", .waited.as_secs())]
    Garbage {
        /// How many.
        bytes: u64,
        /// How long it was waited for.
        waited: Duration,
    },
    /// The port or the other end is gone.
    #[error("the station has gone ({0})")]
    Gone(#[source] io::Error),
    /// The station says no.
    #[error("{0}")]
    Refused(Reason),
    /// The station speaks another version of the link.
    #[error("the station speaks version {theirs} of the link, this command version {VERSION}")]
    Version {
        /// The station's.
        theirs: u8,
    },
    /// The answer is of a kind that this command does not know, or that does not belong to the request.
    #[error("the station gives an answer that this command does not know")]
    UnknownReply,
    /// The request does not fit a frame.
    #[error("the request is too long for the link")]
    TooLong,
}

impl Explain for LinkError {
    fn kind(&self) -> &'static str {
        match self {
            Self::NoAnswer { .. } => "no-answer",
            Self::Silent { .. } => "station-silent",
            Self::Garbage { .. } => "garbage",
            Self::Gone(_) => "station-gone",
            Self::Refused(reason) => match reason {
                Reason::StudyUnfinished => "study-unfinished",
                Reason::Plan(_) => "plan-invalid",
                Reason::NotRecorded(_) => "not-recorded",
                Reason::BeyondJournal => "beyond-journal",
                Reason::Version { .. } => "link-version",
                _ => "refused",
            },
            Self::Version { .. } => "link-version",
            Self::UnknownReply => "unknown-reply",
            Self::TooLong => "request-too-long",
        }
    }

    fn help(&self) -> String {
        match self {
            Self::NoAnswer { .. } => {
                "Is this port a Donelight station's? `donelight station list` shows them. If it is, unplug it, plug it \
                 in again and try once more."
            }
            Self::Silent { .. } => {
                "Unplug the station, plug it in again and run the same command again: nothing is lost or doubled by that."
            }
            Self::Garbage { .. } => {
                "Something else sends on this port, or another program reads from it (ModemManager and terminal \
                 programs do). End that program, or choose another port; `donelight station list` shows them."
            }
            Self::Gone(_) => "Check the cable and run the same command again: nothing is lost or doubled by that.",
            // The reasons say themselves what to do.
            Self::Refused(_) => "",
            Self::Version { theirs } if *theirs > VERSION => "Update this command.",
            Self::Version { .. } => "Update the station.",
            Self::UnknownReply => "Update this command.",
            Self::TooLong => "Shorten the plan's texts.",
        }
        .to_owned()
    }
}

/// Why a port cannot be used.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum PortError {
    /// No such file or device.
    #[error("there is no port {port}")]
    Missing {
        /// Its name.
        port: String,
    },
    /// It is there but is no serial port.
    #[error("{port} is not a serial port")]
    NotAPort {
        /// Its name.
        port: String,
    },
    /// Another program holds it.
    #[error("the port {port} is in use by another program")]
    Busy {
        /// Its name.
        port: String,
    },
    /// The user may not open it.
    #[error("no permission to open {port}")]
    Permission {
        /// Its name.
        port: String,
    },
    /// Anything else that the system says.
    #[error("the port {port} cannot be opened: {reason}")]
    Other {
        /// Its name.
        port: String,
        /// In the system's words.
        reason: String,
    },
    /// No station is attached.
    #[error("no station is attached")]
    NoStation,
    /// More than one station is attached.
    #[error("{} stations are attached: {}", .ports.len(), .ports.join(", "))]
    Several {
        /// Their ports.
        ports: Vec<String>,
    },
    /// The system does not list its ports.
    #[error("the serial ports cannot be listed: {reason}")]
    NotListed {
        /// In the system's words.
        reason: String,
    },
}

impl Explain for PortError {
    fn kind(&self) -> &'static str {
        match self {
            Self::Missing { .. } => "port-missing",
            Self::NotAPort { .. } => "port-not-serial",
            Self::Busy { .. } => "port-busy",
            Self::Permission { .. } => "port-permission",
            Self::Other { .. } => "port-failed",
            Self::NoStation => "no-station",
            Self::Several { .. } => "several-stations",
            Self::NotListed { .. } => "ports-not-listed",
        }
    }

    fn help(&self) -> String {
        match self {
            Self::Missing { .. } | Self::NotAPort { .. } => {
                "`donelight station list` shows the stations that are attached."
            }
            Self::Busy { .. } => {
                "End the other program (another donelight, a terminal program, ModemManager) and try again."
            }
            Self::Permission { .. } if cfg!(target_os = "linux") => {
                "Add yourself to the port's group with `sudo usermod -aG dialout $USER` (some systems call the group \
                 uucp), then log out and in again."
            }
            Self::Permission { .. } => "Ask the administrator of this computer for access to the port.",
            Self::Other { .. } => "Unplug the station, plug it in again and try once more.",
            Self::NoStation => {
                "Plug one in, or name its port with --port. `donelight virtual` gives one without hardware."
            }
            Self::Several { .. } => "Name one of them with --port; `donelight station blink` shows which one it is.",
            Self::NotListed { .. } => "Name the port with --port.",
        }
        .to_owned()
    }

    fn exit(&self) -> Exit {
        Exit::Refused
    }
}
