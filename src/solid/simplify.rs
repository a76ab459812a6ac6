//! Fewer triangles, under audit: nothing leaves here that is not a solid within the tolerance.

use super::audit::{Audit, audit};
use super::deviation::{Comparison, Deviation, Memory};
use super::finish::finish;
use super::seams::Seamed;
use crate::geom::Vec3;
use crate::mesh::{Fans, TriMesh, components, measure};

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

/// How one level of coarsening is run.
#[derive(Clone, Copy)]
struct Step {
    /// The part of the tolerance given to the simplifier as its error goal.
    goal: f64,
    /// Whether the simplifier also counts a tenth of the way its vertices move as error.
    even: bool,
    /// Rings locked around a fault in the first round.
    rings: u32,
}

/// One level after the other. The first makes even triangles of a mesher's slivers, and does little harm: counting moves
/// keeps them short. The others take curvature alone; the simplifier's estimate is an average, so their goals stay below the
/// tolerance.
///
/// Measured on the halfway model of order 2 (120 mm, wall 2.4 mm, grid 0.7 mm, 925,408 triangles, tolerance 0.05 mm):
/// these two end at 98,730 triangles after 15 rounds; 1.0 even and 0.7 fail in the second level; 0.2, 0.45 and 0.7
/// without an even level end at 104,466 after 20 rounds, at half as much time again.
const STEPS: [Step; 2] =
    [Step { goal: 2.0, even: true, rings: 4 }, Step { goal: 0.7, even: false, rings: 2 }];
/// Mean cosine between a triangle and the normals at its corners below which it is compared with the input.
const STEEP: f64 = 0.2;
/// When more than this part of the triangles is beyond the tolerance, the goal is halved. Rounds that
/// came out clean later began with up to 0.04, hopeless ones with 0.6.
const TOO_MANY: f64 = 0.1;
/// After this many rounds with faults the input is audited, since faults it brought along cannot be cured.
const CHECK_INPUT: u32 = 3;

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
/// About 600 bytes of working memory per input triangle.
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

fn refuse_unless_solid(input: &TriMesh) -> Result<Audit, SimplifyError> {
    let found = audit(input);
    if found.is_solid() { Ok(found) } else { Err(SimplifyError::NotSolid(Box::new(found))) }
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

/// What is kept of the input to judge results by.
struct Known {
    /// For each input vertex its shell.
    of: Vec<u32>,
    /// For each shell its Euler number and how many triangles it has.
    shells: Vec<(i64, usize)>,
    /// For each input vertex and side the unit normal of that side's triangles there, zero where there is none.
    normals: Vec<[Vec3; 3]>,
}

impl Known {
    fn of(input: &TriMesh) -> Self {
        let mut of = vec![u32::MAX; input.positions.len()];
        let mut shells = Vec::new();
        for (k, c) in (0_u32..).zip(components(input)) {
            for &t in &c.triangles {
                for i in input.triangles[t as usize] {
                    of[i as usize] = k;
                }
            }
            shells.push((c.euler, c.triangles.len()));
        }
        let mut normals = vec![[Vec3::zeros(); 3]; input.positions.len()];
        for ((k, t), &side) in input.triangles.iter().enumerate().zip(&input.sides) {
            let normal = measure::doubled_area_vector(&input.corners(k));
            for &i in t {
                normals[i as usize][side as usize] += normal;
            }
        }
        for n in normals.iter_mut().flatten() {
            *n = n.try_normalize(0.0).unwrap_or_default();
        }
        Self { of, shells, normals }
    }
}

/// One step of coarsening: a clean base, to be simplified to one goal.
///
/// All meshes here number their vertices as the input does.
struct Level<'a> {
    base: &'a TriMesh,
    anchors: &'a [[u32; 3]],
    known: &'a Known,
    compare: &'a Comparison<'a>,
    settings: &'a SimplifySettings,
    step: Step,
}

/// A result, compact and as vertices of the input.
struct Candidate {
    mesh: TriMesh,
    /// The triangles as vertices of the input.
    triangles: Vec<[u32; 3]>,
}

/// What one round gave.
struct Round {
    candidate: Candidate,
    audit: Audit,
    /// Input vertices at faults, turned faces and lost shells.
    harmed: Vec<u32>,
    /// Whether shells were lost, split, joined or changed their Euler number.
    changed: bool,
    deviation: Deviation,
}

impl Level<'_> {
    /// Simplifies the base, again and again with more vertices locked, until the result is clean; `None` when it never is.
    fn run(
        &self,
        memory: &mut Memory,
        rounds: &mut u32,
        locks: &mut usize,
    ) -> Result<Option<(Candidate, Audit, Deviation)>, SimplifyError> {
        let seamed = Seamed::cut(self.base);
        let fans = Fans::build(self.base);
        // Too bold a goal is halved, and its locks, which would only hinder, are forgotten.
        for goal in [1.0, 0.5, 0.25].map(|part| part * self.step.goal * self.settings.tolerance_mm) {
            let mut locked = vec![false; self.base.positions.len()];
            for round in 1..=self.settings.max_rounds {
                *rounds += 1;
                let result = self.round(&seamed, goal, &locked, round == 1, memory)?;
                if result.harmed.is_empty() && !result.changed && result.deviation.bad.is_empty() {
                    *locks += locked.iter().filter(|&&l| l).count();
                    return Ok(Some((result.candidate, result.audit, result.deviation)));
                }
                if round == CHECK_INPUT && result.audit.total() > 0 {
                    refuse_unless_solid(self.base)?;
                }
                let size = result.candidate.triangles.len();
                if as_f64(result.deviation.failing) > TOO_MANY * as_f64(size) {
                    break;
                }
                let before = locked.iter().filter(|&&l| l).count();
                let rings = (self.step.rings + 2 * (round - 1)).min(8);
                self.lock_around(&fans, &result.harmed, rings, &mut locked);
                let anchored = result.deviation.bad.iter().flat_map(|&v| self.anchors[v as usize]);
                let places: Vec<u32> = anchored.filter(|&v| v != u32::MAX).collect();
                self.lock_around(&fans, &places, self.step.rings / 2 - 1 + round / 3, &mut locked);
                if before == locked.iter().filter(|&&l| l).count() {
                    // The same again would give the same again.
                    break;
                }
            }
        }
        Ok(None)
    }

    /// Simplifies the base once and judges the result; measures it if it is sound otherwise, or when told to.
    fn round(
        &self,
        seamed: &Seamed,
        goal: f64,
        locked: &[bool],
        measure: bool,
        memory: &mut Memory,
    ) -> Result<Round, SimplifyError> {
        let locks_of_cut: Vec<bool> = seamed.origins().iter().map(|&v| locked[v as usize]).collect();
        let target = self.settings.max_triangles.unwrap_or(0);
        let cut = seamed.simplified(&locks_of_cut, target, goal, self.step.even)?;
        let candidate = self.candidate(seamed, &cut);
        let audit = audit(&candidate.mesh);
        let mut harmed = harm(self.compare, self.known, &candidate, &audit);
        let changed = self.changed_shells(&candidate, &mut harmed);
        let deviation = if measure || (harmed.is_empty() && !changed) {
            self.compare.measure(&candidate.triangles, memory)
        } else {
            Deviation::default()
        };
        Ok(Round { candidate, audit, harmed, changed, deviation })
    }

    fn candidate(&self, seamed: &Seamed, cut: &[[u32; 3]]) -> Candidate {
        let triangles: Vec<[u32; 3]> = cut.iter().map(|t| t.map(|l| seamed.origin(l))).collect();
        let sides = cut.iter().map(|t| seamed.side(t[0])).collect();
        // The input is finished, so this only renumbers, in the order of first use.
        let mesh =
            finish(&TriMesh { positions: self.base.positions.clone(), triangles: triangles.clone(), sides });
        Candidate { mesh, triangles }
    }

    /// Whether shells were lost, split, joined or changed their Euler number. Lost shells, and small changed ones, are
    /// added whole to the seeds.
    fn changed_shells(&self, candidate: &Candidate, seeds: &mut Vec<u32>) -> bool {
        let found = components(&candidate.mesh);
        let mut times = vec![0_usize; self.known.shells.len()];
        let mut euler = vec![0_i64; self.known.shells.len()];
        if candidate.mesh.triangles.len() == candidate.triangles.len() {
            for c in &found {
                let v = candidate.triangles[c.triangles[0] as usize][0];
                let k = self.known.of[v as usize] as usize;
                times[k] += 1;
                euler[k] += c.euler;
            }
        }
        let mut changed = false;
        let all: usize = self.known.shells.iter().map(|s| s.1).sum();
        for (k, (before, triangles)) in self.known.shells.iter().enumerate() {
            if times[k] != 1 || euler[k] != *before {
                changed = true;
                if times[k] == 0 || 50 * triangles < all {
                    let own = (0_u32..).zip(&self.known.of).filter(|(_, p)| **p as usize == k);
                    seeds.extend(own.map(|(v, _)| v));
                }
            }
        }
        changed
    }

    /// Locks everything within `rings` edges of the seeds.
    fn lock_around(&self, fans: &Fans, seeds: &[u32], rings: u32, locked: &mut [bool]) {
        let mut reached = vec![false; self.base.positions.len()];
        let mut front: Vec<u32> = Vec::new();
        for &s in seeds {
            if !std::mem::replace(&mut reached[s as usize], true) {
                front.push(s);
            }
        }
        for _ in 0..=rings {
            let mut next = Vec::new();
            for &v in &front {
                locked[v as usize] = true;
                for &t in fans.around(v) {
                    for w in self.base.triangles[t as usize] {
                        if !std::mem::replace(&mut reached[w as usize], true) {
                            next.push(w);
                        }
                    }
                }
            }
            front = next;
        }
    }
}

/// Input vertices at faults of the audit, and at faces turned by more than a right angle from the input's normals
/// at their corners.
fn harm(compare: &Comparison, known: &Known, candidate: &Candidate, audit: &Audit) -> Vec<u32> {
    let mut seeds: Vec<u32> = Vec::new();
    if candidate.mesh.triangles.len() != candidate.triangles.len() {
        // A triangle named a vertex twice; find it, since its number is gone from the compact mesh.
        let repeats = |t: &&[u32; 3]| t[0] == t[1] || t[1] == t[2] || t[2] == t[0];
        seeds.extend(candidate.triangles.iter().filter(repeats).flatten());
    } else {
        for fault in &audit.faults {
            seeds.extend(fault.triangles.iter().flat_map(|&t| candidate.triangles[t as usize]));
        }
        let doubtful = (0..candidate.triangles.len()).filter(|&k| {
            let normal = measure::doubled_area_vector(&candidate.mesh.corners(k));
            let side = candidate.mesh.sides[k] as usize;
            let along: f64 =
                candidate.triangles[k].iter().map(|&v| known.normals[v as usize][side].dot(&normal)).sum();
            along <= 3.0 * STEEP * normal.norm()
        });
        let doubtful: Vec<[u32; 3]> = doubtful.map(|k| candidate.triangles[k]).collect();
        seeds.extend(compare.turned(&doubtful).iter().flatten());
    }
    seeds.sort_unstable();
    seeds.dedup();
    seeds
}

/// A count for a ratio; exact below 2^53.
fn as_f64(n: usize) -> f64 {
    n as f64
}

#[cfg(test)]
mod tests {
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
