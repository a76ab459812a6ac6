//! Adaptive triangulation of a skin under a chord bound.
//!
//! The parametrisation of a stage may stretch one direction fifteen times more than the other, so the
//! sphere is refined by the geometry of the image: longest-edge bisection with all lengths taken in space,
//! then edge flips that raise the smallest angle.
//!
//! # Source
//! M.-C. Rivara, "New longest-edge algorithms for the refinement and/or improvement of unstructured
//! triangulations", Int. J. Numer. Meth. Engng. 40, 1997 (longest-edge propagation path); C. L. Lawson,
//! "Software for C1 surface interpolation", in: Mathematical Software III, 1977 (flips by angle).
//! Changed: lengths in space, and the new vertex halves the edge's image instead of its parameters.

use super::linked::{Linked, before, next};
use super::sphere::quartered_octahedron;
use crate::geom::{FirstJet, Surface, Vec3, closest_point_on_triangle, tangent_frame};
use crate::mesh::SkinMesh;
use rayon::prelude::*;

/// Times an octahedron's triangles are quartered at the start: 2048 triangles, 64 points around the
/// equator, 12 for each wave of order 5.
const START_LEVEL: u32 = 4;
/// Cosine of the largest angle between two corner normals, or a corner normal and the flat triangle: 25
/// degrees, so that a triangle stands for one sheet seen from one side.
const COS_LARGEST_TURN: f64 = 0.906_307_787_036_65;
/// Deviations are measured at midpoints and centroid and held to this share of the bound. Over a quadratic
/// the greatest deviation exceeds those four by at most 6 %; the rest is for cubic terms.
const MEASURED_SHARE: f64 = 0.92;
/// The bound is reached in steps, with flips after each, so that stretched triangles are mended while there
/// are few of them and their offspring inherit better shapes.
const COARSER_FIRST: [f64; 4] = [64.0, 16.0, 4.0, 1.0];
/// A flip must lower the cosine of the smallest of the six angles by this much; keeps flips finite.
const LEAST_GAIN: f64 = 1e-3;
/// Parameter triangles must keep an area of this much of their longest edge squared when flipped.
const LEAST_PARAMETER_AREA: f64 = 1e-3;

/// Triangulates the image of the unit sphere under `surface`.
///
/// - `chord_mm`: the largest distance allowed between triangles and smooth skin, either way, mm.
/// - `max_triangles`: give up beyond this many.
/// - returns: a closed triangulated sphere with exact positions and unit normals at the vertices, and its
///   parameters. `chord_mm` of the result is the measured bound (see Guarantees), at most the one asked for.
///
/// # Guarantees
/// Conforming and closed; parameter triangles positively oriented; corner normals of a triangle within 25
/// degrees of each other and of the flat triangle; same input, same bytes, whatever the thread count. The
/// distance to the exact surface is measured at three midpoints and the centroid of every triangle and
/// divided by 0.92 for what lies between: a bound for a quadratic surface, measured (not proved) otherwise.
///
/// # Errors
/// See [`SampleError`].
pub fn sample(surface: &dyn Surface, chord_mm: f64, max_triangles: usize) -> Result<SkinMesh, SampleError> {
    if !(chord_mm.is_finite() && chord_mm > 0.0) {
        return Err(SampleError::Chord { chord_mm });
    }
    let limit = Limit { triangles: max_triangles.min(u32::MAX as usize / 4), chord_mm };
    let mut sampler = Sampler::start(surface, limit)?;
    for coarser in COARSER_FIRST {
        sampler.bound = coarser * MEASURED_SHARE * chord_mm;
        sampler.refine((0..sampler.mesh.len()).collect())?;
        sampler.flip_edges();
    }
    let mut suspects: Vec<usize> = (0..sampler.mesh.len()).collect();
    loop {
        sampler.refine(suspects)?;
        sampler.flip_edges();
        suspects = sampler.measure();
        if suspects.is_empty() {
            return Ok(sampler.finish());
        }
        for t in &suspects {
            sampler.split(*t)?;
        }
        suspects = (0..sampler.mesh.len()).filter(|t| sampler.deviation[*t].is_none()).collect();
    }
}

/// Why a skin could not be sampled.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum SampleError {
    /// The bound asked for is no positive number.
    #[error("chord bound {chord_mm} mm; it must be a finite number above 0 mm")]
    Chord {
        /// What was asked for, mm.
        chord_mm: f64,
    },
    /// The bound needs more triangles than allowed.
    #[error(
        "the skin needs more than {limit} triangles to stay within {chord_mm} mm of the exact surface; \
         allow a larger tolerance or make the part smaller"
    )]
    TooManyTriangles {
        /// The number allowed.
        limit: usize,
        /// The bound asked for, mm.
        chord_mm: f64,
    },
    /// The surface has no finite position or no normal at a point of the unit sphere.
    #[error("the surface is not regular at the point ({}, {}, {}) of the unit sphere", at[0], at[1], at[2])]
    NotRegular {
        /// The point of the unit sphere.
        at: [f64; 3],
    },
}

#[derive(Clone, Copy)]
struct Limit {
    triangles: usize,
    chord_mm: f64,
}

struct Sampler<'s> {
    surface: &'s dyn Surface,
    limit: Limit,
    /// What triangles are held to now, mm.
    bound: f64,
    mesh: Linked,
    parameters: Vec<Vec3>,
    jets: Vec<FirstJet>,
    normals: Vec<Vec3>,
    /// Measured deviation of each triangle, mm; `None` since the triangle changed.
    deviation: Vec<Option<f64>>,
}

impl<'s> Sampler<'s> {
    fn start(surface: &'s dyn Surface, limit: Limit) -> Result<Self, SampleError> {
        let (points, corners) = quartered_octahedron(START_LEVEL);
        if corners.len() > limit.triangles {
            return Err(limit.exceeded());
        }
        let evaluated: Vec<_> = points.par_iter().map(|p| evaluate(surface, p)).collect();
        let (mut jets, mut normals) = (Vec::new(), Vec::new());
        for e in evaluated {
            let (jet, normal) = e?;
            jets.push(jet);
            normals.push(normal);
        }
        let deviation = vec![None; corners.len()];
        // a subdivided octahedron is closed
        let mesh = Linked::new(corners).ok_or(limit.exceeded())?;
        Ok(Self { surface, limit, bound: f64::INFINITY, mesh, parameters: points, jets, normals, deviation })
    }

    fn place(&self, vertex: u32) -> &Vec3 {
        &self.jets[vertex as usize].position
    }

    fn triangle(&self, corners: [u32; 3]) -> [&Vec3; 3] {
        corners.map(|v| self.place(v))
    }

    /// Splits the given triangles and their offspring until each looks fine enough from its corners.
    fn refine(&mut self, suspects: Vec<usize>) -> Result<(), SampleError> {
        let mut queue: std::collections::VecDeque<usize> = suspects.into();
        while let Some(t) = queue.pop_front() {
            if self.too_coarse(self.mesh.corners[t]) {
                let first_new = self.mesh.len();
                self.split(t)?;
                queue.push_back(t);
                queue.extend(first_new..self.mesh.len());
            }
        }
        Ok(())
    }

    /// Bisects the longest edge of triangle `t`, after those on its propagation path.
    fn split(&mut self, t: usize) -> Result<(), SampleError> {
        let before = self.mesh.corners[t];
        while self.mesh.corners[t] == before {
            let (mut at, mut edge) = (t, self.longest_edge(t));
            loop {
                let (across, back) = self.mesh.across(at, edge);
                let longest = self.longest_edge(across);
                if longest == back {
                    break;
                }
                (at, edge) = (across, longest);
            }
            self.bisect(at, edge)?;
        }
        Ok(())
    }

    /// The longest edge in space; of equal ones that with the larger vertex numbers, so that every path ends.
    fn longest_edge(&self, t: usize) -> usize {
        let c = self.mesh.corners[t];
        let key = |i: usize| {
            let (a, b) = (c[i], c[next(i)]);
            ((self.place(a) - self.place(b)).norm_squared(), a.max(b), a.min(b))
        };
        let (mut best, mut found) = (key(0), 0);
        for i in 1..3 {
            let k = key(i);
            if k.0 > best.0 || (k.0 >= best.0 && (k.1, k.2) > (best.1, best.2)) {
                (best, found) = (k, i);
            }
        }
        found
    }

    fn bisect(&mut self, t: usize, edge: usize) -> Result<(), SampleError> {
        if self.mesh.len() + 2 > self.limit.triangles {
            return Err(self.limit.exceeded());
        }
        let (a, b) = (self.mesh.corners[t][edge], self.mesh.corners[t][next(edge)]);
        let share = self.middle_of_image(a as usize, b as usize);
        let (pa, pb) = (self.parameters[a as usize], self.parameters[b as usize]);
        let p = (pa * (1.0 - share) + pb * share).normalize();
        let (jet, normal) = evaluate(self.surface, &p)?;
        let vertex = u32::try_from(self.parameters.len()).map_err(|_| self.limit.exceeded())?;
        self.parameters.push(p);
        self.jets.push(jet);
        self.normals.push(normal);
        let changed = self.mesh.bisect(t, edge, vertex);
        self.deviation.resize(self.mesh.len(), None);
        for t in changed {
            self.deviation[t] = None;
        }
        Ok(())
    }

    /// Where on the arc of parameters from a (0) to b (1) the image is about halfway along its chord: one
    /// Newton step on the cubic with the right ends and speeds.
    fn middle_of_image(&self, a: usize, b: usize) -> f64 {
        let chord = self.jets[b].position - self.jets[a].position;
        let (pa, pb) = (self.parameters[a], self.parameters[b]);
        let speed = |v: usize, towards: Vec3| {
            let (e1, e2) = tangent_frame(&self.parameters[v]);
            let jet = &self.jets[v];
            (jet.d1 * e1.dot(&towards) + jet.d2 * e2.dot(&towards)).dot(&chord)
        };
        let length2 = chord.norm_squared();
        let (at_a, at_b) = (speed(a, pb - pa) / length2, speed(b, pb - pa) / length2);
        let step = (at_a - at_b) / 8.0 / (1.5 - 0.25 * (at_a + at_b)).max(0.5);
        if step.is_finite() { (0.5 - step).clamp(0.3, 0.7) } else { 0.5 }
    }

    /// Whether a triangle must be split, judged from positions and normals at its corners: the cubic along
    /// each edge gives its midpoint's deviation, and the quadratic through these its greatest inside.
    fn too_coarse(&self, corners: [u32; 3]) -> bool {
        let x = self.triangle(corners);
        let n = corners.map(|v| &self.normals[v as usize]);
        let mut bulge = [0.0; 3];
        let mut wave: f64 = 0.0;
        for i in 0..3 {
            let (d, from, to) = (x[next(i)] - x[i], n[i], n[next(i)]);
            if from.dot(to) < COS_LARGEST_TURN {
                return true;
            }
            let (slope_from, slope_to) = (d.dot(from), d.dot(to));
            bulge[i] = (slope_to - slope_from) / 8.0;
            // an S-shaped cubic with slope k at both ends rises to k sqrt(3) / 18
            wave = wave.max((slope_to + slope_from).abs() * 0.048_112_522_432_468_8);
        }
        let flat = (x[1] - x[0]).cross(&(x[2] - x[0]));
        let turn = COS_LARGEST_TURN * flat.norm();
        if n.iter().any(|n| n.dot(&flat) < turn) {
            return true;
        }
        greatest_of_quadratic(bulge) + wave > self.bound
    }

    /// Flips edges while that raises the smallest angle of the two triangles and spoils nothing.
    fn flip_edges(&mut self) {
        let mut stack: Vec<(usize, usize)> = (0..self.mesh.len())
            .rev()
            .filter(|t| self.deviation[*t].is_none())
            .flat_map(|t| [(t, 2), (t, 1), (t, 0)])
            .filter(|&(t, i)| {
                let u = self.mesh.neighbours[t][i] as usize;
                t < u || self.deviation[u].is_some()
            })
            .collect();
        while let Some((t, i)) = stack.pop() {
            if self.flip_improves(t, i) {
                for t in self.mesh.flip(t, i) {
                    self.deviation[t] = None;
                    stack.extend([(t, 0), (t, 1), (t, 2)]);
                }
            }
        }
    }

    fn flip_improves(&self, t: usize, i: usize) -> bool {
        let (u, j) = self.mesh.across(t, i);
        let (now_t, now_u) = (self.mesh.corners[t], self.mesh.corners[u]);
        let (a, b, c, d) = (now_t[i], now_t[next(i)], now_t[before(i)], now_u[before(j)]);
        // two acute angles opposite the edge: it is the better diagonal already (Delaunay, cheap to see)
        let acute = |top: u32| {
            let x = self.place(top);
            (self.place(a) - x).dot(&(self.place(b) - x)) > 0.0
        };
        if acute(c) && acute(d) {
            return false;
        }
        let sharpest = |c: [u32; 3]| largest_cosine(self.triangle(c));
        let now = sharpest(now_t).max(sharpest(now_u));
        let (new_t, new_u) = ([c, a, d], [d, b, c]);
        if sharpest(new_t).max(sharpest(new_u)) > now - LEAST_GAIN {
            return false;
        }
        let stays_unfolded = |corners: [u32; 3]| {
            let [p, q, r] = corners.map(|v| self.parameters[v as usize]);
            let (e, f, g) = (q - p, r - p, r - q);
            let longest = e.norm_squared().max(f.norm_squared()).max(g.norm_squared());
            e.cross(&f).dot(&p) > LEAST_PARAMETER_AREA * longest
        };
        [new_t, new_u].iter().all(|c| stays_unfolded(*c) && !self.too_coarse(*c))
    }

    /// Measures every triangle that changed; returns those beyond the bound.
    fn measure(&mut self) -> Vec<usize> {
        let changed: Vec<usize> = (0..self.mesh.len()).filter(|t| self.deviation[*t].is_none()).collect();
        let measured: Vec<f64> = changed.par_iter().map(|t| self.measured(*t)).collect();
        let mut beyond = Vec::new();
        for (t, far) in changed.into_iter().zip(measured) {
            self.deviation[t] = Some(far);
            if far > self.bound {
                beyond.push(t);
            }
        }
        beyond
    }

    /// The greatest distance from exact points over the three midpoints and the centroid of triangle `t` to
    /// the triangle or, for a midpoint, to the nearer of the two triangles at the edge, mm.
    fn measured(&self, t: usize) -> f64 {
        let corners = self.mesh.corners[t];
        let p = corners.map(|v| self.parameters[v as usize]);
        let distance = |x: &Vec3, corners: [u32; 3]| {
            let [a, b, c] = self.triangle(corners);
            (x - closest_point_on_triangle(x, a, b, c).point).norm()
        };
        let mut far = distance(&self.surface.position((p[0] + p[1] + p[2]).normalize()), corners);
        for i in 0..3 {
            let x = self.surface.position((p[i] + p[next(i)]).normalize());
            let other = self.mesh.corners[self.mesh.neighbours[t][i] as usize];
            far = far.max(distance(&x, corners).min(distance(&x, other)));
        }
        far
    }

    fn finish(self) -> SkinMesh {
        let far = self.deviation.iter().flatten().fold(0.0_f64, |m, d| m.max(*d));
        SkinMesh {
            positions: self.jets.iter().map(|j| j.position).collect(),
            normals: self.normals,
            parameters: self.parameters,
            triangles: self.mesh.corners,
            chord_mm: far / MEASURED_SHARE,
        }
    }
}

impl Limit {
    const fn exceeded(self) -> SampleError {
        SampleError::TooManyTriangles { limit: self.triangles, chord_mm: self.chord_mm }
    }
}

fn evaluate(surface: &dyn Surface, p: &Vec3) -> Result<(FirstJet, Vec3), SampleError> {
    let (e1, e2) = tangent_frame(p);
    let jet = surface.first(*p, e1, e2);
    let normal = jet.normal();
    if (normal.norm_squared() - 1.0).abs() < 1e-6 && jet.position.iter().all(|x| x.is_finite()) {
        Ok((jet, normal))
    } else {
        Err(SampleError::NotRegular { at: [p.x, p.y, p.z] })
    }
}

/// The greatest absolute value over a triangle of the quadratic that is 0 at the corners and has the values
/// `mid` at the midpoints.
fn greatest_of_quadratic(mid: [f64; 3]) -> f64 {
    let [a, b, c] = mid;
    let at_edges = a.abs().max(b.abs()).max(c.abs());
    // stationary point: its barycentric coordinates are proportional to a (b + c - a) and so on
    let (u, v, w) = (a * (b + c - a), b * (c + a - b), c * (a + b - c));
    let sum = u + v + w;
    if sum > 0.0 && u >= 0.0 && v >= 0.0 && w >= 0.0 {
        at_edges.max((4.0 * a * b * c / sum).abs())
    } else {
        at_edges
    }
}

/// The cosine of a triangle's smallest angle.
fn largest_cosine([a, b, c]: [&Vec3; 3]) -> f64 {
    let (x, y, z) = ((b - a).norm(), (c - b).norm(), (a - c).norm());
    // the smallest angle lies opposite the shortest side
    let (p, q, r) = if x <= y && x <= z {
        (y, z, x)
    } else if y <= z {
        (z, x, y)
    } else {
        (x, y, z)
    };
    let cosine = (p * p + q * q - r * r) / (2.0 * p * q);
    if cosine.is_nan() { 1.0 } else { cosine }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::geom::{Placed, Placement};
    use crate::skin::{Ruled, StageSurface};

    /// An ellipsoid with the given half axes, mm.
    struct Ellipsoid(Vec3);

    impl Surface for Ellipsoid {
        fn position(&self, p: Vec3) -> Vec3 {
            p.component_mul(&self.0)
        }
        fn first(&self, p: Vec3, e1: Vec3, e2: Vec3) -> FirstJet {
            let m = |v: Vec3| v.component_mul(&self.0);
            FirstJet { position: m(p), d1: m(e1), d2: m(e2) }
        }
        fn second(&self, p: Vec3, e1: Vec3, e2: Vec3) -> crate::geom::SecondJet {
            let m = |v: Vec3| v.component_mul(&self.0);
            let (d11, d12, d22) = (m(-p), Vec3::zeros(), m(-p));
            crate::geom::SecondJet { position: m(p), d1: m(e1), d2: m(e2), d11, d12, d22 }
        }
    }

    fn placed(stage: &dyn StageSurface) -> Placed<'_> {
        Placed::new(stage, Placement { scale: 60.0, ..Placement::identity() })
    }

    /// Closed, oriented, Euler number 2; parameter triangles unfolded; sizes agree.
    fn assert_sphere(mesh: &SkinMesh) {
        let linked = Linked::new(mesh.triangles.clone()).unwrap();
        assert_eq!(linked.len() / 2 + 2, mesh.positions.len());
        assert_eq!((mesh.normals.len(), mesh.parameters.len()), (mesh.positions.len(), mesh.positions.len()));
        for t in &mesh.triangles {
            let [a, b, c] = t.map(|v| mesh.parameters[v as usize]);
            assert!((b - a).cross(&(c - a)).dot(&a) > 0.0);
            let [x, y, z] = t.map(|v| mesh.positions[v as usize]);
            let flat = (y - x).cross(&(z - x)).normalize();
            for v in t {
                assert!(mesh.normals[*v as usize].dot(&flat) >= COS_LARGEST_TURN - 1e-12);
            }
        }
    }

    /// The greatest distance of 45 exact points a triangle from the nearest triangle around, mm.
    fn densely_measured(surface: &dyn Surface, mesh: &SkinMesh) -> f64 {
        let linked = Linked::new(mesh.triangles.clone()).unwrap();
        let mut far = 0.0_f64;
        let mut fans = vec![Vec::new(); mesh.positions.len()];
        for (t, c) in linked.corners.iter().enumerate() {
            c.iter().for_each(|v| fans[*v as usize].push(t));
        }
        for t in 0..linked.len() {
            let around: std::collections::BTreeSet<_> =
                linked.corners[t].iter().flat_map(|v| &fans[*v as usize]).copied().collect();
            let p = linked.corners[t].map(|v| mesh.parameters[v as usize]);
            for i in 0..=8 {
                for j in 0..=8 - i {
                    let (u, v) = (f64::from(i) / 8.0, f64::from(j) / 8.0);
                    let x = surface.position((p[0] * (1.0 - u - v) + p[1] * u + p[2] * v).normalize());
                    let near = |t: usize| {
                        let [a, b, c] = linked.corners[t].map(|v| mesh.positions[v as usize]);
                        (x - closest_point_on_triangle(&x, &a, &b, &c).point).norm()
                    };
                    if near(t) > far {
                        far = far.max(around.iter().fold(f64::INFINITY, |m, t| m.min(near(*t))));
                    }
                }
            }
        }
        far
    }

    #[test]
    fn chord_bound_holds_between_the_measured_points() {
        for (order, tau) in [(2, 0.0), (2, 0.05), (2, 0.5), (3, 0.25), (4, 0.3), (5, 0.05), (5, 0.28)] {
            let stage = Ruled::new(order).unwrap().stage_at(tau);
            let surface = placed(&stage);
            let mesh = sample(&surface, 0.1, 2_000_000).unwrap();
            assert_sphere(&mesh);
            let far = densely_measured(&surface, &mesh);
            println!(
                "order {order} tau {tau}: {} triangles, {far} of {}",
                mesh.triangles.len(),
                mesh.chord_mm
            );
            assert!(far <= mesh.chord_mm && mesh.chord_mm <= 0.1, "{far} {}", mesh.chord_mm);
        }
    }

    #[test]
    fn triangles_are_well_shaped_in_space() {
        for (order, tau) in [(2, 0.05), (2, 0.5), (3, 0.25)] {
            let stage = Ruled::new(order).unwrap().stage_at(tau);
            let mesh = sample(&placed(&stage), 0.03, 2_000_000).unwrap();
            let mut angles: Vec<f64> = mesh
                .triangles
                .iter()
                .map(|t| {
                    let [a, b, c] = t.map(|v| mesh.positions[v as usize]);
                    largest_cosine([&a, &b, &c]).min(1.0).acos().to_degrees()
                })
                .collect();
            angles.sort_by(f64::total_cmp);
            let (least, low) = (angles[0], angles[angles.len() / 100]);
            println!("order {order} tau {tau}: {} triangles, least {least}, 1 % {low}", angles.len());
            assert!(least > 8.0 && low > 20.0, "least {least}, lowest per cent {low} degrees");
        }
    }

    #[test]
    fn a_sphere_needs_about_as_many_triangles_as_its_chord_bound_says() {
        // equilateral triangles of edge l on radius r deviate l^2 / (6 r) at their centre
        let mesh = sample(&Ellipsoid(Vec3::repeat(50.0)), 0.02, 1_000_000).unwrap();
        assert_sphere(&mesh);
        let edge2 = 6.0 * 50.0 * 0.02;
        let ideal = 4.0 * std::f64::consts::PI * 2500.0 / (0.75_f64.sqrt() * 0.5 * edge2);
        let count = mesh.triangles.len() as f64;
        assert!(count > ideal && count < 3.0 * ideal, "{count} against {ideal}");
    }

    #[test]
    fn a_flat_ellipsoid_keeps_its_bound() {
        let surface = Ellipsoid(Vec3::new(50.0, 20.0, 3.0));
        let mesh = sample(&surface, 0.02, 1_000_000).unwrap();
        assert_sphere(&mesh);
        assert!(densely_measured(&surface, &mesh) <= mesh.chord_mm);
    }

    #[test]
    fn the_thread_count_changes_nothing() {
        let stage = Ruled::new(3).unwrap().stage_at(0.4);
        let run = |threads: usize| {
            let pool = rayon::ThreadPoolBuilder::new().num_threads(threads).build().unwrap();
            pool.install(|| sample(&placed(&stage), 0.2, 1_000_000)).unwrap()
        };
        let (one, three) = (run(1), run(3));
        assert_eq!((one.positions, one.triangles), (three.positions, three.triangles));
        assert_eq!(one.chord_mm.to_bits(), three.chord_mm.to_bits());
    }

    #[test]
    fn what_cannot_be_sampled_is_refused_with_a_reason() {
        let ball = Ellipsoid(Vec3::repeat(50.0));
        for chord_mm in [0.0, -1.0, f64::NAN, f64::INFINITY] {
            assert!(matches!(sample(&ball, chord_mm, 1000), Err(SampleError::Chord { .. })));
        }
        let few = sample(&ball, 0.001, 10_000).unwrap_err();
        assert_eq!(few, SampleError::TooManyTriangles { limit: 10_000, chord_mm: 0.001 });
        let flat = sample(&Ellipsoid(Vec3::new(1.0, 1.0, 0.0)), 0.1, 10_000).unwrap_err();
        assert!(matches!(flat, SampleError::NotRegular { .. }), "{flat}");
        let nan = Ruled::new(2).unwrap().stage_at(f64::NAN);
        assert!(matches!(sample(&nan, 0.1, 10_000), Err(SampleError::NotRegular { .. })));
    }

    #[test]
    fn the_quadratic_with_equal_midpoints_is_greatest_at_the_centroid() {
        assert!((greatest_of_quadratic([1.0, 1.0, 1.0]) - 4.0 / 3.0).abs() < 1e-15);
        assert!((greatest_of_quadratic([1.0, -2.0, 0.5]) - 2.0).abs() < 1e-15);
        assert!(greatest_of_quadratic([0.0; 3]).abs() < 1e-15);
    }
}
