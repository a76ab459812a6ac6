//! Which triangle is seen in each sample: a z-buffer, row band by row band.
//!
//! A sample belongs to a triangle by the signs of its three edge functions, each evaluated on its own, so a
//! band gives the same answer however many there are. Equal depths go to the earlier triangle.

use super::camera::{Camera, Section};
use crate::geom::Vec3;
use crate::mesh::TriMesh;
use rayon::prelude::*;

/// What is seen in one sample.
#[derive(Clone, Copy, Debug)]
pub(super) struct Hit {
    /// Towards the viewer from the camera's middle, mm.
    pub(super) depth: f32,
    /// The triangle; [`Hit::NOTHING`] when the paper is seen.
    pub(super) triangle: u32,
    /// Whether the triangle is seen from its back.
    pub(super) back: bool,
}

impl Hit {
    /// Marks an empty sample.
    pub(super) const NOTHING: u32 = u32::MAX;
    const EMPTY: Self = Self { depth: f32::NEG_INFINITY, triangle: Self::NOTHING, back: false };

    pub(super) fn is_empty(&self) -> bool {
        self.triangle == Self::NOTHING
    }
}

/// The nearest surface in every sample, row by row from the top.
pub(super) struct Layer {
    pub(super) hits: Vec<Hit>,
}

/// Rows of samples one thread draws at a time: few enough that two threads stay busy, many enough that
/// looking through all triangles once a band costs little.
const BAND_ROWS: usize = 64;

/// How far outside a triangle, in barycentric coordinates, a sample still belongs to it: more than rounding
/// can move an edge, so no sample falls between two triangles that share one.
const SEAM: f64 = 1e-9;

impl Layer {
    pub(super) fn of(mesh: &TriMesh, camera: &Camera, section: Option<&Section>) -> Self {
        let points: Vec<[f64; 3]> = mesh.positions.par_iter().map(|p| camera.project(p)).collect();
        // The distance from the cutting plane is affine in column, row and depth.
        let cut = section.map(|s| Affine::of(camera, s));
        let mut hits = vec![Hit::EMPTY; camera.width * camera.height];
        hits.par_chunks_mut(camera.width * BAND_ROWS).enumerate().for_each(|(band, rows)| {
            let first = band * BAND_ROWS;
            let last = first + rows.len() / camera.width;
            let window = Window { columns: [0, camera.width], rows: [first, last] };
            for (t, corners) in (0_u32..).zip(&mesh.triangles) {
                cover(corners.map(|i| points[i as usize]), window, |column, row, depth, back| {
                    if cut.as_ref().is_some_and(|c| c.at(column, row, depth) > 0.0) {
                        return;
                    }
                    let hit = &mut rows[(row - first) * camera.width + column];
                    let depth = nearest_f32(depth);
                    if depth > hit.depth {
                        *hit = Hit { depth, triangle: t, back };
                    }
                });
            }
        });
        Self { hits }
    }
}

/// A depth as stored.
#[expect(clippy::cast_possible_truncation, reason = "rounding a depth to f32 is what is wanted")]
pub(super) fn nearest_f32(x: f64) -> f32 {
    x as f32
}

/// c0 + c1 column + c2 row + c3 depth.
struct Affine([f64; 4]);

impl Affine {
    fn of(camera: &Camera, section: &Section) -> Self {
        let at = |column: usize, row: usize, depth: f64| section.height(&camera.point(column, row, depth));
        let c0 = at(0, 0, 0.0);
        let slope = |axis: &Vec3, length: f64| section.normal.dot(axis) * length;
        Self([
            c0,
            slope(&camera.right, camera.step),
            slope(&camera.up, -camera.step),
            slope(&camera.toward, 1.0),
        ])
    }

    fn at(&self, column: usize, row: usize, depth: f64) -> f64 {
        self.0[0] + self.0[1] * column as f64 + self.0[2] * row as f64 + self.0[3] * depth
    }
}

/// Half-open ranges of samples.
#[derive(Clone, Copy)]
pub(super) struct Window {
    pub(super) columns: [usize; 2],
    pub(super) rows: [usize; 2],
}

/// Calls `visit(column, row, depth, back)` for every sample of the window that the triangle covers.
///
/// - `p`: column, row and depth of the corners, rows growing downwards.
/// - `back`: the triangle is clockwise as seen.
///
/// A triangle seen edge-on, without area, or with a corner that is not finite covers nothing.
pub(super) fn cover(p: [[f64; 3]; 3], window: Window, mut visit: impl FnMut(usize, usize, f64, bool)) {
    let [a, b, c] = p;
    // Most triangles of a fine mesh lie between the middles of the samples: out with them first.
    let [left, right] = covered([a[0], b[0], c[0]], window.columns);
    let [top, bottom] = covered([a[1], b[1], c[1]], window.rows);
    if left >= right || top >= bottom {
        return;
    }
    let area = (b[0] - a[0]) * (c[1] - a[1]) - (c[0] - a[0]) * (b[1] - a[1]);
    if !area.is_finite() || area.abs() < 1e-12 || !(a[2] + b[2] + c[2]).is_finite() {
        return;
    }
    let inverse = 1.0 / area;
    // Edge functions: column, row and constant factors; 1 at the corner opposite to the edge.
    let edge = |u: [f64; 3], v: [f64; 3]| {
        let (x, y) = ((v[0] - u[0]) * inverse, (v[1] - u[1]) * inverse);
        [-y, x, y * u[0] - x * u[1]]
    };
    let edges = [edge(b, c), edge(c, a), edge(a, b)];
    let depth: [f64; 3] =
        std::array::from_fn(|k| edges[0][k] * a[2] + edges[1][k] * b[2] + edges[2][k] * c[2]);
    for row in top..bottom {
        let y = row as f64 + 0.5;
        let at_row = |e: &[f64; 3]| e[1] * y + e[2];
        let starts = [at_row(&edges[0]), at_row(&edges[1]), at_row(&edges[2])];
        let depth_start = at_row(&depth);
        for column in left..right {
            let x = column as f64 + 0.5;
            if (0..3).all(|k| edges[k][0] * x + starts[k] >= -SEAM) {
                // Rows grow downwards: what is counter-clockwise in space is clockwise here.
                visit(column, row, depth[0] * x + depth_start, area > 0.0);
            }
        }
    }
}

/// The samples whose middle lies after the least and not after the greatest of three coordinates, within
/// the limits; a middle that lies exactly on an edge belongs to the triangle before it.
#[expect(
    clippy::cast_possible_truncation,
    clippy::cast_sign_loss,
    reason = "float casts saturate; then clamped"
)]
fn covered([a, b, c]: [f64; 3], limits: [usize; 2]) -> [usize; 2] {
    let least = a.min(b).min(c) + 0.5;
    let greatest = a.max(b).max(c) + 0.5;
    [(least as u32 as usize).max(limits[0]), (greatest as u32 as usize).min(limits[1])]
}

/// Barycentric coordinates of the point `p` projected on the triangle along `toward`.
pub(super) fn barycentric(corners: &[Vec3; 3], p: &Vec3, toward: &Vec3) -> [f64; 3] {
    let [a, b, c] = corners;
    let whole = (b - a).cross(&(c - a)).dot(toward);
    if whole.abs() < 1e-30 {
        return [1.0 / 3.0; 3];
    }
    let u = (c - b).cross(&(p - b)).dot(toward) / whole;
    let v = (a - c).cross(&(p - c)).dot(toward) / whole;
    [u, v, 1.0 - u - v].map(|x| x.clamp(0.0, 1.0))
}
