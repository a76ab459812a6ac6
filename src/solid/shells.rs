//! The closed surfaces of a mesh, and which of them encloses which.

use crate::geom::{Aabb, Vec3};
use crate::mesh::crossing::side_of_plane;
use crate::mesh::{Component, Tree, TriMesh, components};

/// A closed surface of a mesh.
#[derive(Clone, Debug, PartialEq)]
pub struct Shell {
    /// Its triangles, ascending.
    pub triangles: Vec<u32>,
    /// Signed volume, mm3: positive around material, negative around a chamber.
    pub volume_mm3: f64,
    /// Area, mm2.
    pub area_mm2: f64,
    /// Vertices less edges plus triangles.
    pub euler: i64,
    /// The box around it.
    pub bounds: Aabb,
    /// Whether it faces inward: it bounds air enclosed by material (when it is not inside out).
    pub is_chamber: bool,
    /// How many times material covers the space just outside it (around a chamber: just beyond its triangles, on the
    /// material's side, less this shell itself): 0 for an outer shell, 1 for a chamber.
    pub covered: i64,
    /// Whether its direction does not fit what encloses it.
    pub is_inside_out: bool,
}

/// Directions of the test rays: odd numbers without common pattern, so that a ray seldom meets an edge; the next is
/// taken when one does. Integers of few bits: a vertex plus such a vector is exact for f32 coordinates.
const DIRECTIONS: [[f64; 3]; 6] = [
    [613.0, 347.0, 1021.0],
    [-449.0, 883.0, 751.0],
    [937.0, -701.0, 269.0],
    [-521.0, -233.0, 971.0],
    [331.0, 997.0, -587.0],
    [-859.0, 409.0, -683.0],
];

/// Splits a mesh whose edges are all matched into shells and judges the direction of each by the winding number of
/// the others around it.
pub(super) fn shells_of(mesh: &TriMesh, tree: &Tree) -> Vec<Shell> {
    let parts = components(mesh);
    let mut owner = vec![0_usize; mesh.triangles.len()];
    for (k, c) in parts.iter().enumerate() {
        for &t in &c.triangles {
            owner[t as usize] = k;
        }
    }
    let all = mesh.bounds();
    let many = parts.len() > 1;
    parts
        .into_iter()
        .enumerate()
        .map(|(k, c)| {
            let covered = if many { winding_of_others(mesh, tree, &owner, k, &c, &all) } else { 0 };
            let is_chamber = c.volume_mm3 < 0.0;
            let is_inside_out = covered != i64::from(is_chamber);
            Shell {
                triangles: c.triangles,
                volume_mm3: c.volume_mm3,
                area_mm2: c.area_mm2,
                euler: c.euler,
                bounds: c.bounds,
                is_chamber,
                covered,
                is_inside_out,
            }
        })
        .collect()
}

/// The winding number of all other shells at a vertex of shell `k`: signed crossings of a ray to far away, each decided
/// exactly. When all directions meet an edge, the last count is given.
fn winding_of_others(
    mesh: &TriMesh,
    tree: &Tree,
    owner: &[usize],
    k: usize,
    part: &Component,
    all: &Aabb,
) -> i64 {
    let mut count = 0;
    for (turn, d) in DIRECTIONS.iter().enumerate() {
        let corners = mesh.triangles[part.triangles[turn % part.triangles.len()] as usize];
        let from = mesh.positions[corners[0] as usize];
        // A power of two keeps the far end exact; twice the box's diagonal is beyond everything.
        let mut reach = 1.0;
        while reach * 500.0 < 2.0 * all.extent().norm() && reach < 1e30 {
            reach *= 2.0;
        }
        let dir = Vec3::new(d[0], d[1], d[2]) * reach;
        let to = from + dir;
        let (mut clean, mut sum) = (true, 0);
        tree.along(&from, &dir, |t| {
            if owner[t as usize] == k {
                return;
            }
            match passes(&from, &to, &mesh.corners(t as usize)) {
                Some(s) => sum += s,
                None => clean = false,
            }
        });
        count = sum;
        if clean {
            break;
        }
    }
    count
}

/// How the segment passes the triangle: 1 from inside to outside, -1 the other way, 0 not at all, `None` when it
/// touches an edge, a corner or the plane.
fn passes(from: &Vec3, to: &Vec3, [a, b, c]: &[Vec3; 3]) -> Option<i64> {
    let (s, e) = (side_of_plane(a, b, c, from), side_of_plane(a, b, c, to));
    if s != 0 && s == e {
        return Some(0);
    }
    let round = [(a, b), (b, c), (c, a)].map(|(p, q)| side_of_plane(from, to, p, q));
    if round.contains(&1) && round.contains(&-1) {
        return Some(0);
    }
    if s == 0 || e == 0 || round.contains(&0) {
        return None;
    }
    // `side_of_plane` is positive on the side the triangle's normal points away from.
    Some(i64::from(s))
}
