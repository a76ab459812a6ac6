//! Where each stage of a set goes and how large it becomes, before anything is meshed.

use crate::geom::{Aabb, Placed, Placement, Vec3};
use crate::job::{Job, Scale};
use crate::orient::{self, OrientError};
use crate::skin::{self, Family, FamilyError, StageSurface};

/// Why a set could not be laid out.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum LayoutError {
    /// The job names a family or order that does not exist.
    #[error(transparent)]
    Family(#[from] FamilyError),
    /// The direction or the size makes no sense.
    #[error(transparent)]
    Orient(#[from] OrientError),
    /// A stage number that is not in the set.
    #[error("there is no stage {index}: the set has stages 1 to {count}")]
    NoStage {
        /// The number asked for.
        index: usize,
        /// Stages in the set.
        count: usize,
    },
}

/// A set laid out: a placement for every stage.
pub struct Layout {
    /// The family.
    pub family: Box<dyn Family>,
    /// The stages in the order of the job.
    pub stages: Vec<LaidOut>,
}

/// One stage laid out.
pub struct LaidOut {
    /// The surface in the family's own coordinates.
    pub stage: Box<dyn StageSurface>,
    /// To mm in the files.
    pub placement: Placement,
    /// Extents of the finished solid, wall included, mm.
    pub extent_mm: Vec3,
}

/// Places every stage of `job` on the plate z = 0 in the positive octant, build direction up.
///
/// # Errors
/// [`LayoutError`] when the family does not exist, the direction is zero or the wall takes the whole size.
pub fn layout(job: &Job) -> Result<Layout, LayoutError> {
    let family = skin::family(&job.family, job.order)?;
    let rotation = orient::rotation_to_z(&job.direction)?;
    let turned = Placement { rotation, ..Placement::identity() };
    let stages: Vec<(Box<dyn StageSurface>, Aabb)> = job
        .times
        .iter()
        .map(|&tau| {
            let stage = family.stage(tau);
            let bounds = skin::extent(&Placed::new(stage.as_ref(), turned));
            (stage, bounds)
        })
        .collect();
    let largest = stages.iter().map(|(_, b)| b.extent().amax()).fold(0.0, f64::max);
    let stages = stages
        .into_iter()
        .map(|(stage, bounds)| {
            let extent = match job.scale {
                Scale::Each => bounds.extent().amax(),
                Scale::Common => largest,
            };
            let scale = orient::scale_for_extent(extent, job.size_mm, job.wall_mm)?;
            let placement = orient::place(rotation, scale, &bounds, job.wall_mm);
            let extent_mm = bounds.extent() * scale + Vec3::repeat(job.wall_mm);
            Ok(LaidOut { stage, placement, extent_mm })
        })
        .collect::<Result<_, OrientError>>()?;
    Ok(Layout { family, stages })
}

/// The edge of a grid cell for a wall, a tolerance and a smallest radius of curvature of the skin, mm.
///
/// Triangles with edges up to sqrt(2) h over a surface of radius r leave it by at most h^2 / (4 r); half
/// the tolerance is left to the simplifier. r is the radius on the concave side of the wall, where it is
/// smallest, but not below a quarter of the wall: a tighter fold has an edge, which the mesher keeps. A
/// quarter of the wall keeps its two faces apart on the grid.
#[must_use]
pub fn grid_mm(job: &Job, min_radius_mm: f64) -> f64 {
    let r = (min_radius_mm - 0.5 * job.wall_mm).max(0.25 * job.wall_mm);
    let chord = (2.0 * job.tolerance_mm * r).sqrt();
    job.grid_mm.unwrap_or_else(|| chord.clamp(job.wall_mm / 12.0, job.wall_mm / 4.0))
}
