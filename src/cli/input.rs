//! Job files and profiles from disk.

use crate::job::{self, FILE_BYTES_MAX, Job, Known};
use crate::profile::{Profile, built_in_names};
use anyhow::{Context as _, anyhow, bail};
use std::fs::File;
use std::io::Read as _;
use std::path::{Path, PathBuf};

/// A job, its profile, and where its set goes when no folder is named.
pub(super) struct Input {
    pub(super) job: Job,
    pub(super) profile: Profile,
    pub(super) folder: PathBuf,
}

/// Reads the job file, or takes the starter set.
pub(super) fn load(path: Option<&Path>) -> anyhow::Result<Input> {
    let Some(path) = path else {
        let job = job::starter();
        let profile = profile(&job.profile, Path::new(""))?;
        return Ok(Input { job, profile, folder: PathBuf::from("stagewright-set") });
    };
    let text = text(path, "job file")?;
    let job = job::parse(&text, &path.display().to_string(), &known())?;
    let profile = profile(&job.profile, path.parent().unwrap_or(Path::new("")))
        .with_context(|| format!("{}: `set.profile`", path.display()))?;
    let mut name = path.file_stem().unwrap_or_default().to_owned();
    name.push("-set");
    Ok(Input { job, profile, folder: PathBuf::from(name) })
}

/// The names a job file can use.
fn known() -> Known {
    Known {
        families: crate::skin::families().iter().map(|f| f.name.to_owned()).collect(),
        profiles: built_in_names().map(str::to_owned).to_vec(),
    }
}

/// Finds a profile by name, or reads it from a path taken from `folder`.
pub(super) fn profile(name: &str, folder: &Path) -> anyhow::Result<Profile> {
    if job::is_profile_path(name) {
        let path = folder.join(name);
        let text = text(&path, "profile")?;
        return Profile::parse(&text, &path.display().to_string()).map_err(|e| anyhow!("{e}"));
    }
    Profile::built_in(name).ok_or_else(|| {
        let names = built_in_names();
        let like =
            names.iter().map(|n| (strsim::jaro_winkler(name, n), n)).max_by(|a, b| a.0.total_cmp(&b.0));
        let hint = like.filter(|(l, _)| *l >= 0.8).map(|(_, n)| format!("; did you mean `{n}`?"));
        anyhow!("there is no profile `{name}`; there are {}{}", names.join(", "), hint.unwrap_or_default())
    })
}

/// The text of a file that should be a page of text.
fn text(path: &Path, what: &str) -> anyhow::Result<String> {
    let place = || format!("{what} {}", path.display());
    let file = File::open(path).with_context(place)?;
    let about = file.metadata().with_context(place)?;
    if about.is_dir() {
        bail!("{}: it is a folder", place());
    }
    let too_large = |bytes: u64| {
        anyhow!("{}: it has {bytes} bytes; a {what} has at most {FILE_BYTES_MAX} bytes", place())
    };
    let limit = u64::try_from(FILE_BYTES_MAX).unwrap_or(u64::MAX);
    if about.len() > limit {
        return Err(too_large(about.len()));
    }
    // A pipe or a device has no length before it is read.
    let mut bytes = Vec::new();
    file.take(limit + 1).read_to_end(&mut bytes).with_context(place)?;
    if bytes.len() > FILE_BYTES_MAX {
        return Err(too_large(limit + 1));
    }
    String::from_utf8(bytes).map_err(|e| {
        let at = e.utf8_error().valid_up_to();
        let line = e.as_bytes()[..at].iter().filter(|b| **b == b'\n').count() + 1;
        anyhow!("{}: it is not UTF-8 text (byte {} on line {line}); save it as UTF-8", place(), at + 1)
    })
}
