//! The form in which a mesh is written: f32 coordinates, equal points joined, nothing collapsed.

use crate::geom::Vec3;
use crate::mesh::{TriMesh, first_equal};

/// Brings a mesh into the form every reader of its files will see.
///
/// Coordinates are rounded to the nearest f32 (they stay f64 in memory), -0.0 becomes 0.0, points with equal
/// coordinates become one, triangles with two corners in one place and vertices without a triangle are dropped. Vertices
/// are numbered in the order of their first use. Nothing else is repaired: audit the result.
///
/// A mesh that was finished before comes back unchanged. Triangles with an index out of range are dropped.
#[must_use]
pub fn finish(mesh: &TriMesh) -> TriMesh {
    let rounded: Vec<Vec3> = mesh.positions.iter().map(|p| p.map(written)).collect();
    let first = first_equal(&rounded);
    let mut number = vec![u32::MAX; rounded.len()];
    let mut out = TriMesh::default();
    for (k, t) in mesh.triangles.iter().enumerate() {
        let [Some(a), Some(b), Some(c)] = t.map(|i| first.get(i as usize).copied()) else { continue };
        if a == b || b == c || c == a {
            continue;
        }
        out.triangles.push([a, b, c].map(|i| {
            let n = &mut number[i as usize];
            if *n == u32::MAX {
                *n = u32::try_from(out.positions.len()).unwrap_or(u32::MAX);
                out.positions.push(rounded[i as usize]);
            }
            *n
        }));
        out.sides.push(mesh.sides.get(k).copied().unwrap_or_default());
    }
    out
}

/// The value a file holds: the nearest f32, never -0.0.
#[expect(clippy::cast_possible_truncation, reason = "rounding to f32 is the purpose")]
fn written(x: f64) -> f64 {
    f64::from(x as f32) + 0.0
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::mesh::{Side, shapes};

    #[test]
    fn equal_points_are_joined_and_collapsed_triangles_go() {
        let mut m = shapes::on_side(&shapes::corner(1.0), Side::A);
        // A vertex that is the same after rounding, one that differs by the sign of zero, one nobody uses.
        m.positions.extend([Vec3::new(1.0 + 1e-12, 0.0, 0.0), Vec3::new(-0.0, 1.0, -0.0), Vec3::repeat(7.0)]);
        m.triangles[0] = [0, 5, 4];
        m.triangles.push([1, 4, 2]);
        m.sides.push(Side::B);
        let f = finish(&m);
        assert_eq!((f.positions.len(), f.triangles.len()), (4, 4));
        assert_eq!(f.sides, [Side::A; 4]);
        assert!(f.positions.iter().flatten().all(|x| x.to_bits() != (-0.0_f64).to_bits()));
        assert_eq!(finish(&f), f);
    }

    #[test]
    fn coordinates_become_f32_values() {
        let f = finish(&shapes::icosphere(40.0, 3));
        assert!(f.positions.iter().flatten().all(|x| (written(*x) - x).abs() == 0.0));
        assert_eq!(f.triangles.len(), 20 * 64);
    }
}
