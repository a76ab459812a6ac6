//! Binary STL, written through `stl_io`.

use super::printed::{Rounding, WriteError, printed_positions, single};
use crate::geom::Vec3;
use crate::mesh::TriMesh;
use std::io::Write;

/// Writes `mesh` as binary STL, little-endian, 84 + 50 bytes a triangle.
///
/// Coordinates are mm (the format has no place for a unit), rounded to 32 bits. The normals are computed in
/// 64 bits from the rounded corners; a triangle without area gets the normal (0, 0, 0), which readers replace.
/// The header is 80 zero bytes, so it cannot be taken for the ASCII form. Sides are not carried.
///
/// # Errors
/// [`WriteError`]: the mesh cannot be represented, or the stream failed. Nothing is written in the first case.
///
/// # Source
/// 3D Systems, StereoLithography Interface Specification, 1989; byte layout: Library of Congress, format
/// description fdd000505.
pub fn write_stl<W: Write>(mesh: &TriMesh, mut w: W) -> Result<(), WriteError> {
    let positions = printed_positions(mesh, Rounding::Single, "STL")?;
    let triangles = mesh.triangles.iter().map(|t| {
        let corners = t.map(|i| positions[i as usize]);
        stl_io::Triangle {
            normal: stl_io::Normal::new(facet_normal(&corners)),
            vertices: corners.map(stl_io::Vertex::new),
        }
    });
    stl_io::write_stl(&mut w, triangles)
        .and_then(|()| w.flush())
        .map_err(|source| WriteError::Stream { format: "STL", source })
}

/// The unit normal of a triangle whose corners are counter-clockwise seen from outside; zero without area.
fn facet_normal(corners: &[[f32; 3]; 3]) -> [f32; 3] {
    let [a, b, c] = corners.map(|p| Vec3::new(p[0].into(), p[1].into(), p[2].into()));
    let n = (b - a).cross(&(c - a)).try_normalize(0.0).unwrap_or_else(Vec3::zeros);
    [single(n.x), single(n.y), single(n.z)]
}

#[cfg(test)]
mod tests {
    use super::*;

    #[expect(clippy::float_cmp, reason = "exact values are expected")]
    #[test]
    fn normals_are_unit_and_outward_even_for_tiny_triangles() {
        assert_eq!(facet_normal(&[[0.0; 3], [3.0, 0.0, 0.0], [0.0, 4.0, 0.0]]), [0.0, 0.0, 1.0]);
        assert_eq!(facet_normal(&[[0.0; 3], [0.0, 1e-15, 0.0], [1e-15, 0.0, 0.0]]), [0.0, 0.0, -1.0]);
        assert_eq!(facet_normal(&[[0.0; 3], [1.0, 0.0, 0.0], [2.0, 0.0, 0.0]]), [0.0; 3]);
    }
}
