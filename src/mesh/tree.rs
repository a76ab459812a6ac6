//! A box tree over the triangles of a mesh: nearest point, rays, pairs of boxes that meet.

use super::TriMesh;
use crate::geom::{Vec3, closest_point_on_triangle};
use rayon::prelude::*;

use super::tree_build::{HALVE_FROM, Item, Node, f32_above, f32_below, half_area, subtree};

/// Room for the stack of a walk: one entry a level, and the sibling.
const STACK: usize = HALVE_FROM + 40;

/// The nearest point of a mesh.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Hit {
    /// The triangle the point lies on.
    pub triangle: u32,
    /// The point, mm.
    pub point: Vec3,
    /// Its distance from the query, mm.
    pub distance: f64,
}

/// Where a ray meets a triangle, from whichever side.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct RayHit {
    /// The triangle.
    pub triangle: u32,
    /// The place is `origin + t * dir`.
    pub t: f64,
}

/// A bounding volume hierarchy over the triangles of a mesh. Owns a copy of the triangles.
///
/// Triangles with a coordinate that is not finite are left out: nothing finds them. The tree is the same
/// whatever the number of threads that built it.
///
/// # Source
/// Binned surface-area heuristic: I. Wald, "On fast Construction of SAH-based Bounding Volume Hierarchies",
/// 2007. Ray and triangle: S. Woop, C. Benthin, I. Wald, "Watertight Ray/Triangle Intersection", JCGT 2(1),
/// 2013, in f64 (a ray never slips between two triangles that share an edge).
pub struct Tree {
    nodes: Vec<Node>,
    triangles: Vec<[Vec3; 3]>,
    ids: Vec<u32>,
}

impl Tree {
    /// Builds the tree. `mesh` must have its indices in range; triangles with an index out of range are left out.
    #[must_use]
    pub fn build(mesh: &TriMesh) -> Self {
        let corners = |t: &[u32; 3]| -> Option<[Vec3; 3]> {
            let p = |k: usize| mesh.positions.get(t[k] as usize).copied();
            Some([p(0)?, p(1)?, p(2)?])
        };
        let mut items: Vec<Item> = mesh
            .triangles
            .par_iter()
            .zip(0_u32..u32::try_from(mesh.triangles.len()).unwrap_or(u32::MAX))
            .filter_map(|(t, id)| {
                let c = corners(t)?;
                if !c.iter().all(|p| p.iter().all(|x| x.is_finite())) {
                    return None;
                }
                let (lo, hi) = (c[0].inf(&c[1]).inf(&c[2]), c[0].sup(&c[1]).sup(&c[2]));
                Some(Item {
                    lo: [0, 1, 2].map(|k| f32_below(lo[k])),
                    hi: [0, 1, 2].map(|k| f32_above(hi[k])),
                    id,
                })
            })
            .collect();
        let mut nodes = Vec::new();
        if !items.is_empty() {
            nodes = subtree(&mut items, 0, 0);
        }
        let triangles =
            items.par_iter().map(|i| corners(&mesh.triangles[i.id as usize]).unwrap_or_default()).collect();
        Self { nodes, triangles, ids: items.iter().map(|i| i.id).collect() }
    }

    /// Whether the tree holds no triangle.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.ids.is_empty()
    }

    /// Finds the point of the mesh nearest to `p`; `None` when nothing is nearer than `max_mm`
    /// (give `f64::INFINITY` for no limit).
    #[must_use]
    pub fn closest(&self, p: &Vec3, max_mm: f64) -> Option<Hit> {
        self.closest_where(p, max_mm, |_, _| true)
    }

    /// Finds, among the triangles' nearest points that `accept` takes (triangle, its point nearest to `p`), the
    /// one nearest to `p`; `None` when none of them is nearer than `max_mm`. `accept` is asked only about
    /// points nearer than the best so far.
    #[must_use]
    pub fn closest_where(&self, p: &Vec3, max_mm: f64, accept: impl Fn(u32, &Vec3) -> bool) -> Option<Hit> {
        let mut best = Hit { triangle: u32::MAX, point: *p, distance: max_mm };
        let mut best2 = max_mm * max_mm;
        let mut stack = [(0_u32, 0.0_f64); STACK];
        let mut top = 0;
        if let Some(root) = self.nodes.first() {
            stack[0] = (0, distance2(root, p));
            top = 1;
        }
        while top > 0 {
            top -= 1;
            let (mut at, mut d2) = stack[top];
            while d2 < best2 {
                let node = &self.nodes[at as usize];
                if node.count > 0 {
                    for s in node.link as usize..(node.link + node.count) as usize {
                        let q = nearest_on(p, &self.triangles[s]);
                        let e2 = (q - p).norm_squared();
                        if e2 < best2 && accept(self.ids[s], &q) {
                            best2 = e2;
                            best = Hit { triangle: self.ids[s], point: q, distance: 0.0 };
                        }
                    }
                    break;
                }
                let (l, r) = (at + 1, at + node.link);
                let (dl, dr) = (distance2(&self.nodes[l as usize], p), distance2(&self.nodes[r as usize], p));
                let (near, far) = if dl <= dr { ((l, dl), (r, dr)) } else { ((r, dr), (l, dl)) };
                if far.1 < best2 {
                    stack[top] = far;
                    top += 1;
                }
                (at, d2) = near;
            }
        }
        (best.triangle != u32::MAX).then(|| Hit { distance: best2.sqrt(), ..best })
    }

    /// Finds the first place where the ray `origin + t * dir`, `t_min <= t <= t_max`, meets a triangle from
    /// either side. `dir` need not be a unit vector; `skip` says which triangles to look through. At equal `t` the
    /// triangle with the smallest number is taken.
    #[must_use]
    pub fn ray(
        &self,
        origin: &Vec3,
        dir: &Vec3,
        t_min: f64,
        t_max: f64,
        skip: impl Fn(u32) -> bool,
    ) -> Option<RayHit> {
        let mut best: Option<RayHit> = None;
        self.walk_ray(origin, dir, t_min, t_max, |hit| {
            if skip(hit.triangle) {
                return t_max;
            }
            if best.is_none_or(|b| hit.t < b.t || (hit.t <= b.t && hit.triangle < b.triangle)) {
                best = Some(hit);
            }
            hit.t
        });
        best
    }

    /// Finds every place where the ray `origin + t * dir`, `t_min <= t <= t_max`, meets a triangle, sorted by
    /// `t`, then by triangle. A ray through an edge or a corner meets each of the triangles there.
    #[must_use]
    pub fn ray_all(&self, origin: &Vec3, dir: &Vec3, t_min: f64, t_max: f64) -> Vec<RayHit> {
        let mut all = Vec::new();
        self.walk_ray(origin, dir, t_min, t_max, |hit| {
            all.push(hit);
            t_max
        });
        all.sort_unstable_by(|a, b| a.t.total_cmp(&b.t).then(a.triangle.cmp(&b.triangle)));
        all
    }

    /// Calls `visit` with every triangle in a leaf whose box the ray `origin + t * dir`, `t >= 0`, meets: all that the
    /// ray can meet and some more, for callers that decide each exactly.
    pub fn along(&self, origin: &Vec3, dir: &Vec3, mut visit: impl FnMut(u32)) {
        if self.nodes.is_empty() {
            return;
        }
        let ray = Ray::new(origin, dir);
        let mut stack = vec![0_u32];
        while let Some(at) = stack.pop() {
            let node = &self.nodes[at as usize];
            if ray.enter(node, 0.0, f64::INFINITY).is_none() {
                continue;
            }
            if node.count > 0 {
                self.ids[node.link as usize..(node.link + node.count) as usize]
                    .iter()
                    .for_each(|&t| visit(t));
            } else {
                stack.extend([at + node.link, at + 1]);
            }
        }
    }

    /// Calls `visit` with every pair of different triangles whose boxes meet (touching counts), each pair once
    /// with the smaller number first, and returns what was pushed, in an order that does not depend on the threads.
    #[must_use]
    pub fn overlapping_pairs<R: Send>(&self, visit: impl Fn(u32, u32, &mut Vec<R>) + Sync) -> Vec<R> {
        if self.nodes.is_empty() {
            return Vec::new();
        }
        // Open pairs of nodes in breadth until there are enough tasks, a number that is fixed.
        let mut tasks: Vec<(u32, u32)> = vec![(0, 0)];
        for _ in 0..14 {
            if tasks.len() >= 512 {
                break;
            }
            let mut next = Vec::with_capacity(2 * tasks.len());
            for &(a, b) in &tasks {
                self.open_pair(a, b, &mut next);
            }
            tasks = next;
        }
        let parts: Vec<Vec<R>> = tasks
            .par_iter()
            .map(|&task| {
                let (mut out, mut stack) = (Vec::new(), vec![task]);
                while let Some((a, b)) = stack.pop() {
                    let (na, nb) = (&self.nodes[a as usize], &self.nodes[b as usize]);
                    if na.count > 0 && nb.count > 0 {
                        self.leaf_pairs(a == b, na, nb, &visit, &mut out);
                    } else {
                        self.open_pair(a, b, &mut stack);
                    }
                }
                out
            })
            .collect();
        parts.into_iter().flatten().collect()
    }

    /// Pushes the pairs of children of (a, b) whose boxes meet; a pair of leaves is pushed as it is.
    fn open_pair(&self, a: u32, b: u32, out: &mut Vec<(u32, u32)>) {
        let (na, nb) = (&self.nodes[a as usize], &self.nodes[b as usize]);
        let mut push = |x: u32, y: u32| {
            if meet(&self.nodes[x as usize], &self.nodes[y as usize]) {
                out.push((x, y));
            }
        };
        if a == b {
            if na.count > 0 {
                push(a, a);
            } else {
                push(a + 1, a + 1);
                push(a + na.link, a + na.link);
                push(a + 1, a + na.link);
            }
        } else if nb.count > 0 && na.count > 0 {
            push(a, b);
        } else if nb.count > 0 || (na.count == 0 && half_area(&na.lo, &na.hi) >= half_area(&nb.lo, &nb.hi)) {
            push(a + 1, b);
            push(a + na.link, b);
        } else {
            push(a, b + 1);
            push(a, b + nb.link);
        }
    }

    fn leaf_pairs<R>(
        &self,
        same: bool,
        na: &Node,
        nb: &Node,
        visit: &impl Fn(u32, u32, &mut Vec<R>),
        out: &mut Vec<R>,
    ) {
        let range = |n: &Node| n.link as usize..(n.link + n.count) as usize;
        for s in range(na) {
            let (alo, ahi) = self.triangle_box(s);
            for u in range(nb) {
                if same && u <= s {
                    continue;
                }
                let (blo, bhi) = self.triangle_box(u);
                if (0..3).all(|k| alo[k] <= bhi[k] && blo[k] <= ahi[k]) {
                    let (i, j) = (self.ids[s], self.ids[u]);
                    visit(i.min(j), i.max(j), out);
                }
            }
        }
    }

    fn triangle_box(&self, slot: usize) -> (Vec3, Vec3) {
        let [a, b, c] = &self.triangles[slot];
        (a.inf(b).inf(c), a.sup(b).sup(c))
    }

    /// Walks along a ray; `found` returns the new greatest `t` of interest.
    fn walk_ray(
        &self,
        origin: &Vec3,
        dir: &Vec3,
        t_min: f64,
        t_max: f64,
        mut found: impl FnMut(RayHit) -> f64,
    ) {
        let length2 = dir.norm_squared();
        if self.nodes.is_empty() || length2.is_nan() || length2 <= 0.0 {
            return;
        }
        let ray = Ray::new(origin, dir);
        let mut limit = t_max;
        let mut stack = [0_u32; STACK];
        let mut top = 1;
        while top > 0 {
            top -= 1;
            let mut at = stack[top];
            if ray.enter(&self.nodes[at as usize], t_min, limit).is_none() {
                continue;
            }
            loop {
                let node = &self.nodes[at as usize];
                if node.count > 0 {
                    for s in node.link as usize..(node.link + node.count) as usize {
                        if let Some(t) = ray.meets(&self.triangles[s])
                            && t >= t_min
                            && t <= limit
                        {
                            limit = limit.min(found(RayHit { triangle: self.ids[s], t }));
                        }
                    }
                    break;
                }
                let (l, r) = (at + 1, at + node.link);
                let el = ray.enter(&self.nodes[l as usize], t_min, limit);
                let er = ray.enter(&self.nodes[r as usize], t_min, limit);
                match (el, er) {
                    (Some(tl), Some(tr)) => {
                        let (near, far) = if tl <= tr { (l, r) } else { (r, l) };
                        stack[top] = far;
                        top += 1;
                        at = near;
                    }
                    (Some(_), None) => at = l,
                    (None, Some(_)) => at = r,
                    (None, None) => break,
                }
            }
        }
    }
}

/// A ray prepared for boxes and for the shear of Woop et al.
struct Ray {
    origin: Vec3,
    inverse: [f64; 3],
    axes: [usize; 3],
    shear: [f64; 3],
}

impl Ray {
    fn new(origin: &Vec3, dir: &Vec3) -> Self {
        let kz = dir.iamax();
        let (mut kx, mut ky) = ((kz + 1) % 3, (kz + 2) % 3);
        if dir[kz] < 0.0 {
            (kx, ky) = (ky, kx);
        }
        Self {
            origin: *origin,
            inverse: [1.0 / dir[0], 1.0 / dir[1], 1.0 / dir[2]],
            axes: [kx, ky, kz],
            shear: [dir[kx] / dir[kz], dir[ky] / dir[kz], 1.0 / dir[kz]],
        }
    }

    /// Where the ray enters the box, if it does between `t_min` and `t_max`. Never misses by rounding.
    fn enter(&self, node: &Node, t_min: f64, t_max: f64) -> Option<f64> {
        let (mut near, mut far) = (t_min, t_max);
        for k in 0..3 {
            let (lo, hi) = (f64::from(node.lo[k]), f64::from(node.hi[k]));
            if self.inverse[k].is_infinite() {
                if self.origin[k] < lo || self.origin[k] > hi {
                    return None;
                }
                continue;
            }
            let (a, b) = ((lo - self.origin[k]) * self.inverse[k], (hi - self.origin[k]) * self.inverse[k]);
            // 45 units in the last place outward cover the rounding of both operations, and of `dir` itself.
            let (a, b) = (a.min(b), a.max(b));
            near = near.max(a - 1e-14 * a.abs());
            far = far.min(b + 1e-14 * b.abs());
        }
        (near <= far).then_some(near)
    }

    /// The parameter where the ray's line meets the triangle, edges and corners included.
    fn meets(&self, triangle: &[Vec3; 3]) -> Option<f64> {
        let [kx, ky, kz] = self.axes;
        let [sx, sy, sz] = self.shear;
        let local = |p: &Vec3| {
            let q = p - self.origin;
            (q[kx] - sx * q[kz], q[ky] - sy * q[kz], q[kz])
        };
        let (a, b, c) = (local(&triangle[0]), local(&triangle[1]), local(&triangle[2]));
        let u = c.0 * b.1 - c.1 * b.0;
        let v = a.0 * c.1 - a.1 * c.0;
        let w = b.0 * a.1 - b.1 * a.0;
        if (u < 0.0 || v < 0.0 || w < 0.0) && (u > 0.0 || v > 0.0 || w > 0.0) {
            return None;
        }
        let det = u + v + w;
        let t = sz * (u * a.2 + v * b.2 + w * c.2) / det;
        t.is_finite().then_some(t)
    }
}

/// The nearest point of a triangle, degenerate ones included.
fn nearest_on(p: &Vec3, [a, b, c]: &[Vec3; 3]) -> Vec3 {
    let q = closest_point_on_triangle(p, a, b, c).point;
    if q.iter().all(|x| x.is_finite()) {
        return q;
    }
    let on = |u: &Vec3, v: &Vec3| {
        let e = v - u;
        let s = (p - u).dot(&e) / e.norm_squared();
        if s.is_nan() { *u } else { u + e * s.clamp(0.0, 1.0) }
    };
    let mut best = on(a, b);
    for r in [on(b, c), on(c, a)] {
        if (r - p).norm_squared() < (best - p).norm_squared() {
            best = r;
        }
    }
    best
}

/// Squared distance from `p` to the box of `node`.
fn distance2(node: &Node, p: &Vec3) -> f64 {
    let mut s = 0.0;
    for k in 0..3 {
        let d = (f64::from(node.lo[k]) - p[k]).max(p[k] - f64::from(node.hi[k])).max(0.0);
        s += d * d;
    }
    s
}

fn meet(a: &Node, b: &Node) -> bool {
    (0..3).all(|k| a.lo[k] <= b.hi[k] && b.lo[k] <= a.hi[k])
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::mesh::shapes;
    use parry3d_f64::math::Vector as ParryVec;
    use parry3d_f64::query::{PointQuery, Ray as ParryRay, RayCast};
    use parry3d_f64::shape::TriMesh as ParryMesh;

    /// A small generator (Knuth's MMIX constants), so that the cases are the same each run.
    struct Cases(u64);

    impl Cases {
        fn unit(&mut self) -> f64 {
            self.0 = self.0.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
            f64::from(u32::try_from(self.0 >> 33).unwrap()) / f64::from(1_u32 << 31)
        }

        fn point(&mut self, half: f64) -> Vec3 {
            Vec3::new(self.unit() - 0.5, self.unit() - 0.5, self.unit() - 0.5) * (2.0 * half)
        }
    }

    fn test_mesh() -> TriMesh {
        shapes::joined(&[
            shapes::sphere_shell(20.0, 18.5, 4),
            shapes::turned(&shapes::torus(30.0, 6.0, 60, 30), Vec3::new(0.3, 1.0, 0.2)),
            shapes::cuboid(Vec3::repeat(-3.0), Vec3::new(4.0, 5.0, 6.0)),
        ])
    }

    fn parry(mesh: &TriMesh) -> ParryMesh {
        let points = mesh.positions.iter().map(|p| ParryVec::new(p.x, p.y, p.z)).collect();
        ParryMesh::new(points, mesh.triangles.clone()).unwrap()
    }

    #[test]
    fn nearest_points_agree_with_an_independent_library() {
        let m = test_mesh();
        let (tree, other) = (Tree::build(&m), parry(&m));
        let mut cases = Cases(1);
        for _ in 0..3000 {
            let p = cases.point(40.0);
            let hit = tree.closest(&p, f64::INFINITY).unwrap();
            let q = other.project_local_point(ParryVec::new(p.x, p.y, p.z), false).point;
            let d = (Vec3::new(q.x, q.y, q.z) - p).norm();
            assert!((hit.distance - d).abs() < 1e-12 * 100.0, "{p} {hit:?} {d}");
            assert!(((hit.point - p).norm() - hit.distance).abs() < 1e-12);
            assert!(tree.closest(&p, 0.999 * d).is_none());
            assert_eq!(tree.closest(&p, 1.001 * d), Some(hit));
        }
    }

    #[test]
    fn rays_agree_with_an_independent_library() {
        let m = test_mesh();
        let (tree, other) = (Tree::build(&m), parry(&m));
        let mut cases = Cases(2);
        let mut met = 0;
        for _ in 0..3000 {
            let (o, d) = (cases.point(40.0), cases.point(1.0));
            let mine = tree.ray(&o, &d, 0.0, 1e9, |_| false);
            let ray = ParryRay::new(ParryVec::new(o.x, o.y, o.z), ParryVec::new(d.x, d.y, d.z));
            let theirs = other.cast_local_ray(&ray, 1e9, false);
            assert_eq!(mine.is_some(), theirs.is_some(), "{o} {d}");
            if let (Some(a), Some(b)) = (mine, theirs) {
                assert!((a.t - b).abs() < 1e-9 * b.max(1.0), "{a:?} {b}");
                met += 1;
                let all = tree.ray_all(&o, &d, 0.0, 1e9);
                assert_eq!(all[0], a);
                let next = tree.ray(&o, &d, 0.0, 1e9, |t| t == a.triangle);
                assert_eq!(next, all.get(1).copied());
            }
        }
        assert!(met > 700, "{met}");
    }

    #[test]
    fn every_ray_through_a_closed_mesh_enters_as_often_as_it_leaves() {
        let m = test_mesh();
        let tree = Tree::build(&m);
        let mut cases = Cases(3);
        let shell = shapes::sphere_shell(20.0, 18.5, 4);
        for i in 0..2000 {
            let hits = tree.ray_all(&cases.point(100.0), &cases.point(1.0), f64::NEG_INFINITY, f64::INFINITY);
            assert_eq!(hits.len() % 2, 0);
            assert!(hits.is_sorted_by(|a, b| a.t <= b.t));
            // From inside, aimed at a vertex: no ray slips out between the triangles that meet there.
            let o = cases.point(2.0);
            let d = shell.positions[i % shell.positions.len()] - o;
            let hits = tree.ray_all(&o, &d, 0.0, f64::INFINITY);
            assert!(hits.iter().any(|h| (h.triangle as usize) < 20 * 256));
            assert!(hits.iter().any(|h| (20 * 256..2 * 20 * 256).contains(&(h.triangle as usize))));
        }
        // Straight down an axis, through corners of boxes of the tree.
        let down = tree.ray_all(&Vec3::new(0.5, 0.25, 99.0), &-Vec3::z(), 0.0, 1e9);
        assert_eq!(down.len(), 6);
    }

    #[test]
    fn pairs_of_boxes_are_those_of_the_plain_double_loop() {
        let m = shapes::joined(&[shapes::icosphere(3.0, 2), shapes::torus(3.0, 1.0, 16, 9)]);
        let tree = Tree::build(&m);
        let mut got = tree.overlapping_pairs(|a, b, out| out.push((a, b)));
        got.sort_unstable();
        let boxes: Vec<_> =
            (0..m.triangles.len()).map(|t| crate::geom::Aabb::around(&m.corners(t))).collect();
        let mut want = Vec::new();
        for i in 0..boxes.len() {
            for j in i + 1..boxes.len() {
                if (0..3).all(|k| boxes[i].min[k] <= boxes[j].max[k] && boxes[j].min[k] <= boxes[i].max[k]) {
                    want.push((u32::try_from(i).unwrap(), u32::try_from(j).unwrap()));
                }
            }
        }
        assert_eq!(got, want);
    }

    #[test]
    fn the_tree_and_its_walks_do_not_depend_on_the_number_of_threads() {
        let m = shapes::icosphere(30.0, 6);
        let in_pool = |n: usize| {
            let pool = rayon::ThreadPoolBuilder::new().num_threads(n).build().unwrap();
            pool.install(|| {
                let tree = Tree::build(&m);
                (tree.ids.clone(), tree.overlapping_pairs(|a, b, out| out.push((a, b))))
            })
        };
        assert_eq!(in_pool(1), in_pool(3));
    }

    #[test]
    fn broken_and_degenerate_input_is_survived() {
        let empty = Tree::build(&TriMesh::default());
        assert!(empty.is_empty());
        assert_eq!(empty.closest(&Vec3::zeros(), f64::INFINITY), None);
        assert_eq!(empty.ray(&Vec3::zeros(), &Vec3::x(), 0.0, 1.0, |_| false), None);
        assert!(empty.overlapping_pairs(|a, b, o| o.push((a, b))).is_empty());
        let mut m = shapes::cuboid(Vec3::zeros(), Vec3::repeat(1.0));
        m.positions.extend([Vec3::repeat(f64::NAN), Vec3::repeat(1e300), Vec3::repeat(9.0)]);
        m.triangles.extend([[0, 1, 8], [0, 1, 77], [0, 9, 9], [10, 10, 10], [0, 10, 10]]);
        let tree = Tree::build(&m);
        let hit = tree.closest(&Vec3::new(9.0, 9.0, 10.0), f64::INFINITY).unwrap();
        assert!((hit.distance - 1.0).abs() < 1e-12);
        assert_eq!(tree.closest(&Vec3::repeat(f64::NAN), f64::INFINITY), None);
        assert_eq!(tree.ray(&Vec3::zeros(), &Vec3::zeros(), 0.0, 1.0, |_| false), None);
        // Ten thousand equal triangles cannot be told apart by boxes, and need no deep tree.
        let same = shapes::from_triangles(vec![Vec3::zeros(), Vec3::x(), Vec3::y()], vec![[0, 1, 2]; 10_000]);
        assert!((Tree::build(&same).closest(&Vec3::z(), 2.0).unwrap().distance - 1.0).abs() < 1e-12);
    }
}
