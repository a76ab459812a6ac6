//! One readable function from a job and a time to a finished stage.

use crate::job::Job;
use crate::mesh::TriMesh;
use crate::profile::Profile;
use crate::report::StageRecord;

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

/// What a stage is expected to be, from the skin alone. All figures are estimates.
#[derive(Clone, Debug, PartialEq)]
pub struct StagePlan {
    /// Position in the set, from 1.
    pub index: usize,
    /// Time.
    pub tau: f64,
    /// Extents x, y, z of the finished solid, wall included, mm.
    pub extent_mm: [f64; 3],
    /// Triangles in the files.
    pub triangles: u64,
    /// Mass of the material, g.
    pub mass_g: f64,
    /// Greatest memory needed while the stage is made, bytes.
    pub memory_bytes: u64,
    /// Computing time on one core, s.
    pub seconds: f64,
}

/// What a set is expected to be, before it is computed.
#[derive(Clone, Debug, PartialEq)]
pub struct Plan {
    /// Edge length of the sampling grid, mm.
    pub grid_mm: f64,
    /// The stages, in the order of the job.
    pub stages: Vec<StagePlan>,
}

impl Plan {
    /// The greatest memory any stage needs, bytes: stages are made one after another.
    #[must_use]
    pub fn memory_bytes(&self) -> u64 {
        self.stages.iter().map(|s| s.memory_bytes).max().unwrap_or(0)
    }
}

/// Why no plan could be made.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum PlanError {
    /// The job names a family that does not exist in this order.
    #[error("there is no family `{family}` of order {order}")]
    NoFamily {
        /// The name asked for.
        family: String,
        /// The symmetry order asked for.
        order: u32,
    },
}

/// A finished stage.
#[derive(Clone, Debug)]
pub struct Stage {
    /// What was measured; `files` and `sha256` are empty until the stage is written.
    pub record: StageRecord,
    /// The solid as every writer writes it.
    pub mesh: TriMesh,
    /// Pictures for the sheet: name (`front`, `side`, `top`) and PNG bytes.
    pub pictures: Vec<(String, Vec<u8>)>,
}

/// Why a stage could not be made.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum StageError {
    /// [`Progress::stopped`] said so.
    #[error("stopped on request")]
    Stopped,
    /// This build has no way from a skin to a solid.
    #[error("stage {index}: this build cannot make solids yet")]
    NotBuilt {
        /// Position in the set, from 1.
        index: usize,
    },
}

/// Estimates every stage of `job` without making it.
///
/// # Errors
/// [`PlanError`] when the job names something that does not exist.
pub fn plan(job: &Job, profile: &Profile) -> Result<Plan, PlanError> {
    let _ = profile;
    Err(PlanError::NoFamily { family: job.family.clone(), order: job.order })
}

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
    let _ = (job, profile);
    if progress.stopped() {
        return Err(StageError::Stopped);
    }
    Err(StageError::NotBuilt { index })
}
