//! Where the demo's three files go: a folder of its own, and never over anything that a demo did not make.

use std::fs;
use std::io;
use std::path::{Path, PathBuf};

use super::bench::STATION;
use crate::ledger::Ledger;
use crate::output::Explain;

/// The folder's name where none is given.
const NAME: &str = "donelight-demo";

/// So many demos can stand side by side.
const FOLDERS_MAX: u32 = 1_000;

/// Why there is no place for the files.
#[derive(Debug, thiserror::Error)]
pub(super) enum FolderError {
    /// The folder cannot be made, or a file in it not replaced.
    #[error("{}: {cause}", path.display())]
    Access {
        /// Which.
        path: PathBuf,
        /// Why.
        cause: io::Error,
    },
    /// There is a file of that name which no demo made.
    #[error("{} is there already and is not an earlier demo's", .0.display())]
    Foreign(PathBuf),
}

impl Explain for FolderError {
    fn kind(&self) -> &'static str {
        match self {
            Self::Access { .. } => "file-unwritable",
            Self::Foreign(_) => "file-exists",
        }
    }

    fn help(&self) -> String {
        match self {
            Self::Access { .. } => "Give a folder that you may write to: --out DIR.".to_owned(),
            Self::Foreign(_) => "It was left as it is. Give another folder: --out DIR.".to_owned(),
        }
    }
}

/// The three files.
#[derive(Debug)]
pub(super) struct Files {
    pub(super) folder: PathBuf,
    pub(super) plan: PathBuf,
    pub(super) ledger: PathBuf,
    pub(super) report: PathBuf,
}

impl Files {
    fn of(folder: PathBuf) -> Self {
        let [plan, ledger, report] =
            ["plan.toml", "ledger.sqlite", "report.html"].map(|name| folder.join(name));
        Self { folder, plan, ledger, report }
    }

    /// Makes the folder ready: the one that is given, or a new one here.
    ///
    /// # Errors
    /// See [`FolderError`]; nothing was changed then, but for a folder that may be new.
    pub(super) fn prepare(out: Option<&Path>, plan: &str) -> Result<Self, FolderError> {
        let Some(out) = out else { return Ok(Self::of(fresh_folder(Path::new("."))?)) };
        fs::create_dir_all(out).map_err(access(out))?;
        let files = Self::of(out.to_owned());
        files.clear(plan)?;
        Ok(files)
    }

    /// Removes the files of an earlier demo, all or none.
    fn clear(&self, plan: &str) -> Result<(), FolderError> {
        let present: Vec<&PathBuf> =
            [&self.plan, &self.ledger, &self.report].into_iter().filter(|path| is_there(path)).collect();
        let Some(first) = present.first() else { return Ok(()) };
        if fs::read(&self.plan).ok().as_deref() != Some(plan.as_bytes()) {
            return Err(FolderError::Foreign((*first).clone()));
        }
        if is_there(&self.ledger) && !is_demo_ledger(&self.ledger) {
            return Err(FolderError::Foreign(self.ledger.clone()));
        }
        // The plan, which vouches for the others, goes last.
        for path in present.into_iter().rev() {
            fs::remove_file(path).map_err(access(path))?;
        }
        Ok(())
    }
}

/// Something is there, be it a dangling link.
fn is_there(path: &Path) -> bool {
    fs::symlink_metadata(path).is_ok()
}

/// Whether the ledger holds no station but the demo's.
fn is_demo_ledger(path: &Path) -> bool {
    Ledger::open_to_read(Some(path))
        .and_then(|ledger| ledger.stations())
        .is_ok_and(|stations| stations.iter().all(|(station, _)| *station == STATION))
}

fn fresh_folder(parent: &Path) -> Result<PathBuf, FolderError> {
    for number in 1..=FOLDERS_MAX {
        let name = if number == 1 { NAME.to_owned() } else { format!("{NAME}-{number}") };
        // Without the "./" where it would only be noise.
        let folder = if parent == Path::new(".") { PathBuf::from(name) } else { parent.join(name) };
        match fs::create_dir(&folder) {
            Ok(()) => return Ok(folder),
            Err(cause) if cause.kind() == io::ErrorKind::AlreadyExists => {}
            Err(cause) => return Err(access(&folder)(cause)),
        }
    }
    Err(FolderError::Foreign(parent.join(NAME)))
}

fn access(path: &Path) -> impl FnOnce(io::Error) -> FolderError {
    let path = path.to_owned();
    move |cause| FolderError::Access { path, cause }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn without_a_folder_given_each_demo_gets_a_new_one() {
        let parent = tempfile::tempdir().unwrap();
        let names = [1, 2, 3].map(|_| fresh_folder(parent.path()).unwrap());
        assert_eq!(
            names,
            ["donelight-demo", "donelight-demo-2", "donelight-demo-3"].map(|n| parent.path().join(n))
        );
    }

    #[test]
    fn an_earlier_demos_files_make_room() {
        let folder = tempfile::tempdir().unwrap();
        let files = Files::prepare(Some(folder.path()), "the plan").unwrap();
        fs::write(&files.plan, "the plan").unwrap();
        drop(Ledger::open(Some(&files.ledger)).unwrap());
        fs::write(&files.report, "page").unwrap();
        let files = Files::prepare(Some(folder.path()), "the plan").unwrap();
        assert!(![&files.plan, &files.ledger, &files.report].into_iter().any(|path| path.exists()));
    }

    #[test]
    fn a_file_that_no_demo_made_is_refused_and_left_as_it_is() {
        for foreign in ["plan.toml", "ledger.sqlite", "report.html"] {
            let folder = tempfile::tempdir().unwrap();
            let path = folder.path().join(foreign);
            fs::write(&path, "mine").unwrap();
            let refused = Files::prepare(Some(folder.path()), "the plan");
            assert!(matches!(refused, Err(FolderError::Foreign(ref at)) if *at == path), "{refused:?}");
            assert_eq!(fs::read(&path).unwrap(), b"mine");
        }
    }

    #[test]
    fn a_foreign_ledger_beside_a_demos_plan_is_left_as_it_is() {
        let folder = tempfile::tempdir().unwrap();
        fs::write(folder.path().join("plan.toml"), "the plan").unwrap();
        fs::write(folder.path().join("ledger.sqlite"), "mine").unwrap();
        assert!(matches!(Files::prepare(Some(folder.path()), "the plan"), Err(FolderError::Foreign(_))));
        assert_eq!(fs::read_dir(folder.path()).unwrap().count(), 2);
    }
}
