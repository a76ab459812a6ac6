//! Fewer triangles, under audit: nothing leaves here that is not a solid within the tolerance.

use super::audit::Audit;
use super::deviation::{Comparison, Deviation, Memory};
use super::finish::finish;
use super::level::{Known, Level, Step, refuse_unless_solid};
use crate::geom::Vec3;
use crate::mesh::TriMesh;

/// What is asked of [`simplify`].
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct SimplifySettings {
    /// How far the result may be from the exact surface, mm, > 0.
    pub tolerance_mm: f64,
    /// Stop when no more than this many triangles are left; `None` goes on as far as the tolerance allows.
    pub max_triangles: Option<usize>,
    /// Spacing of the points at which the deviation is measured, mm, > 0.
    pub sample_mm: f64,
    /// Rounds of simplifying, auditing and locking before a level's goal is halved (twice
    /// a level), >= 1.
    pub max_rounds: u32,
}

impl SimplifySettings {
    /// Settings for a tolerance: no limit on triangles, samples 0.5 mm apart, 12 rounds.
    #[must_use]
    pub const fn new(tolerance_mm: f64) -> Self {
        Self { tolerance_mm, max_triangles: None, sample_mm: 0.5, max_rounds: 12 }
    }
}

/// A simplified solid.
#[derive(Clone, Debug)]
pub struct Simplified {
    /// The mesh, finished and audited without fault.
    pub mesh: TriMesh,
    /// Its audit.
    pub audit: Audit,
    /// The greatest deviation measured, mm: the largest of
    /// - |exact| at samples of the result on smooth places (edges, faces),
    /// - the distance to the input mesh at samples where the input itself cuts off a crease (it is farther than a quarter of
    ///   the tolerance from the exact surface there),
    /// - the distance of every input vertex from the result.
    ///
    /// Never above the tolerance when `target_reached`. Measured at samples, so not a bound between them.
    pub deviation_mm: f64,
    /// The greatest |exact| at any sample, creases included, mm.
    pub exact_mm: f64,
    /// Rounds used.
    pub rounds: u32,
    /// Vertices that had to be kept, summed over the levels, because the simplifier did harm near them.
    pub locked: usize,
    /// False when the result is the input (no clean result within the tolerance), or when `max_triangles` could not
    /// be reached within the tolerance.
    pub target_reached: bool,
}

/// Why nothing could be returned.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum SimplifyError {
    /// Nothing to simplify.
    #[error("the mesh has no triangles with an area; there is nothing to simplify")]
    Empty,
    /// A triangle names a vertex that does not exist.
    #[error("triangle {triangle} names vertex {index}, but there are only {vertices} vertices")]
    IndexOutOfRange {
        /// The triangle.
        triangle: usize,
        /// The index.
        index: u32,
        /// How many vertices there are.
        vertices: usize,
    },
    /// A coordinate is not finite, or too large for a file's 32-bit number.
    #[error("vertex {vertex} is at ({x}, {y}, {z}) mm, which a file's 32-bit numbers cannot hold")]
    NotFinite {
        /// The vertex.
        vertex: usize,
        /// Its coordinates.
        x: f64,
        /// Its coordinates.
        y: f64,
        /// Its coordinates.
        z: f64,
    },
    /// The list of sides does not fit the list of triangles.
    #[error("{sides} sides were given for {triangles} triangles; there must be one each")]
    Sides {
        /// Entries of the list of sides.
        sides: usize,
        /// Triangles.
        triangles: usize,
    },
    /// A setting is out of range.
    #[error("{name} is {value} mm; it must be a finite number above 0 mm")]
    Setting {
        /// `tolerance_mm` or `sample_mm`.
        name: &'static str,
        /// Its value.
        value: f64,
    },
    /// The input, rounded as files hold it, is not a solid; no simplification can be judged.
    #[error("the mesh to simplify is not a solid:\n{0}")]
    NotSolid(Box<Audit>),
    /// Something this program did wrong.
    #[error("internal fault in simplification: {0}")]
    Internal(&'static str),
}

/// One level after the other. The first makes even triangles of a mesher's slivers and does little harm: counting moves
/// keeps them short. The second takes curvature alone; the simplifier's estimate is an average, so its goal stays below the
/// tolerance. The more rings are locked, the fewer rounds and the more triangles.
///
/// Measured on the halfway model of order 2 and on tau 0.31 (120 mm, wall 2.4 mm, grid 0.7 mm, tolerance 0.05 mm):
/// 925,408 and 708,860 triangles become 118,030 and 94,776 after 11 and 12 rounds (16 and 13 s of one core). With 4 and 2
/// rings and a second goal of 0.7 they become 98,730 and 81,568 after 15 and 18 rounds (22 and 20 s); with plain
/// levels at 0.3 and 0.7 the second never comes out clean.
const STEPS: [Step; 2] =
    [Step { goal: 2.0, even: true, rings: 6 }, Step { goal: 0.6, even: false, rings: 4 }];

/// Reduces the triangles of a solid as far as the tolerance allows.
///
/// The meshopt library does the work on a copy whose sides are cut apart, in two levels of coarseness. Each result is
/// audited exactly, searched for turned faces, compared with the input shell by shell (Euler numbers), and its deviation
/// measured. Vertices are locked in rings around each fault and at the worst place of each triangle beyond the tolerance, and the
/// level's base is simplified again; where deviations are many, the error goal is lowered. A level that never
/// comes out clean is skipped; when all are, the input is returned (finished).
///
/// - `mesh`: a solid, with a side for each triangle.
/// - `exact`: the signed distance to the exact surface, mm, 1-Lipschitz (0 on it).
/// - returns: every vertex of the result is a vertex of `finish(mesh)`; sides are kept. Same input, same result, whatever
///   the number of threads.
///
/// # Errors
/// [`SimplifyError`]: bad input or settings, or an input that is not a solid itself when no round is clean.
///
/// # Limits
/// Memory: 312 MiB for the whole process at 925,408 input triangles (measured), input and skin included.
///
/// # Source
/// The simplifier: A. Kapoulkine, meshoptimizer (edge collapse by quadrics after M. Garland and P. Heckbert, 1997). The
/// lock-and-retry loop is our own.
pub fn simplify(
    mesh: &TriMesh,
    settings: &SimplifySettings,
    exact: &(dyn Fn(&Vec3) -> f64 + Sync),
) -> Result<Simplified, SimplifyError> {
    validate(mesh, settings)?;
    let input = finish(mesh);
    if input.triangles.is_empty() {
        return Err(SimplifyError::Empty);
    }
    let compare =
        Comparison { input: &input, exact, tolerance: settings.tolerance_mm, spacing: settings.sample_mm };
    let mut memory = Memory::default();
    let known = Known::of(&input);
    let mut found: Option<Simplified> = None;
    let mut base = input.clone();
    // Where an input vertex is found in the base: at first, at itself.
    let mut anchors: Vec<[u32; 3]> = (0..).take(input.positions.len()).map(|v| [v; 3]).collect();
    let (mut rounds, mut locked) = (0, 0);
    for step in STEPS {
        if settings.max_triangles.is_some_and(|n| base.triangles.len() <= n) {
            break;
        }
        let level =
            Level { base: &base, anchors: &anchors, known: &known, compare: &compare, settings, step };
        let Some((candidate, audit, deviation)) = level.run(&mut memory, &mut rounds, &mut locked)? else {
            continue;
        };
        if candidate.triangles.len() < base.triangles.len() || found.is_none() {
            anchors = memory.nearest().collect();
            base = TriMesh {
                positions: input.positions.clone(),
                triangles: candidate.triangles,
                sides: candidate.mesh.sides.clone(),
            };
            found = Some(accepted(candidate.mesh, audit, &deviation, settings));
        }
    }
    if let Some(s) = found {
        return Ok(Simplified { rounds, locked, ..s });
    }
    let audit = refuse_unless_solid(&input)?;
    let deviation = compare.measure(&input.triangles, &mut memory);
    let s = accepted(input, audit, &deviation, settings);
    Ok(Simplified {
        rounds,
        locked,
        target_reached: s.target_reached && settings.max_triangles.is_some(),
        ..s
    })
}

fn accepted(mesh: TriMesh, audit: Audit, deviation: &Deviation, settings: &SimplifySettings) -> Simplified {
    let target_reached = settings.max_triangles.is_none_or(|n| mesh.triangles.len() <= n);
    Simplified {
        mesh,
        audit,
        deviation_mm: deviation.greatest,
        exact_mm: deviation.exact,
        rounds: 0,
        locked: 0,
        target_reached,
    }
}

fn validate(mesh: &TriMesh, settings: &SimplifySettings) -> Result<(), SimplifyError> {
    for (name, value) in [("tolerance_mm", settings.tolerance_mm), ("sample_mm", settings.sample_mm)] {
        if !(value.is_finite() && value > 0.0) {
            return Err(SimplifyError::Setting { name, value });
        }
    }
    if mesh.sides.len() != mesh.triangles.len() {
        return Err(SimplifyError::Sides { sides: mesh.sides.len(), triangles: mesh.triangles.len() });
    }
    let vertices = mesh.positions.len();
    for (triangle, t) in mesh.triangles.iter().enumerate() {
        if let Some(&index) = t.iter().find(|&&i| i as usize >= vertices) {
            return Err(SimplifyError::IndexOutOfRange { triangle, index, vertices });
        }
    }
    for (vertex, p) in mesh.positions.iter().enumerate() {
        // 1e30 is far below the greatest f32, so that squares of differences in f64 stay finite as well.
        if !p.iter().all(|x| x.abs() < 1e30) {
            return Err(SimplifyError::NotFinite { vertex, x: p.x, y: p.y, z: p.z });
        }
    }
    Ok(())
}

#[cfg(test)]
mod tests {
    use super::super::audit::audit;
    use super::*;
    use crate::mesh::{Side, Tree, shapes};

    fn check(mesh: &TriMesh, s: &Simplified, tolerance: f64) {
        assert!(s.audit.is_solid() && s.audit == audit(&s.mesh));
        assert_eq!(s.mesh, finish(&s.mesh));
        assert!(s.deviation_mm <= tolerance, "{}", s.deviation_mm);
        // Two-sided distance by means of its own: every vertex and every middle of both meshes.
        for (from, to) in [(mesh, &s.mesh), (&s.mesh, mesh)] {
            let tree = Tree::build(to);
            for t in 0..from.triangles.len() {
                let [a, b, c] = from.corners(t);
                for p in [a, b, c, (a + b + c) / 3.0, 0.5 * (a + b)] {
                    let d = tree.closest(&p, f64::INFINITY).map_or(f64::INFINITY, |h| h.distance);
                    assert!(d <= 1.05 * tolerance, "{d} at {p}");
                }
            }
        }
    }

    #[test]
    fn a_sphere_keeps_its_tolerance_and_loses_most_triangles() {
        let m = shapes::icosphere(20.0, 6);
        let exact = |p: &Vec3| p.norm() - 20.0;
        let s = simplify(&m, &SimplifySettings::new(0.05), &exact).unwrap();
        check(&m, &s, 0.05);
        assert!(
            s.target_reached && s.mesh.triangles.len() < m.triangles.len() / 10,
            "{}",
            s.mesh.triangles.len()
        );
        // An inscribed mesh with sagitta t loses at most the area times t.
        let lost = 4.0 / 3.0 * std::f64::consts::PI * 8000.0 - s.audit.shells[0].volume_mm3;
        assert!(lost > 0.0 && lost < 4.0 * std::f64::consts::PI * 400.0 * 0.05);
    }

    #[test]
    fn a_torus_stays_a_torus_at_a_coarse_tolerance() {
        let m = shapes::torus(30.0, 4.0, 400, 80);
        let exact = |p: &Vec3| (p.xy().norm() - 30.0).hypot(p.z) - 4.0;
        let s = simplify(&m, &SimplifySettings::new(0.4), &exact).unwrap();
        check(&m, &s, 0.4);
        assert!(s.target_reached && s.audit.euler == 0);
        assert!(s.mesh.triangles.len() < m.triangles.len() / 40, "{}", s.mesh.triangles.len());
    }

    #[test]
    fn a_thin_shell_keeps_both_sides_apart() {
        let m = shapes::sphere_shell(20.0, 19.0, 5);
        let exact = |p: &Vec3| (p.norm() - 19.5).abs() - 0.5;
        let s = simplify(&m, &SimplifySettings::new(0.2), &exact).unwrap();
        check(&m, &s, 0.2);
        assert!(s.target_reached && s.audit.chambers() == 1);
        for (t, side) in s.mesh.sides.iter().enumerate() {
            let r = s.mesh.corners(t)[0].norm();
            assert_eq!(*side, if r > 19.5 { Side::A } else { Side::B });
        }
    }

    #[test]
    fn a_line_between_two_sides_stays_where_it_is() {
        // A ball whose upper half is side A: the seam is the equator of the icosphere's triangles.
        let mut m = shapes::icosphere(20.0, 5);
        for t in 0..m.triangles.len() {
            let [a, b, c] = m.corners(t);
            m.sides[t] = if a.z + b.z + c.z > 0.0 { Side::A } else { Side::B };
        }
        let s = simplify(&m, &SimplifySettings::new(0.1), &|p| p.norm() - 20.0).unwrap();
        check(&m, &s, 0.1);
        for side in [Side::A, Side::B] {
            let part = |m: &TriMesh| {
                let keep = (0..m.triangles.len()).filter(|&t| m.sides[t] == side);
                shapes::from_triangles(m.positions.clone(), keep.map(|t| m.triangles[t]).collect())
            };
            let (before, after) =
                (crate::mesh::measure::area(&part(&m)), crate::mesh::measure::area(&part(&s.mesh)));
            assert!((before - after).abs() < 0.01 * before, "{before} {after}");
        }
    }

    #[test]
    fn a_box_ends_at_its_twelve_triangles() {
        // The cut faces of a finely divided box, put together by welding.
        let n = 12;
        let face = shapes::sheet(10.0, 10.0, n);
        let up = shapes::moved(&face, Vec3::z() * 10.0);
        let down = shapes::flipped(&face);
        let swap =
            |m: &TriMesh, k: usize| shapes::mapped(m, |p| Vec3::new(p[k], p[(k + 1) % 3], p[(k + 2) % 3]));
        let m = finish(&shapes::joined(&[
            up.clone(),
            down.clone(),
            swap(&up, 1),
            swap(&down, 1),
            swap(&up, 2),
            swap(&down, 2),
        ]));
        assert!(audit(&m).is_solid());
        let exact = |p: &Vec3| {
            let q = (p - Vec3::repeat(5.0)).abs() - Vec3::repeat(5.0);
            q.sup(&Vec3::zeros()).norm() + q.max().min(0.0)
        };
        let s = simplify(&m, &SimplifySettings::new(0.05), &exact).unwrap();
        assert_eq!((s.mesh.triangles.len(), s.mesh.positions.len()), (12, 8));
        assert!((s.audit.shells[0].volume_mm3 - 1000.0).abs() < 1e-9);
        // Again: nothing is left to take away, and that is success.
        let again = simplify(&s.mesh, &SimplifySettings::new(0.05), &exact).unwrap();
        assert!(again.target_reached && again.mesh == s.mesh);
    }

    #[test]
    fn a_wished_number_is_kept_within_the_tolerance() {
        let m = shapes::icosphere(20.0, 5);
        let exact = |p: &Vec3| p.norm() - 20.0;
        let with = |max_triangles| SimplifySettings { max_triangles, ..SimplifySettings::new(0.05) };
        let s = simplify(&m, &with(Some(10_000)), &exact).unwrap();
        assert!(s.target_reached && s.mesh.triangles.len() <= 10_000, "{}", s.mesh.triangles.len());
        let few = simplify(&m, &with(Some(12)), &exact).unwrap();
        assert!(!few.target_reached && few.deviation_mm <= 0.05 && few.audit.is_solid());
    }

    #[test]
    fn a_surface_that_lies_gets_its_input_back() {
        // An exact surface 3 mm away from the mesh: no round can be within the tolerance.
        let m = shapes::icosphere(20.0, 3);
        let settings = SimplifySettings { max_rounds: 2, ..SimplifySettings::new(0.05) };
        let s = simplify(&m, &settings, &|p| p.norm() - 23.0 + (p.x * 9.0).sin() * 1e-3).unwrap();
        // Far from the exact surface everywhere, the input counts as a crease; only its own shape binds.
        assert!(s.exact_mm > 2.9);
        let nan = simplify(&m, &settings, &|_| f64::NAN).unwrap();
        assert!(nan.exact_mm.is_infinite());
    }

    #[test]
    fn bad_input_is_refused_with_its_place() {
        let exact = |p: &Vec3| p.norm() - 1.0;
        let go = |m: &TriMesh| simplify(m, &SimplifySettings::new(0.1), &exact).map(|s| s.mesh);
        assert_eq!(go(&TriMesh::default()), Err(SimplifyError::Empty));
        let ball = shapes::icosphere(1.0, 2);
        let mut m = ball.clone();
        m.triangles[7][1] = 4_000_000;
        assert!(matches!(go(&m), Err(SimplifyError::IndexOutOfRange { triangle: 7, index: 4_000_000, .. })));
        let mut m = ball.clone();
        m.positions[5].y = f64::NAN;
        assert!(matches!(go(&m), Err(SimplifyError::NotFinite { vertex: 5, .. })));
        let mut m = ball.clone();
        m.sides.pop();
        assert!(matches!(go(&m), Err(SimplifyError::Sides { .. })));
        let s = SimplifySettings::new(-1.0);
        assert!(matches!(simplify(&ball, &s, &exact), Err(SimplifyError::Setting { .. })));
        // Two balls through each other: no solid, and the message says where.
        let m = shapes::joined(&[
            shapes::icosphere(1.0, 3),
            shapes::moved(&shapes::icosphere(1.0, 3), Vec3::x()),
        ]);
        let Err(e) = go(&m) else { panic!("crossing balls were taken for a solid") };
        assert!(e.to_string().contains("pairs of triangles that cross, the first at ("), "{e}");
    }

    #[test]
    fn the_result_does_not_depend_on_the_number_of_threads() {
        let m = shapes::sphere_shell(20.0, 19.0, 4);
        let exact = |p: &Vec3| (p.norm() - 19.5).abs() - 0.5;
        let in_pool = |n: usize| {
            let pool = rayon::ThreadPoolBuilder::new().num_threads(n).build().unwrap();
            pool.install(|| simplify(&m, &SimplifySettings::new(0.2), &exact).unwrap())
        };
        let (one, three) = (in_pool(1), in_pool(3));
        assert_eq!(one.mesh, three.mesh);
        assert_eq!(one.deviation_mm.to_bits(), three.deviation_mm.to_bits());
    }
}
