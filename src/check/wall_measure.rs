//! Thickness of the material under points of the surface, by rays and by inscribed balls.
//!
//! Under a point x of the surface with outward normal n:
//!
//! - **ray**: the length of the straight way from x along -n to the other side of the wall;
//! - **ball**: the diameter of the largest ball inside the material that touches the surface at x and is stopped by
//!   a *facing* part of the surface. It is never more than the ray's length.
//!
//! Two parts of the surface face each other when their outward normals are at least 120 degrees apart. So two
//! sides of a wall count, a wedge sharper than 60 degrees counts (and is thin at its edge), the two faces of a
//! box's edge do not, and neither do neighbouring facets of one smooth side. The last is why this measure gives
//! no false alarm on triangulated curves: the unrestricted largest ball touching a facet near its edge is stopped by
//! the next facet and shrinks to nothing there, however thick the wall.
//!
//! # Source
//! The ball is found by shrinking, as in J. Ma, S. W. Bae, S. Choi, "3D medial axis point approximation using nearest
//! neighbors and the normal field", The Visual Computer 28, 2012: a ball tangent at x that has a point q in its
//! inside is replaced by the ball tangent at x that passes through q, until no such q is left. Changed here: q
//! is the nearest point of the triangles, not of a cloud of points; only facing triangles are asked; the first ball
//! is the one the ray gives.

use super::body::Body;
use super::samples::{Sample, in_triangle, over};
use super::wall_edges::stand_on_thicker;
use crate::geom::Vec3;
use crate::mesh::{Fans, TriMesh};
use rayon::prelude::*;
use std::cmp::Ordering;

/// Fewest and most samples of the first pass.
const SAMPLES: (u32, u32) = (20_000, 200_000);
/// Greatest cosine between outward normals that face each other: 120 degrees.
const FACING: f64 = -0.5;
/// Smallest cosine between -n and the way from x to the place where a ball is stopped. A ball stopped by a face
/// at 120 degrees has 0.866; the rest is for facets. Points of the same side lie near 0.
const AHEAD: f64 = 0.8;
/// Least cosine between the normals of triangles around a vertex that belong to one smooth side: 40 degrees.
const SAME_SIDE: f64 = 0.766;
/// A triangle is a sliver when its least altitude is below this share of the mesh's diagonal; then its normal is
/// believed only if it is within 60 degrees of that of its surroundings. (The vertices of a mesher carry errors of some
/// micrometres, enough to turn a sliver over. A share of its longest side would not do: the long facets of
/// drawn shapes are exact.)
const SLIVER: f64 = 1e-4;
/// Steps of shrinking; 3 to 5 are usual.
const STEPS: usize = 40;
/// A ball is done when no facing point is deeper in it than this share of its radius, so a thickness is at most this
/// share too great. In a tube or ball, where every facet is about as near, 1e-6 took 15 times as long.
const DEPTH: f64 = 1e-3;
/// Where the thinnest ray is more than this many times the thickness of interest, balls are only found under the
/// lowest samples by ray and nothing is refined: in the middle of a solid ball every triangle is nearest.
const THICK: f64 = 10.0;
/// How many samples that are: so many triangles may be asked in all, in thousands, and 16 to 2000 samples.
const THICK_BUDGET: usize = 20_000;
/// A ball fits into the material when the surface is nowhere deeper in it than the rest of this share of its radius;
/// the rest is for facets.
const HOLDS: f64 = 0.9;
/// Lowest samples whose surroundings are sampled again, and how often in each triangle there.
const ROUNDS: [(usize, u32); 3] = [(64, 8), (24, 24), (8, 64)];

/// One measured place.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct WallPlace {
    /// Thickness, mm.
    pub thickness_mm: f64,
    /// The point of the surface it was measured under, mm.
    pub place_mm: Vec3,
}

/// Thickness of a solid's walls.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct WallFigures {
    /// Thinnest wall by inscribed balls, edges left out; `None` when no two parts of the surface face each other.
    pub ball: Option<WallPlace>,
    /// Thinnest wall by rays, edges left out.
    pub ray: Option<WallPlace>,
    /// Thinnest edge by inscribed balls: a place thinner than the limit that stands on thicker material.
    pub edge: Option<WallPlace>,
    /// Share, 0..=1, of the surface over walls thinner than the limit.
    pub thin_share: f64,
    /// Share, 0..=1, of the surface over edges thinner than the limit.
    pub edge_share: f64,
    /// The ray thickness (mm) that half of the area that has one stays below.
    pub median_ray_mm: Option<f64>,
    /// Points measured, refinement included.
    pub samples: usize,
}

/// Measures the walls of a solid.
///
/// One sample a triangle (its middle) for meshes of 20,000 to 200,000 triangles, more in each of fewer, and one in every
/// so much area for finer ones; then the surroundings of the thinnest samples are sampled three times over, finer
/// each time. The minimum is that of the samples: a thinner place smaller than their spacing can be missed.
///
/// A place thinner than `limit_mm` is an edge, not a wall, when a ball of diameter `limit_mm` fits into the material so near
/// that the two are at most `limit_mm` (and the spacing of the samples) apart.
///
/// # Limits
/// A dent or pit in a thick wall that is narrower than about `limit_mm` all round is told as an edge, too: it has the same
/// material beside it. Read `edge` with `ball`. Where there are teeth, `ball` is often just above `limit_mm`: a
/// tooth that thick counts as a wall.
///
/// - `mesh`: closed, outward, free of crossings; otherwise the figures mean nothing (but there are some).
/// - `limit_mm`: the thickness the walls should have, above 0.
/// - returns: thicknesses at most 0.1 % too great; no place for an empty or spoiled mesh.
#[must_use]
pub fn wall(mesh: &TriMesh, limit_mm: f64) -> WallFigures {
    Body::new(mesh).map(|b| of_body(&b, limit_mm)).unwrap_or_default()
}

pub(super) fn of_body(body: &Body<'_>, limit_mm: f64) -> WallFigures {
    let probe = Probe::new(body);
    let triangles = u32::try_from(body.mesh.triangles.len()).unwrap_or(u32::MAX);
    let samples = over(body.mesh, &body.areas, triangles.clamp(SAMPLES.0, SAMPLES.1));
    let first = probe.rays(&samples);
    let area = samples.iter().fold(0.0, |sum, s| sum + s.area);
    let spacing = (area / super::mesh_audit::as_number(samples.len().max(1))).sqrt();
    let ground = Ground {
        full: first.iter().filter(|m| m.free.is_finite()).map(|m| m.middle(limit_mm)).collect(),
        limit: limit_mm,
        reach: 1.5 * limit_mm + 0.7 * spacing,
    };
    let mut figures =
        WallFigures { median_ray_mm: median(&first), samples: first.len(), ..WallFigures::default() };
    let (mut walls, mut edges) = probe.parted(first, &ground, ray_of);
    let thinnest_ray = thinnest(&walls, ray_of).map_or(0.0, |r| r.thickness_mm);
    let most = limit_mm.max(thinnest_ray);
    let thick = thinnest_ray > THICK * limit_mm;
    if thick {
        let keep = (THICK_BUDGET / (body.areas.len() / 1000 + 1)).clamp(16, 2000);
        if walls.len() > keep {
            walls.select_nth_unstable_by(keep, |a, b| order(a, b, ray_of));
            walls.truncate(keep);
        }
    }
    for (lowest, each) in std::iter::once(&(0, 0)).chain(if thick { &[][..] } else { &ROUNDS[..] }) {
        if *each > 0 {
            let finer = probe.rays(&probe.around_lowest(&mut walls, *lowest, *each));
            figures.samples += finer.len();
            (walls, edges) = probe.parted(finer, &ground, ray_of);
        }
        probe.balls(&mut walls, most);
        probe.balls(&mut edges, most);
        let (parted, more) = probe.parted(walls, &ground, ball_of);
        walls = parted;
        edges.extend(more);
        if *each == 0 && area > 0.0 {
            let share = |all: &[Measured]| {
                let thin = all.iter().filter(|m| m.ball < limit_mm);
                thin.fold(0.0, |sum, m| sum + m.sample.area) / area
            };
            (figures.thin_share, figures.edge_share) = (share(&walls), share(&edges));
        }
        figures.ball = thinner(figures.ball, thinnest(&walls, ball_of));
        figures.ray = thinner(figures.ray, thinnest(&walls, ray_of));
        figures.edge = thinner(figures.edge, thinnest(&edges, ball_of));
    }
    figures
}

/// The material thin places may stand on.
struct Ground {
    /// Middles of balls of the limit's diameter that touch the surface at the samples of the first pass.
    full: Vec<Vec3>,
    limit: f64,
    /// From the middle of a thin place to the middle of such a ball, mm.
    reach: f64,
}

/// What was measured under one sample, mm; infinite where nothing faces it.
#[derive(Clone, Copy)]
struct Measured {
    sample: Sample,
    /// The normal believed in; zero for none.
    normal: Vec3,
    /// Free way along -normal, whatever ends it.
    free: f64,
    ray: f64,
    ball: f64,
}

impl Measured {
    /// The middle of a ball of this diameter that touches the surface here from inside.
    fn middle(&self, diameter: f64) -> Vec3 {
        self.sample.point - self.normal * (0.5 * diameter)
    }
}

fn ball_of(m: &Measured) -> f64 {
    m.ball
}

fn ray_of(m: &Measured) -> f64 {
    m.ray
}

/// A total order by `key`, then by place: which samples are lowest must not depend on how they lie in memory.
fn order(a: &Measured, b: &Measured, key: fn(&Measured) -> f64) -> Ordering {
    let (p, q) = (&a.sample.point, &b.sample.point);
    key(a)
        .total_cmp(&key(b))
        .then(a.sample.triangle.cmp(&b.sample.triangle))
        .then(p.x.total_cmp(&q.x))
        .then(p.y.total_cmp(&q.y))
        .then(p.z.total_cmp(&q.z))
}

/// The median ray by area.
fn median(measured: &[Measured]) -> Option<f64> {
    let mut rays: Vec<(f64, f64)> =
        measured.iter().filter(|m| m.ray.is_finite()).map(|m| (m.ray, m.sample.area)).collect();
    rays.sort_by(|a, b| a.0.total_cmp(&b.0).then(a.1.total_cmp(&b.1)));
    let half = 0.5 * rays.iter().map(|r| r.1).sum::<f64>();
    let mut sum = 0.0;
    rays.iter()
        .find(|r| {
            sum += r.1;
            sum >= half
        })
        .map(|r| r.0)
}

fn thinnest(all: &[Measured], key: fn(&Measured) -> f64) -> Option<WallPlace> {
    let mut best: Option<WallPlace> = None;
    for m in all {
        let thickness_mm = key(m);
        if thickness_mm.is_finite() && best.is_none_or(|b| thickness_mm < b.thickness_mm) {
            best = Some(WallPlace { thickness_mm, place_mm: m.sample.point });
        }
    }
    best
}

fn thinner(a: Option<WallPlace>, b: Option<WallPlace>) -> Option<WallPlace> {
    match (a, b) {
        (Some(x), Some(y)) => Some(if y.thickness_mm < x.thickness_mm { y } else { x }),
        _ => a.or(b),
    }
}

struct Probe<'b, 'm> {
    body: &'b Body<'m>,
    fans: Fans,
    /// Normals that can be believed; zero for the others.
    normals: Vec<Vec3>,
    /// Hits nearer than this are taken for the surface the ray starts from, mm.
    start: f64,
}

impl<'b, 'm> Probe<'b, 'm> {
    fn new(body: &'b Body<'m>) -> Self {
        let fans = Fans::build(body.mesh);
        let diagonal = body.mesh.bounds().extent().norm();
        let normals = (0..body.normals.len())
            .into_par_iter()
            .map(|t| believed(body, &fans, t, SLIVER * diagonal))
            .collect();
        let start = 1e-6 * diagonal;
        Self { body, fans, normals, start }
    }

    fn rays(&self, samples: &[Sample]) -> Vec<Measured> {
        samples.par_iter().with_min_len(64).map(|s| self.ray(s)).collect()
    }

    fn ray(&self, sample: &Sample) -> Measured {
        let mut m = Measured {
            sample: *sample,
            normal: Vec3::zeros(),
            free: f64::INFINITY,
            ray: f64::INFINITY,
            ball: f64::INFINITY,
        };
        let Some(n) = self.smooth_normal(sample) else { return m };
        let skip = |t: u32| t == sample.triangle;
        let hit = self.body.tree.ray(&sample.point, &-n, self.start, f64::INFINITY, skip);
        if let Some(hit) = hit {
            (m.normal, m.free) = (n, hit.t);
            if self.faces(hit.triangle, &n) {
                m.ray = hit.t;
            }
        }
        m
    }

    /// Finds the balls no thicker than `most`.
    fn balls(&self, measured: &mut [Measured], most: f64) {
        measured.par_iter_mut().with_min_len(64).filter(|m| m.free.is_finite()).for_each(|m| {
            let stopped = self.ball(&m.sample.point, &m.normal, m.free.min(most));
            m.ball = stopped.unwrap_or(if m.ray <= most { m.ray } else { f64::INFINITY });
        });
    }

    /// The normal at a sample, interpolated between those of the corners so that it turns evenly from facet to facet.
    /// A corner's normal is the mean, by area, of the triangles around it that are at most 40 degrees from the sample's:
    /// past a sharper edge is another side. `None` when the triangle's own normal can't be believed.
    ///
    /// On a rod of radius r with facets of width w, the facet's own normal beside the facet's edge makes the ball
    /// too thin by up to 0.58 w (5.88 for a tube of 6 with w = 0.2); this one by about w^2 / (4 r).
    fn smooth_normal(&self, sample: &Sample) -> Option<Vec3> {
        let own = self.normals[sample.triangle as usize];
        if own == Vec3::zeros() {
            return None;
        }
        let corners = self.body.mesh.corners(sample.triangle as usize);
        let mut sum = Vec3::zeros();
        for (k, v) in self.body.mesh.triangles[sample.triangle as usize].into_iter().enumerate() {
            let mut at_corner = Vec3::zeros();
            for &t in self.fans.around(v) {
                let m = self.normals[t as usize];
                if m.dot(&own) >= SAME_SIDE {
                    at_corner += m * self.body.areas[t as usize];
                }
            }
            let (a, b) = (corners[(k + 1) % 3] - sample.point, corners[(k + 2) % 3] - sample.point);
            sum += at_corner.try_normalize(0.0).unwrap_or(own) * a.cross(&b).norm();
        }
        Some(sum.try_normalize(0.0).unwrap_or(own))
    }

    fn faces(&self, t: u32, n: &Vec3) -> bool {
        let m = self.normals[t as usize];
        m != Vec3::zeros() && m.dot(n) <= FACING
    }

    /// The diameter of the ball tangent at `x` that facing triangles stop, if they stop the one of diameter
    /// `free` at all.
    fn ball(&self, x: &Vec3, n: &Vec3, free: f64) -> Option<f64> {
        let ahead = |q: &Vec3| {
            let d = x - q;
            n.dot(&d) >= AHEAD * d.norm() && d.norm() > self.start
        };
        let mut r = 0.5 * free;
        let mut stopped = None;
        for _ in 0..STEPS {
            let centre = x - n * r;
            let inside = r * (1.0 - DEPTH);
            let hit = self.body.tree.closest_where(&centre, inside, |t, q| self.faces(t, n) && ahead(q));
            let Some(hit) = hit else { break };
            let d = x - hit.point;
            r = d.norm_squared() / (2.0 * n.dot(&d));
            stopped = Some(2.0 * r);
        }
        stopped
    }

    /// Parts samples into walls and edges by the thickness `key` gives.
    fn parted(
        &self,
        measured: Vec<Measured>,
        ground: &Ground,
        key: fn(&Measured) -> f64,
    ) -> (Vec<Measured>, Vec<Measured>) {
        let thin: Vec<Vec3> =
            measured.iter().filter(|m| key(m) < ground.limit).map(|m| m.middle(key(m))).collect();
        let tree = &self.body.tree;
        let radius = HOLDS * 0.5 * ground.limit;
        let on_thicker =
            stand_on_thicker(&thin, &ground.full, ground.reach, |p| tree.closest(p, radius).is_none());
        let mut on_thicker = on_thicker.into_iter();
        measured.into_iter().partition(|m| key(m) >= ground.limit || !on_thicker.next().unwrap_or(false))
    }

    /// Samples, `each` in a triangle, around the `lowest` lowest of `measured` by ball and by ray; reorders them.
    fn around_lowest(&self, measured: &mut [Measured], lowest: usize, each: u32) -> Vec<Sample> {
        let mut around = Vec::new();
        for key in [ball_of, ray_of] {
            if measured.len() > lowest {
                measured.select_nth_unstable_by(lowest, |a, b| order(a, b, key));
            }
            for m in measured.iter().take(lowest).filter(|m| key(m).is_finite()) {
                for v in self.body.mesh.triangles[m.sample.triangle as usize] {
                    around.extend_from_slice(self.fans.around(v));
                }
            }
        }
        around.sort_unstable();
        around.dedup();
        let mut finer = Vec::new();
        for t in around {
            in_triangle(self.body.mesh, t, self.body.areas[t as usize], each, &mut finer);
        }
        finer
    }
}

/// The normal of triangle `t` when it can be believed, zero otherwise; `least` is the altitude (mm) that makes it so.
fn believed(body: &Body<'_>, fans: &Fans, t: usize, least: f64) -> Vec3 {
    let n = body.normals[t];
    let [a, b, c] = body.mesh.corners(t);
    let longest = (b - a).norm().max((c - b).norm()).max((a - c).norm());
    if 2.0 * body.areas[t] >= least * longest {
        return n;
    }
    let mut around = Vec3::zeros();
    for v in body.mesh.triangles[t] {
        for &s in fans.around(v) {
            around += body.normals[s as usize] * body.areas[s as usize];
        }
    }
    if n.dot(&around) >= 0.5 * around.norm() { n } else { Vec3::zeros() }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::mesh::shapes;

    fn both(mesh: &TriMesh) -> (WallPlace, WallPlace) {
        let w = wall(mesh, 2.0);
        (w.ball.unwrap(), w.ray.unwrap())
    }

    /// The shell of radius 40 and wall 2 (practice: both measures give the wall). The mesh is inscribed in both
    /// spheres, with the same facets, so its wall under a facet is 2 times the facet's cosine, not less.
    #[test]
    fn both_measures_give_the_wall_of_a_sphere_shell() {
        for (level, tolerance) in [(3, 0.08), (5, 0.006), (6, 0.003)] {
            let w = wall(&shapes::sphere_shell(41.0, 39.0, level), 3.0);
            let (ball, ray) = (w.ball.unwrap().thickness_mm, w.ray.unwrap().thickness_mm);
            assert!((ball - 2.0).abs() < tolerance, "level {level}: ball {ball}");
            assert!((ray - 2.0).abs() < tolerance, "level {level}: ray {ray}");
            assert!(ball <= ray + 1e-9);
            assert!((w.median_ray_mm.unwrap() - 2.0).abs() < tolerance);
            assert!((w.thin_share - 1.0).abs() < 1e-12 && w.edge.is_none());
        }
    }

    /// Inner facets turned against the outer ones, the case in which unrestricted balls were seen to give 0.07 for 2.2.
    #[test]
    fn facets_that_do_not_match_raise_no_false_alarm() {
        let outer = shapes::icosphere(41.0, 5);
        let inner = shapes::turned(&shapes::flipped(&shapes::icosphere(39.0, 4)), Vec3::new(0.3, 0.2, 0.1));
        let (ball, ray) = both(&shapes::joined(&[outer, inner]));
        // Chord depths: 0.031 at level 5, 0.12 at level 4; the outer one takes from the wall.
        assert!(ball.thickness_mm > 1.95 && ball.thickness_mm < 2.13, "{ball:?}");
        assert!(ray.thickness_mm >= ball.thickness_mm && ray.thickness_mm < 2.13, "{ray:?}");
    }

    #[test]
    fn an_eccentric_shell_is_thinnest_where_the_spheres_are_nearest() {
        let inner = shapes::moved(&shapes::flipped(&shapes::icosphere(18.0, 5)), Vec3::x() * 1.2);
        let (ball, ray) = both(&shapes::joined(&[shapes::icosphere(20.0, 5), inner]));
        // 20 - 18 - 1.2 = 0.8 at (20, 0, 0) or (19.2, 0, 0)
        for w in [ball, ray] {
            assert!((w.thickness_mm - 0.8).abs() < 0.02, "{w:?}");
            assert!(w.place_mm.x > 19.0 && w.place_mm.yz().norm() < 3.0, "{w:?}");
        }
    }

    #[test]
    fn a_box_is_as_thin_as_its_least_edge_and_its_edges_are_no_wall() {
        let (ball, ray) = both(&shapes::cuboid(Vec3::zeros(), Vec3::new(30.0, 20.0, 1.5)));
        assert!((ball.thickness_mm - 1.5).abs() < 1e-9, "{ball:?}");
        assert!((ray.thickness_mm - 1.5).abs() < 1e-9, "{ray:?}");
    }

    #[test]
    fn a_torus_is_as_thin_as_its_tube() {
        let (ball, ray) = both(&shapes::torus(20.0, 3.0, 192, 96));
        assert!((ball.thickness_mm - 6.0).abs() < 0.02, "{ball:?}");
        assert!((ray.thickness_mm - 6.0).abs() < 0.02, "{ray:?}");
    }

    /// A thin lens-like gap: the ball is told apart from the ray. In a wedge of angle b between planes through the
    /// y axis, a point at distance s from the edge has ray s tan b and ball diameter 2 s tan(b / 2).
    #[test]
    fn in_a_wedge_the_ball_is_smaller_than_the_ray() {
        let b = 40.0_f64.to_radians();
        let (near, far) = (10.0, 30.0);
        let p = |x: f64, y: f64, top: bool| Vec3::new(x, y, if top { x * b.tan() } else { 0.0 });
        let corners = [
            p(near, 0.0, false),
            p(far, 0.0, false),
            p(far, 40.0, false),
            p(near, 40.0, false),
            p(near, 0.0, true),
            p(far, 0.0, true),
            p(far, 40.0, true),
            p(near, 40.0, true),
        ];
        let mesh = shapes::from_triangles(
            corners.to_vec(),
            vec![
                [0, 2, 1],
                [0, 3, 2],
                [4, 5, 6],
                [4, 6, 7],
                [0, 1, 5],
                [0, 5, 4],
                [3, 6, 2],
                [3, 7, 6],
                [0, 4, 7],
                [0, 7, 3],
                [1, 2, 6],
                [1, 6, 5],
            ],
        );
        let body = Body::new(&mesh).unwrap();
        let probe = Probe::new(&body);
        let sample = Sample { triangle: 0, point: Vec3::new(20.0, 18.0, 0.0), area: 1.0 };
        let mut m = probe.rays(&[sample]);
        probe.balls(&mut m, 30.0);
        let m = m[0];
        assert!((m.ray - 20.0 * b.tan()).abs() < 1e-9, "{}", m.ray);
        assert!((m.ball - 40.0 * (0.5 * b).tan()).abs() < 1e-3 * m.ball, "{}", m.ball);
    }

    /// A box of 40 x 40 x 10 carries a tooth of 0.1 x 3 mm, 0.8 high: an edge, not a wall. Made 8 high it is a wall.
    #[test]
    fn a_tooth_is_an_edge_and_a_fin_is_a_wall() {
        for (height, is_wall) in [(0.8, false), (8.0, true)] {
            let w = wall(&tooth(height), 1.2);
            let (wall, edge) = (w.ball.unwrap().thickness_mm, w.edge.unwrap().thickness_mm);
            assert!((edge - 0.1).abs() < 1e-3, "{w:?}");
            assert!((wall - if is_wall { 0.1 } else { 10.0 }).abs() < 1e-2, "{w:?}");
            assert_eq!(w.thin_share > 0.0, is_wall);
            assert!(w.edge_share > 0.0);
        }
    }

    /// A strip too narrow for a ball of the limit anywhere is a wall all over, its sides notwithstanding.
    #[test]
    fn a_thin_strip_stands_on_nothing() {
        let w = wall(&shapes::cuboid(Vec3::zeros(), Vec3::new(40.0, 3.0, 0.8)), 1.2);
        assert!((w.ball.unwrap().thickness_mm - 0.8).abs() < 1e-3 && w.edge.is_none(), "{w:?}");
    }

    /// The profile of a plate with a tooth in the middle of its top, drawn out along y.
    fn tooth(height: f64) -> TriMesh {
        let outline = [
            (0.0, 0.0),
            (40.0, 0.0),
            (40.0, 10.0),
            (20.1, 10.0),
            (20.1, 10.0 + height),
            (20.0, 10.0 + height),
            (20.0, 10.0),
            (0.0, 10.0),
        ];
        let mut positions = Vec::new();
        for y in [0.0, 40.0] {
            positions.extend(outline.iter().map(|&(x, z)| Vec3::new(x, y, z)));
        }
        // Front (y = 0, seen from -y counter-clockwise): the plate as a fan over its top corners, then the tooth.
        let front: [[u32; 3]; 6] = [[0, 1, 3], [1, 2, 3], [0, 3, 6], [0, 6, 7], [3, 4, 5], [3, 5, 6]];
        let mut triangles = front.to_vec();
        triangles.extend(front.map(|[a, b, c]| [a + 8, c + 8, b + 8]));
        for i in 0..8 {
            let j = (i + 1) % 8;
            triangles.extend([[j, i, i + 8], [j, i + 8, j + 8]]);
        }
        shapes::from_triangles(positions, triangles)
    }

    /// In the middle of a ball every facet is nearest; the lowest samples must do.
    #[test]
    fn a_solid_ball_is_as_thick_as_its_diameter() {
        let (ball, ray) = both(&shapes::icosphere(30.0, 5));
        assert!((ball.thickness_mm - 60.0).abs() < 0.12, "{ball:?}");
        assert!((ray.thickness_mm - 60.0).abs() < 0.12, "{ray:?}");
    }

    #[test]
    fn figures_do_not_depend_on_the_number_of_threads() {
        let mesh = shapes::sphere_shell(20.0, 18.0, 4);
        let with = |n| {
            let pool = rayon::ThreadPoolBuilder::new().num_threads(n).build().unwrap();
            pool.install(|| wall(&mesh, 1.2))
        };
        assert_eq!(with(1), with(3));
    }

    #[test]
    fn nothing_is_measured_of_nothing() {
        let w = wall(&TriMesh::default(), 1.2);
        assert!(w.ball.is_none() && w.ray.is_none() && w.samples == 0 && w.median_ray_mm.is_none());
    }
}
