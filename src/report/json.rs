//! `set.json`: the set as data for other programs. The contract is [`SCHEMA`].
//!
//! Keys come in a fixed order, numbers in the shortest form that reads back to the same `f64`, and
//! nothing depends on the clock or the machine, so equal jobs give equal bytes. A number that could not
//! be measured (not finite) is written as `null`.

use super::flat_arrays::FlatArrays;
use super::record::{SetRecord, StageRecord};
use crate::check::Finding;
use crate::geom::Vec3;
use crate::job::Scale;
use serde::Serialize;
use std::collections::BTreeMap;

/// The version of the contract; raised when a key changes its meaning or goes away.
pub const SCHEMA_VERSION: u32 = 1;

/// JSON Schema (draft 2020-12) of what [`set_json`] writes.
pub const SCHEMA: &str = include_str!("set.schema.json");

/// Writes a set as pretty-printed JSON, ending in a line feed, valid against [`SCHEMA`].
///
/// - `set`: the finished set.
/// - returns: UTF-8 text; equal records give equal bytes.
#[must_use]
pub fn set_json(set: &SetRecord) -> String {
    let mut bytes = Vec::new();
    let mut out = serde_json::Serializer::with_formatter(&mut bytes, FlatArrays::default());
    // Writing plain data to memory has no way to fail: all map keys are strings.
    let written = Document::of(set).serialize(&mut out);
    debug_assert!(written.is_ok(), "plain data can always be written to memory");
    bytes.push(b'\n');
    String::from_utf8_lossy(&bytes).into_owned()
}

#[derive(Serialize)]
struct Document<'r> {
    schema_version: u32,
    program: &'static str,
    version: &'static str,
    title: &'r str,
    job: JobOut<'r>,
    profile: ProfileOut<'r>,
    family_source: &'r str,
    totals: Totals,
    stages: Vec<StageOut<'r>>,
    failures: Vec<FailureOut<'r>>,
    verdict: &'static str,
}

#[derive(Serialize)]
struct JobOut<'r> {
    title: &'r str,
    profile: &'r str,
    formats: Vec<&'static str>,
    family: &'r str,
    order: u32,
    times: Vec<f64>,
    size_mm: f64,
    scale: &'static str,
    wall_mm: f64,
    tolerance_mm: f64,
    grid_mm: Option<f64>,
    direction: [f64; 3],
    colour_a: String,
    colour_b: String,
}

#[derive(Serialize)]
struct ProfileOut<'r> {
    name: &'r str,
    title: &'r str,
    process: &'r str,
    process_code: &'r str,
    material: &'r str,
    density_g_cm3: f64,
}

#[derive(Serialize)]
struct Totals {
    stages: usize,
    volume_mm3: f64,
    mass_g: f64,
    triangles: usize,
}

#[derive(Serialize)]
struct StageOut<'r> {
    index: usize,
    tau: f64,
    files: &'r BTreeMap<String, String>,
    sha256: &'r BTreeMap<String, String>,
    placement: [[f64; 4]; 3],
    skin: SkinOut,
    solid: SolidOut,
    findings: Vec<FindingOut<'r>>,
    verdict: &'static str,
}

#[derive(Serialize)]
struct SkinOut {
    area_mm2: f64,
    signed_volume_mm3: f64,
    min_radius_mm: f64,
    regularity: RegularityOut,
}

#[derive(Serialize)]
struct RegularityOut {
    fold_margin: Option<f64>,
    sigma_min: f64,
}

#[derive(Serialize)]
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

#[derive(Serialize)]
struct FindingOut<'r> {
    check: &'static str,
    verdict: &'static str,
    value: f64,
    limit: Option<f64>,
    unit: &'static str,
    place_mm: Option<[f64; 3]>,
    source: &'r str,
    message: &'r str,
    advice: &'r str,
}

#[derive(Serialize)]
struct FailureOut<'r> {
    index: usize,
    tau: f64,
    reason: &'r str,
}

impl<'r> Document<'r> {
    fn of(set: &'r SetRecord) -> Self {
        let (job, profile, totals) = (&set.job, &set.profile, set.totals());
        Self {
            schema_version: SCHEMA_VERSION,
            program: "stagewright",
            version: env!("CARGO_PKG_VERSION"),
            title: &job.title,
            job: JobOut {
                title: &job.title,
                profile: &job.profile,
                formats: job.formats.iter().map(|f| f.name()).collect(),
                family: &job.family,
                order: job.order,
                times: job.times.iter().map(|&t| plain(t)).collect(),
                size_mm: plain(job.size_mm),
                scale: match job.scale {
                    Scale::Each => "each",
                    Scale::Common => "common",
                },
                wall_mm: plain(job.wall_mm),
                tolerance_mm: plain(job.tolerance_mm),
                grid_mm: job.grid_mm.map(plain),
                direction: triple(&job.direction),
                colour_a: hex(job.colour_a),
                colour_b: hex(job.colour_b),
            },
            profile: ProfileOut {
                name: &profile.name,
                title: &profile.title,
                process: &profile.process,
                process_code: &profile.process_code,
                material: &profile.material,
                density_g_cm3: plain(profile.density_g_cm3.value),
            },
            family_source: &set.family_source,
            totals: Totals {
                stages: set.stages.len(),
                volume_mm3: plain(totals.volume_mm3),
                mass_g: plain(totals.mass_g),
                triangles: totals.triangles,
            },
            stages: set.stages.iter().map(StageOut::of).collect(),
            failures: set
                .failures
                .iter()
                .map(|(index, tau, reason)| FailureOut { index: *index, tau: plain(*tau), reason })
                .collect(),
            verdict: set.verdict().word(),
        }
    }
}

impl<'r> StageOut<'r> {
    fn of(stage: &'r StageRecord) -> Self {
        let (skin, solid) = (&stage.skin, &stage.solid);
        Self {
            index: stage.index,
            tau: plain(stage.tau),
            files: &stage.files,
            sha256: &stage.sha256,
            placement: stage.placement.map(|row| row.map(plain)),
            skin: SkinOut {
                area_mm2: plain(skin.area_mm2),
                signed_volume_mm3: plain(skin.signed_volume_mm3),
                min_radius_mm: plain(skin.min_radius_mm),
                regularity: RegularityOut {
                    fold_margin: skin.regularity.fold_margin.map(plain),
                    sigma_min: plain(skin.regularity.sigma_min),
                },
            },
            solid: SolidOut {
                triangles: solid.triangles,
                vertices: solid.vertices,
                volume_mm3: plain(solid.volume_mm3),
                area_mm2: plain(solid.area_mm2),
                bbox_mm: solid.bbox_mm.map(|corner| corner.map(plain)),
                shells: solid.shells,
                chambers: solid.chambers,
                euler: solid.euler,
                mass_g: plain(solid.mass_g),
                deviation_mm: plain(solid.deviation_mm),
                grid_mm: plain(solid.grid_mm),
            },
            findings: stage.findings.iter().map(FindingOut::of).collect(),
            verdict: stage.verdict().word(),
        }
    }
}

impl<'r> FindingOut<'r> {
    fn of(finding: &'r Finding) -> Self {
        Self {
            check: finding.check,
            verdict: finding.verdict.word(),
            value: plain(finding.value),
            limit: finding.limit.map(plain),
            unit: finding.unit.symbol(),
            place_mm: finding.place_mm.as_ref().map(triple),
            source: &finding.source,
            message: &finding.message,
            advice: &finding.advice,
        }
    }
}

fn triple(v: &Vec3) -> [f64; 3] {
    [plain(v.x), plain(v.y), plain(v.z)]
}

/// Makes -0 into 0: the two are equal numbers and must be equal bytes. (The writer turns what is not
/// finite into `null`.)
fn plain(x: f64) -> f64 {
    x + 0.0
}

fn hex([r, g, b]: [u8; 3]) -> String {
    format!("#{r:02x}{g:02x}{b:02x}")
}
