//! How far a simplified mesh is from the exact solid and from the mesh it came from, measured.

use crate::geom::{Aabb, Vec3};
use crate::mesh::measure::doubled_area_vector;
use crate::mesh::{Tree, TriMesh};
use rayon::prelude::*;
use rustc_hash::{FxHashMap, FxHashSet};

/// Greatest number of steps along an edge or a height; keeps a plate of huge triangles cheap.
const STEPS: f64 = 24.0;
/// Where the input mesh itself is farther from the exact surface than this part of the tolerance, the place is taken for a
/// crease that the input's grid has cut off.
const CREASE: f64 = 0.25;
/// How far, in tolerances, the nearest input triangle is looked for.
const REACH: f64 = 4.0;

/// What is compared.
pub(super) struct Comparison<'a> {
    /// The input mesh.
    pub(super) input: &'a TriMesh,
    /// Signed distance to the exact surface, mm.
    pub(super) exact: &'a (dyn Fn(&Vec3) -> f64 + Sync),
    /// mm.
    pub(super) tolerance: f64,
    /// Spacing of samples on edges and faces, mm.
    pub(super) spacing: f64,
}

/// What was measured.
#[derive(Default)]
pub(super) struct Deviation {
    /// The greatest deviation, mm; see [`super::Simplified::deviation_mm`].
    pub(super) greatest: f64,
    /// The greatest |exact| at any sample, creases included, mm.
    pub(super) exact: f64,
    /// Triangles of the result with a place beyond the tolerance on them or nearest to them.
    pub(super) failing: usize,
    /// For each of these the input vertex nearest to its worst place; ascending.
    pub(super) bad: Vec<u32>,
}

/// Remembers what was measured on triangles that come again in the next round.
#[derive(Default)]
pub(super) struct Memory {
    /// Triangles (as input vertices) within the tolerance: deviation and |exact|.
    good: FxHashMap<[u32; 3], (f64, f64)>,
    /// For each input vertex the triangle it lies near.
    near: Vec<Near>,
}

/// The triangle of a result nearest to an input vertex.
#[derive(Clone, Copy)]
struct Near {
    /// As input vertices; `u32::MAX` three times when there is none near.
    triangle: [u32; 3],
    /// mm.
    distance: f64,
    /// Its place in the list of the result it was found in, unless that was an earlier one.
    number: Option<u32>,
}

impl Memory {
    /// For each input vertex the nearest triangle of the result measured last, as input vertices; `u32::MAX` three
    /// times when there is none near.
    pub(super) fn nearest(&self) -> impl Iterator<Item = [u32; 3]> {
        self.near.iter().map(|n| n.triangle)
    }
}

/// The worst place of each triangle of a result that has one beyond the tolerance.
struct Worst(Vec<Option<(f64, u32)>>);

impl Worst {
    fn add(&mut self, triangle: usize, distance: f64, vertex: u32) {
        let w = &mut self.0[triangle];
        if w.is_none_or(|w| distance > w.0) {
            *w = Some((distance, vertex));
        }
    }
}

/// One triangle's samples in short.
#[derive(Clone, Copy, Default)]
struct Seen {
    /// Greatest |exact| within the tolerance, mm.
    smooth: f64,
    /// Greatest |exact|, mm.
    exact: f64,
}

/// A sample farther from the exact surface than the tolerance.
struct Doubt {
    /// Place of its triangle in the list.
    triangle: usize,
    place: Vec3,
    /// |exact| there, mm.
    exact: f64,
}

impl Comparison<'_> {
    /// Measures a result whose triangles are given as vertices of the input.
    pub(super) fn measure(&self, triangles: &[[u32; 3]], memory: &mut Memory) -> Deviation {
        let mut out = Deviation::default();
        let mut worst = Worst(vec![None; triangles.len()]);
        self.forward(triangles, memory, &mut out, &mut worst);
        self.backward(triangles, memory, &mut out, &mut worst);
        for w in worst.0.iter().flatten() {
            out.failing += 1;
            out.greatest = out.greatest.max(w.0);
            out.bad.push(w.1);
        }
        out.bad.sort_unstable();
        out.bad.dedup();
        out
    }

    /// Samples of the result against the exact surface; near creases against the input mesh.
    fn forward(&self, triangles: &[[u32; 3]], memory: &mut Memory, out: &mut Deviation, worst: &mut Worst) {
        let good = &memory.good;
        let parts: Vec<(Vec<Seen>, Vec<Doubt>)> = triangles
            .par_chunks(256)
            .enumerate()
            .map(|(part, ts)| {
                let (mut seen, mut doubts, mut samples) =
                    (Vec::with_capacity(ts.len()), Vec::new(), Vec::new());
                for (triangle, t) in (256 * part..).zip(ts) {
                    if let Some(&(smooth, exact)) = good.get(t) {
                        seen.push(Seen { smooth, exact });
                        continue;
                    }
                    self.samples(t, &mut samples);
                    let mut s = Seen::default();
                    for p in &samples {
                        let e = magnitude((self.exact)(p));
                        s.exact = s.exact.max(e);
                        if e <= self.tolerance {
                            s.smooth = s.smooth.max(e);
                        } else {
                            doubts.push(Doubt { triangle, place: *p, exact: e });
                        }
                    }
                    seen.push(s);
                }
                (seen, doubts)
            })
            .collect();
        let mut seen = Vec::with_capacity(triangles.len());
        let mut doubts = Vec::new();
        for (s, d) in parts {
            seen.extend(s);
            doubts.extend(d);
        }
        let judged = self.judge(&doubts);
        let mut failed = vec![false; triangles.len()];
        for (doubt, verdict) in doubts.iter().zip(judged) {
            let t = doubt.triangle;
            match verdict {
                Judged::Crease(d) => {
                    let s = &mut seen[t];
                    s.smooth = s.smooth.max(d);
                }
                Judged::Beyond(d, near) => {
                    failed[t] = true;
                    worst.add(t, d, self.nearest_corner(&doubt.place, near.unwrap_or(triangles[t])));
                }
            }
        }
        for ((t, s), failed) in triangles.iter().zip(&seen).zip(failed) {
            out.greatest = out.greatest.max(s.smooth);
            out.exact = out.exact.max(s.exact);
            if !failed {
                memory.good.insert(*t, (s.smooth, s.exact));
            }
        }
    }

    /// Decides about samples that are farther from the exact surface than the tolerance.
    fn judge(&self, doubts: &[Doubt]) -> Vec<Judged> {
        if doubts.is_empty() {
            return Vec::new();
        }
        let reach = REACH * self.tolerance;
        let near = self.input_near(doubts.iter().map(|d| &d.place), reach);
        let tree = Tree::build(&near);
        doubts
            .par_iter()
            .map(|doubt| match tree.closest(&doubt.place, reach) {
                None => Judged::Beyond(doubt.exact, None),
                Some(hit) => {
                    let there = magnitude((self.exact)(&hit.point));
                    if hit.distance <= self.tolerance && there > CREASE * self.tolerance {
                        Judged::Crease(hit.distance)
                    } else {
                        Judged::Beyond(
                            doubt.exact.max(hit.distance),
                            Some(near.triangles[hit.triangle as usize]),
                        )
                    }
                }
            })
            .collect()
    }

    /// Those of the triangles (as input vertices) that are turned by more than a right angle from the input triangle
    /// nearest to their middle, or have none near.
    pub(super) fn turned(&self, triangles: &[[u32; 3]]) -> Vec<[u32; 3]> {
        if triangles.is_empty() {
            return Vec::new();
        }
        let corners = |t: &[u32; 3]| t.map(|i| self.input.positions[i as usize]);
        let middles: Vec<Vec3> = triangles.iter().map(|t| corners(t).iter().sum::<Vec3>() / 3.0).collect();
        let reach = REACH * self.tolerance;
        let near = self.input_near(middles.iter(), reach);
        let tree = Tree::build(&near);
        let is_turned = |(t, middle): &(&[u32; 3], &Vec3)| {
            tree.closest(middle, reach).is_none_or(|hit| {
                let there = near.corners(hit.triangle as usize);
                doubled_area_vector(&corners(t)).dot(&doubled_area_vector(&there)) < 0.0
            })
        };
        triangles.iter().zip(&middles).filter(is_turned).map(|(t, _)| *t).collect()
    }

    /// The input's triangles that can be within `reach` of one of the points.
    fn input_near<'p>(&self, points: impl Iterator<Item = &'p Vec3>, reach: f64) -> TriMesh {
        let cell = (4.0 * reach).max(self.spacing);
        let mut marked: FxHashSet<[i64; 3]> = FxHashSet::default();
        for p in points {
            each_cell(&Aabb { min: *p, max: *p }.grown(reach), cell, |c| {
                marked.insert(c);
                false
            });
        }
        let touches = |t: &&[u32; 3]| {
            let b = Aabb::around(&t.map(|i| self.input.positions[i as usize]));
            // A large triangle is taken as it is, rather than looking up all its cells.
            b.extent().max() > 32.0 * cell || each_cell(&b, cell, |c| marked.contains(&c))
        };
        let triangles: Vec<[u32; 3]> = self.input.triangles.par_iter().filter(touches).copied().collect();
        TriMesh { positions: self.input.positions.clone(), sides: Vec::new(), triangles }
    }

    /// Every vertex of the input against the result.
    fn backward(&self, triangles: &[[u32; 3]], memory: &mut Memory, out: &mut Deviation, worst: &mut Worst) {
        let result = TriMesh {
            positions: self.input.positions.clone(),
            triangles: triangles.to_vec(),
            sides: Vec::new(),
        };
        let tree = Tree::build(&result);
        let present: FxHashSet<[u32; 3]> = triangles.iter().copied().collect();
        let known = std::mem::take(&mut memory.near);
        let reach = 2.0 * REACH * self.tolerance;
        memory.near = self
            .input
            .positions
            .par_iter()
            .enumerate()
            .map(|(v, p)| match known.get(v) {
                Some(k) if k.distance <= self.tolerance && present.contains(&k.triangle) => {
                    Near { number: None, ..*k }
                }
                _ => match tree.closest(p, reach) {
                    Some(hit) => Near {
                        triangle: triangles[hit.triangle as usize],
                        distance: hit.distance,
                        number: Some(hit.triangle),
                    },
                    None => Near { triangle: [u32::MAX; 3], distance: reach, number: None },
                },
            })
            .collect();
        for (v, near) in (0_u32..).zip(&memory.near) {
            if near.distance > self.tolerance {
                match near.number {
                    Some(t) => worst.add(t as usize, near.distance, v),
                    None => out.bad.push(v),
                }
            }
            out.greatest = out.greatest.max(near.distance);
        }
    }

    /// The corner nearest to `p` of a triangle given as input vertices.
    fn nearest_corner(&self, p: &Vec3, t: [u32; 3]) -> u32 {
        let d = |i: u32| (self.input.positions[i as usize] - p).norm_squared();
        t.into_iter().fold(t[0], |best, i| if d(i) < d(best) { i } else { best })
    }

    /// Corners excepted, points of the triangle no farther apart than the spacing (or [`STEPS`] along an edge)
    /// and the middle of each edge longer than half the spacing:
    /// the middle, rows inside, and those edges that run from a smaller to a larger number, so that each edge
    /// of a closed mesh is sampled once.
    fn samples(&self, t: &[u32; 3], out: &mut Vec<Vec3>) {
        out.clear();
        let p = t.map(|i| self.input.positions[i as usize]);
        let steps = |length: f64| match length / self.spacing {
            short if short < 0.5 => 1.0,
            parts => parts.ceil().clamp(2.0, STEPS),
        };
        let mut longest = 0;
        for k in 0..3 {
            let (a, b) = (&p[k], &p[(k + 1) % 3]);
            if t[k] < t[(k + 1) % 3] {
                between(a, b, steps((b - a).norm()), out);
            }
            if (b - a).norm_squared() > (p[(longest + 1) % 3] - p[longest]).norm_squared() {
                longest = k;
            }
        }
        out.push((p[0] + p[1] + p[2]) / 3.0);
        let (a, b, c) = (&p[longest], &p[(longest + 1) % 3], &p[(longest + 2) % 3]);
        let base = (b - a).norm();
        let rows = steps((b - a).cross(&(c - a)).norm() / base);
        let mut row = 1.0;
        while row < rows {
            let s = row / rows;
            between(&a.lerp(c, s), &b.lerp(c, s), (base * (1.0 - s) / self.spacing).ceil().min(STEPS), out);
            row += 1.0;
        }
    }
}

enum Judged {
    /// Within the tolerance of the input mesh where that cuts a crease: the distance.
    Crease(f64),
    /// Too far: by how much, and the input triangle nearest.
    Beyond(f64, Option<[u32; 3]>),
}

/// |x|, infinite for NaN.
fn magnitude(x: f64) -> f64 {
    if x.is_nan() { f64::INFINITY } else { x.abs() }
}

/// Pushes the points that divide ab into `steps` parts.
fn between(a: &Vec3, b: &Vec3, steps: f64, out: &mut Vec<Vec3>) {
    let mut k = 1.0;
    while k < steps {
        out.push(a.lerp(b, k / steps));
        k += 1.0;
    }
}

/// Calls `visit` with the cells of a grid that a box meets (cells below 0 begin after, not at, their edge) until it returns true; says whether it did.
#[expect(clippy::cast_possible_truncation, reason = "saturates for cells beyond any build volume")]
fn each_cell(b: &Aabb, cell: f64, mut visit: impl FnMut([i64; 3]) -> bool) -> bool {
    let floor = |x: f64| {
        let y = x / cell;
        y as i64 - i64::from(y < 0.0)
    };
    let (lo, hi) = (b.min.map(floor), b.max.map(floor));
    for x in lo.x..=hi.x {
        for y in lo.y..=hi.y {
            for z in lo.z..=hi.z {
                if visit([x, y, z]) {
                    return true;
                }
            }
        }
    }
    false
}
