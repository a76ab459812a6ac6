//! What the checks are given.

use crate::geom::Vec3;
use crate::mesh::TriMesh;
use crate::profile::Profile;

/// A kind of fault of a mesh: how often and where first.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct Fault {
    /// How many.
    pub count: usize,
    /// The place of the first, mm; `None` when there is none or it has no place.
    pub place_mm: Option<Vec3>,
}

impl Fault {
    /// So many, the first of them at `place_mm`.
    #[must_use]
    pub const fn new(count: usize, place_mm: Option<Vec3>) -> Self {
        Self { count, place_mm }
    }
}

/// What an audit of the mesh found, as plain data (the audit itself is the business of `solid`).
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct AuditFigures {
    /// Triangles with a corner that does not exist or is not finite, or that name a vertex twice.
    pub bad_triangles: Fault,
    /// Triangles whose three corners lie on a line.
    pub flat_triangles: Fault,
    /// Triangles with the same three corners as another.
    pub doubled_triangles: Fault,
    /// Edges of one triangle only.
    pub open_edges: Fault,
    /// Edges of more than two triangles.
    pub crowded_edges: Fault,
    /// Vertices at which two or more fans of triangles meet.
    pub pinched_vertices: Fault,
    /// Edges of two triangles that both run the same way, so that the triangles face opposite ways.
    pub turned_edges: Fault,
    /// Pairs of triangles that cross.
    pub crossings: Fault,
    /// Connected components.
    pub shells: usize,
    /// Vertices less edges plus triangles.
    pub euler: i64,
}

impl AuditFigures {
    /// The figures of a mesh without fault.
    #[must_use]
    pub fn clean(shells: usize, euler: i64) -> Self {
        Self { shells, euler, ..Self::default() }
    }
}

/// The wall that was asked for.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct AskedWall {
    /// Wall thickness, mm.
    pub wall_mm: f64,
    /// How far the surface may be from the exact one, mm.
    pub tolerance_mm: f64,
}

/// Shells below the smallest feature that were taken away before the mesh was finished.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct RemovedShells {
    /// Voids filled with material.
    pub filled: usize,
    /// Loose crumbs of material dropped.
    pub dropped: usize,
    /// Volume of all of them together, mm3.
    pub volume_mm3: f64,
}

/// How near the skin comes to itself.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct SheetFigures {
    /// Whether the skin covers its image twice: two sheets coincide everywhere.
    pub double_cover: bool,
    /// Share, 0..=1, of the skin's area that has another, nearly parallel sheet nearer than the wall.
    pub close_share: f64,
    /// Mean distance to that sheet over this part of the skin, mm; 0 when there is none.
    pub mean_distance_mm: f64,
    /// Times at which the sheets stand apart; empty when none is known.
    pub better_taus: Vec<f64>,
}

/// Everything [`super::run`] looks at.
#[derive(Clone, Debug)]
pub struct CheckInput<'a> {
    /// The mesh in the coordinates of the written files, mm, build direction +z; anything is allowed.
    pub mesh: &'a TriMesh,
    /// The audit of this mesh.
    pub audit: AuditFigures,
    /// The limits.
    pub profile: &'a Profile,
    /// The wall that was asked for; `None` for a mesh from elsewhere.
    pub asked: Option<AskedWall>,
    /// Shells taken away; `None` for a mesh from elsewhere.
    pub removed: Option<RemovedShells>,
    /// How near the skin comes to itself; `None` when there is no skin.
    pub sheets: Option<SheetFigures>,
}

impl<'a> CheckInput<'a> {
    /// A mesh from elsewhere: nothing was asked for and no skin is known.
    #[must_use]
    pub const fn from_elsewhere(mesh: &'a TriMesh, audit: AuditFigures, profile: &'a Profile) -> Self {
        Self { mesh, audit, profile, asked: None, removed: None, sheets: None }
    }
}
