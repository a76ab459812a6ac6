//! The thickened skin: distance to the nearest sheet minus half the wall.
//!
//! A triangulated skin with a stated chord error finds the nearest sheet; where the decision is closer
//! than that error, and for every sample, the answer is polished on the exact surface. So signs and
//! samples belong to the exact skin, not to its triangulation.
//!
//! # Source
//! Closest point on a parametric surface by a Newton method: A. Björck, "Numerical Methods for Least Squares
//! Problems", 1996, section 9.2. The second derivatives are not evaluated: the normals at a triangle's
//! corners tell how the surface bends there.

use super::{Field, LocalField, Sample};
use crate::geom::{Aabb, Surface, Vec3, closest_point_on_triangle, tangent_frame};
use crate::mesh::{Side, SkinMesh};

/// Iterations of the polish; each gains about a factor 30 (see [`Bend`]).
const POLISH_STEPS: usize = 8;
/// The polish stops when its tangential step is below this, mm: what is left of it then changes the distance
/// by less than 1e-5 mm.
const POLISH_STEP_MM: f64 = 0.02;
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
    bends: Vec<Bend>,
    discs: Vec<Disc>,
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
        let normals: Vec<_> = skin.triangles.iter().map(|t| pick(&skin.normals, t)).collect();
        let exact = surface.filter(|_| !skin.parameters.is_empty());
        let parameters = match exact {
            Some(_) => skin.triangles.iter().map(|t| pick(&skin.parameters, t)).collect(),
            None => Vec::new(),
        };
        let discs = corners.iter().map(Disc::around).collect();
        let bends = corners.iter().zip(&normals).map(|(c, n)| Bend::of(c, n)).collect();
        let half_wall = 0.5 * wall_mm;
        let chord = if exact.is_some() { skin.chord_mm } else { 0.0 };
        let bounds = Aabb::around(&skin.positions).grown(half_wall + chord);
        Ok(Self { surface: exact, half_wall, chord, corners, normals, parameters, bends, discs, bounds })
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
            let rough = j.d1 * s1 + j.d2 * s2;
            // The tangential offset, corrected for the turn of the normal on the way to the foot.
            let normal = j.d1.cross(&j.d2);
            let height = (r - rough).norm().copysign(r.dot(&normal));
            let (step, sag) = self.bends[t as usize].corrected(&rough, height);
            if step.norm_squared() < POLISH_STEP_MM * POLISH_STEP_MM {
                // At the foot the surface has left its tangent plane by the sag.
                let offset = r - step + normal * (sag / normal.norm());
                return oriented(offset, &normal);
            }
            let (g1, g2) = (step.dot(&j.d1), step.dot(&j.d2));
            let (s1, s2) = ((c * g1 - b * g2) / det, (a * g2 - b * g1) / det);
            // A step of more than half the distance to the antipode would leave the chart.
            let limit = (0.25 / (s1 * s1 + s2 * s2)).sqrt().min(1.0);
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

/// How the surface bends over a triangle: the change of its unit normal with the place, in a basis of the
/// triangle's plane, from the normals at the corners.
struct Bend {
    basis: [Vec3; 2],
    /// Symmetric: xx, xy, yy, 1/mm.
    turn: [f64; 3],
}

impl Bend {
    fn of(corners: &[Vec3; 3], normals: &[Vec3; 3]) -> Self {
        let (e, f) = (corners[1] - corners[0], corners[2] - corners[0]);
        let u = e.normalize();
        let v = e.cross(&f).cross(&e).normalize();
        let flat = |x: &Vec3| [x.dot(&u), x.dot(&v)];
        let (e, f) = (flat(&e), flat(&f));
        let (m, n) = (flat(&(normals[1] - normals[0])), flat(&(normals[2] - normals[0])));
        let det = e[0] * f[1] - e[1] * f[0];
        let entry = |k: usize| [(m[k] * f[1] - n[k] * e[1]) / det, (n[k] * e[0] - m[k] * f[0]) / det];
        let (top, bottom) = (entry(0), entry(1));
        let turn = [top[0], 0.5 * (top[1] + bottom[0]), bottom[1]];
        // A needle tells nothing; no bend makes the polish plain Gauss-Newton.
        let sound = turn.iter().all(|t| t.is_finite());
        Self { basis: [u, v], turn: if sound { turn } else { [0.0; 3] } }
    }

    /// The step to the foot for a tangential offset seen from `height` above the surface (negative below),
    /// and how far the surface bends away from the tangent plane over that step, mm.
    fn corrected(&self, rough: &Vec3, height: f64) -> (Vec3, f64) {
        let [u, v] = &self.basis;
        let (x, y) = (rough.dot(u), rough.dot(v));
        let [a, b, c] = self.turn;
        let (p, q, r) = (1.0 + height * a, height * b, 1.0 + height * c);
        let det = p * r - q * q;
        // Near a focal point the correction means nothing.
        if det < 0.1 {
            return (*rough, 0.0);
        }
        let (sx, sy) = ((r * x - q * y) / det, (p * y - q * x) / det);
        let off = rough - u * x - v * y;
        (u * sx + v * sy + off, 0.5 * (a * sx * sx + 2.0 * b * sx * sy + c * sy * sy))
    }
}

/// Splits an offset from the skin into distance, unit direction and side.
fn oriented(offset: Vec3, normal: &Vec3) -> (f64, Vec3, Side) {
    let d = offset.norm();
    let up = offset.dot(normal) >= 0.0;
    let direction = if d > 1e-12 { offset / d } else { normal.normalize() };
    (d, direction, if up { Side::A } else { Side::B })
}

/// A flat disc that holds a triangle: for quick lower bounds of the distance.
#[derive(Clone, Copy)]
struct Disc {
    /// The centroid, a point of the triangle.
    centre: [f32; 3],
    radius: f32,
    /// Unit normal.
    normal: [f32; 3],
}

impl Disc {
    #[expect(clippy::cast_possible_truncation, reason = "the radius is widened to cover the rounding")]
    fn around(corners: &[Vec3; 3]) -> Self {
        let c = (corners[0] + corners[1] + corners[2]) / 3.0;
        let r = corners.iter().map(|q| (q - c).norm()).fold(0.0, f64::max);
        let slack = 4.0 * f64::from(f32::EPSILON) * (c.amax() + r);
        let n = (corners[1] - corners[0]).cross(&(corners[2] - corners[0])).normalize();
        // A triangle without area lies in every plane through it; a zero normal makes the disc a ball.
        let n = if n.iter().all(|x| x.is_finite()) { n } else { Vec3::zeros() };
        Self { centre: single(&c), radius: (r + slack) as f32, normal: [n.x as f32, n.y as f32, n.z as f32] }
    }

    /// Squared distance from a point to the centre, and its height over the plane.
    fn seen_from(&self, p: [f32; 3]) -> (f32, f32) {
        let [x, y, z] = [0, 1, 2].map(|k| p[k] - self.centre[k]);
        let n = &self.normal;
        (x * x + y * y + z * z, x * n[0] + y * n[1] + z * n[2])
    }

    /// A lower bound of the distance from a point to the triangle, but for rounding ([`SLACK`]).
    fn at_least(&self, p: [f32; 3]) -> f32 {
        let (g2, h) = self.seen_from(p);
        let beside = ((g2 - h * h).max(0.0).sqrt() - self.radius).max(0.0);
        (h * h + beside * beside).sqrt()
    }

    /// Whether the bound is at most `reach`.
    fn within(&self, p: [f32; 3], reach: f32) -> bool {
        let (g2, h) = self.seen_from(p);
        let h2 = h * h;
        let room = reach * reach - h2;
        if room < 0.0 {
            return false;
        }
        let r = self.radius + room.sqrt();
        g2 - h2 <= r * r
    }
}

impl Field for SheetField<'_> {
    fn bounds(&self) -> Aabb {
        self.bounds
    }

    fn within(&self, region: &Aabb) -> Box<dyn LocalField<'_> + '_> {
        let ids = 0..u32::try_from(self.discs.len()).unwrap_or(u32::MAX);
        Box::new(SheetNear::pruned(self, ids, region))
    }

    fn accuracy_mm(&self) -> f64 {
        if self.surface.is_some() { 1e-5 } else { 1e-9 }
    }
}

/// The triangles that can be nearest to some point of a region.
struct SheetNear<'f> {
    field: &'f SheetField<'f>,
    ids: Vec<u32>,
    discs: Vec<Disc>,
    /// For a short list, ascending: lower bounds of the distances from `centre`; empty for a long one.
    bounds: Vec<f32>,
    centre: [f32; 3],
}

#[expect(clippy::cast_possible_truncation, reason = "bounds from it are widened by the rounding")]
fn single(p: &Vec3) -> [f32; 3] {
    [p.x as f32, p.y as f32, p.z as f32]
}

/// A length in f32, widened by the rounding of the discs.
#[expect(clippy::cast_possible_truncation, reason = "widened by more than its rounding")]
fn wider(reach: f64) -> f32 {
    reach as f32 + SLACK
}

/// A list shorter than this is ordered by distance from the middle of its region.
const SHORT: usize = 128;
/// f32 rounding of distances up to a few hundred mm, with room.
const SLACK: f32 = 2e-4;

impl<'f> SheetNear<'f> {
    fn pruned(field: &'f SheetField<'f>, ids: impl Iterator<Item = u32>, region: &Aabb) -> Self {
        let (middle, centre) = (region.centre(), single(&region.centre()));
        let mut order: Vec<(f32, u32)> = ids.map(|i| (field.discs[i as usize].at_least(centre), i)).collect();
        // The distance to the triangle with the least bound is an upper bound for the nearest.
        let first = order.iter().min_by(|a, b| a.0.total_cmp(&b.0)).map_or(0, |o| o.1);
        let nearest = field.flat(first, &middle).2;
        let limit = wider(nearest + region.extent().norm() + 2.0 * field.chord);
        order.retain(|o| o.0 <= limit);
        // Ordering a long list costs more than it saves: it will be narrowed again before it is asked much.
        let ordered = order.len() < SHORT;
        if ordered {
            order.sort_unstable_by(|a, b| a.0.total_cmp(&b.0).then(a.1.cmp(&b.1)));
        }
        let ids: Vec<u32> = order.iter().map(|o| o.1).collect();
        let discs = ids.iter().map(|&i| field.discs[i as usize]).collect();
        Self {
            field,
            ids,
            discs,
            bounds: if ordered { order.iter().map(|o| o.0).collect() } else { Vec::new() },
            centre,
        }
    }

    /// The nearest triangle: number, barycentric foot, distance.
    fn nearest(&self, p: &Vec3) -> (u32, [f64; 3], f64) {
        let (w, _, d) = self.field.flat(self.ids[0], p);
        let mut best = (self.ids[0], w, d);
        self.visit(p, d, |k, reach| {
            let (w, _, d) = self.field.flat(self.ids[k], p);
            // Ties go to the lower number, so that every region gives the same answer.
            if d < best.2 || (d <= best.2 && self.ids[k] < best.0) {
                best = (self.ids[k], w, d);
            }
            *reach = best.2;
        });
        best
    }

    /// Calls `f` with every triangle of the list that can be within `reach` of `p`; `f` may lower it.
    fn visit(&self, p: &Vec3, mut reach: f64, mut f: impl FnMut(usize, &mut f64)) {
        let c = single(p);
        let off: f32 = (0..3).map(|k| (c[k] - self.centre[k]).powi(2)).sum::<f32>().sqrt() + SLACK;
        let mut wide = wider(reach);
        for (k, disc) in self.discs.iter().enumerate() {
            if self.bounds.get(k).is_some_and(|b| b - off > wide) {
                break;
            }
            if disc.within(c, wide) {
                f(k, &mut reach);
                wide = wider(reach);
            }
        }
    }

    /// The nearest sheet on the exact skin. The nearest triangle may belong to another sheet that is
    /// farther by less than twice the chord error, so every sheet within that reach is polished.
    fn nearest_sheet(&self, p: &Vec3) -> Sample {
        let f = self.field;
        let (t, w, d) = self.nearest(p);
        let (mut best, mut piece) = (f.polished(t, w, p), t);
        if f.chord > 0.0 {
            let reach = d + 2.0 * f.chord;
            let mut directions = [best.1; 4];
            let mut sheets = 1;
            self.visit(p, reach, |k, _| {
                let (w, q, d) = f.flat(self.ids[k], p);
                if d > reach || d < 1e-9 || sheets == directions.len() {
                    return;
                }
                let direction = (p - q) / d;
                if directions[..sheets].iter().all(|o| o.dot(&direction) < SHEET_COSINE) {
                    let other = f.polished(self.ids[k], w, p);
                    directions[sheets] = direction;
                    sheets += 1;
                    if other.0 < best.0 {
                        (best, piece) = (other, self.ids[k]);
                    }
                }
            });
        }
        Sample { value: best.0 - f.half_wall, gradient: best.1, side: best.2, piece }
    }
}

impl<'f> LocalField<'f> for SheetNear<'f> {
    fn narrowed(&self, region: &Aabb) -> Box<dyn LocalField<'f> + 'f> {
        Box::new(Self::pruned(self.field, self.ids.iter().copied(), region))
    }

    fn range(&self, region: &Aabb) -> (f64, f64) {
        let (middle, c) = (region.centre(), single(&region.centre()));
        let (mut low, mut first) = (f32::INFINITY, 0);
        for (k, d) in self.discs.iter().enumerate() {
            let bound = d.at_least(c);
            if bound < low {
                (low, first) = (bound, k);
            }
        }
        let high = self.field.flat(self.ids[first], &middle).2;
        let r = 0.5 * region.extent().norm() + self.field.chord + f64::from(SLACK);
        let a = self.field.half_wall;
        (f64::from(low) - r - a, high + r - a)
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
        self.visit(p, f64::INFINITY, |k, reach| {
            let (_, q, d) = self.field.flat(self.ids[k], p);
            if d < best && (p - q).dot(gradient) < -0.5 * d {
                best = d;
                *reach = d;
            }
        });
        best - self.field.half_wall
    }

    fn piece(&self, piece: u32, p: &Vec3) -> Sample {
        let (w, _, _) = self.field.flat(piece, p);
        let (d, gradient, side) = self.field.polished(piece, w, p);
        Sample { value: d - self.field.half_wall, gradient, side, piece }
    }
}
