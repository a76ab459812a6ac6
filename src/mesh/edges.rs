//! The edges of a mesh in a fixed order, and which triangles meet at them.

use super::TriMesh;
use rayon::prelude::*;

/// Marks a side of a triangle without exactly one neighbour.
pub const NO_TRIANGLE: u32 = u32::MAX;

/// One use of an edge by a triangle.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub struct EdgeUse {
    /// The edge's other (larger) vertex number; makes the order of the table.
    hi: u32,
    /// The triangle.
    pub triangle: u32,
    /// Which of its edges: from corner `corner` to corner `(corner + 1) % 3`.
    pub corner: u8,
    /// Whether the triangle runs from the smaller vertex number to the larger.
    pub forward: bool,
}

/// An edge and all its uses.
#[derive(Clone, Copy, Debug)]
pub struct Edge<'t> {
    /// The smaller vertex number.
    pub lo: u32,
    /// The larger vertex number (the same for an edge of a triangle that names a vertex twice).
    pub hi: u32,
    /// The uses, by triangle.
    pub uses: &'t [EdgeUse],
}

impl Edge<'_> {
    /// Whether exactly two triangles use the edge, in opposite directions.
    #[must_use]
    pub fn is_manifold(&self) -> bool {
        matches!(self.uses, [a, b] if a.forward != b.forward)
    }
}

/// All edges of a mesh, sorted by their vertex numbers (by counting, not by hashing).
///
/// Memory: 12 bytes an edge use, 4 bytes a vertex. Triangles with an index out of range are left out.
pub struct EdgeTable {
    starts: Vec<u32>,
    uses: Vec<EdgeUse>,
    triangles: usize,
}

impl EdgeTable {
    /// Sorts the edges of `mesh`.
    #[must_use]
    pub fn build(mesh: &TriMesh) -> Self {
        let n = mesh.positions.len();
        let inside = |t: &[u32; 3]| t.iter().all(|&i| (i as usize) < n);
        let mut starts = vec![0_u32; n + 1];
        for t in mesh.triangles.iter().filter(|t| inside(t)) {
            for k in 0..3 {
                starts[t[k].min(t[(k + 1) % 3]) as usize + 1] += 1;
            }
        }
        for i in 0..n {
            starts[i + 1] += starts[i];
        }
        let blank = EdgeUse { hi: 0, triangle: 0, corner: 0, forward: false };
        let mut uses = vec![blank; starts[n] as usize];
        let mut next = starts.clone();
        for (triangle, t) in (0_u32..).zip(&mesh.triangles).filter(|(_, t)| inside(t)) {
            for (k, corner) in [(0, 0_u8), (1, 1), (2, 2)] {
                let (a, b) = (t[k], t[(k + 1) % 3]);
                let slot = &mut next[a.min(b) as usize];
                uses[*slot as usize] = EdgeUse { hi: a.max(b), triangle, corner, forward: a <= b };
                *slot += 1;
            }
        }
        // Uses of one vertex are few: sort them by the other vertex, then by triangle.
        let mut rest = uses.as_mut_slice();
        let mut parts = Vec::with_capacity(n / 4096 + 1);
        let mut at = 0;
        while at < n {
            let to = (at + 4096).min(n);
            let (part, tail) = rest.split_at_mut((starts[to] - starts[at]) as usize);
            parts.push((at, to, part));
            rest = tail;
            at = to;
        }
        let starts_ref = &starts;
        parts.into_par_iter().for_each(|(from, to, part)| {
            for v in from..to {
                let base = starts_ref[from];
                part[(starts_ref[v] - base) as usize..(starts_ref[v + 1] - base) as usize].sort_unstable();
            }
        });
        Self { starts, uses, triangles: mesh.triangles.len() }
    }

    /// The edges in order of (`lo`, `hi`).
    pub fn edges(&self) -> impl Iterator<Item = Edge<'_>> {
        (0_u32..).zip(self.starts.windows(2)).flat_map(|(lo, w)| {
            self.uses[w[0] as usize..w[1] as usize].chunk_by(|a, b| a.hi == b.hi).map(move |uses| Edge {
                lo,
                hi: uses[0].hi,
                uses,
            })
        })
    }

    /// The edge between two vertices, if any triangle uses it.
    #[must_use]
    pub fn find(&self, a: u32, b: u32) -> Option<Edge<'_>> {
        let (lo, hi) = (a.min(b), a.max(b));
        let (from, to) = (*self.starts.get(lo as usize)?, *self.starts.get(lo as usize + 1)?);
        let all = &self.uses[from as usize..to as usize];
        let first = all.partition_point(|u| u.hi < hi);
        let last = all.partition_point(|u| u.hi <= hi);
        (first < last).then(|| Edge { lo, hi, uses: &all[first..last] })
    }

    /// For each triangle its neighbour over the edge from corner k to corner k + 1; [`NO_TRIANGLE`] where the
    /// edge is not used exactly twice in opposite directions.
    #[must_use]
    pub fn neighbours(&self) -> Vec<[u32; 3]> {
        let mut out = vec![[NO_TRIANGLE; 3]; self.triangles];
        for e in self.edges().filter(Edge::is_manifold) {
            let (a, b) = (e.uses[0], e.uses[1]);
            out[a.triangle as usize][a.corner as usize] = b.triangle;
            out[b.triangle as usize][b.corner as usize] = a.triangle;
        }
        out
    }
}

/// For each vertex the triangles that use it, in order.
pub struct Fans {
    starts: Vec<u32>,
    triangles: Vec<u32>,
}

impl Fans {
    /// Lists the triangles around each vertex; triangles with an index out of range are left out.
    #[must_use]
    pub fn build(mesh: &TriMesh) -> Self {
        let n = mesh.positions.len();
        let inside = |t: &[u32; 3]| t.iter().all(|&i| (i as usize) < n);
        let mut starts = vec![0_u32; n + 1];
        for &i in mesh.triangles.iter().filter(|t| inside(t)).flatten() {
            starts[i as usize + 1] += 1;
        }
        for i in 0..n {
            starts[i + 1] += starts[i];
        }
        let mut triangles = vec![0_u32; starts[n] as usize];
        let mut next = starts.clone();
        for (number, t) in (0_u32..).zip(&mesh.triangles).filter(|(_, t)| inside(t)) {
            for &i in t {
                triangles[next[i as usize] as usize] = number;
                next[i as usize] += 1;
            }
        }
        Self { starts, triangles }
    }

    /// The triangles that use vertex `v`, by number; a triangle that names `v` twice is listed twice.
    #[must_use]
    pub fn around(&self, v: u32) -> &[u32] {
        let v = v as usize;
        match (self.starts.get(v), self.starts.get(v + 1)) {
            (Some(&a), Some(&b)) => &self.triangles[a as usize..b as usize],
            _ => &[],
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::mesh::shapes;

    #[test]
    fn a_box_has_18_edges_each_used_both_ways() {
        let m = shapes::cuboid(crate::geom::Vec3::zeros(), crate::geom::Vec3::new(1.0, 2.0, 3.0));
        let table = EdgeTable::build(&m);
        assert_eq!(table.edges().count(), 18);
        assert!(table.edges().all(|e| e.is_manifold() && e.lo < e.hi));
        let order: Vec<_> = table.edges().map(|e| (e.lo, e.hi)).collect();
        assert!(order.is_sorted());
        assert!(table.neighbours().iter().flatten().all(|&t| t < 12));
        let e = table.find(m.triangles[0][1], m.triangles[0][0]).expect("an edge of the box");
        assert!(e.uses.iter().any(|u| u.triangle == 0));
        assert!(table.find(0, 99).is_none());
    }

    #[test]
    fn an_open_sheet_has_a_rim_of_4n_edges() {
        let m = shapes::sheet(1.0, 1.0, 7);
        let table = EdgeTable::build(&m);
        assert_eq!(table.edges().filter(|e| e.uses.len() == 1).count(), 28);
    }

    #[test]
    fn fans_of_an_icosahedron_have_five_triangles() {
        let m = shapes::icosphere(1.0, 0);
        let fans = Fans::build(&m);
        assert!((0..12).all(|v| fans.around(v).len() == 5));
        assert!(fans.around(12).is_empty());
    }
}
