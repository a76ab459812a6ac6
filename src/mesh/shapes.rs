//! Plain shapes with answers known in closed form, and ways to move, turn and join meshes.
//!
//! Every closed shape is outward oriented and belongs to [`Side::Fixture`].

use super::{Side, TriMesh};
use crate::geom::Vec3;
use std::f64::consts::TAU;

/// A mesh of the given triangles, all of side [`Side::Fixture`].
#[must_use]
pub fn from_triangles(positions: Vec<Vec3>, triangles: Vec<[u32; 3]>) -> TriMesh {
    let sides = vec![Side::Fixture; triangles.len()];
    TriMesh { positions, triangles, sides }
}

/// A corner cut off a cube, `l` mm along each axis: volume l^3 / 6, area (3 + sqrt 3) l^2 / 2.
#[must_use]
pub fn corner(l: f64) -> TriMesh {
    tetrahedron(Vec3::zeros(), Vec3::x() * l, Vec3::y() * l, Vec3::z() * l)
}

/// The tetrahedron `abcd`: positive volume when (b - a) x (c - a) . (d - a) > 0.
#[must_use]
pub fn tetrahedron(a: Vec3, b: Vec3, c: Vec3, d: Vec3) -> TriMesh {
    from_triangles(vec![a, b, c, d], vec![[0, 2, 1], [0, 1, 3], [1, 2, 3], [2, 0, 3]])
}

/// The box between two opposite corners, 12 triangles.
#[must_use]
pub fn cuboid(min: Vec3, max: Vec3) -> TriMesh {
    let positions = (0..8)
        .map(|i| {
            let pick = |k: usize| if i >> k & 1 == 0 { min[k] } else { max[k] };
            Vec3::new(pick(0), pick(1), pick(2))
        })
        .collect();
    let quads = [[0, 4, 6, 2], [1, 3, 7, 5], [0, 1, 5, 4], [2, 6, 7, 3], [0, 2, 3, 1], [4, 5, 7, 6]];
    let triangles = quads.iter().flat_map(|&[a, b, c, d]| [[a, b, c], [a, c, d]]).collect();
    from_triangles(positions, triangles)
}

/// A sphere about the origin: the icosahedron with every triangle divided in four `level` times.
/// 20 * 4^level triangles, all vertices at `radius` mm; `level` is cut at 10.
#[must_use]
pub fn icosphere(radius: f64, level: u32) -> TriMesh {
    let g = f64::midpoint(1.0, 5.0_f64.sqrt());
    let mut unit: Vec<Vec3> = Vec::new();
    for (s, t) in [(-1.0, 1.0), (1.0, 1.0), (-1.0, -1.0), (1.0, -1.0)] {
        unit.push(Vec3::new(s, t * g, 0.0).normalize());
    }
    for (s, t) in [(-1.0, 1.0), (1.0, 1.0), (-1.0, -1.0), (1.0, -1.0)] {
        unit.push(Vec3::new(0.0, s, t * g).normalize());
    }
    for (s, t) in [(-1.0, 1.0), (1.0, 1.0), (-1.0, -1.0), (1.0, -1.0)] {
        unit.push(Vec3::new(t * g, 0.0, s).normalize());
    }
    let mut triangles: Vec<[u32; 3]> = vec![
        [0, 11, 5],
        [0, 5, 1],
        [0, 1, 7],
        [0, 7, 10],
        [0, 10, 11],
        [1, 5, 9],
        [5, 11, 4],
        [11, 10, 2],
        [10, 7, 6],
        [7, 1, 8],
        [3, 9, 4],
        [3, 4, 2],
        [3, 2, 6],
        [3, 6, 8],
        [3, 8, 9],
        [4, 9, 5],
        [2, 4, 11],
        [6, 2, 10],
        [8, 6, 7],
        [9, 8, 1],
    ];
    for _ in 0..level.min(10) {
        let mut middle = rustc_hash::FxHashMap::default();
        let mut next = Vec::with_capacity(4 * triangles.len());
        for &[a, b, c] in &triangles {
            let mut mid = |i: u32, j: u32| -> u32 {
                *middle.entry((i.min(j), i.max(j))).or_insert_with(|| {
                    unit.push((unit[i as usize] + unit[j as usize]).normalize());
                    number(unit.len() - 1)
                })
            };
            let (ab, bc, ca) = (mid(a, b), mid(b, c), mid(c, a));
            next.extend([[a, ab, ca], [b, bc, ab], [c, ca, bc], [ab, bc, ca]]);
        }
        triangles = next;
    }
    from_triangles(unit.into_iter().map(|p| p * radius).collect(), triangles)
}

/// A torus about the z axis, `major` mm from the axis to the middle of the tube, `minor` mm the tube's radius,
/// `n` points around the axis and `m` around the tube (both at least 3). Volume of the smooth one:
/// 2 pi^2 R r^2; of this one: 2 pi^2 R r^2 times sinc-like factors, see the test.
#[must_use]
pub fn torus(major: f64, minor: f64, n: u32, m: u32) -> TriMesh {
    let (n, m) = (n.max(3), m.max(3));
    let mut positions = Vec::new();
    let mut triangles = Vec::new();
    for i in 0..n {
        let (su, cu) = (TAU * f64::from(i) / f64::from(n)).sin_cos();
        for j in 0..m {
            let (sv, cv) = (TAU * f64::from(j) / f64::from(m)).sin_cos();
            let r = major + minor * cv;
            positions.push(Vec3::new(r * cu, r * su, minor * sv));
            let at = |i: u32, j: u32| (i % n) * m + j % m;
            let (a, b, c, d) = (at(i, j), at(i + 1, j), at(i + 1, j + 1), at(i, j + 1));
            triangles.extend([[a, b, c], [a, c, d]]);
        }
    }
    from_triangles(positions, triangles)
}

/// A cone standing on its tip at the origin, axis +z, flat lid at z = `height`, a regular polygon of `n` corners at
/// `radius` mm: volume n sin(2 pi / n) r^2 h / 6.
#[must_use]
pub fn cone_on_tip(radius: f64, height: f64, n: u32) -> TriMesh {
    let n = n.max(3);
    let mut positions = vec![Vec3::zeros(), Vec3::z() * height];
    positions.extend(ring(radius, height, n));
    let triangles = (0..n).flat_map(|i| {
        let (a, b) = (2 + i, 2 + (i + 1) % n);
        [[0, b, a], [1, a, b]]
    });
    let triangles = triangles.collect();
    from_triangles(positions, triangles)
}

/// A prism over a regular polygon of `n` corners at `radius` mm, from z = 0 to `height`:
/// volume n sin(2 pi / n) r^2 h / 2.
#[must_use]
pub fn prism(radius: f64, height: f64, n: u32) -> TriMesh {
    let n = n.max(3);
    let mut positions = vec![Vec3::zeros(), Vec3::z() * height];
    positions.extend(ring(radius, 0.0, n));
    positions.extend(ring(radius, height, n));
    let triangles = (0..n).flat_map(|i| {
        let j = (i + 1) % n;
        let (a, b, c, d) = (2 + i, 2 + j, 2 + n + j, 2 + n + i);
        [[0, b, a], [1, d, c], [a, b, c], [a, c, d]]
    });
    let triangles = triangles.collect();
    from_triangles(positions, triangles)
}

/// An OPEN flat rectangle in z = 0 with a corner at the origin, `n` by `n` squares, normal +z.
#[must_use]
pub fn sheet(width: f64, depth: f64, n: u32) -> TriMesh {
    let n = n.max(1);
    let mut positions = Vec::new();
    let mut triangles = Vec::new();
    for j in 0..=n {
        for i in 0..=n {
            let at = |k: u32, l: f64| l * f64::from(k) / f64::from(n);
            positions.push(Vec3::new(at(i, width), at(j, depth), 0.0));
            if i < n && j < n {
                let a = j * (n + 1) + i;
                triangles.extend([[a, a + 1, a + n + 2], [a, a + n + 2, a + n + 1]]);
            }
        }
    }
    from_triangles(positions, triangles)
}

/// The same mesh with every position replaced by `f` of it.
#[must_use]
pub fn mapped(mesh: &TriMesh, f: impl Fn(&Vec3) -> Vec3) -> TriMesh {
    TriMesh { positions: mesh.positions.iter().map(f).collect(), ..mesh.clone() }
}

/// The same mesh moved by `shift` mm.
#[must_use]
pub fn moved(mesh: &TriMesh, shift: Vec3) -> TriMesh {
    mapped(mesh, |p| p + shift)
}

/// The same mesh turned about the origin by the vector `axis_angle` (its length is the angle in radians).
#[must_use]
pub fn turned(mesh: &TriMesh, axis_angle: Vec3) -> TriMesh {
    let r = nalgebra::Rotation3::new(axis_angle);
    mapped(mesh, |p| r * p)
}

/// The same mesh turned inside out: every triangle runs the other way.
#[must_use]
pub fn flipped(mesh: &TriMesh) -> TriMesh {
    TriMesh { triangles: mesh.triangles.iter().map(|&[a, b, c]| [a, c, b]).collect(), ..mesh.clone() }
}

/// The same mesh with all triangles on one side.
#[must_use]
pub fn on_side(mesh: &TriMesh, side: Side) -> TriMesh {
    TriMesh { sides: vec![side; mesh.triangles.len()], ..mesh.clone() }
}

/// The meshes side by side in one, nothing welded.
#[must_use]
pub fn joined(meshes: &[TriMesh]) -> TriMesh {
    let mut out = TriMesh::default();
    for m in meshes {
        let base = number(out.positions.len());
        out.positions.extend_from_slice(&m.positions);
        out.triangles.extend(m.triangles.iter().map(|t| t.map(|i| i + base)));
        out.sides.extend_from_slice(&m.sides);
    }
    out
}

/// A sphere shell about the origin: outside at `outer` mm on side A, chamber at `inner` mm on side B.
#[must_use]
pub fn sphere_shell(outer: f64, inner: f64, level: u32) -> TriMesh {
    joined(&[
        on_side(&icosphere(outer, level), Side::A),
        on_side(&flipped(&icosphere(inner, level)), Side::B),
    ])
}

fn ring(radius: f64, z: f64, n: u32) -> impl Iterator<Item = Vec3> {
    (0..n).map(move |i| {
        let (s, c) = (TAU * f64::from(i) / f64::from(n)).sin_cos();
        Vec3::new(radius * c, radius * s, z)
    })
}

fn number(n: usize) -> u32 {
    u32::try_from(n).unwrap_or(u32::MAX)
}
