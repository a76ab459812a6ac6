//! Normals at the corners of triangles: smooth across flat edges, broken at creases.

use super::sky::small;
use crate::geom::Vec3;
use crate::mesh::TriMesh;
use rayon::prelude::*;

/// Two faces whose normals differ by less than this shade as one smooth surface; cosine of 40 degrees.
/// Sheets cross at larger angles nearly everywhere, neighbours on one sheet differ by a few degrees.
const SMOOTH_COSINE: f64 = 0.766;

/// A triangle lower than this share of the solid's size tells nothing of the surface: moving a corner by the
/// tolerance of a simplified mesh turns it any way. At 80 mm it is 0.16 mm, about a pixel of a portrait.
const SLIVER_SHARE: f64 = 0.002;

/// Unit normals, three a triangle.
pub(super) struct CornerNormals {
    corners: Vec<[[f32; 3]; 3]>,
}

impl CornerNormals {
    pub(super) fn of(mesh: &TriMesh) -> Self {
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
        let extent = mesh.bounds().extent().max();
        let lowest = if extent.is_finite() { SLIVER_SHARE * extent } else { 0.0 };
        let facing = |t: usize| {
            let [a, b, c] = mesh.corners(t);
            let longest = (b - a).norm().max((c - b).norm()).max((a - c).norm());
            let own = scaled[t];
            if own.norm() > lowest * longest {
                return own;
            }
            // A sliver faces the way its neighbourhood does.
            let near = mesh.triangles[t].iter().flat_map(|&vertex| around.triangles_of(vertex));
            near.fold(Vec3::zeros(), |sum, &other| sum + scaled[other as usize])
        };
        let corners = (0..mesh.triangles.len())
            .into_par_iter()
            .map(|t| {
                let own = facing(t).try_normalize(1e-30).unwrap_or_else(Vec3::zeros);
                mesh.triangles[t].map(|vertex| {
                    let mut sum = Vec3::zeros();
                    for &other in around.triangles_of(vertex) {
                        let n = scaled[other as usize];
                        if n.dot(&own) >= SMOOTH_COSINE * n.norm() {
                            sum += n;
                        }
                    }
                    small(&sum.try_normalize(1e-30).unwrap_or(own))
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

#[cfg(test)]
mod tests {
    use super::*;
    use crate::mesh::shapes;

    #[test]
    fn a_block_keeps_its_edges_and_a_ball_is_smooth() {
        let block = shapes::cuboid(Vec3::zeros(), Vec3::repeat(10.0));
        let normals = CornerNormals::of(&block);
        for t in 0..block.triangles.len() {
            assert!(normals.at(t, [0.1, 0.2, 0.7]).amax() > 1.0 - 1e-6, "a face of a block has one normal");
        }
        let ball = shapes::icosphere(10.0, 3);
        let normals = CornerNormals::of(&ball);
        for t in 0..ball.triangles.len() {
            let radial = ball.positions[ball.triangles[t][0] as usize].normalize();
            assert!(normals.at(t, [1.0, 0.0, 0.0]).dot(&radial) > 0.999);
        }
    }

    #[test]
    fn a_sliver_that_is_turned_over_faces_as_its_neighbours_do() {
        // A flat square with a needle in it whose tip was moved a little beyond its base: it faces down.
        let positions = [(0.0, 0.0), (10.0, 0.0), (10.0, 10.0), (0.0, 10.0), (5.0, -1e-4)];
        let positions = positions.map(|(x, y)| Vec3::new(x, y, 0.0)).to_vec();
        let mesh = shapes::from_triangles(positions, vec![[0, 1, 4], [4, 1, 2], [4, 2, 3], [4, 3, 0]]);
        let normals = CornerNormals::of(&mesh);
        assert!(normals.at(0, [1.0 / 3.0; 3]).z > 0.99);
    }
}
