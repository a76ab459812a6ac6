//! What a set is expected to be, before it is computed.

use super::layout::{LayoutError, grid_mm, layout};
use crate::job::Job;
use crate::profile::Profile;
use crate::skin;
use crate::solid;

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
    /// The set cannot be laid out.
    #[error(transparent)]
    Layout(#[from] LayoutError),
}

/// Vertices a square millimetre of boundary gets, times the square of the grid: 1.5 crossed edges a square
/// (measured 1.51 on every stage; a plane of random direction has 3/2).
const VERTICES: f64 = 1.5;
/// Bytes a vertex of the unsimplified mesh costs while the solid is made (measured 480 to 560 with its two
/// triangles, its block and its share of the narrowed fields).
const BYTES_A_VERTEX: f64 = 520.0;
/// Bytes a triangle costs while simplified.
const BYTES_A_TRIANGLE: f64 = 600.0;
/// Triangles left after simplification, times the tolerance over (boundary area times root mean square
/// curvature of the skin): 1.06 and 1.32 at tau 0 and 0.5 of the starter set.
const TRIANGLES_LEFT: f64 = 1.2;
/// Seconds of one core a vertex of the unsimplified mesh costs, all steps together (starter set: 154 s for
/// 1.6 million).
const SECONDS_A_VERTEX: f64 = 95e-6;

/// Estimates every stage of `job` without making it: from the area and the curvature of the exact skin.
///
/// Volume and mass count places where walls cross twice, so they are too high by a few per cent.
///
/// # Errors
/// [`PlanError`] when the job names something that does not exist or has no room for its wall.
pub fn plan(job: &Job, profile: &Profile) -> Result<Plan, PlanError> {
    let layout = layout(job)?;
    let mut finest = f64::INFINITY;
    let stages = (1..)
        .zip(&layout.stages)
        .map(|(index, laid)| {
            let figures = skin::figures(laid.stage.as_ref());
            let scale = laid.placement.scale;
            let grid = grid_mm(job, figures.min_radius * scale);
            finest = finest.min(grid);
            let area = figures.area * scale * scale;
            let boundary = 2.0 * area;
            let all_blocks = solid::block_estimate(&laid.extent_mm, grid);
            let vertices = VERTICES * boundary / (grid * grid);
            let bytes = vertices * (BYTES_A_VERTEX + 2.0 * BYTES_A_TRIANGLE) + 8.0 * all_blocks;
            let mass_g = area * job.wall_mm * profile.density_g_cm3.value / 1000.0;
            let bend = (figures.bending_energy / area).sqrt();
            let left = TRIANGLES_LEFT * boundary * bend / job.tolerance_mm;
            StagePlan {
                index,
                tau: laid.stage.tau(),
                extent_mm: laid.extent_mm.into(),
                triangles: whole(left.min(2.0 * vertices)),
                mass_g,
                memory_bytes: whole(bytes),
                seconds: vertices * SECONDS_A_VERTEX,
            }
        })
        .collect();
    Ok(Plan { grid_mm: finest, stages })
}

/// Rounds a count that is not negative; what is too large for a u64 becomes the largest.
#[expect(clippy::cast_possible_truncation, clippy::cast_sign_loss, reason = "saturates, and is not negative")]
fn whole(count: f64) -> u64 {
    count.round() as u64
}
