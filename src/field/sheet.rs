//! The thickened skin: distance to the nearest sheet minus half the wall.
//!
//! A triangulated skin with a stated chord error finds the nearest sheet; where the decision is closer
//! than that error, and for every sample, the answer is polished on the exact surface. So signs and
//! samples belong to the exact skin, not to its triangulation.
//!
//! # Source
//! Closest point on a parametric surface by Gauss-Newton: A. Björck, "Numerical Methods for Least Squares
//! Problems", 1996, section 9.2; the rate is distance times curvature, below 1 while wall/2 is below the
//! radius of curvature.

use super::{Field, LocalField, Sample};
use crate::geom::{Aabb, Surface, Vec3, closest_point_on_triangle, tangent_frame};
use crate::mesh::{Side, SkinMesh};

/// Iterations of the polish; each gains about a factor (radius of curvature) / (wall / 2).
const POLISH_STEPS: usize = 8;
/// The polish stops when its tangential step is below this, mm: a step of s changes the distance by less
/// than s^2 / wall.
const POLISH_STEP_MM: f64 = 3e-4;
/// Two feet within the chord error of each other belong to different sheets when the directions to them
/// differ by more than this cosine.
const SHEET_COSINE: f64 = 0.985;

/// Why no field could be made.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum SheetError {
    /// The skin has no triangles.
    #[error("the skin has no triangles")]
    Empty,
    /// A wall that is not a positive number.
    #[error("a wall of {0} mm is not a positive length")]
    Wall(f64),
    /// A corner that is not a finite point.
    #[error("corner {0} of the skin is not a finite point")]
    NotFinite(usize),
}

/// The field |x - skin| - wall/2. Negative within half a wall of the skin.
pub struct SheetField<'s> {
    surface: Option<&'s dyn Surface>,
    half_wall: f64,
    chord: f64,
    corners: Vec<[Vec3; 3]>,
    normals: Vec<[Vec3; 3]>,
    parameters: Vec<[Vec3; 3]>,
    /// Centroid (a point of the triangle) and the radius of a ball around it that holds the triangle.
    balls: Vec<[f32; 4]>,
    bounds: Aabb,
}

impl<'s> SheetField<'s> {
    /// Makes the field of a wall around a skin.
    ///
    /// - `skin`: a triangulation whose `chord_mm` bounds its distance to the smooth skin, both ways.
    /// - `surface`: the smooth skin itself, over the unit sphere; `None` takes the triangles as exact.
    /// - `wall_mm`: full thickness of the wall.
    ///
    /// # Errors
    /// [`SheetError`] for an empty skin, a corner that is not finite or a wall that is not positive.
    pub fn new(skin: &SkinMesh, surface: Option<&'s dyn Surface>, wall_mm: f64) -> Result<Self, SheetError> {
        if skin.triangles.is_empty() {
            return Err(SheetError::Empty);
        }
        if !(wall_mm.is_finite() && wall_mm > 0.0) {
            return Err(SheetError::Wall(wall_mm));
        }
        if let Some(bad) = skin.positions.iter().position(|p| !p.iter().all(|c| c.is_finite())) {
            return Err(SheetError::NotFinite(bad));
        }
        let pick = |list: &[Vec3], t: &[u32; 3]| t.map(|i| list[i as usize]);
        let corners: Vec<_> = skin.triangles.iter().map(|t| pick(&skin.positions, t)).collect();
        let normals = skin.triangles.iter().map(|t| pick(&skin.normals, t)).collect();
        let exact = surface.filter(|_| !skin.parameters.is_empty());
        let parameters = match exact {
            Some(_) => skin.triangles.iter().map(|t| pick(&skin.parameters, t)).collect(),
            None => Vec::new(),
        };
        let balls = corners.iter().map(ball).collect();
        let half_wall = 0.5 * wall_mm;
        let chord = if exact.is_some() { skin.chord_mm } else { 0.0 };
        let bounds = Aabb::around(&skin.positions).grown(half_wall + chord);
        Ok(Self { surface: exact, half_wall, chord, corners, normals, parameters, balls, bounds })
    }

    /// The nearest point of triangle `t` to `p`, and its distance.
    fn flat(&self, t: u32, p: &Vec3) -> ([f64; 3], Vec3, f64) {
        let [a, b, c] = &self.corners[t as usize];
        let q = closest_point_on_triangle(p, a, b, c);
        (q.barycentric, q.point, (p - q.point).norm())
    }

    /// Distance, direction and side of the sheet near triangle `t`, starting at the given point of it.
    fn polished(&self, t: u32, barycentric: [f64; 3], p: &Vec3) -> (f64, Vec3, Side) {
        let mix = |v: &[Vec3; 3]| v[0] * barycentric[0] + v[1] * barycentric[1] + v[2] * barycentric[2];
        let flat = || {
            let offset = p - mix(&self.corners[t as usize]);
            oriented(offset, &mix(&self.normals[t as usize]))
        };
        let Some(surface) = self.surface else { return flat() };
        let mut u = mix(&self.parameters[t as usize]).normalize();
        for _ in 0..POLISH_STEPS {
            let (e1, e2) = tangent_frame(&u);
            let j = surface.first(u, e1, e2);
            let r = p - j.position;
            let (a, b, c) = (j.d1.dot(&j.d1), j.d1.dot(&j.d2), j.d2.dot(&j.d2));
            let det = a * c - b * b;
            let (g1, g2) = (r.dot(&j.d1), r.dot(&j.d2));
            let (s1, s2) = ((c * g1 - b * g2) / det, (a * g2 - b * g1) / det);
            let step = j.d1 * s1 + j.d2 * s2;
            if step.norm_squared() < POLISH_STEP_MM * POLISH_STEP_MM {
                return oriented(r - step, &j.d1.cross(&j.d2));
            }
            // A step of more than half the distance to the antipode would leave the chart.
            let limit = (0.5 / s1.hypot(s2)).min(1.0);
            u = (u + (e1 * s1 + e2 * s2) * limit).normalize();
        }
        let (e1, e2) = tangent_frame(&u);
        let j = surface.first(u, e1, e2);
        let exact = oriented(p - j.position, &j.d1.cross(&j.d2));
        let rough = flat();
        // No convergence (wall/2 near the radius of curvature): the triangle is within the chord error.
        if (exact.0 - rough.0).abs() <= 2.0 * self.chord { exact } else { rough }
    }
}

/// Splits an offset from the skin into distance, unit direction and side.
fn oriented(offset: Vec3, normal: &Vec3) -> (f64, Vec3, Side) {
    let d = offset.norm();
    let up = offset.dot(normal) >= 0.0;
    let direction = if d > 1e-12 { offset / d } else { normal.normalize() };
    (d, direction, if up { Side::A } else { Side::B })
}

#[expect(clippy::cast_possible_truncation, reason = "rounded once; the radius is widened to cover it")]
fn ball(corners: &[Vec3; 3]) -> [f32; 4] {
    let c = (corners[0] + corners[1] + corners[2]) / 3.0;
    let r = corners.iter().map(|q| (q - c).norm()).fold(0.0, f64::max);
    let slack = 4.0 * f64::from(f32::EPSILON) * (c.amax() + r);
    [c.x as f32, c.y as f32, c.z as f32, (r + slack) as f32]
}

impl Field for SheetField<'_> {
    fn bounds(&self) -> Aabb {
        self.bounds
    }

    fn within(&self, region: &Aabb) -> Box<dyn LocalField<'_> + '_> {
        let ids = 0..u32::try_from(self.balls.len()).unwrap_or(u32::MAX);
        Box::new(SheetNear::pruned(self, ids, region))
    }

    fn accuracy_mm(&self) -> f64 {
        // s^2 / wall for the last step of the polish, and as much again for its curvature.
        if self.surface.is_some() { POLISH_STEP_MM * POLISH_STEP_MM / self.half_wall } else { 1e-9 }
    }
}

/// The triangles that can be nearest to some point of a region.
struct SheetNear<'f> {
    field: &'f SheetField<'f>,
    ids: Vec<u32>,
    balls: Vec<[f32; 4]>,
}

fn gap(b: &[f32; 4], c: [f32; 3]) -> f32 {
    let (x, y, z) = (b[0] - c[0], b[1] - c[1], b[2] - c[2]);
    (x * x + y * y + z * z).sqrt()
}

#[expect(clippy::cast_possible_truncation, reason = "a reach computed in f32 and widened by its rounding")]
fn single(p: &Vec3) -> [f32; 3] {
    [p.x as f32, p.y as f32, p.z as f32]
}

/// f32 rounding of distances up to a few hundred mm, with room.
const SLACK: f32 = 2e-4;

impl<'f> SheetNear<'f> {
    #[expect(
        clippy::cast_possible_truncation,
        reason = "a reach computed in f32 and widened by its rounding"
    )]
    fn pruned(field: &'f SheetField<'f>, ids: impl Iterator<Item = u32> + Clone, region: &Aabb) -> Self {
        let c = single(&region.centre());
        let reach = region.extent().norm() as f32 + 2.0 * field.chord as f32 + SLACK;
        let gaps: Vec<f32> = ids.clone().map(|i| gap(&field.balls[i as usize], c)).collect();
        let limit = gaps.iter().copied().fold(f32::INFINITY, f32::min) + reach;
        let near = |(i, g): (u32, &f32)| (g - field.balls[i as usize][3] <= limit).then_some(i);
        let mut kept: Vec<u32> = ids.zip(&gaps).filter_map(near).collect();
        // Few left: the exact distances to the middle prune what the balls could not.
        if kept.len() < 400 && kept.len() > 4 {
            let m = region.centre();
            let d: Vec<f64> = kept.iter().map(|&t| field.flat(t, &m).2).collect();
            let limit = d.iter().copied().fold(f64::INFINITY, f64::min) + f64::from(reach);
            let mut k = 0;
            kept.retain(|_| {
                k += 1;
                d[k - 1] <= limit
            });
        }
        let balls = kept.iter().map(|&i| field.balls[i as usize]).collect();
        Self { field, ids: kept, balls }
    }

    /// The nearest triangle: number, barycentric foot, distance.
    fn nearest(&self, p: &Vec3) -> (u32, [f64; 3], f64) {
        let c = single(p);
        let mut first = (f32::INFINITY, 0);
        for (k, b) in self.balls.iter().enumerate() {
            let g = gap(b, c);
            if g < first.0 {
                first = (g, k);
            }
        }
        let (w, _, d) = self.field.flat(self.ids[first.1], p);
        let mut best = (self.ids[first.1], w, d);
        for (k, b) in self.balls.iter().enumerate() {
            if f64::from(gap(b, c) - b[3] - SLACK) < best.2 && k != first.1 {
                let (w, _, d) = self.field.flat(self.ids[k], p);
                // Ties go to the lower number, so that every region gives the same answer.
                if d < best.2 || (d <= best.2 && self.ids[k] < best.0) {
                    best = (self.ids[k], w, d);
                }
            }
        }
        best
    }

    /// The nearest sheet on the exact skin. The nearest triangle may belong to another sheet that is
    /// farther by less than twice the chord error, so every sheet within that reach is polished.
    fn nearest_sheet(&self, p: &Vec3) -> Sample {
        let f = self.field;
        let (t, w, d) = self.nearest(p);
        let (mut best, mut piece) = (f.polished(t, w, p), t);
        if f.chord > 0.0 {
            let c = single(p);
            let reach = d + 2.0 * f.chord;
            let mut directions = vec![best.1];
            for (k, b) in self.balls.iter().enumerate() {
                if f64::from(gap(b, c) - b[3] - SLACK) > reach {
                    continue;
                }
                let (w, q, d) = f.flat(self.ids[k], p);
                if d > reach || d < 1e-9 {
                    continue;
                }
                let direction = (p - q) / d;
                if directions.iter().all(|o| o.dot(&direction) < SHEET_COSINE) {
                    let other = f.polished(self.ids[k], w, p);
                    directions.push(direction);
                    if other.0 < best.0 {
                        (best, piece) = (other, self.ids[k]);
                    }
                }
            }
        }
        Sample { value: best.0 - f.half_wall, gradient: best.1, side: best.2, piece }
    }
}

impl<'f> LocalField<'f> for SheetNear<'f> {
    fn narrowed(&self, region: &Aabb) -> Box<dyn LocalField<'f> + 'f> {
        Box::new(Self::pruned(self.field, self.ids.iter().copied(), region))
    }

    fn range(&self, region: &Aabb) -> (f64, f64) {
        let c = single(&region.centre());
        let (mut low, mut high) = (f32::INFINITY, f32::INFINITY);
        for b in &self.balls {
            let g = gap(b, c);
            low = low.min(g - b[3]);
            high = high.min(g);
        }
        let r = 0.5 * region.extent().norm() + self.field.chord + f64::from(SLACK);
        let a = self.field.half_wall;
        (f64::from(low).max(0.0) - r - a, f64::from(high) + r - a)
    }

    fn value(&self, p: &Vec3) -> f64 {
        let rough = self.nearest(p).2 - self.field.half_wall;
        if rough.abs() > self.field.chord { rough } else { self.nearest_sheet(p).value }
    }

    fn sample(&self, p: &Vec3) -> Sample {
        self.nearest_sheet(p)
    }

    fn facing(&self, p: &Vec3, gradient: &Vec3) -> f64 {
        let mut best = f64::INFINITY;
        let c = single(p);
        for (b, &t) in self.balls.iter().zip(&self.ids) {
            if f64::from(gap(b, c) - b[3] - SLACK) >= best {
                continue;
            }
            let (_, q, d) = self.field.flat(t, p);
            if d < best && (p - q).dot(gradient) < -0.5 * d {
                best = d;
            }
        }
        best - self.field.half_wall
    }

    fn piece(&self, piece: u32, p: &Vec3) -> Sample {
        let (w, _, _) = self.field.flat(piece, p);
        let (d, gradient, side) = self.field.polished(piece, w, p);
        Sample { value: d - self.field.half_wall, gradient, side, piece }
    }
}
