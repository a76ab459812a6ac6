//! One file, written whole or not at all.

use super::folder::{Folder, TEMPORARY};
use sha2::{Digest, Sha256};
use std::fs::{self, File};
use std::io::{self, BufReader, Read, Seek, SeekFrom, Write};
use std::path::{Path, PathBuf};

/// Why a file of a set was not written. Nothing of it is left behind.
#[derive(Debug, thiserror::Error)]
pub enum FileError {
    /// The system refused.
    #[error("{path} was not written: {source}")]
    System {
        /// The file.
        path: PathBuf,
        /// What the system says.
        source: io::Error,
    },
    /// The mesh cannot be put into this format.
    #[error("{path} was not written: {source}")]
    Format {
        /// The file.
        path: PathBuf,
        /// What the writer says.
        source: crate::export::WriteError,
    },
    /// The run was asked to stop.
    #[error("{path} was not written: stopped on request")]
    Stopped {
        /// The file.
        path: PathBuf,
    },
}

impl FileError {
    /// Whether there is no room left, so that further files need not be tried.
    #[must_use]
    pub fn is_full(&self) -> bool {
        let source = match self {
            Self::System { source, .. } => source,
            Self::Format { source: crate::export::WriteError::Stream { source, .. }, .. } => source,
            _ => return false,
        };
        matches!(
            source.kind(),
            io::ErrorKind::StorageFull | io::ErrorKind::QuotaExceeded | io::ErrorKind::FileTooLarge
        )
    }
}

/// The stream a writer sees: a file that refuses to go on when the run is to stop.
pub(super) struct Sink<'f> {
    file: &'f mut File,
    stopped: &'f dyn Fn() -> bool,
}

impl Write for Sink<'_> {
    fn write(&mut self, buf: &[u8]) -> io::Result<usize> {
        if (self.stopped)() {
            return Err(io::Error::other("stopped on request"));
        }
        self.file.write(buf)
    }

    fn flush(&mut self) -> io::Result<()> {
        self.file.flush()
    }
}

impl Seek for Sink<'_> {
    fn seek(&mut self, to: SeekFrom) -> io::Result<u64> {
        self.file.seek(to)
    }
}

/// What can go wrong inside the closure that fills a file.
#[derive(Debug)]
pub(super) enum FillError {
    /// The stream failed.
    Stream(io::Error),
    /// The writer refused.
    Writer(crate::export::WriteError),
}

impl From<io::Error> for FillError {
    fn from(e: io::Error) -> Self {
        Self::Stream(e)
    }
}

impl From<crate::export::WriteError> for FillError {
    fn from(e: crate::export::WriteError) -> Self {
        Self::Writer(e)
    }
}

/// Writes `name` into the folder (or, with `hidden`, into its hidden part): fills a temporary file, brings
/// it to the disk, then gives it its name. Returns the SHA-256 of what was read back, lower-case hex.
pub(super) fn write_whole(
    folder: &mut Folder,
    place: Place,
    name: &str,
    stopped: &dyn Fn() -> bool,
    fill: impl FnOnce(&mut Sink<'_>) -> Result<(), FillError>,
) -> Result<String, FileError> {
    let hidden = folder.hidden();
    let path = match place {
        Place::Visible => folder.path().join(name),
        Place::Hidden => hidden.join(name),
    };
    let system = |source| FileError::System { path: path.clone(), source };
    let mut temporary = tempfile::Builder::new().prefix(TEMPORARY).tempfile_in(&hidden).map_err(system)?;
    let filled = fill(&mut Sink { file: temporary.as_file_mut(), stopped });
    // From here every early return drops `temporary`, which removes it.
    match filled {
        _ if stopped() => return Err(FileError::Stopped { path }),
        Ok(()) => {}
        Err(FillError::Stream(source)) => return Err(FileError::System { path, source }),
        Err(FillError::Writer(source)) => return Err(FileError::Format { path, source }),
    }
    temporary.as_file().sync_all().map_err(system)?;
    let sha256 = sha256_of(temporary.path()).map_err(system)?;
    set_plain_permissions(temporary.path()).map_err(system)?;
    if place == Place::Visible {
        folder.note(name).map_err(system)?;
    }
    temporary.persist(&path).map_err(|e| FileError::System { path: path.clone(), source: e.error })?;
    Ok(sha256)
}

/// Where a file goes.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Place {
    /// Beside the other files of the set.
    Visible,
    /// Into the hidden folder.
    Hidden,
}

/// Temporary files are made for the owner only; files of a set are read by others, too.
#[cfg(unix)]
fn set_plain_permissions(path: &Path) -> io::Result<()> {
    use std::os::unix::fs::PermissionsExt as _;
    fs::set_permissions(path, fs::Permissions::from_mode(0o644))
}

#[cfg(not(unix))]
fn set_plain_permissions(_path: &Path) -> io::Result<()> {
    Ok(())
}

/// The SHA-256 of a file, lower-case hex.
pub(super) fn sha256_of(path: &Path) -> io::Result<String> {
    let mut reader = BufReader::with_capacity(1 << 16, File::open(path)?);
    let mut hash = Sha256::new();
    let mut piece = vec![0_u8; 1 << 16];
    loop {
        match reader.read(&mut piece)? {
            0 => break,
            n => hash.update(&piece[..n]),
        }
    }
    Ok(hex(&hash.finalize()))
}

/// The SHA-256 of bytes, lower-case hex.
pub(super) fn sha256_bytes(bytes: &[u8]) -> String {
    hex(&Sha256::digest(bytes))
}

fn hex(bytes: &[u8]) -> String {
    use std::fmt::Write as _;
    bytes.iter().fold(String::new(), |mut s, b| {
        let _ = write!(s, "{b:02x}");
        s
    })
}
