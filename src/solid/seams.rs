//! A mesh as the simplifier wants it: 32-bit floats, and one vertex for each side that meets at a point.

use super::simplify::SimplifyError;
use crate::geom::Vec3;
use crate::mesh::{Side, TriMesh};
use meshopt::{SimplifyOptions, VertexDataAdapter, simplify_with_locks, typed_to_bytes};

/// A mesh cut open along the lines where its sides meet.
///
/// The simplifier takes points that share a place but not a number for a seam: it moves such a seam only along
/// itself, both lips together. So every triangle of its result has corners of one side, and that is its side.
pub(super) struct Seamed {
    /// Corner numbers, three a triangle.
    indices: Vec<u32>,
    /// Positions moved near the origin.
    places: Vec<[f32; 3]>,
    /// The vertex of the uncut mesh.
    origin: Vec<u32>,
    /// The side.
    sides: Vec<Side>,
}

impl Seamed {
    /// Cuts `mesh`, leaving out vertices without a triangle. Its indices are in range, its positions finite, and it
    /// has a side for each triangle.
    pub(super) fn cut(mesh: &TriMesh) -> Self {
        let mut lip = vec![[u32::MAX; 3]; mesh.positions.len()];
        let (mut origin, mut sides) = (Vec::new(), Vec::new());
        let mut indices = Vec::with_capacity(3 * mesh.triangles.len());
        for (t, &side) in mesh.triangles.iter().zip(&mesh.sides) {
            for &i in t {
                let number = &mut lip[i as usize][side as usize];
                if *number == u32::MAX {
                    *number = count(origin.len());
                    origin.push(i);
                    sides.push(side);
                }
                indices.push(*number);
            }
        }
        // Only a part far from the origin is moved, by whole millimetres: near it the f32 values stay as they are.
        let (centre, extent) = (mesh.bounds().centre(), mesh.bounds().extent());
        let shift = if centre.norm() > 2.0 * extent.norm() { centre.map(f64::round) } else { Vec3::zeros() };
        let places = origin.iter().map(|&v| single(&(mesh.positions[v as usize] - shift))).collect();
        Self { indices, places, origin, sides }
    }

    /// The vertex of the uncut mesh that a vertex of the cut mesh came from.
    pub(super) fn origin(&self, l: u32) -> u32 {
        self.origin[l as usize]
    }

    /// All of it.
    pub(super) fn origins(&self) -> &[u32] {
        &self.origin
    }

    /// The side a vertex of the cut mesh belongs to.
    pub(super) fn side(&self, l: u32) -> Side {
        self.sides[l as usize]
    }

    /// Calls the simplifier: at least `target` triangles, and at most an *estimated* error of `goal_mm`. Vertices whose
    /// entry in `locked` (one each) is set stay. With `even`, a tenth of the way a vertex
    /// moves counts as error as well. Returns triangles of the cut mesh.
    ///
    /// # Errors
    /// [`SimplifyError::Internal`] when what is handed over or comes back is not in order: the C++ library
    /// checks no index.
    pub(super) fn simplified(
        &self,
        locked: &[bool],
        target: usize,
        goal_mm: f64,
        even: bool,
    ) -> Result<Vec<[u32; 3]>, SimplifyError> {
        let n = self.places.len();
        let in_range = |list: &[u32]| list.len().is_multiple_of(3) && list.iter().all(|&i| (i as usize) < n);
        if locked.len() != n
            || !in_range(&self.indices)
            || !self.places.iter().flatten().all(|x| x.is_finite())
        {
            return Err(SimplifyError::Internal(
                "vertices or locks handed to the simplifier are not in order",
            ));
        }
        let adapter = VertexDataAdapter::new(typed_to_bytes(&self.places), size_of::<[f32; 3]>(), 0)
            .map_err(|_| SimplifyError::Internal("the simplifier did not take the vertices"))?;
        let shape = if even { SimplifyOptions::RegularizeLight } else { SimplifyOptions::None };
        let options = SimplifyOptions::ErrorAbsolute | shape;
        let list =
            simplify_with_locks(&self.indices, &adapter, locked, 3 * target, narrow(goal_mm), options, None);
        if !in_range(&list) {
            return Err(SimplifyError::Internal("the simplifier returned vertices that do not exist"));
        }
        Ok(list.chunks_exact(3).map(|t| [t[0], t[1], t[2]]).collect())
    }
}

fn count(n: usize) -> u32 {
    u32::try_from(n).unwrap_or(u32::MAX)
}

fn single(p: &Vec3) -> [f32; 3] {
    [narrow(p.x), narrow(p.y), narrow(p.z)]
}

#[expect(
    clippy::cast_possible_truncation,
    reason = "the simplifier works in f32; positions written come from the f64 mesh"
)]
fn narrow(x: f64) -> f32 {
    x as f32
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::mesh::shapes;

    #[test]
    fn a_box_with_one_side_of_its_own_is_cut_along_that_side() {
        let mut m = shapes::cuboid(Vec3::zeros(), Vec3::repeat(1.0));
        m.sides[0] = Side::A;
        m.sides[1] = Side::A; // one face: its four corners are doubled
        let s = Seamed::cut(&m);
        assert_eq!(s.origins().len(), 12);
        for (k, t) in s.indices.chunks_exact(3).enumerate() {
            assert!(t.iter().all(|&l| s.side(l) == m.sides[k]));
            assert_eq!([0, 1, 2].map(|i| s.origin(t[i])), m.triangles[k]);
        }
    }

    #[test]
    fn nothing_moves_at_a_goal_of_zero_with_all_locked() {
        let m = shapes::icosphere(5.0, 2);
        let s = Seamed::cut(&m);
        let t = s.simplified(&vec![true; s.origins().len()], 0, 1.0, false).unwrap();
        assert_eq!(t.len(), m.triangles.len());
        assert!(s.simplified(&[true], 0, 1.0, false).is_err());
    }
}
