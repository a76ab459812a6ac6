//! The mesh types every room hands to the next.

use crate::geom::{Aabb, Vec3};

/// What a triangle of a solid bounds.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, PartialOrd, Ord, Hash)]
#[repr(u8)]
pub enum Side {
    /// The side of the skin that is outside at tau = 0.
    A,
    /// The other side.
    B,
    /// A foot, a label, a peg: neither side of the skin; also every triangle of a mesh from elsewhere.
    #[default]
    Fixture,
}

impl Side {
    /// All sides in their fixed order.
    pub const ALL: [Self; 3] = [Self::A, Self::B, Self::Fixture];

    /// The name used in files: `side-a`, `side-b`, `fixture`.
    #[must_use]
    pub const fn name(self) -> &'static str {
        match self {
            Self::A => "side-a",
            Self::B => "side-b",
            Self::Fixture => "fixture",
        }
    }
}

/// An indexed triangle mesh, mm. Counter-clockwise seen from outside when it bounds a solid.
///
/// Indices are in range and `sides` has one entry a triangle; nothing else is promised by the type.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct TriMesh {
    /// Vertex positions, mm.
    pub positions: Vec<Vec3>,
    /// Corner indices, three a triangle.
    pub triangles: Vec<[u32; 3]>,
    /// The side of each triangle.
    pub sides: Vec<Side>,
}

impl TriMesh {
    /// The corners of triangle `t`.
    ///
    /// # Panics
    /// When `t` is not a triangle of the mesh.
    #[must_use]
    pub fn corners(&self, t: usize) -> [Vec3; 3] {
        self.triangles[t].map(|i| self.positions[i as usize])
    }

    /// The smallest box around all vertices.
    #[must_use]
    pub fn bounds(&self) -> Aabb {
        Aabb::around(&self.positions)
    }
}

/// A triangulated skin: the image of a triangulated sphere, mm.
///
/// Triangles are counter-clockwise seen from side A.
#[derive(Clone, Debug, Default)]
pub struct SkinMesh {
    /// Points of the skin, mm.
    pub positions: Vec<Vec3>,
    /// Unit normals of the skin at the points, towards side A.
    pub normals: Vec<Vec3>,
    /// The points of the unit sphere they are images of; empty for a skin that has no formula.
    pub parameters: Vec<Vec3>,
    /// Corner indices.
    pub triangles: Vec<[u32; 3]>,
    /// No point of a triangle is farther than this from the smooth skin near it, nor the reverse, mm.
    pub chord_mm: f64,
}
