//! Connected components of a mesh.

use super::TriMesh;
use super::measure::doubled_area_vector;
use crate::geom::{Aabb, Vec3};

/// A part of a mesh whose triangles hang together by shared vertices.
#[derive(Clone, Debug, PartialEq)]
pub struct Component {
    /// Its triangles, ascending.
    pub triangles: Vec<u32>,
    /// Signed volume, mm3: positive when its triangles face away from what they enclose.
    /// Meaningless for an open component.
    pub volume_mm3: f64,
    /// Area, mm2.
    pub area_mm2: f64,
    /// Vertices less edges plus triangles.
    pub euler: i64,
    /// The box around it.
    pub bounds: Aabb,
}

/// Splits a mesh into components, ordered by their first triangle. Triangles with an index out of range
/// belong to none.
#[must_use]
pub fn components(mesh: &TriMesh) -> Vec<Component> {
    let n = mesh.positions.len();
    let inside = |t: &[u32; 3]| t.iter().all(|&i| (i as usize) < n);
    let mut parent: Vec<u32> = (0..u32::try_from(n).unwrap_or(u32::MAX)).collect();
    for t in mesh.triangles.iter().filter(|t| inside(t)) {
        let (a, b, c) = (root(&mut parent, t[0]), root(&mut parent, t[1]), root(&mut parent, t[2]));
        let m = a.min(b).min(c);
        for x in [a, b, c] {
            parent[x as usize] = m;
        }
    }
    let mut name = vec![u32::MAX; n];
    let mut lists: Vec<Vec<u32>> = Vec::new();
    for (number, t) in (0_u32..).zip(&mesh.triangles).filter(|(_, t)| inside(t)) {
        let r = root(&mut parent, t[0]) as usize;
        if name[r] == u32::MAX {
            name[r] = u32::try_from(lists.len()).unwrap_or(u32::MAX);
            lists.push(Vec::new());
        }
        lists[name[r] as usize].push(number);
    }
    let mut seen = vec![false; n];
    let mut edges = Vec::new();
    lists.into_iter().map(|triangles| measured(mesh, triangles, &mut seen, &mut edges)).collect()
}

/// The representative of `v`, with path halving.
fn root(parent: &mut [u32], mut v: u32) -> u32 {
    while parent[v as usize] != v {
        let up = parent[parent[v as usize] as usize];
        parent[v as usize] = up;
        v = up;
    }
    v
}

fn measured(mesh: &TriMesh, triangles: Vec<u32>, seen: &mut [bool], edges: &mut Vec<u64>) -> Component {
    let mut bounds = Aabb::EMPTY;
    let mut vertices = 0_i64;
    edges.clear();
    for &t in &triangles {
        let ids = mesh.triangles[t as usize];
        for k in 0..3 {
            let i = ids[k];
            if !std::mem::replace(&mut seen[i as usize], true) {
                vertices += 1;
                bounds.include(&mesh.positions[i as usize]);
            }
            let j = ids[(k + 1) % 3];
            edges.push(u64::from(i.min(j)) << 32 | u64::from(i.max(j)));
        }
    }
    edges.sort_unstable();
    edges.dedup();
    let o = bounds.centre();
    let (mut six, mut doubled) = (0.0, 0.0);
    for &t in &triangles {
        let [a, b, c]: [Vec3; 3] = mesh.corners(t as usize).map(|p| p - o);
        six += a.dot(&b.cross(&c));
        doubled += doubled_area_vector(&[a, b, c]).norm();
    }
    let count = |n: usize| i64::try_from(n).unwrap_or(i64::MAX);
    let euler = vertices - count(edges.len()) + count(triangles.len());
    Component { triangles, volume_mm3: six / 6.0, area_mm2: 0.5 * doubled, euler, bounds }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::mesh::shapes;

    #[test]
    fn a_shell_has_an_outside_and_a_chamber() {
        let parts = components(&shapes::sphere_shell(10.0, 8.0, 4));
        assert_eq!(parts.len(), 2);
        assert!(parts[0].volume_mm3 > 0.0 && parts[1].volume_mm3 < 0.0);
        assert!((parts[1].volume_mm3 / parts[0].volume_mm3 + 0.512).abs() < 1e-12);
        assert!(parts.iter().all(|p| p.euler == 2));
        assert_eq!(parts[0].triangles.len() + parts[1].triangles.len(), 2 * 20 * 256);
        assert!((parts[1].bounds.extent().max() - 16.0).abs() < 0.1);
    }

    #[test]
    fn parts_that_share_a_vertex_are_one() {
        let mut m = shapes::joined(&[shapes::corner(1.0), shapes::torus(30.0, 10.0, 12, 9)]);
        assert_eq!(components(&m).iter().map(|c| c.euler).collect::<Vec<_>>(), [2, 0]);
        for t in &mut m.triangles {
            for i in t {
                if *i == 4 {
                    *i = 0;
                }
            }
        }
        assert_eq!(components(&m).len(), 1);
        m.triangles.push([0, 1, 999_999]);
        assert_eq!(components(&m).len(), 1);
    }
}
