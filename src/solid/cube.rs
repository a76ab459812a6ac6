//! The 256 sign patterns of a cube and the closed loops the surface cuts on its boundary.
//!
//! On each face, crossings are joined so that material connects through an ambiguous face and air does
//! not. The rule looks at the face's four corners only, so the two cubes that share a face agree. Every
//! loop then bounds one disc inside the cube:
//!
//! - a fan from a loop vertex whose two faces hold no other segment of the loop, or
//! - a fan from a point inside the cube.
//!
//! Both are cones over a simple closed curve on the boundary of a convex body, seen from a point from
//! which no two of its points project onto one another; so the disc does not cross itself, wherever the
//! vertices sit on the open edges. Two discs of one cube never cross either: a loop of three around a
//! corner is cut off by the plane through the corner's three neighbours, and the only other pair (two
//! quadrilaterals around opposite parallel edges) by the plane midway between them. The tests go through
//! all 256 patterns. Each edge crossing lies on one loop in each of the four cubes around its edge, each
//! segment on two loops: the union of all discs is a closed two-manifold, embedded by construction.
//!
//! # Source
//! Marching cubes: W. Lorensen, H. Cline, SIGGRAPH 1987. A face rule that both neighbours read alike:
//! C. Montani, R. Scateni, R. Scopigno, "A modified look-up table for implicit disambiguation of
//! Marching Cubes", The Visual Computer 10, 1994. The cone argument is our own.

use std::sync::LazyLock;

/// Corner `c` of a cell sits at (c & 1, c >> 1 & 1, c >> 2 & 1).
pub(super) const CORNERS: [[i32; 3]; 8] =
    [[0, 0, 0], [1, 0, 0], [0, 1, 0], [1, 1, 0], [0, 0, 1], [1, 0, 1], [0, 1, 1], [1, 1, 1]];

/// Edge `4 a + k` runs along axis `a`; the pair is its lower and its upper corner.
pub(super) const EDGES: [[u8; 2]; 12] =
    [[0, 1], [2, 3], [4, 5], [6, 7], [0, 2], [1, 3], [4, 6], [5, 7], [0, 4], [1, 5], [2, 6], [3, 7]];

/// Face `2 a + s` lies across axis `a`, at coordinate `s`; corners counter-clockwise from outside.
pub(super) const FACES: [[u8; 4]; 6] =
    [[0, 4, 6, 2], [1, 3, 7, 5], [0, 1, 5, 4], [2, 6, 7, 3], [0, 2, 3, 1], [4, 5, 7, 6]];

/// One loop of the surface on the boundary of a cell, counter-clockwise seen from the air.
#[derive(Clone, Debug, Default)]
pub(super) struct Loop {
    /// The crossed edges in order.
    pub(super) edges: Vec<u8>,
    /// The face that holds the segment from `edges[k]` to `edges[k + 1]`.
    pub(super) faces: Vec<u8>,
    /// Positions in `edges` from which a plain fan is embedded; empty where only an inner point will do.
    pub(super) apexes: Vec<u8>,
}

/// The loops of a sign pattern; bit `c` of `pattern` is set when corner `c` is material.
pub(super) fn loops(pattern: u8) -> &'static [Loop] {
    static TABLE: LazyLock<Vec<Vec<Loop>>> = LazyLock::new(|| (0..=255).map(trace).collect());
    &TABLE[usize::from(pattern)]
}

/// Whether the face's signs alternate, so that two segments lie on it.
pub(super) fn ambiguous(pattern: u8, face: u8) -> bool {
    let s = FACES[usize::from(face)].map(|c| pattern >> c & 1);
    s[0] == s[2] && s[1] == s[3] && s[0] != s[1]
}

fn edge_between(a: u8, b: u8) -> u8 {
    let wanted = [a.min(b), a.max(b)];
    (0..12).find(|&e| EDGES[usize::from(e)] == wanted).unwrap_or(0)
}

fn trace(pattern: u8) -> Vec<Loop> {
    // From the edge where the walk around a face (counter-clockwise from outside) leaves the material to
    // the edge where it next enters it: such a segment has the air corners between its ends.
    let mut next = [None; 12];
    for (f, corners) in (0u8..).zip(&FACES) {
        let inside = |k: usize| pattern >> corners[k % 4] & 1 == 1;
        for k in (0..4).filter(|&k| inside(k) && !inside(k + 1)) {
            let enter = (k + 1..k + 4).find(|&m| !inside(m) && inside(m + 1)).unwrap_or(k);
            let edge = |m: usize| edge_between(corners[m % 4], corners[(m + 1) % 4]);
            next[usize::from(edge(k))] = Some((edge(enter), f));
        }
    }
    let mut out = Vec::new();
    for start in 0u8..12 {
        let mut l = Loop::default();
        let mut at = start;
        while let Some((to, face)) = next[usize::from(at)].take() {
            l.edges.push(at);
            l.faces.push(face);
            at = to;
        }
        if !l.edges.is_empty() {
            // The walk keeps the air on its right; the loop is wanted counter-clockwise from the air.
            l.edges.reverse();
            l.faces.reverse();
            l.faces.rotate_left(1);
            l.apexes = apexes(&l);
            out.push(l);
        }
    }
    out
}

fn apexes(l: &Loop) -> Vec<u8> {
    let n = l.edges.len();
    let on_face = |edge: u8, face: u8| {
        let c = FACES[usize::from(face)];
        EDGES[usize::from(edge)].iter().all(|e| c.contains(e))
    };
    let clear =
        |&k: &usize| (0..n).filter(|&s| s != k && (s + 1) % n != k).all(|s| !on_face(l.edges[k], l.faces[s]));
    (0..n).filter(clear).filter_map(|k| u8::try_from(k).ok()).collect()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::geom::Vec3;

    fn corner(c: u8) -> Vec3 {
        let q = CORNERS[usize::from(c)];
        Vec3::new(f64::from(q[0]), f64::from(q[1]), f64::from(q[2]))
    }

    fn middle(e: u8) -> Vec3 {
        let [a, b] = EDGES[usize::from(e)];
        0.5 * (corner(a) + corner(b))
    }

    #[test]
    fn every_crossed_edge_lies_on_exactly_one_loop() {
        for pattern in 0..=255u8 {
            let mut seen = [0; 12];
            loops(pattern).iter().flat_map(|l| &l.edges).for_each(|&e| seen[usize::from(e)] += 1);
            for (e, n) in seen.iter().enumerate() {
                let [a, b] = EDGES[e];
                let crossed = pattern >> a & 1 != pattern >> b & 1;
                assert_eq!(*n, i32::from(crossed), "pattern {pattern}, edge {e}");
            }
        }
    }

    #[test]
    fn both_cubes_at_a_face_draw_the_same_segments_in_opposite_directions() {
        // Face 2a+1 of a pattern against face 2a of every pattern that agrees on the four corners.
        for axis in 0..3usize {
            let (upper, lower) = (2 * axis + 1, 2 * axis);
            for p in 0..=255u8 {
                let q = (0..8u8).filter(|c| c >> axis & 1 == 0).fold(0u8, |q, c| {
                    let across = c | 1 << axis;
                    q | (p >> across & 1) << c | (p >> across & 1) << across
                });
                let of = |pattern: u8, face: usize| {
                    let mut s = Vec::new();
                    for l in loops(pattern) {
                        for k in 0..l.edges.len() {
                            if usize::from(l.faces[k]) == face {
                                s.push((middle(l.edges[k]), middle(l.edges[(k + 1) % l.edges.len()])));
                            }
                        }
                    }
                    s
                };
                let mut step = Vec3::zeros();
                step[axis] = 1.0;
                let mine = of(p, upper);
                let theirs: Vec<_> = of(q, lower).iter().map(|(a, b)| (b + step, a + step)).collect();
                assert_eq!(mine.len(), theirs.len());
                assert!(mine.iter().all(|m| theirs.contains(m)), "pattern {p}, axis {axis}");
            }
        }
    }

    #[test]
    fn loops_turn_counter_clockwise_seen_from_the_air() {
        for c in 0..8u8 {
            let l = &loops(1 << c)[0];
            let [p, q, r] = [0, 1, 2].map(|k| middle(l.edges[k]));
            assert!((q - p).cross(&(r - p)).dot(&(p - corner(c))) > 0.0, "corner {c}");
        }
    }

    #[test]
    fn discs_of_one_cube_are_kept_apart_by_a_plane() {
        for pattern in 0..=255u8 {
            let long: Vec<_> = loops(pattern).iter().filter(|l| l.edges.len() > 3).collect();
            if long.len() < 2 {
                continue;
            }
            // Two quadrilaterals around opposite parallel edges, nothing else.
            assert_eq!(long.len(), 2, "pattern {pattern}");
            assert!(long.iter().all(|l| l.edges.len() == 4));
            let mean = |l: &Loop| l.edges.iter().map(|&e| middle(e)).sum::<Vec3>() / 4.0;
            let n = mean(long[1]) - mean(long[0]);
            let level = n.dot(&Vec3::repeat(0.5));
            // The whole open edges lie on their side, not just the middles.
            for (l, sign) in [(long[0], -1.0), (long[1], 1.0)] {
                for &e in &l.edges {
                    let ends = EDGES[usize::from(e)].map(|c| sign * (n.dot(&corner(c)) - level));
                    assert!(ends[0].min(ends[1]) > -1e-12 && ends[0].max(ends[1]) > 1e-3);
                }
            }
        }
    }

    #[test]
    fn a_loop_without_apex_is_alone_or_beside_corners() {
        let mut without = 0;
        for pattern in 0..=255u8 {
            for l in loops(pattern).iter().filter(|l| l.apexes.is_empty()) {
                without += 1;
                assert!(l.edges.len() > 3, "a triangle needs no inner point: pattern {pattern}");
            }
        }
        println!("loops that need an inner point: {without}");
    }
}
