//! How much light reaches a point past the rest of the solid.
//!
//! Light is taken to come from a fixed set of directions spread evenly over the sphere. For each, a small
//! depth map of the solid is drawn along it; a point is lit from there when nothing in the map is nearer.
//! Many such maps together give soft shadows in hollows and where the solid touches its plate.

use super::camera::{Section, upright};
use super::raster::{Window, cover, nearest_f32};
use crate::geom::Vec3;
use crate::mesh::TriMesh;
use rayon::prelude::*;

/// Directions over the whole sphere; about half of them light a given point. Fewer leave steps in the shadows.
const DIRECTIONS: usize = 128;

/// Side of a depth map, texels: a tenth of a typical wall is not resolved, a typical chamber is.
const MAP: usize = 192;

/// Light from all around, past one solid.
pub(super) struct Sky {
    /// Middle of the solid.
    pub(super) centre: Vec3,
    /// Half the diagonal of its box, mm.
    pub(super) radius: f64,
    /// Its lowest height, mm.
    pub(super) floor: f64,
    maps: Vec<DepthMap>,
}

struct DepthMap {
    /// Towards the light.
    toward: Vec3,
    right: Vec3,
    up: Vec3,
    depth: Vec<f32>,
}

impl Sky {
    /// Draws the depth maps.
    pub(super) fn around(mesh: &TriMesh, section: Option<&Section>) -> Self {
        let bounds = mesh.bounds();
        let empty = bounds.is_empty() || !bounds.extent().norm().is_finite();
        let (centre, radius) =
            if empty { (Vec3::zeros(), 1.0) } else { (bounds.centre(), 0.5 * bounds.extent().norm()) };
        let radius = radius.max(1e-6);
        let floor = if empty { 0.0 } else { bounds.min.z };
        let kept = Kept::of(mesh, section);
        let maps =
            (0..DIRECTIONS).into_par_iter().map(|k| DepthMap::of(mesh, &kept, &centre, radius, direction(k)));
        Self { centre, radius, floor, maps: maps.collect() }
    }

    /// The directions light comes from; the number of a direction is its place here.
    pub(super) fn directions(&self) -> impl ExactSizeIterator<Item = &Vec3> {
        self.maps.iter().map(|m| &m.toward)
    }

    /// One direction made ready to ask about many points.
    pub(super) fn beam(&self, k: usize) -> Beam<'_> {
        let map = &self.maps[k];
        let scale = 0.5 * MAP as f64 / self.radius;
        Beam {
            depth: &map.depth,
            toward: small(&map.toward),
            right: small(&(map.right * scale)),
            down: small(&(map.up * -scale)),
        }
    }

    /// A point as [`Beam::reaches`] wants it: from the middle of the solid.
    pub(super) fn local(&self, p: &Vec3) -> [f32; 3] {
        small(&(p - self.centre))
    }

    /// How far a point must be lifted off its surface not to stand in its own shadow, mm.
    pub(super) fn lift(&self) -> f64 {
        1.6 * 2.0 * self.radius / MAP as f64
    }
}

/// Light from one direction. In f32, for speed: a hundred-millionth of the solid's size matters to no picture.
pub(super) struct Beam<'s> {
    depth: &'s [f32],
    /// Towards the light.
    pub(super) toward: [f32; 3],
    right: [f32; 3],
    down: [f32; 3],
}

impl Beam<'_> {
    /// Whether the light reaches the point `q` (see [`Sky::local`]), lifted off its surface by [`Sky::lift`].
    #[expect(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "checked to lie on the map before the cast"
    )]
    pub(super) fn reaches(&self, q: &[f32; 3]) -> bool {
        const HALF: f32 = 0.5 * MAP as f32;
        let (x, y) = (dot(q, &self.right) + HALF, dot(q, &self.down) + HALF);
        let on_map = x >= 0.0 && y >= 0.0 && x < MAP as f32 && y < MAP as f32;
        !on_map || self.depth[y as u32 as usize * MAP + x as u32 as usize] <= dot(q, &self.toward)
    }
}

pub(super) fn dot(a: &[f32; 3], b: &[f32; 3]) -> f32 {
    a[0] * b[0] + a[1] * b[1] + a[2] * b[2]
}

pub(super) fn small(v: &Vec3) -> [f32; 3] {
    [nearest_f32(v.x), nearest_f32(v.y), nearest_f32(v.z)]
}

/// Evenly spread directions: the golden spiral from pole to pole.
fn direction(k: usize) -> Vec3 {
    let z = 1.0 - (2.0 * k as f64 + 1.0) / DIRECTIONS as f64;
    let turn = k as f64 * (std::f64::consts::PI * (3.0 - 5.0_f64.sqrt()));
    let rho = (1.0 - z * z).sqrt();
    Vec3::new(rho * turn.cos(), rho * turn.sin(), z)
}

/// What the cutting plane leaves of each triangle.
struct Kept<'s> {
    section: Option<&'s Section>,
    /// Empty without a section.
    gone: Vec<bool>,
    /// Empty without a section.
    crossed: Vec<bool>,
}

impl<'s> Kept<'s> {
    fn of(mesh: &TriMesh, section: Option<&'s Section>) -> Self {
        let Some(plane) = section else { return Self { section, gone: Vec::new(), crossed: Vec::new() } };
        let above: Vec<bool> = mesh.positions.iter().map(|p| plane.height(p) > 0.0).collect();
        let count = |t: &[u32; 3]| t.iter().filter(|&&i| above[i as usize]).count();
        Self {
            section,
            gone: mesh.triangles.iter().map(|t| count(t) == 3).collect(),
            crossed: mesh.triangles.iter().map(|t| (1..3).contains(&count(t))).collect(),
        }
    }

    fn is(list: &[bool], t: usize) -> bool {
        list.get(t).copied().unwrap_or(false)
    }
}

impl DepthMap {
    fn of(mesh: &TriMesh, kept: &Kept, centre: &Vec3, radius: f64, toward: Vec3) -> Self {
        let (right, up) = upright(&toward, &Vec3::new(0.31, 0.17, 0.94));
        let texels = 0.5 * MAP as f64;
        let points: Vec<[f32; 3]> = mesh
            .positions
            .iter()
            .map(|p| {
                let q = p - centre;
                small(&Vec3::new(
                    (q.dot(&right) / radius + 1.0) * texels,
                    (1.0 - q.dot(&up) / radius) * texels,
                    q.dot(&toward),
                ))
            })
            .collect();
        let mut depth = vec![f32::NEG_INFINITY; MAP * MAP];
        let window = Window { columns: [0, MAP], rows: [0, MAP] };
        for (t, corners) in mesh.triangles.iter().enumerate() {
            if Kept::is(&kept.gone, t) {
                continue;
            }
            let crossed = Kept::is(&kept.crossed, t);
            cover(corners.map(|i| points[i as usize].map(f64::from)), window, |column, row, d, back| {
                let slot = &mut depth[row * MAP + column];
                let d32 = nearest_f32(d);
                // Of a closed solid the front faces are enough; a cut one lets light in to the back faces.
                if d32 <= *slot || (back && kept.section.is_none()) {
                    return;
                }
                if crossed {
                    let x = ((column as f64 + 0.5) / texels - 1.0) * radius;
                    let y = (1.0 - (row as f64 + 0.5) / texels) * radius;
                    let p = centre + right * x + up * y + toward * d;
                    if kept.section.is_some_and(|s| s.height(&p) > 0.0) {
                        return;
                    }
                }
                *slot = d32;
            });
        }
        Self { toward, right, up, depth }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn directions_are_unit_and_balanced() {
        let mut sum = Vec3::zeros();
        for k in 0..DIRECTIONS {
            assert!((direction(k).norm() - 1.0).abs() < 1e-12);
            sum += direction(k);
        }
        assert!(sum.norm() < 0.02 * DIRECTIONS as f64, "{sum}");
    }
}
