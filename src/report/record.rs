//! What is known of a finished set, as plain data: the source of `set.json`, the sheet and the cautions.

use crate::check::{Finding, Verdict};
use crate::job::Job;
use crate::profile::Profile;
use std::collections::BTreeMap;

/// Regularity figures of a skin; see `skin::Margins`.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct RegularityRecord {
    /// The family's own margin, positive when the stage is proved immersed.
    pub fold_margin: Option<f64>,
    /// Smallest singular value of dF against the round unit sphere, family coordinates.
    pub sigma_min: f64,
}

/// Figures of the exact skin, scaled to mm.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct SkinRecord {
    /// Area, mm2.
    pub area_mm2: f64,
    /// Signed volume (winding number integrated), mm3.
    pub signed_volume_mm3: f64,
    /// Smallest principal radius of curvature, mm.
    pub min_radius_mm: f64,
    /// How far the stage is from losing its immersion.
    pub regularity: RegularityRecord,
}

/// Figures of the written solid.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct SolidRecord {
    /// Triangles in the files.
    pub triangles: usize,
    /// Vertices in the files.
    pub vertices: usize,
    /// Volume of material, mm3.
    pub volume_mm3: f64,
    /// Area of the whole boundary, chambers included, mm2.
    pub area_mm2: f64,
    /// Smallest and largest coordinates, mm.
    pub bbox_mm: [[f64; 3]; 2],
    /// Closed boundary surfaces.
    pub shells: usize,
    /// Chambers: shells that bound air enclosed by material.
    pub chambers: usize,
    /// Euler number of the boundary.
    pub euler: i64,
    /// Mass of the material, g.
    pub mass_g: f64,
    /// Greatest measured distance of the written surface from the exact one on smooth parts, mm.
    pub deviation_mm: f64,
    /// Edge length of the sampling grid, mm.
    pub grid_mm: f64,
}

/// A finished stage.
#[derive(Clone, Debug, PartialEq)]
pub struct StageRecord {
    /// Position in the set, from 1.
    pub index: usize,
    /// Time.
    pub tau: f64,
    /// Format name to relative path.
    pub files: BTreeMap<String, String>,
    /// Format name to SHA-256 of the file, lower-case hex.
    pub sha256: BTreeMap<String, String>,
    /// Family coordinates to mm in the files; rows of a 3 x 4 matrix.
    pub placement: [[f64; 4]; 3],
    /// The skin.
    pub skin: SkinRecord,
    /// The solid.
    pub solid: SolidRecord,
    /// Every finding of every check.
    pub findings: Vec<Finding>,
}

impl StageRecord {
    /// The worst verdict of all findings.
    #[must_use]
    pub fn verdict(&self) -> Verdict {
        self.findings.iter().map(|f| f.verdict).max().unwrap_or(Verdict::Pass)
    }
}

/// A finished set.
#[derive(Clone, Debug, PartialEq)]
pub struct SetRecord {
    /// What was asked for.
    pub job: Job,
    /// The profile it was checked against.
    pub profile: Profile,
    /// Where the family's formulas come from.
    pub family_source: String,
    /// The stages that were made.
    pub stages: Vec<StageRecord>,
    /// Stages that could not be made: index, tau, why.
    pub failures: Vec<(usize, f64, String)>,
}

/// Sums over the stages that were made.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct TotalsRecord {
    /// Volume of material, mm3.
    pub volume_mm3: f64,
    /// Mass of the material, g.
    pub mass_g: f64,
    /// Triangles.
    pub triangles: usize,
}

impl SetRecord {
    /// The worst verdict of all stages; a stage that could not be made counts as a fail.
    #[must_use]
    pub fn verdict(&self) -> Verdict {
        if !self.failures.is_empty() {
            return Verdict::Fail;
        }
        self.stages.iter().map(StageRecord::verdict).max().unwrap_or(Verdict::Pass)
    }

    /// Sums over the stages that were made, in their order.
    #[must_use]
    pub fn totals(&self) -> TotalsRecord {
        let mut sum = TotalsRecord { volume_mm3: 0.0, mass_g: 0.0, triangles: 0 };
        for stage in &self.stages {
            sum.volume_mm3 += stage.solid.volume_mm3;
            sum.mass_g += stage.solid.mass_g;
            sum.triangles += stage.solid.triangles;
        }
        sum
    }
}
