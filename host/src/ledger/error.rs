//! What goes wrong with a ledger, and what to do about it.

use std::io;
use std::path::{Path, PathBuf};

use donelight_core::record::{DecodeError, Seq};
use donelight_core::wire::StationId;
use rusqlite::ErrorCode;

use crate::output::Explain;

/// Why a ledger cannot be used. Nothing in it has changed then, but for what was committed before.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum LedgerError {
    /// There is no such file, and it shall only be read.
    #[error("there is no ledger {}", .0.display())]
    Missing(PathBuf),
    /// The folder that it should be in is missing.
    #[error("the folder of {} does not exist", .0.display())]
    NoFolder(PathBuf),
    /// The user's data folder is unknown.
    #[error("this user has no data folder")]
    NoDataFolder,
    /// The file is something else.
    #[error("{} is no Donelight ledger", .0.display())]
    Foreign(PathBuf),
    /// A later version of this command has written it.
    #[error("{} was written by a newer version of donelight (its version is {version}, this one knows {known})", .path.display())]
    Newer {
        /// The file.
        path: PathBuf,
        /// The version of its tables.
        version: u32,
        /// The latest that this command knows.
        known: u32,
    },
    /// Its content is broken.
    #[error("the ledger {} is damaged: {reason}", .path.display())]
    Damaged {
        /// The file.
        path: PathBuf,
        /// In SQLite's words.
        reason: String,
    },
    /// A record's check sum does not fit.
    #[error("the ledger {} is damaged: record {seq} of station {station}: {reason}", .path.display())]
    DamagedRecord {
        /// The file.
        path: PathBuf,
        /// Whose record.
        station: StationId,
        /// Its number.
        seq: Seq,
        /// What does not fit.
        reason: DecodeError,
    },
    /// File or folder may not be written, or the file not be read.
    #[error("the ledger {} cannot be {wanted} by this user", .path.display())]
    Permission {
        /// The file.
        path: PathBuf,
        /// "read" or "written".
        wanted: &'static str,
    },
    /// The disk is full.
    #[error("the disk is full: the ledger {} cannot grow", .0.display())]
    Full(PathBuf),
    /// Another program holds it for too long.
    #[error("the ledger {} is in use by another program", .0.display())]
    Busy(PathBuf),
    /// The system cannot read or write it.
    #[error("the ledger {} cannot be read or written: {reason}", .path.display())]
    Io {
        /// The file.
        path: PathBuf,
        /// In the system's words.
        reason: String,
    },
}

impl LedgerError {
    pub(super) fn sqlite(path: &Path, error: &rusqlite::Error) -> Self {
        let path = path.to_owned();
        let reason = error.to_string();
        match error.sqlite_error_code() {
            Some(ErrorCode::DatabaseCorrupt | ErrorCode::NotADatabase) => Self::Damaged { path, reason },
            Some(ErrorCode::ReadOnly | ErrorCode::PermissionDenied) => {
                Self::Permission { path, wanted: "written" }
            }
            Some(ErrorCode::DiskFull) => Self::Full(path),
            Some(ErrorCode::DatabaseBusy | ErrorCode::DatabaseLocked) => Self::Busy(path),
            Some(_) => Self::Io { path, reason },
            // A value of another type than the table's, for example.
            None => Self::Damaged { path, reason },
        }
    }

    pub(super) fn io(path: &Path, error: &io::Error, wanted: &'static str) -> Self {
        let path = path.to_owned();
        match error.kind() {
            io::ErrorKind::PermissionDenied => Self::Permission { path, wanted },
            io::ErrorKind::ReadOnlyFilesystem => Self::Permission { path, wanted: "written" },
            io::ErrorKind::StorageFull | io::ErrorKind::QuotaExceeded => Self::Full(path),
            _ => Self::Io { path, reason: error.to_string() },
        }
    }
}

impl Explain for LedgerError {
    fn kind(&self) -> &'static str {
        match self {
            Self::Missing(_) => "ledger-missing",
            Self::NoFolder(_) => "ledger-folder-missing",
            Self::NoDataFolder => "no-data-folder",
            Self::Foreign(_) => "ledger-foreign",
            Self::Newer { .. } => "ledger-newer",
            Self::Damaged { .. } | Self::DamagedRecord { .. } => "ledger-damaged",
            Self::Permission { .. } => "ledger-permission",
            Self::Full(_) => "disk-full",
            Self::Busy(_) => "ledger-busy",
            Self::Io { .. } => "ledger-io",
        }
    }

    fn help(&self) -> String {
        match self {
            Self::Missing(_) => "Name an existing one with --ledger, or pull a station first.",
            Self::NoFolder(_) => "Make the folder, or name another file with --ledger.",
            Self::NoDataFolder => "Name the ledger's file with --ledger.",
            Self::Foreign(_) => "The file was left as it is. Name another one with --ledger.",
            Self::Newer { .. } => "The file was left as it is. Update donelight.",
            Self::Damaged { .. } | Self::DamagedRecord { .. } => {
                "Keep the file for rescue, go on with a copy from before the damage or with a new one (--ledger FILE), \
                 and pull the stations again: they still have what was not confirmed, and often more."
            }
            Self::Permission { wanted: "read", .. } => "Have the file's owner grant you access.",
            Self::Permission { .. } => {
                "Have the owner of file and folder grant you write access, or name another file with --ledger."
            }
            Self::Full(_) => "Free some space and run the same command again: nothing is lost or doubled by that.",
            Self::Busy(_) => "Wait until it is done, then run the same command again.",
            Self::Io { .. } => {
                "Check that the disk is well and not full, and that its quota is not used up; then run the same \
                 command again: nothing is lost or doubled by that."
            }
        }
        .to_owned()
    }
}
