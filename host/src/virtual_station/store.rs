//! The folder that a virtual station lives in:
//!
//! | file | holds |
//! |---|---|
//! | `journal.flash` | the station's flash, 1 MiB |
//! | `station.id` | its unchangeable number, 16 hexadecimal digits |
//! | `lock` | nothing; it is locked while a process runs the station |

use std::fs::{self, File, OpenOptions, TryLockError};
use std::io::{self, Read, Write};
use std::path::{Path, PathBuf};

use donelight_core::wire::StationId;

use super::flash::{ERASED, FLASH_SIZE, FileFlash, FlashFile};
use crate::output::Explain;

const JOURNAL: &str = "journal.flash";
const ID: &str = "station.id";
const LOCK: &str = "lock";

/// Why a store cannot be used.
#[derive(Debug, thiserror::Error)]
pub enum StoreError {
    /// The folder or a file in it cannot be made, read or written.
    #[error("{}: {cause}", path.display())]
    Access {
        /// Which one.
        path: PathBuf,
        /// Why.
        cause: io::Error,
    },
    /// Another process runs a station on it.
    #[error("{}: another virtual station runs on this store", .0.display())]
    InUse(PathBuf),
    /// The flash's file is not as long as the flash.
    #[error("{}: has {size} bytes and not the {FLASH_SIZE} of a station's flash", path.display())]
    WrongSize {
        /// Which file.
        path: PathBuf,
        /// Its length.
        size: u64,
    },
    /// There is a number but no flash.
    #[error("{}: is missing, but the store was in use before", .0.display())]
    NoJournal(PathBuf),
    /// The number's file does not hold a number, or is missing although the flash is in use.
    #[error("{}: does not hold the station's number of 16 hexadecimal digits", .0.display())]
    NoId(PathBuf),
}

impl Explain for StoreError {
    fn kind(&self) -> &'static str {
        match self {
            Self::Access { .. } => "store-access",
            Self::InUse(_) => "store-in-use",
            Self::WrongSize { .. } => "store-wrong-size",
            Self::NoJournal(_) => "store-no-journal",
            Self::NoId(_) => "store-no-id",
        }
    }

    fn help(&self) -> String {
        match self {
            Self::Access { .. } => "Give a folder that you may write in, on a disk with 2 MB free.".to_owned(),
            Self::InUse(_) => "Stop the other one first, or give this one another --store.".to_owned(),
            Self::WrongSize { .. } | Self::NoJournal(_) => {
                "Put the file back from a copy, or give another --store: a new store is a new station. An empty flash \
                 under the old number would contradict what the ledger has of this station."
                    .to_owned()
            }
            Self::NoId(_) => {
                "Write the number into it that `donelight station status` showed, or give another --store. Under \
                 another number the ledger would take this for another station."
                    .to_owned()
            }
        }
    }
}

/// A store in use by this process alone, until it is dropped.
#[derive(Debug)]
pub struct Store {
    folder: PathBuf,
    id: StationId,
    /// Unlocked by the system when the process ends, however it ends.
    _lock: File,
}

impl Store {
    /// Locks the folder; makes it, with a fresh flash and a fresh number, on first use.
    ///
    /// # Errors
    /// See [`StoreError`].
    pub fn open(folder: &Path) -> Result<(Self, FileFlash), StoreError> {
        fs::create_dir_all(folder).map_err(access(folder))?;
        let lock = lock(&folder.join(LOCK))?;
        let (journal, number) = (folder.join(JOURNAL), folder.join(ID));
        let mut file = match open_journal(&journal)? {
            Some(file) => file,
            None if number.exists() => return Err(StoreError::NoJournal(journal)),
            None => {
                make(&journal, FileFlash::format)?;
                open_journal(&journal)?.ok_or_else(|| access(&journal)(io::ErrorKind::NotFound.into()))?
            }
        };
        // The number comes last, so that one is only ever made for a flash that holds nothing.
        let id = match read_id(&number)? {
            Some(id) => id,
            None if is_blank(&mut file).map_err(access(&journal))? => make_id(&number)?,
            None => return Err(StoreError::NoId(number)),
        };
        Ok((Self { folder: folder.to_owned(), id, _lock: lock }, FileFlash::over(FlashFile(file))))
    }

    /// The station's number.
    #[must_use]
    pub fn id(&self) -> StationId {
        self.id
    }

    /// The folder.
    #[must_use]
    pub fn folder(&self) -> &Path {
        &self.folder
    }
}

fn access(path: &Path) -> impl FnOnce(io::Error) -> StoreError {
    let path = path.to_owned();
    move |cause| StoreError::Access { path, cause }
}

fn lock(path: &Path) -> Result<File, StoreError> {
    let file =
        OpenOptions::new().create(true).truncate(false).write(true).open(path).map_err(access(path))?;
    match file.try_lock() {
        Ok(()) => Ok(file),
        Err(TryLockError::WouldBlock) => {
            Err(StoreError::InUse(path.parent().unwrap_or(Path::new(".")).to_owned()))
        }
        Err(TryLockError::Error(cause)) => Err(access(path)(cause)),
    }
}

/// `None` if there is no such file yet.
fn open_journal(path: &Path) -> Result<Option<File>, StoreError> {
    let file = match OpenOptions::new().read(true).write(true).open(path) {
        Ok(file) => file,
        Err(cause) if cause.kind() == io::ErrorKind::NotFound => return Ok(None),
        Err(cause) => return Err(access(path)(cause)),
    };
    let size = file.metadata().map_err(access(path))?.len();
    if size != FLASH_SIZE as u64 {
        return Err(StoreError::WrongSize { path: path.to_owned(), size });
    }
    Ok(Some(file))
}

/// Makes a file that is there either whole or not at all, whenever the process or the computer stops.
fn make(path: &Path, fill: impl FnOnce(&mut File) -> io::Result<()>) -> Result<(), StoreError> {
    let unfinished = path.with_extension("new");
    let mut file = File::create(&unfinished).map_err(access(&unfinished))?;
    fill(&mut file).map_err(access(&unfinished))?;
    drop(file);
    fs::rename(&unfinished, path).map_err(access(path))?;
    sync_folder(path).map_err(access(path))
}

/// On Unix a new name is durable once its folder is; elsewhere folders cannot be opened as files.
#[cfg(unix)]
fn sync_folder(file: &Path) -> io::Result<()> {
    match file.parent() {
        Some(folder) if !folder.as_os_str().is_empty() => File::open(folder)?.sync_all(),
        _ => File::open(".")?.sync_all(),
    }
}

#[cfg(not(unix))]
fn sync_folder(_file: &Path) -> io::Result<()> {
    Ok(())
}

fn is_blank(flash: &mut File) -> io::Result<bool> {
    let mut bytes = Vec::with_capacity(FLASH_SIZE);
    flash.read_to_end(&mut bytes)?;
    Ok(bytes.iter().all(|byte| *byte == ERASED))
}

/// `None` if there is no such file yet.
fn read_id(path: &Path) -> Result<Option<StationId>, StoreError> {
    let text = match fs::read_to_string(path) {
        Ok(text) => text,
        Err(cause) if cause.kind() == io::ErrorKind::NotFound => return Ok(None),
        Err(cause) if cause.kind() == io::ErrorKind::InvalidData => String::new(),
        Err(cause) => return Err(access(path)(cause)),
    };
    parse_id(text.trim()).map(Some).ok_or_else(|| StoreError::NoId(path.to_owned()))
}

fn make_id(path: &Path) -> Result<StationId, StoreError> {
    let random = getrandom::u64()
        .map_err(|error| access(path)(io::Error::other(format!("no random number: {error}"))))?;
    let id = StationId(random.to_be_bytes());
    make(path, |file| {
        writeln!(file, "{id}")?;
        file.sync_all()
    })?;
    Ok(id)
}

fn parse_id(text: &str) -> Option<StationId> {
    let plain = text.len() == 16 && text.bytes().all(|byte| byte.is_ascii_hexdigit());
    let number = plain.then(|| u64::from_str_radix(text, 16).ok())?;
    Some(StationId(number?.to_be_bytes()))
}

#[cfg(test)]
mod tests {
    use embedded_storage::nor_flash::{NorFlash, ReadNorFlash};

    use super::*;

    #[test]
    fn a_store_is_made_on_first_use_and_found_again_with_its_number_and_content() {
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("deep/bench");
        let (store, mut flash) = Store::open(&path).unwrap();
        let id = store.id();
        flash.write(70_000, b"kept").unwrap();
        drop((store, flash));
        let (store, mut flash) = Store::open(&path).unwrap();
        assert_eq!(store.id(), id);
        let mut bytes = [0; 6];
        flash.read(69_999, &mut bytes).unwrap();
        assert_eq!(&bytes, b"\xffkept\xff");
        assert_eq!(flash.capacity(), FLASH_SIZE);
    }

    #[test]
    fn a_store_in_use_is_refused_and_free_again_afterwards() {
        let folder = tempfile::tempdir().unwrap();
        let first = Store::open(folder.path()).unwrap();
        assert!(matches!(Store::open(folder.path()), Err(StoreError::InUse(_))));
        drop(first);
        assert!(Store::open(folder.path()).is_ok());
    }

    #[test]
    fn a_flash_file_of_the_wrong_size_is_refused_and_left_as_it_is() {
        let folder = tempfile::tempdir().unwrap();
        fs::write(folder.path().join(JOURNAL), b"short").unwrap();
        assert!(matches!(Store::open(folder.path()), Err(StoreError::WrongSize { size: 5, .. })));
        assert_eq!(fs::read(folder.path().join(JOURNAL)).unwrap(), b"short");
    }

    #[test]
    fn a_number_that_is_none_is_refused_and_left_as_it_is() {
        let folder = tempfile::tempdir().unwrap();
        drop(Store::open(folder.path()).unwrap());
        for wrong in ["", "+123456789abcdef", "0123456789abcdef0", "0123456789abcdeg"] {
            fs::write(folder.path().join(ID), wrong).unwrap();
            assert!(matches!(Store::open(folder.path()), Err(StoreError::NoId(_))), "{wrong:?}");
            assert_eq!(fs::read(folder.path().join(ID)).unwrap(), wrong.as_bytes());
        }
    }

    #[test]
    fn a_flash_in_use_gets_no_new_number_and_a_number_in_use_no_new_flash() {
        let folder = tempfile::tempdir().unwrap();
        let (store, mut flash) = Store::open(folder.path()).unwrap();
        flash.write(9_000, b"record").unwrap();
        drop((store, flash));
        let number = fs::read(folder.path().join(ID)).unwrap();
        fs::remove_file(folder.path().join(ID)).unwrap();
        assert!(matches!(Store::open(folder.path()), Err(StoreError::NoId(_))));
        fs::write(folder.path().join(ID), number).unwrap();
        fs::remove_file(folder.path().join(JOURNAL)).unwrap();
        assert!(matches!(Store::open(folder.path()), Err(StoreError::NoJournal(_))));
        assert!(!folder.path().join(JOURNAL).exists());
    }

    #[test]
    fn what_a_stop_in_the_middle_of_making_left_is_made_anew() {
        let folder = tempfile::tempdir().unwrap();
        fs::write(folder.path().join("journal.new"), b"half").unwrap();
        assert!(Store::open(folder.path()).is_ok());
    }
}
