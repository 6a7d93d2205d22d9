//! Files are written whole or not at all, and never over what they were made from.

use std::fs;
use std::io::{self, Write};
use std::path::{Path, PathBuf};

use crate::output::{Exit, Explain};

/// Why a file was not written. What was there before is still there.
#[derive(Debug, thiserror::Error)]
pub enum WriteError {
    /// It is there already.
    #[error("{} exists already and was left as it is", path.display())]
    Exists {
        /// Which file.
        path: PathBuf,
    },
    /// It is one of the files that are read, or written otherwise.
    #[error("{} is named twice: it cannot be written and serve for something else too", path.display())]
    IsSource {
        /// Which file.
        path: PathBuf,
    },
    /// The system refuses: no such folder, no permission, disk full.
    #[error("cannot write {}: {error}", path.display())]
    Refused {
        /// Which file.
        path: PathBuf,
        /// What the system says.
        error: io::Error,
    },
}

impl Explain for WriteError {
    fn kind(&self) -> &'static str {
        match self {
            Self::Exists { .. } => "file-exists",
            Self::IsSource { .. } => "writes-over-its-source",
            Self::Refused { .. } => "file-unwritable",
        }
    }

    fn help(&self) -> String {
        match self {
            Self::Exists { .. } => "Choose another name, or replace it with --force.",
            Self::IsSource { .. } => "Choose another name for what is written.",
            Self::Refused { error, .. } => match error.kind() {
                io::ErrorKind::NotFound => "Make the folder first, or correct the path.",
                io::ErrorKind::PermissionDenied | io::ErrorKind::ReadOnlyFilesystem => {
                    "Choose a folder that you may write to."
                }
                io::ErrorKind::StorageFull | io::ErrorKind::QuotaExceeded => {
                    "Make room on the disk, then try again."
                }
                _ => "Check the path and the disk, then try again.",
            },
        }
        .to_owned()
    }

    fn exit(&self) -> Exit {
        match self {
            Self::IsSource { .. } => Exit::WrongUse,
            Self::Exists { .. } | Self::Refused { .. } => Exit::Refused,
        }
    }
}

/// Refuses to let an output replace an input (or another output), by whatever path both are named.
///
/// # Errors
/// [`WriteError::IsSource`].
pub fn keep_apart(output: &Path, sources: &[&Path]) -> Result<(), WriteError> {
    let real = |path: &Path| fs::canonicalize(path).ok();
    if sources.contains(&output) {
        return Err(WriteError::IsSource { path: output.to_owned() });
    }
    match real(output) {
        Some(written) if sources.iter().any(|source| real(source).as_ref() == Some(&written)) => {
            Err(WriteError::IsSource { path: output.to_owned() })
        }
        _ => Ok(()),
    }
}

/// Writes a new file; one that is there is left alone.
///
/// # Errors
/// It exists, or the system refuses.
pub fn write_new(path: &Path, content: &[u8]) -> Result<(), WriteError> {
    let refused = |error: io::Error| match error.kind() {
        io::ErrorKind::AlreadyExists => WriteError::Exists { path: path.to_owned() },
        _ => WriteError::Refused { path: path.to_owned(), error },
    };
    let staged = stage(path, content).map_err(refused)?;
    staged.persist_noclobber(path).map(drop).map_err(|error| refused(error.error))
}

/// Writes a file, replacing one that is there in one step: at no time is there half a file.
///
/// # Errors
/// The system refuses; what was there is still there.
pub fn write(path: &Path, content: &[u8]) -> Result<(), WriteError> {
    let refused = |error: io::Error| WriteError::Refused { path: path.to_owned(), error };
    let special = fs::metadata(path).is_ok_and(|metadata| !metadata.is_file() && !metadata.is_dir());
    if special {
        // A device or a pipe is written to, not replaced.
        return fs::OpenOptions::new()
            .write(true)
            .open(path)
            .and_then(|mut file| file.write_all(content))
            .map_err(refused);
    }
    let staged = stage(path, content).map_err(refused)?;
    staged.persist(path).map(drop).map_err(|error| refused(error.error))
}

/// Moves a finished file to where it belongs, on the same disk: it is there whole or not at all, also when the computer
/// stops. `replace`: also where there is one.
///
/// # Errors
/// It exists, or the system refuses.
pub fn move_whole(from: &Path, to: &Path, replace: bool) -> Result<(), WriteError> {
    let refused = |error: io::Error| match error.kind() {
        io::ErrorKind::AlreadyExists => WriteError::Exists { path: to.to_owned() },
        _ => WriteError::Refused { path: to.to_owned(), error },
    };
    fs::File::open(from).and_then(|file| file.sync_all()).map_err(refused)?;
    let staged = tempfile::TempPath::try_from_path(from).map_err(refused)?;
    let moved = if replace { staged.persist(to) } else { staged.persist_noclobber(to) };
    moved.map_err(|error| refused(error.error))
}

/// The content in a file beside the one that it is to become.
fn stage(path: &Path, content: &[u8]) -> io::Result<tempfile::NamedTempFile> {
    let folder = match path.parent() {
        Some(folder) if !folder.as_os_str().is_empty() => folder,
        _ => Path::new("."),
    };
    let mut builder = tempfile::Builder::new();
    builder.prefix(".donelight-");
    #[cfg(unix)]
    {
        // As any file of the user's: the process's mask takes away what it must.
        use std::os::unix::fs::PermissionsExt;
        builder.permissions(fs::Permissions::from_mode(0o666));
    }
    let mut file = builder.tempfile_in(folder).map_err(without_the_temporary_name)?;
    file.write_all(content)?;
    file.as_file().sync_all()?;
    Ok(file)
}

/// tempfile adds its own path to the message; the reader knows another one.
fn without_the_temporary_name(error: io::Error) -> io::Error {
    error.raw_os_error().map_or_else(|| io::Error::from(error.kind()), io::Error::from_raw_os_error)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_file_is_replaced_only_when_asked_and_leaves_nothing_else_behind() {
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("plan.toml");
        write_new(&path, b"first").unwrap();
        assert!(matches!(write_new(&path, b"second"), Err(WriteError::Exists { .. })));
        assert_eq!(fs::read(&path).unwrap(), b"first");
        write(&path, b"second").unwrap();
        assert_eq!(fs::read(&path).unwrap(), b"second");
        assert_eq!(fs::read_dir(folder.path()).unwrap().count(), 1);
    }

    #[test]
    fn a_source_is_recognised_by_any_path() {
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("a.csv");
        fs::write(&path, "1").unwrap();
        let other = folder.path().join(".").join("a.csv");
        assert!(matches!(keep_apart(&other, &[&path]), Err(WriteError::IsSource { .. })));
        let new = folder.path().join("b.csv");
        assert!(keep_apart(&new, &[&path]).is_ok());
        assert!(matches!(keep_apart(&new, &[&path, &new]), Err(WriteError::IsSource { .. })));
    }

    #[test]
    fn a_folder_that_is_not_there_is_named_with_what_to_do() {
        let error = write(Path::new("/no/such/folder/x.html"), b"").unwrap_err();
        assert_eq!(error.help(), "Make the folder first, or correct the path.");
        assert!(error.to_string().contains("/no/such/folder/x.html"), "{error}");
        assert!(!error.to_string().contains(".donelight-"), "{error}");
    }
}
