//! The output folder: tried before the work, and the list of files made in it.

use std::collections::BTreeSet;
use std::fs::{self, File, OpenOptions, TryLockError};
use std::io::{self, Write};
use std::path::{Path, PathBuf};

/// The folder beside the files that holds temporary files and what is needed to resume.
pub(super) const HIDDEN: &str = ".stagewright";
/// One name a line: every file this program has made in the folder.
const MADE: &str = "made.txt";

/// Why nothing can be written to an output folder.
#[derive(Debug, thiserror::Error)]
pub enum FolderError {
    /// Something that is not a folder has its name.
    #[error("output folder {path}: there is a file of that name; choose another --out or move the file")]
    NotAFolder {
        /// The folder asked for.
        path: PathBuf,
    },
    /// The folder can neither be found nor made.
    #[error("output folder {path}: it cannot be made; choose another --out")]
    NotMade {
        /// The folder asked for.
        path: PathBuf,
        /// What the system says.
        source: io::Error,
    },
    /// No file can be written into it.
    #[error("output folder {path}: no file can be written there; choose another --out")]
    NotWritable {
        /// The folder asked for.
        path: PathBuf,
        /// What the system says.
        source: io::Error,
    },
    /// Another run holds it.
    #[error("output folder {path}: another run is writing there; wait for it or choose another --out")]
    InUse {
        /// The folder asked for.
        path: PathBuf,
    },
    /// Files that would be overwritten were not made by this program.
    #[error(
        "output folder {path}: {} would be overwritten but was not made by an earlier run there; \
         move it away or choose another --out", .names.join(", ")
    )]
    Foreign {
        /// The folder asked for.
        path: PathBuf,
        /// The files, relative to it.
        names: Vec<String>,
    },
}

/// An output folder that has been tried and is held by this run until dropped.
#[derive(Debug)]
pub(super) struct Folder {
    path: PathBuf,
    made: BTreeSet<String>,
    /// Folders that [`Folder::open`] made, outermost first.
    new: Vec<PathBuf>,
    _lock: File,
}

impl Folder {
    /// Makes the folder if needed, holds it, writes a first temporary file, clears those an earlier run
    /// left, and refuses when one of `names` is there but was not made by this program.
    pub(super) fn open(path: &Path, names: &[String]) -> Result<Self, FolderError> {
        let not_writable = |source| FolderError::NotWritable { path: path.to_owned(), source };
        let mut new: Vec<PathBuf> = path
            .ancestors()
            .take_while(|p| !p.as_os_str().is_empty() && !p.exists())
            .map(Path::to_owned)
            .collect();
        new.reverse();
        match fs::metadata(path) {
            Ok(m) if !m.is_dir() => return Err(FolderError::NotAFolder { path: path.to_owned() }),
            Ok(_) => {}
            Err(_) => fs::create_dir_all(path)
                .map_err(|source| FolderError::NotMade { path: path.to_owned(), source })?,
        }
        let hidden = path.join(HIDDEN);
        fs::create_dir_all(&hidden).map_err(not_writable)?;
        let lock = OpenOptions::new()
            .create(true)
            .truncate(false)
            .write(true)
            .open(hidden.join("lock"))
            .map_err(not_writable)?;
        match lock.try_lock() {
            Ok(()) => {}
            Err(TryLockError::WouldBlock) => return Err(FolderError::InUse { path: path.to_owned() }),
            // Some network folders know no locks; two runs in one are then the user's affair.
            Err(TryLockError::Error(_)) => {}
        }
        let made: BTreeSet<String> = fs::read_to_string(hidden.join(MADE))
            .unwrap_or_default()
            .lines()
            .filter(|l| !l.is_empty() && !l.contains(['/', '\\']))
            .map(str::to_owned)
            .collect();
        let foreign: Vec<String> = names
            .iter()
            .filter(|n| {
                fs::symlink_metadata(path.join(n)).is_ok_and(|m| m.is_dir() || !made.contains(n.as_str()))
            })
            .cloned()
            .collect();
        if !foreign.is_empty() {
            return Err(FolderError::Foreign { path: path.to_owned(), names: foreign });
        }
        clear_temporary(&hidden);
        let mut probe =
            tempfile::Builder::new().prefix(TEMPORARY).tempfile_in(&hidden).map_err(not_writable)?;
        probe.write_all(b"tried before the work\n").map_err(not_writable)?;
        probe.flush().map_err(not_writable)?;
        probe.close().map_err(not_writable)?;
        Ok(Self { path: path.to_owned(), made, new, _lock: lock })
    }

    /// Takes back what [`Folder::open`] made, when no work was begun after all.
    pub(super) fn take_back(self) {
        if self.made.is_empty() {
            let _ = fs::remove_file(self.hidden().join("lock"));
            let _ = fs::remove_dir(self.hidden());
        }
        for folder in self.new.iter().rev() {
            // Refused by the system when something is in it.
            let _ = fs::remove_dir(folder);
        }
    }

    /// The folder.
    pub(super) fn path(&self) -> &Path {
        &self.path
    }

    /// Where temporary files and the state of stages are.
    pub(super) fn hidden(&self) -> PathBuf {
        self.path.join(HIDDEN)
    }

    /// Notes that `name` is about to be made; done before it gets its name, so that a run that is cut off
    /// in between does not refuse its own file later.
    pub(super) fn note(&mut self, name: &str) -> io::Result<()> {
        if self.made.contains(name) {
            return Ok(());
        }
        let mut list = OpenOptions::new().create(true).append(true).open(self.hidden().join(MADE))?;
        list.write_all(format!("{name}\n").as_bytes())?;
        self.made.insert(name.to_owned());
        Ok(())
    }

    /// Files of earlier sets that are still there and not among `names`.
    pub(super) fn left_over(&self, names: &[String]) -> Vec<String> {
        let here = |n: &&String| !names.contains(n) && self.path.join(n).exists();
        self.made.iter().filter(here).cloned().collect()
    }
}

/// The beginning of the names of temporary files.
pub(super) const TEMPORARY: &str = "unfinished-";

/// Removes temporary files that a run left which was cut off; what cannot be removed stays.
fn clear_temporary(hidden: &Path) {
    let Ok(entries) = fs::read_dir(hidden) else { return };
    for entry in entries.flatten() {
        if entry.file_name().to_string_lossy().starts_with(TEMPORARY) {
            let _ = fs::remove_file(entry.path());
        }
    }
}
