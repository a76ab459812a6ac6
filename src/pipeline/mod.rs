//! One readable function from a job and a time to a finished stage.

mod inspect;
mod layout;
mod plan;

pub use inspect::inspect;
pub use layout::{LaidOut, Layout, LayoutError, grid_mm, layout};
pub use plan::{Plan, PlanError, StagePlan, plan};

use crate::check::{self, AskedWall, AuditFigures, CheckInput, Fault, RemovedShells, SheetFigures};
use crate::field::{SheetError, SheetField};
use crate::geom::{Placed, Vec3};
use crate::job::Job;
use crate::mesh::{TriMesh, measure};
use crate::profile::Profile;
use crate::report::picture::{Look, stage_pictures};
use crate::report::{RegularityRecord, SkinRecord, SolidRecord, StageRecord};
use crate::skin::{self, SampleError, SheetOverlap};
use crate::solid::{self, Audit, FaultKind, GridError, GridSettings, SimplifyError, SimplifySettings};
use std::collections::BTreeMap;

/// The work on a stage, in its order; what a progress line shows.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum Step {
    /// Sampling the skin into triangles.
    Skin,
    /// Meshing the field into a closed solid.
    Solid,
    /// Simplifying the solid, audited.
    Simplify,
    /// Checking the solid against the profile.
    Check,
    /// Drawing the pictures of the sheet.
    Pictures,
}

impl Step {
    /// All steps in their order.
    pub const ALL: [Self; 5] = [Self::Skin, Self::Solid, Self::Simplify, Self::Check, Self::Pictures];

    /// What a person reads: `sampling the skin`.
    #[must_use]
    pub const fn words(self) -> &'static str {
        match self {
            Self::Skin => "sampling the skin",
            Self::Solid => "meshing the solid",
            Self::Simplify => "simplifying",
            Self::Check => "checking",
            Self::Pictures => "drawing",
        }
    }
}

/// Who is told how far a stage is, and who may ask the work to stop.
pub trait Progress: Sync {
    /// Called when a step begins.
    fn step(&self, step: Step);

    /// Whether the work should stop at the next point where it can; asked between steps and, in long
    /// steps, every second or so.
    fn stopped(&self) -> bool {
        false
    }
}

/// A [`Progress`] that shows nothing and never stops the work.
#[derive(Clone, Copy, Debug, Default)]
pub struct NoProgress;

impl Progress for NoProgress {
    fn step(&self, _step: Step) {}
}

/// A finished stage.
#[derive(Clone, Debug)]
pub struct Stage {
    /// What was measured; `files` and `sha256` are empty until the stage is written.
    pub record: StageRecord,
    /// The solid as every writer writes it.
    pub mesh: TriMesh,
    /// Pictures for the sheet: name of the view (see `report::picture::Picture`) and PNG bytes.
    pub pictures: Vec<(String, Vec<u8>)>,
}

/// Why a stage could not be made.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum StageError {
    /// [`Progress::stopped`] said so.
    #[error("stopped on request")]
    Stopped,
    /// The stage has no place in the set.
    #[error(transparent)]
    Layout(#[from] LayoutError),
    /// The skin could not be sampled.
    #[error("the skin could not be sampled: {0}")]
    Skin(#[from] SampleError),
    /// The skin has no distance field.
    #[error("the skin has no distance field: {0}")]
    Field(#[from] SheetError),
    /// The field could not be meshed.
    #[error(transparent)]
    Grid(#[from] GridError),
    /// The mesh could not be simplified.
    #[error(transparent)]
    Simplify(#[from] SimplifyError),
    /// A picture could not be drawn.
    #[error("the pictures could not be drawn: {0}")]
    Picture(String),
}

/// Share of the grid that the skin's triangles may be from the skin. Only a start for the exact search:
/// coarser is quicker until the triangles grow past the cells.
const CHORD_OF_GRID: f64 = 0.1;
/// The skin is never sampled finer than this many triangles.
const MOST_SKIN_TRIANGLES: usize = 4_000_000;

/// Makes the stage number `index` (from 1) of `job`.
///
/// Deterministic: the same job and profile give the same stage whatever the number of threads of the
/// current rayon pool.
///
/// # Errors
/// [`StageError`] when the stage cannot be made; a stage that prints badly is no error but has findings.
pub fn make_stage(
    job: &Job,
    profile: &Profile,
    index: usize,
    progress: &dyn Progress,
) -> Result<Stage, StageError> {
    let begin = |step: Step| {
        progress.step(step);
        if progress.stopped() { Err(StageError::Stopped) } else { Ok(()) }
    };

    begin(Step::Skin)?;
    let layout = layout(job)?;
    let count = layout.stages.len();
    let laid = index.checked_sub(1).and_then(|i| layout.stages.get(i));
    let laid = laid.ok_or(LayoutError::NoStage { index, count })?;
    let scale = laid.placement.scale;
    let figures = skin::figures(laid.stage.as_ref());
    let overlap = skin::sheet_overlap(layout.family.as_ref(), laid.stage.tau(), scale, job.wall_mm)?;
    let surface = Placed::new(laid.stage.as_ref(), laid.placement);
    let grid = grid_mm(job, figures.min_radius * scale);
    let skin_mesh = skin::sample(&surface, CHORD_OF_GRID * grid, MOST_SKIN_TRIANGLES)?;

    begin(Step::Solid)?;
    let field = SheetField::new(&skin_mesh, Some(&surface), job.wall_mm)?;
    let crumb_mm3 = profile.feature_mm.value.powi(3);
    let meshed = solid::solidify(&field, &GridSettings { cell_mm: grid, crumb_mm3 })?;
    let removed = RemovedShells {
        filled: meshed.filled_voids,
        dropped: meshed.dropped_crumbs,
        volume_mm3: meshed.crumbs_mm3,
    };

    begin(Step::Simplify)?;
    let exact = |p: &Vec3| meshed.probe.sample(p).value;
    let solid = solid::simplify(&meshed.mesh, &SimplifySettings::new(job.tolerance_mm), &exact)?;
    let cell_mm = meshed.cell_mm;
    drop(meshed);

    begin(Step::Check)?;
    let findings = check::run(&CheckInput {
        mesh: &solid.mesh,
        audit: audit_figures(&solid.audit),
        profile,
        asked: Some(AskedWall { wall_mm: job.wall_mm, tolerance_mm: job.tolerance_mm }),
        removed: Some(removed),
        sheets: Some(sheet_figures(&overlap)),
    });

    begin(Step::Pictures)?;
    let look = Look::of_sides(job.colour_a, job.colour_b);
    let pictures = stage_pictures(&solid.mesh, job.size_mm, &look)
        .map_err(|e| StageError::Picture(e.to_string()))?
        .into_named();

    let volume_mm3 = measure::signed_mass(&solid.mesh).volume_mm3;
    let bounds = solid.mesh.bounds();
    let record = StageRecord {
        index,
        tau: laid.stage.tau(),
        files: BTreeMap::new(),
        sha256: BTreeMap::new(),
        placement: laid.placement.rows(),
        skin: SkinRecord {
            area_mm2: figures.area * scale * scale,
            signed_volume_mm3: figures.signed_volume * scale.powi(3),
            min_radius_mm: figures.min_radius * scale,
            regularity: RegularityRecord {
                fold_margin: laid.stage.fold_margin(),
                sigma_min: figures.sigma_min,
            },
        },
        solid: SolidRecord {
            triangles: solid.mesh.triangles.len(),
            vertices: solid.mesh.positions.len(),
            volume_mm3,
            area_mm2: measure::area(&solid.mesh),
            bbox_mm: [bounds.min.into(), bounds.max.into()],
            shells: solid.audit.shells.len(),
            chambers: solid.audit.chambers(),
            euler: solid.audit.euler,
            mass_g: volume_mm3 * profile.density_g_cm3.value / 1000.0,
            deviation_mm: solid.deviation_mm,
            grid_mm: cell_mm,
        },
        findings,
    };
    Ok(Stage { record, mesh: solid.mesh, pictures })
}

/// The audit as the checks take it.
#[must_use]
pub fn audit_figures(audit: &Audit) -> AuditFigures {
    let fault = |kinds: &[FaultKind]| {
        let count = kinds.iter().map(|&k| audit.count(k)).sum();
        let first = audit.faults.iter().find(|f| kinds.contains(&f.kind));
        // A triangle without a finite corner has no place.
        let placed = first.filter(|f| !matches!(f.kind, FaultKind::IndexOutOfRange | FaultKind::NotFinite));
        Fault::new(count, placed.map(|f| f.place_mm))
    };
    AuditFigures {
        bad_triangles: fault(&[FaultKind::IndexOutOfRange, FaultKind::NotFinite, FaultKind::RepeatedCorner]),
        flat_triangles: fault(&[FaultKind::ZeroArea]),
        doubled_triangles: fault(&[FaultKind::DuplicateTriangle]),
        open_edges: fault(&[FaultKind::OpenEdge]),
        crowded_edges: fault(&[FaultKind::CrowdedEdge]),
        pinched_vertices: fault(&[FaultKind::PinchedVertex]),
        turned_edges: fault(&[FaultKind::MisorientedEdge]),
        crossings: fault(&[FaultKind::Crossing]),
        shells: audit.shells.len(),
        euler: audit.euler,
    }
}

fn sheet_figures(overlap: &SheetOverlap) -> SheetFigures {
    SheetFigures {
        double_cover: overlap.double_cover,
        close_share: overlap.share,
        mean_distance_mm: overlap.mean_distance_mm.unwrap_or(0.0),
        better_taus: overlap.suggested_times.map_or_else(Vec::new, |t| t.to_vec()),
    }
}
