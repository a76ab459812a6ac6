//! What a family of eversions gives; everything else is written once for all families.

use crate::geom::Surface;

/// Figures that say how far a stage is from losing its immersion, in the family's own coordinates.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Margins {
    /// A family's own sufficient condition, positive when it holds (for `ruled`: min Phi / (L c) on the
    /// fold); `None` for a family without one.
    pub fold: Option<f64>,
    /// Smallest singular value of dF against the round metric of the unit sphere.
    pub sigma_min: f64,
}

/// One stage of a family: a surface over the unit sphere, in the family's own coordinates.
pub trait StageSurface: Surface {
    /// The time of this stage.
    fn tau(&self) -> f64;
    /// The family's own regularity condition at this time (see [`Margins::fold`]).
    fn fold_margin(&self) -> Option<f64>;
    /// A number k such that rotation by 2 pi / k about z maps the stage to itself, sides kept, by rotation
    /// of the unit sphere by the same angle; 1 when none is known.
    fn symmetry(&self) -> u32 {
        1
    }
}

/// A way to evert the sphere.
pub trait Family: Send + Sync {
    /// The name in job files.
    fn name(&self) -> &'static str;
    /// The symmetry order: rotation by 2 pi / order about z maps every stage to itself.
    fn order(&self) -> u32;
    /// Where the formulas come from.
    fn source(&self) -> &'static str;
    /// The stage at time `tau`, 0..=1.
    fn stage(&self, tau: f64) -> Box<dyn StageSurface>;
    /// Whether the stage at tau = 1/2 covers its image twice (two sheets coincide everywhere).
    fn halfway_is_double_cover(&self) -> bool;
}
