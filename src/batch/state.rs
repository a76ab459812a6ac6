//! What is kept of a finished stage so that a later run need not make it again.
//!
//! TOML rather than JSON: its reader gives back the very same `f64`, so a set that was resumed has the
//! same `set.json`, byte for byte, as one made in a single run.

use super::files::{self, FileError, Place, sha256_bytes, sha256_of, write_whole};
use super::folder::Folder;
use crate::check::{Finding, Verdict};
use crate::geom::Vec3;
use crate::job::Job;
use crate::pipeline::Stage;
use crate::profile::Profile;
use crate::report::{RegularityRecord, SkinRecord, SolidRecord, StageRecord};
use crate::units::Unit;
use serde::{Deserialize, Serialize};
use std::collections::{BTreeMap, BTreeSet};
use std::fs;
use std::io::Write as _;
use std::sync::Mutex;

/// Pictures of a stage: name and PNG bytes.
pub(super) type Pictures = Vec<(String, Vec<u8>)>;

/// All units a finding can have.
const UNITS: [Unit; 7] = [Unit::Mm, Unit::Mm2, Unit::Mm3, Unit::Deg, Unit::Gram, Unit::Count, Unit::Ratio];

/// A stage as it lies in the hidden folder.
#[derive(Serialize, Deserialize)]
struct Kept {
    recipe: String,
    pictures: Vec<Picture>,
    stage: StageOut,
}

#[derive(Serialize, Deserialize)]
struct Picture {
    name: String,
    sha256: String,
}

#[derive(Serialize, Deserialize)]
struct StageOut {
    index: usize,
    tau: f64,
    files: BTreeMap<String, String>,
    sha256: BTreeMap<String, String>,
    placement: [[f64; 4]; 3],
    #[serde(with = "SkinOut")]
    skin: SkinRecord,
    #[serde(with = "SolidOut")]
    solid: SolidRecord,
    findings: Vec<FindingOut>,
}

#[derive(Serialize, Deserialize)]
#[serde(remote = "SkinRecord")]
struct SkinOut {
    area_mm2: f64,
    signed_volume_mm3: f64,
    min_radius_mm: f64,
    #[serde(with = "RegularityOut")]
    regularity: RegularityRecord,
}

#[derive(Serialize, Deserialize)]
#[serde(remote = "RegularityRecord")]
struct RegularityOut {
    fold_margin: Option<f64>,
    sigma_min: f64,
}

#[derive(Serialize, Deserialize)]
#[serde(remote = "SolidRecord")]
struct SolidOut {
    triangles: usize,
    vertices: usize,
    volume_mm3: f64,
    area_mm2: f64,
    bbox_mm: [[f64; 3]; 2],
    shells: usize,
    chambers: usize,
    euler: i64,
    mass_g: f64,
    deviation_mm: f64,
    grid_mm: f64,
}

#[derive(Serialize, Deserialize)]
struct FindingOut {
    check: String,
    verdict: String,
    value: f64,
    limit: Option<f64>,
    unit: String,
    place_mm: Option<[f64; 3]>,
    message: String,
    advice: String,
    source: String,
}

impl FindingOut {
    fn of(f: &Finding) -> Self {
        Self {
            check: f.check.to_owned(),
            verdict: f.verdict.word().to_owned(),
            value: f.value,
            limit: f.limit,
            unit: f.unit.symbol().to_owned(),
            place_mm: f.place_mm.map(Into::into),
            message: f.message.clone(),
            advice: f.advice.clone(),
            source: f.source.clone(),
        }
    }

    fn finding(self) -> Option<Finding> {
        let verdicts = [Verdict::Pass, Verdict::Caution, Verdict::Fail];
        Some(Finding {
            check: check_name(&self.check)?,
            verdict: verdicts.into_iter().find(|v| v.word() == self.verdict)?,
            value: self.value,
            limit: self.limit,
            unit: UNITS.into_iter().find(|u| u.symbol() == self.unit)?,
            place_mm: self.place_mm.map(Vec3::from),
            message: self.message,
            advice: self.advice,
            source: self.source,
        })
    }
}

/// The name of a check as the constant the rest of the program expects. Each different name is stored
/// once for the life of the process; only short plain names are taken.
fn check_name(name: &str) -> Option<&'static str> {
    static NAMES: Mutex<BTreeSet<&'static str>> = Mutex::new(BTreeSet::new());
    let plain = |b: u8| b.is_ascii_lowercase() || b.is_ascii_digit() || b == b'-';
    if name.is_empty() || name.len() > 64 || !name.bytes().all(plain) {
        return None;
    }
    let mut names = NAMES.lock().ok()?;
    if let Some(known) = names.get(name) {
        return Some(known);
    }
    if names.len() >= 1000 {
        return None;
    }
    let known: &'static str = Box::leak(name.to_owned().into_boxed_str());
    names.insert(known);
    Some(known)
}

/// What a stage is made from, as one hash: the program (version and bytes), the job, the profile, the stage.
pub(super) fn recipe(build: &str, job: &Job, profile: &Profile, index: usize) -> String {
    let profile = toml::to_string(profile).unwrap_or_else(|_| format!("{profile:?}"));
    let parts = [build, &job.to_toml(), &profile, &index.to_string()].map(|p| sha256_bytes(p.as_bytes()));
    sha256_bytes(parts.concat().as_bytes())
}

/// The program as text: its version and, where the system lets it be read, the hash of its file.
pub(super) fn build() -> String {
    let hash = std::env::current_exe().and_then(|p| sha256_of(&p)).unwrap_or_default();
    format!("{} {hash}", env!("CARGO_PKG_VERSION"))
}

fn record_name(index: usize) -> String {
    format!("{index:03}.toml")
}

fn picture_name(index: usize, number: usize) -> String {
    format!("{index:03}-{number}.png")
}

/// Keeps a stage whose files are complete; also when the run is to stop, for then it matters most.
pub(super) fn keep(folder: &mut Folder, recipe: &str, stage: &Stage) -> Result<(), FileError> {
    let r = &stage.record;
    let mut pictures = Vec::new();
    for (number, (name, png)) in stage.pictures.iter().enumerate() {
        let file = picture_name(r.index, number);
        let sha256 = write_whole(folder, Place::Hidden, &file, &|| false, |w| Ok(w.write_all(png)?))?;
        pictures.push(Picture { name: name.clone(), sha256 });
    }
    let kept = Kept {
        recipe: recipe.to_owned(),
        pictures,
        stage: StageOut {
            index: r.index,
            tau: r.tau,
            files: r.files.clone(),
            sha256: r.sha256.clone(),
            placement: r.placement,
            skin: r.skin,
            solid: r.solid,
            findings: r.findings.iter().map(FindingOut::of).collect(),
        },
    };
    let text = toml::to_string(&kept).map_err(|e| FileError::System {
        path: folder.hidden().join(record_name(r.index)),
        source: std::io::Error::other(e),
    })?;
    write_whole(folder, Place::Hidden, &record_name(r.index), &|| false, |w| {
        Ok(w.write_all(text.as_bytes())?)
    })?;
    Ok(())
}

/// Forgets a stage, before its files are replaced.
pub(super) fn forget(folder: &Folder, index: usize) {
    let _ = fs::remove_file(folder.hidden().join(record_name(index)));
}

/// A stage of an earlier run and its pictures, if it has the same recipe and every file is unchanged.
pub(super) fn kept(folder: &Folder, recipe: &str, index: usize) -> Option<(StageRecord, Pictures)> {
    let text = fs::read_to_string(folder.hidden().join(record_name(index))).ok()?;
    let kept: Kept = toml::from_str(&text).ok()?;
    if kept.recipe != recipe || kept.stage.index != index {
        return None;
    }
    let s = kept.stage;
    for (format, name) in &s.files {
        let plain = !name.contains(['/', '\\']);
        let now = plain.then(|| files::sha256_of(&folder.path().join(name)).ok())??;
        if Some(&now) != s.sha256.get(format) {
            return None;
        }
    }
    let mut pictures = Vec::new();
    for (number, picture) in kept.pictures.into_iter().enumerate() {
        let png = fs::read(folder.hidden().join(picture_name(index, number))).ok()?;
        if sha256_bytes(&png) != picture.sha256 {
            return None;
        }
        pictures.push((picture.name, png));
    }
    let record = StageRecord {
        index: s.index,
        tau: s.tau,
        files: s.files,
        sha256: s.sha256,
        placement: s.placement,
        skin: s.skin,
        solid: s.solid,
        findings: s.findings.into_iter().map(FindingOut::finding).collect::<Option<Vec<_>>>()?,
    };
    Some((record, pictures))
}
