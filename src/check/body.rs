//! A mesh with what several checks need of it, worked out once.

use super::nesting::{Nest, nesting};
use crate::geom::Vec3;
use crate::mesh::{Component, Tree, TriMesh, components, measure};

/// A closed, two-manifold, consistently oriented mesh without crossings, ready to be measured.
pub(super) struct Body<'m> {
    pub(super) mesh: &'m TriMesh,
    pub(super) tree: Tree,
    /// Unit normals of the triangles, outward; zero for a triangle without area.
    pub(super) normals: Vec<Vec3>,
    /// Areas of the triangles, mm2.
    pub(super) areas: Vec<f64>,
    pub(super) parts: Vec<Component>,
    pub(super) nests: Vec<Nest>,
}

impl<'m> Body<'m> {
    /// Prepares a mesh; `None` when it is empty or a triangle has a corner that does not exist or is not finite.
    pub(super) fn new(mesh: &'m TriMesh) -> Option<Self> {
        let exists = |i: u32| mesh.positions.get(i as usize).is_some_and(|p| p.iter().all(|x| x.is_finite()));
        if mesh.triangles.is_empty() || !mesh.triangles.iter().flatten().all(|&i| exists(i)) {
            return None;
        }
        let tree = Tree::build(mesh);
        let parts = components(mesh);
        let nests = nesting(mesh, &tree, &parts);
        let vectors: Vec<Vec3> =
            (0..mesh.triangles.len()).map(|t| measure::doubled_area_vector(&mesh.corners(t))).collect();
        let areas = vectors.iter().map(|v| 0.5 * v.norm()).collect();
        let normals = vectors.iter().map(|v| v.try_normalize(0.0).unwrap_or_default()).collect();
        Some(Self { mesh, tree, normals, areas, parts, nests })
    }

    /// Whether a shell lies so deep that it bounds air inside the material (or material floating in such air).
    pub(super) fn is_inside(&self, part: usize) -> bool {
        self.nests[part].depth > 0
    }

    /// Shells whose triangles face the wrong way for the place they are in.
    pub(super) fn misplaced(&self) -> impl Iterator<Item = usize> + '_ {
        (0..self.parts.len())
            .filter(|&i| (self.parts[i].volume_mm3 > 0.0) != self.nests[i].depth.is_multiple_of(2))
    }

    /// Volume of the material, mm3.
    pub(super) fn volume_mm3(&self) -> f64 {
        self.parts.iter().map(|p| p.volume_mm3).sum()
    }

    /// Area of the whole boundary, mm2.
    pub(super) fn area_mm2(&self) -> f64 {
        self.areas.iter().sum()
    }

    /// The middle of triangle `t`.
    pub(super) fn middle(&self, t: usize) -> Vec3 {
        let [a, b, c] = self.mesh.corners(t);
        (a + b + c) / 3.0
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::mesh::shapes;

    #[test]
    fn a_shell_has_its_void_in_place_and_a_flipped_one_has_not() {
        let shell = shapes::sphere_shell(5.0, 4.0, 2);
        let misplaced = |m: &TriMesh| Body::new(m).unwrap().misplaced().collect::<Vec<_>>();
        assert!(misplaced(&shell).is_empty());
        assert_eq!(misplaced(&shapes::flipped(&shell)), vec![0, 1]);
        let nested = shapes::joined(&[shapes::icosphere(5.0, 1), shapes::icosphere(3.0, 1)]);
        assert_eq!(misplaced(&nested), vec![1]);
    }

    #[test]
    fn spoiled_meshes_have_no_body() {
        let mut mesh = shapes::icosphere(5.0, 1);
        mesh.positions[3].y = f64::NAN;
        assert!(Body::new(&mesh).is_none());
        mesh.positions.truncate(3);
        assert!(Body::new(&mesh).is_none());
        assert!(Body::new(&TriMesh::default()).is_none());
    }
}
