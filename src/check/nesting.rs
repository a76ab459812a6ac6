//! Which closed shell lies inside which.

use crate::geom::Vec3;
use crate::mesh::{Component, Tree, TriMesh};
use rayon::prelude::*;

/// Three directions no face or edge of a made-up or measured shape is likely to share.
const DIRECTIONS: [Vec3; 3] = [
    Vec3::new(0.291_537, 0.487_291, 0.823_142),
    Vec3::new(-0.773_129, 0.214_573, 0.596_837),
    Vec3::new(0.401_963, -0.861_127, 0.311_359),
];

/// The place of one shell among the others.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub(super) struct Nest {
    /// How many shells it lies inside of.
    pub(super) depth: usize,
    /// The innermost of them.
    pub(super) parent: Option<usize>,
}

/// Finds for every component the components around it. Components must be closed and must not cross; then a
/// point of one of them tells for all. Three rays vote, so that one that grazes an edge is outvoted.
pub(super) fn nesting(mesh: &TriMesh, tree: &Tree, parts: &[Component]) -> Vec<Nest> {
    let mut part_of = vec![usize::MAX; mesh.triangles.len()];
    for (i, part) in parts.iter().enumerate() {
        for &t in &part.triangles {
            part_of[t as usize] = i;
        }
    }
    let around: Vec<Vec<usize>> = parts
        .par_iter()
        .enumerate()
        .map(|(i, part)| containers(mesh, tree, &part_of, parts, i, part))
        .collect();
    around
        .iter()
        .map(|shells| Nest {
            depth: shells.len(),
            parent: shells.iter().copied().max_by_key(|&j| (around[j].len(), j)),
        })
        .collect()
}

fn containers(
    mesh: &TriMesh,
    tree: &Tree,
    part_of: &[usize],
    parts: &[Component],
    own: usize,
    part: &Component,
) -> Vec<usize> {
    // Parts whose box does not reach around this one can't contain it.
    let around = |j: usize| {
        let (a, b) = (&parts[j].bounds, &part.bounds);
        j != own && (0..3).all(|k| a.min[k] <= b.min[k] && a.max[k] >= b.max[k])
    };
    let candidates: Vec<usize> = (0..parts.len()).filter(|&j| around(j)).collect();
    if candidates.is_empty() {
        return candidates;
    }
    let Some(&first) = part.triangles.first() else { return Vec::new() };
    let [a, b, c] = mesh.corners(first as usize);
    let start = (a + b + c) / 3.0;
    let mut votes = vec![0_u8; candidates.len()];
    for direction in DIRECTIONS {
        let mut odd = vec![false; candidates.len()];
        for hit in tree.ray_all(&start, &direction, 0.0, f64::INFINITY) {
            if let Ok(at) = candidates.binary_search(&part_of[hit.triangle as usize]) {
                odd[at] = !odd[at];
            }
        }
        for (vote, odd) in votes.iter_mut().zip(odd) {
            *vote += u8::from(odd);
        }
    }
    candidates.into_iter().zip(votes).filter(|&(_, v)| v >= 2).map(|(j, _)| j).collect()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::mesh::{components, shapes};

    #[test]
    fn depth_and_parent_of_an_onion_with_a_neighbour() {
        let at = |r: f64, x: f64| shapes::moved(&shapes::icosphere(r, 2), Vec3::x() * x);
        let mesh = shapes::joined(&[at(1.0, 0.0), at(5.0, 0.0), at(2.0, 0.0), at(1.0, 20.0), at(0.5, 3.3)]);
        let nests = nesting(&mesh, &Tree::build(&mesh), &components(&mesh));
        let all: Vec<_> = nests.iter().map(|n| (n.depth, n.parent)).collect();
        assert_eq!(all, vec![(2, Some(2)), (0, None), (1, Some(1)), (0, None), (1, Some(1))]);
    }
}
