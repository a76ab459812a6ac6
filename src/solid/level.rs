//! One level of simplification: simplify, judge, lock what was harmed, again.

use super::audit::{Audit, audit};
use super::deviation::{Comparison, Deviation, Memory};
use super::finish::finish;
use super::seams::Seamed;
use super::simplify::{SimplifyError, SimplifySettings};
use crate::geom::Vec3;
use crate::mesh::{Fans, TriMesh, components, measure};

/// How one level of coarsening is run.
#[derive(Clone, Copy)]
pub(super) struct Step {
    /// The part of the tolerance given to the simplifier as its error goal.
    pub(super) goal: f64,
    /// Whether the simplifier also counts a tenth of the way its vertices move as error.
    pub(super) even: bool,
    /// Rings locked around a fault in the first round.
    pub(super) rings: u32,
}

/// Mean cosine between a triangle and the normals at its corners below which it is compared with the input.
const STEEP: f64 = 0.2;
/// When more than this part of the triangles is beyond the tolerance, the goal is halved. Rounds that
/// came out clean later began with up to 0.04, hopeless ones with 0.6.
const TOO_MANY: f64 = 0.1;
/// After this many rounds with faults the input is audited, since faults it brought along cannot be cured.
const CHECK_INPUT: u32 = 3;

/// What is kept of the input to judge results by.
pub(super) struct Known {
    /// For each input vertex its shell.
    of: Vec<u32>,
    /// For each shell its Euler number and how many triangles it has.
    shells: Vec<(i64, usize)>,
    /// For each input vertex and side the unit normal of that side's triangles there, zero where there is none.
    normals: Vec<[Vec3; 3]>,
}

impl Known {
    pub(super) fn of(input: &TriMesh) -> Self {
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
pub(super) struct Level<'a> {
    pub(super) base: &'a TriMesh,
    pub(super) anchors: &'a [[u32; 3]],
    pub(super) known: &'a Known,
    pub(super) compare: &'a Comparison<'a>,
    pub(super) settings: &'a SimplifySettings,
    pub(super) step: Step,
}

/// A result, compact and as vertices of the input.
pub(super) struct Candidate {
    pub(super) mesh: TriMesh,
    /// The triangles as vertices of the input.
    pub(super) triangles: Vec<[u32; 3]>,
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
    pub(super) fn run(
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

pub(super) fn refuse_unless_solid(input: &TriMesh) -> Result<Audit, SimplifyError> {
    let found = audit(input);
    if found.is_solid() { Ok(found) } else { Err(SimplifyError::NotSolid(Box::new(found))) }
}
