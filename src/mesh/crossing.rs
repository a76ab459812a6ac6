//! Whether two triangles of a mesh meet elsewhere than in the corners they share, decided exactly.
//!
//! Every decision is a sign of `robust::orient2d` or `robust::orient3d`, so there is no tolerance and no doubt:
//! a touch counts as a meeting. Exact for coordinates whose products of three neither overflow nor underflow
//! (always so for f32 values that are not subnormal).
//!
//! # Source
//! J. R. Shewchuk, "Adaptive Precision Floating-Point Arithmetic and Fast Robust Geometric Predicates", Discrete &
//! Computational Geometry 18, 1997 (the predicates); the case distinction is our own and stands beside each case.

use crate::geom::Vec3;
use robust::{Coord, Coord3D, orient2d, orient3d};

/// How two triangles of a mesh lie to each other.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Pair {
    /// They meet nowhere but in the corners or the edge they share by number.
    Apart,
    /// They have another point in common.
    Crossing,
    /// They have all three corners in common.
    Same,
}

/// The sign of the volume of the tetrahedron abcd: 0 exactly when the points lie in a plane.
#[must_use]
pub fn side_of_plane(a: &Vec3, b: &Vec3, c: &Vec3, d: &Vec3) -> i8 {
    let at = |p: &Vec3| Coord3D { x: p.x, y: p.y, z: p.z };
    sign(orient3d(at(a), at(b), at(c), at(d)))
}

/// Whether the three points lie on a line (or coincide), exactly.
#[must_use]
pub fn collinear(a: &Vec3, b: &Vec3, c: &Vec3) -> bool {
    // Most triangles are far from it: |ab x ac| is then well above its own rounding.
    let (u, v) = (b - a, c - a);
    if u.cross(&v).norm_squared() > 1e-20 * u.norm_squared() * v.norm_squared() {
        return false;
    }
    (0..3).all(|drop| side_of_line(a, b, c, drop) == 0)
}

/// Decides how the triangles with corner numbers `s` and `t` lie to each other. Both must name three different
/// corners, and every number must be in range.
///
/// A triangle without area is treated as the segment it is; two such triangles are always apart.
#[must_use]
pub fn pair(positions: &[Vec3], s: [u32; 3], t: [u32; 3]) -> Pair {
    let shared: [Option<usize>; 3] = s.map(|i| t.iter().position(|&j| j == i));
    let at = |i: u32| &positions[i as usize];
    let crossing = match shared.iter().flatten().count() {
        3 => return Pair::Same,
        2 => {
            // A common edge: they meet elsewhere only when one lies folded onto the other.
            let k = shared.iter().position(Option::is_none).unwrap_or(0);
            let (p, q, r) = (at(s[(k + 1) % 3]), at(s[(k + 2) % 3]), at(s[k]));
            let o = t.iter().position(|j| !s.contains(j)).unwrap_or(0);
            let w = at(t[o]);
            side_of_plane(p, q, r, w) == 0
                && axis_to_drop(p, q, r)
                    .is_some_and(|drop| side_of_line(p, q, r, drop) == side_of_line(p, q, w, drop))
        }
        1 => {
            // A common corner p: what they have in common is convex and contains p. If it is more than p, it reaches
            // the edge opposite p of one of the two.
            let k = shared.iter().position(Option::is_some).unwrap_or(0);
            let j = shared[k].unwrap_or(0);
            let p = at(s[k]);
            let (a, b) = (at(s[(k + 1) % 3]), at(s[(k + 2) % 3]));
            let (c, d) = (at(t[(j + 1) % 3]), at(t[(j + 2) % 3]));
            let (sa, sb) = (side_of_plane(p, c, d, a), side_of_plane(p, c, d, b));
            if sa * sb > 0 {
                return Pair::Apart;
            }
            let (sc, sd) = (side_of_plane(p, a, b, c), side_of_plane(p, a, b, d));
            if sc * sd > 0 {
                return Pair::Apart;
            }
            segment_meets(a, b, sa, sb, [p, c, d]) || segment_meets(c, d, sc, sd, [p, a, b])
        }
        _ => {
            let (a, b) = (s.map(at), t.map(at));
            let sa = a.map(|p| side_of_plane(b[0], b[1], b[2], p));
            if one_sided(sa) {
                return Pair::Apart;
            }
            let sb = b.map(|p| side_of_plane(a[0], a[1], a[2], p));
            if one_sided(sb) {
                return Pair::Apart;
            }
            // Two triangles that meet do so on the rim of one of them.
            let rim_meets = |p: [&Vec3; 3], side: [i8; 3], q: [&Vec3; 3]| {
                (0..3).any(|k| {
                    let l = (k + 1) % 3;
                    segment_meets(p[k], p[l], side[k], side[l], q)
                })
            };
            rim_meets(a, sa, b) || rim_meets(b, sb, a)
        }
    };
    if crossing { Pair::Crossing } else { Pair::Apart }
}

/// Whether the closed segment pq meets the closed triangle; `sp` and `sq` are the sides of the triangle's plane on
/// which p and q lie.
fn segment_meets(p: &Vec3, q: &Vec3, sp: i8, sq: i8, t: [&Vec3; 3]) -> bool {
    match (sp, sq) {
        (0, 0) => flat_segment_meets(p, q, t),
        (0, _) => flat_segment_meets(p, p, t),
        (_, 0) => flat_segment_meets(q, q, t),
        _ if sp == sq => false,
        // The line pq passes the three edges on the same side, or touches some.
        _ => !two_sided([0, 1, 2].map(|k| side_of_plane(p, q, t[k], t[(k + 1) % 3]))),
    }
}

/// The same when p and q lie in the plane of the triangle (p = q is allowed).
fn flat_segment_meets(p: &Vec3, q: &Vec3, t: [&Vec3; 3]) -> bool {
    let Some(drop) = axis_to_drop(t[0], t[1], t[2]) else { return false };
    let turn = side_of_line(t[0], t[1], t[2], drop);
    let mut outside_both = false;
    for k in 0..3 {
        let (a, b) = (t[k], t[(k + 1) % 3]);
        outside_both |= side_of_line(a, b, p, drop) * turn < 0 && side_of_line(a, b, q, drop) * turn < 0;
    }
    // Convex sets in the plane are apart exactly when an edge of one separates them: an edge of the triangle...
    if outside_both {
        return false;
    }
    // ...or the line pq. For p = q the first test was complete.
    let all = [0, 1, 2].map(|k| side_of_line(p, q, t[k], drop));
    !one_sided(all)
}

/// An axis along which the triangle can be projected without losing its area; the steepest that can.
fn axis_to_drop(a: &Vec3, b: &Vec3, c: &Vec3) -> Option<usize> {
    let n = (b - a).cross(&(c - a));
    let first = n.iamax();
    [first, (first + 1) % 3, (first + 2) % 3].into_iter().find(|&k| side_of_line(a, b, c, k) != 0)
}

/// On which side of the line ab the point c lies, seen along axis `drop`.
fn side_of_line(a: &Vec3, b: &Vec3, c: &Vec3, drop: usize) -> i8 {
    let (u, v) = ((drop + 1) % 3, (drop + 2) % 3);
    let at = |p: &Vec3| Coord { x: p[u], y: p[v] };
    sign(orient2d(at(a), at(b), at(c)))
}

fn one_sided(s: [i8; 3]) -> bool {
    s == [1; 3] || s == [-1; 3]
}

fn two_sided(s: [i8; 3]) -> bool {
    s.contains(&1) && s.contains(&-1)
}

fn sign(x: f64) -> i8 {
    i8::from(x > 0.0) - i8::from(x < 0.0)
}

#[cfg(test)]
mod tests {
    use super::*;

    type Int = [i128; 3];
    /// A rational point: x, y, z over w > 0.
    type Ratio = [i128; 4];

    fn sub(a: Int, b: Int) -> Int {
        [a[0] - b[0], a[1] - b[1], a[2] - b[2]]
    }

    fn cross(a: Int, b: Int) -> Int {
        [a[1] * b[2] - a[2] * b[1], a[2] * b[0] - a[0] * b[2], a[0] * b[1] - a[1] * b[0]]
    }

    fn dot(a: Int, b: Int) -> i128 {
        a[0] * b[0] + a[1] * b[1] + a[2] * b[2]
    }

    fn normal(t: [Int; 3]) -> Int {
        cross(sub(t[1], t[0]), sub(t[2], t[0]))
    }

    /// w (p - a) for the rational point p.
    fn from(p: Ratio, a: Int) -> Int {
        [p[0] - p[3] * a[0], p[1] - p[3] * a[1], p[2] - p[3] * a[2]]
    }

    fn in_triangle(p: Ratio, t: [Int; 3]) -> bool {
        let n = normal(t);
        dot(n, from(p, t[0])) == 0
            && (0..3).all(|k| dot(n, cross(sub(t[(k + 1) % 3], t[k]), from(p, t[k]))) >= 0)
    }

    /// The point of uv where a linear function with values f at u and g at v, of opposite signs, is zero.
    fn zero(u: Int, v: Int, f: i128, g: i128) -> Ratio {
        let s = (g - f).signum();
        [0, 1, 2, 3].map(|k| if k < 3 { s * (u[k] * g - v[k] * f) } else { (g - f).abs() })
    }

    /// Every point that can be extreme in the common part of two triangles, in rational arithmetic.
    fn extreme_points(a: [Int; 3], b: [Int; 3]) -> Vec<Ratio> {
        let mut out = Vec::new();
        for (s, t) in [(a, b), (b, a)] {
            let n = normal(t);
            for k in 0..3 {
                let (u, v) = (s[k], s[(k + 1) % 3]);
                out.push([u[0], u[1], u[2], 1]);
                let (f, g) = (dot(n, sub(u, t[0])), dot(n, sub(v, t[0])));
                if f.signum() * g.signum() < 0 {
                    out.push(zero(u, v, f, g));
                }
                for j in 0..3 {
                    // Edge against edge within one plane.
                    let (c, d) = (t[j], t[(j + 1) % 3]);
                    let side = |x: Int| dot(n, cross(sub(d, c), sub(x, c)));
                    if f == 0 && g == 0 && side(u).signum() * side(v).signum() < 0 {
                        out.push(zero(u, v, side(u), side(v)));
                    }
                }
            }
        }
        out.retain(|&p| in_triangle(p, a) && in_triangle(p, b));
        out
    }

    /// The answer of [`pair`] by listing points.
    fn by_points(points: &[Int], s: [u32; 3], t: [u32; 3]) -> Pair {
        let at = |i: u32| points[i as usize];
        let shared: Vec<Int> = s.iter().filter(|i| t.contains(i)).map(|&i| at(i)).collect();
        let allowed = |p: &Ratio| match shared[..] {
            [] => false,
            [a] => from(*p, a) == [0; 3],
            [a, b, ..] => {
                let (d, e) = (from(*p, a), sub(b, a));
                cross(d, e) == [0; 3] && dot(d, e) >= 0 && dot(from(*p, b), e) <= 0
            }
        };
        match shared.len() {
            3 => Pair::Same,
            _ if extreme_points(s.map(at), t.map(at)).iter().all(allowed) => Pair::Apart,
            _ => Pair::Crossing,
        }
    }

    #[test]
    fn random_pairs_on_a_small_lattice_agree_with_rational_arithmetic() {
        let mut state = 7_u64;
        let mut below = |n: u64| {
            state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
            (state >> 33) % n
        };
        let mut seen = std::collections::BTreeMap::new();
        for _ in 0..150_000 {
            // Few lattice points, so that touching, coplanar and shared cases are common.
            let side = 2 + below(3);
            let points: Vec<Int> = (0..6).map(|_| [0; 3].map(|_: i32| i128::from(below(side)))).collect();
            let floats: Vec<Vec3> = points
                .iter()
                .map(|p| Vec3::from_iterator(p.iter().map(|&x| f64::from(i32::try_from(x).unwrap()))))
                .collect();
            let number = |base: u32, n: u64| base + u32::try_from(n).unwrap();
            let s = [0, 1, 2];
            let t = [number(0, below(6)), number(0, below(6)), number(3, below(3))];
            let flat = |t: [u32; 3]| normal(t.map(|i| points[i as usize])) == [0; 3];
            assert_eq!(flat(s), collinear(&floats[0], &floats[1], &floats[2]));
            if flat(s) || flat(t) || t[0] == t[1] || t[1] == t[2] || t[2] == t[0] {
                continue;
            }
            // A shared place must be a shared number, as in a welded mesh.
            let twin = |&i: &u32| s.iter().any(|&j| i != j && points[i as usize] == points[j as usize]);
            if t.iter().any(twin) {
                continue;
            }
            let want = by_points(&points, s, t);
            assert_eq!(pair(&floats, s, t), want, "{points:?} {t:?}");
            assert_eq!(pair(&floats, t, s), want, "{points:?} {t:?} swapped");
            *seen.entry((t.iter().filter(|i| s.contains(i)).count(), want == Pair::Crossing)).or_insert(0) +=
                1;
        }
        // All of: nothing, a corner, an edge shared; apart and crossing.
        assert!(
            (0..3).all(|k| [true, false].iter().all(|c| seen.get(&(k, *c)).is_some_and(|&n| n > 200))),
            "{seen:?}"
        );
    }
}
