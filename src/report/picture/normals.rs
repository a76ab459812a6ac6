//! Normals at the corners of triangles: smooth across flat edges, broken at creases.

use super::sky::small;
use crate::geom::Vec3;
use crate::mesh::TriMesh;

/// Two faces whose normals differ by less than this shade as one smooth surface; cosine of 40 degrees.
/// Sheets cross at larger angles nearly everywhere, neighbours on one sheet differ by a few degrees.
const SMOOTH_COSINE: f64 = 0.766;

/// Unit normals, three a triangle.
pub(super) struct CornerNormals {
    corners: Vec<[[f32; 3]; 3]>,
}

impl CornerNormals {
    pub(super) fn of(mesh: &TriMesh) -> Self {
        use rayon::prelude::*;
        // Twice the area times the normal: large triangles count more, slivers next to nothing.
        let scaled: Vec<Vec3> = (0..mesh.triangles.len())
            .into_par_iter()
            .map(|t| {
                let [a, b, c] = mesh.corners(t);
                let n = (b - a).cross(&(c - a));
                if n.iter().all(|x| x.is_finite()) { n } else { Vec3::zeros() }
            })
            .collect();
        let around = Around::of(mesh);
        let corners = (0..mesh.triangles.len())
            .into_par_iter()
            .map(|t| {
                let own = scaled[t].try_normalize(1e-30).unwrap_or_else(Vec3::zeros);
                mesh.triangles[t].map(|vertex| {
                    let mut sum = Vec3::zeros();
                    for &other in around.triangles_of(vertex) {
                        let n = scaled[other as usize];
                        if n.dot(&own) >= SMOOTH_COSINE * n.norm() {
                            sum += n;
                        }
                    }
                    let n = sum.try_normalize(1e-30).unwrap_or(own);
                    small(&n)
                })
            })
            .collect();
        Self { corners }
    }

    /// The normal at the barycentric coordinates of triangle `t`; not zero unless the triangle has no area.
    pub(super) fn at(&self, t: usize, barycentric: [f64; 3]) -> Vec3 {
        let mut n = Vec3::zeros();
        for (corner, weight) in self.corners[t].iter().zip(barycentric) {
            n += Vec3::new(f64::from(corner[0]), f64::from(corner[1]), f64::from(corner[2])) * weight;
        }
        n.try_normalize(1e-12).unwrap_or_else(Vec3::zeros)
    }
}

/// The triangles around each vertex, in one list.
struct Around {
    starts: Vec<u32>,
    list: Vec<u32>,
}

impl Around {
    fn of(mesh: &TriMesh) -> Self {
        let mut starts = vec![0_u32; mesh.positions.len() + 1];
        for vertex in mesh.triangles.iter().flatten() {
            starts[*vertex as usize + 1] += 1;
        }
        for k in 1..starts.len() {
            starts[k] += starts[k - 1];
        }
        let mut next = starts.clone();
        let mut list = vec![0_u32; mesh.triangles.len() * 3];
        for (t, corners) in (0_u32..).zip(&mesh.triangles) {
            for &vertex in corners {
                let slot = &mut next[vertex as usize];
                list[*slot as usize] = t;
                *slot += 1;
            }
        }
        Self { starts, list }
    }

    fn triangles_of(&self, vertex: u32) -> &[u32] {
        let v = vertex as usize;
        &self.list[self.starts[v] as usize..self.starts[v + 1] as usize]
    }
}
