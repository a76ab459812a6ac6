//! From sampled nodes to triangles.
//!
//! One vertex on each lattice edge whose ends differ, at the root of the field; one vertex inside a cell
//! where smooth pieces of the boundary meet in an edge or a corner; triangles from the loops of
//! [`super::cube`].
//!
//! Between two walls the edge often runs just beyond the last cell the nodes see, in a cell whose corners
//! are all alike. Then the inner vertex sits in that cell: the disc is a cone from a point inside the box
//! of the two cells over a curve on the box's boundary (the face between them carries no segment), so it is
//! embedded as before. A cell is lent to one neighbour only.
//!
//! Along such an edge, two neighbouring cells with inner vertices F and G share a segment pq on their
//! common face; the two triangles at pq are turned into the two at FG. This keeps the mesh embedded when
//! FG pierces the face: inside each cell the disc is still a cone from its inner point over a simple
//! closed curve, with the detour over the piercing point in place of pq. It is done only on faces with a
//! single segment and when the point is clearly inside the face.
//!
//! # Source
//! Feature points and edge flips: L. Kobbelt, M. Botsch, U. Schwanecke, H.-P. Seidel, "Feature Sensitive
//! Surface Extraction from Volume Data", SIGGRAPH 2001, sections 3 and 4; here the point is found on the
//! pieces of the field itself by Newton's method, and flips are allowed only where proved embedded.

use super::cube::{CORNERS, EDGES, Loop, ambiguous, loops};
use super::lattice::{BLOCK, Block, Lattice, State, node_index, padded_index};
use crate::field::LocalField;
use crate::geom::{Aabb, Vec3};
use crate::mesh::{Side, TriMesh};
use rayon::prelude::*;
use rustc_hash::FxHashSet;

/// Roots stay this share of an edge away from its ends, so that rounding cannot reach a node.
const EDGE_MARGIN: f64 = 2e-4;
/// A root is good when the field there is below this, mm.
const ROOT_MM: f64 = 2e-4;
/// Steps of the bracketed root search; bisection alone would then reach cell / 2^40.
const ROOT_STEPS: usize = 40;
/// Where a filled node meets thin air, the vertex sits this share of the edge from the filled node.
const FILLED_SHARE: f64 = 0.2;
/// A cell is cut by an edge of the boundary when two of its normals differ by more than this cosine (18 deg).
const EDGE_COSINE: f64 = 0.95;
/// Inner vertices stay this share of a cell away from its faces.
const INNER_MARGIN: f64 = 0.02;

/// A vertex on a lattice edge.
struct Crossing {
    position: [f32; 3],
    gradient: [f32; 3],
    piece: u32,
    side: Side,
}

/// A vertex inside a cell, or inside the cell it has borrowed.
#[derive(Clone, Copy)]
struct Inner {
    cell: u16,
    at: [f32; 3],
    /// The face across which the borrowed cell lies.
    borrowed: Option<u8>,
}

/// The vertices of one block.
struct BlockVertices {
    /// Bit 512 axis + node: the edge from that node along that axis is crossed.
    bits: [u64; 24],
    /// Number of crossings before each word.
    rank: [u16; 24],
    /// Global number of the first crossing.
    base: u32,
    crossings: Vec<Crossing>,
    /// Cells the surface passes, with their patterns, in order of the cell.
    cells: Vec<(u16, u8)>,
    /// Inner vertices by cell.
    inner: Vec<Inner>,
    inner_base: u32,
}

/// Meshes the lattice. Positions come out rounded to f32 and the mesh is closed and embedded as it is.
pub(super) fn extract(lattice: &Lattice<'_>) -> TriMesh {
    let mut blocks: Vec<BlockVertices> =
        lattice.blocks.par_iter().map(|b| block_vertices(lattice, b)).collect();
    let mut next = 0u32;
    for b in &mut blocks {
        b.base = next;
        next += u32::try_from(b.crossings.len()).unwrap_or(0);
    }
    let mut inner: Vec<Vec<Inner>> = (0..blocks.len())
        .into_par_iter()
        .map(|n| {
            let view = View { lattice, blocks: &blocks, n };
            view.inner_vertices()
        })
        .collect();
    lend_once(lattice, &mut inner);
    for (b, inner) in blocks.iter_mut().zip(inner) {
        b.inner_base = next;
        next += u32::try_from(inner.len()).unwrap_or(0);
        b.inner = inner;
    }
    let faces: Vec<Vec<([u32; 3], Side)>> = (0..blocks.len())
        .into_par_iter()
        .map(|n| {
            let view = View { lattice, blocks: &blocks, n };
            view.triangles()
        })
        .collect();
    let wide = |p: &[f32; 3]| Vec3::new(f64::from(p[0]), f64::from(p[1]), f64::from(p[2]));
    let mut mesh = TriMesh::default();
    mesh.positions.reserve_exact(next as usize);
    for b in &blocks {
        mesh.positions.extend(b.crossings.iter().map(|c| wide(&c.position)));
    }
    for b in &blocks {
        mesh.positions.extend(b.inner.iter().map(|i| wide(&i.at)));
    }
    drop(blocks);
    let count = faces.iter().map(Vec::len).sum();
    mesh.triangles.reserve_exact(count);
    mesh.sides.reserve_exact(count);
    for f in faces {
        mesh.triangles.extend(f.iter().map(|(t, _)| *t));
        mesh.sides.extend(f.iter().map(|(_, s)| *s));
    }
    mesh
}

/// Leaves out inner vertices whose borrowed cell another has borrowed before, in the order of the blocks.
fn lend_once(lattice: &Lattice<'_>, inner: &mut [Vec<Inner>]) {
    let mut lent = FxHashSet::default();
    for (block, list) in lattice.blocks.iter().zip(inner) {
        list.retain(|i| {
            i.borrowed
                .is_none_or(|face| lent.insert(add(block.at.map(|b| b * BLOCK), across(local(i.cell), face))))
        });
    }
}

/// The cell on the other side of a face.
fn across(l: [i32; 3], face: u8) -> [i32; 3] {
    let mut out = l;
    out[usize::from(face / 2)] += if face % 2 == 1 { 1 } else { -1 };
    out
}

fn block_vertices<'f>(lattice: &Lattice<'f>, block: &Block<'f>) -> BlockVertices {
    let mut out = BlockVertices {
        bits: [0; 24],
        rank: [0; 24],
        base: 0,
        crossings: Vec::new(),
        cells: Vec::new(),
        inner: Vec::new(),
        inner_base: 0,
    };
    let nodes = lattice.padded(block);
    let value = |l: [i32; 3]| nodes[padded_index(l)];
    let step = |l: [i32; 3], axis: usize| {
        let mut m = l;
        m[axis] += 1;
        m
    };
    for l in locals() {
        let pattern =
            (0u8..8).filter(|&c| value(add(l, CORNERS[usize::from(c)])) <= 0.0).fold(0u8, |p, c| p | 1 << c);
        if pattern != 0 && pattern != 255 {
            out.cells.push((small(node_index(l)), pattern));
        }
        for axis in 0..3 {
            if (value(l) > 0.0) != (value(step(l, axis)) > 0.0) {
                let bit = 512 * axis + node_index(l);
                out.bits[bit / 64] |= 1 << (bit % 64);
            }
        }
    }
    let mut total = 0u16;
    for w in 0..24 {
        out.rank[w] = total;
        total += small(out.bits[w].count_ones() as usize);
    }
    if total == 0 {
        return out;
    }
    // The field narrowed to each eighth of the block made when first needed.
    let corner = block.at.map(|b| b * BLOCK);
    let part = |near: &dyn LocalField<'f>, low: [i32; 3], n: i32| {
        let a = add(corner, low);
        near.narrowed(&Aabb { min: lattice.node(a), max: lattice.node(a.map(|c| c + n)) })
    };
    let mut eighths: [Option<Box<dyn LocalField<'f> + 'f>>; 8] = Default::default();
    for axis in 0..3 {
        for l in locals() {
            let bit = 512 * axis + node_index(l);
            if out.bits[bit / 64] >> (bit % 64) & 1 == 0 {
                continue;
            }
            let big = l.map(|c| c / 4);
            let near = eighths[(big[0] + 2 * big[1] + 4 * big[2]).unsigned_abs() as usize]
                .get_or_insert_with(|| part(block.near.as_ref(), big.map(|c| 4 * c), 4));
            let m = step(l, axis);
            let ends = [(l, value(l)), (m, value(m))];
            let [(inside, vi), (outside, vo)] = if ends[0].1 > 0.0 { [ends[1], ends[0]] } else { ends };
            let (p, q) = (lattice.node(add(corner, inside)), lattice.node(add(corner, outside)));
            out.crossings.push(crossing(near.as_ref(), &p, &q, [f64::from(vi), f64::from(vo)]));
        }
    }
    out
}

/// Finds the root of the field on the edge from `p` in the material to `q` in the air.
fn crossing(near: &dyn LocalField<'_>, p: &Vec3, q: &Vec3, values: [f64; 2]) -> Crossing {
    let edge = q - p;
    let (mut low, mut high) = (0.0, 1.0);
    let guess = values[0] / (values[0] - values[1]);
    let mut t: f64 = if guess.is_finite() { guess } else { 0.5 };
    t = t.clamp(EDGE_MARGIN, 1.0 - EDGE_MARGIN);
    let mut s = near.sample(&(p + edge * t));
    // A node of thin air that was filled: there is no root, the field is positive all along.
    let filled = s.value > 0.0 && values[0] < 0.0 && near.value(p) > 0.0;
    if filled {
        t = FILLED_SHARE;
        s = near.sample(&(p + edge * t));
    }
    for _ in 0..ROOT_STEPS {
        if filled || s.value.abs() < ROOT_MM {
            break;
        }
        if s.value > 0.0 {
            high = t;
        } else {
            low = t;
        }
        let newton = t - s.value / s.gradient.dot(&edge);
        t = if newton > low && newton < high { newton } else { 0.5 * (low + high) };
        if high - low < EDGE_MARGIN {
            break;
        }
        s = near.sample(&(p + edge * t));
    }
    let t = t.clamp(EDGE_MARGIN, 1.0 - EDGE_MARGIN);
    Crossing {
        position: narrow(&(p + edge * t)),
        gradient: narrow(&s.gradient),
        piece: s.piece,
        side: s.side,
    }
}

/// A block with its neighbours.
struct View<'v, 'f> {
    lattice: &'v Lattice<'f>,
    blocks: &'v [BlockVertices],
    n: usize,
}

impl<'v, 'f> View<'v, 'f> {
    fn block(&self) -> &'v Block<'f> {
        &self.lattice.blocks[self.n]
    }

    /// The vertices of the block that holds the local coordinates, and the coordinates within it.
    fn home(&self, l: [i32; 3]) -> Option<(&BlockVertices, [i32; 3])> {
        let d = l.map(|c| c.div_euclid(BLOCK));
        if d == [0; 3] {
            return Some((&self.blocks[self.n], l));
        }
        match self.lattice.state(add(self.block().at, d)) {
            State::Sampled(n) => Some((&self.blocks[n as usize], l.map(|c| c.rem_euclid(BLOCK)))),
            _ => None,
        }
    }

    /// The crossing on edge `e` of the cell at `l`: its global number and itself.
    fn crossing(&self, l: [i32; 3], e: u8) -> Option<(u32, &Crossing)> {
        let (b, l) = self.home(add(l, CORNERS[usize::from(EDGES[usize::from(e)][0])]))?;
        let bit = 512 * usize::from(e / 4) + node_index(l);
        let before = b.bits[bit / 64] & ((1 << (bit % 64)) - 1);
        let k = usize::from(b.rank[bit / 64]) + before.count_ones() as usize;
        Some((b.base + u32::try_from(k).ok()?, b.crossings.get(k)?))
    }

    /// The inner vertex of the cell at `l` and its number.
    fn inner(&self, l: [i32; 3]) -> Option<(u32, Inner)> {
        let (b, l) = self.home(l)?;
        let k = b.inner.binary_search_by_key(&small(node_index(l)), |i| i.cell).ok()?;
        Some((b.inner_base + u32::try_from(k).ok()?, b.inner[k]))
    }

    /// Whether the surface passes the cell at `l`.
    fn passed(&self, l: [i32; 3]) -> bool {
        self.home(l)
            .is_some_and(|(b, l)| b.cells.binary_search_by_key(&small(node_index(l)), |(c, _)| *c).is_ok())
    }

    fn around(&self, l: [i32; 3], lp: &Loop) -> Vec<(u32, &Crossing)> {
        lp.edges.iter().filter_map(|&e| self.crossing(l, e)).collect()
    }

    fn inner_vertices(&self) -> Vec<Inner> {
        let mut out = Vec::new();
        for &(cell, pattern) in &self.blocks[self.n].cells {
            let [only] = loops(pattern) else { continue };
            let l = local(cell);
            let ring = self.around(l, only);
            if let Some((at, borrowed)) = self.inner_vertex(l, &ring) {
                out.push(Inner { cell, at, borrowed });
            }
        }
        out
    }

    /// The point inside the cell, or just across one of its faces, where two or three pieces of the
    /// boundary meet, and that face.
    fn inner_vertex(&self, l: [i32; 3], ring: &[(u32, &Crossing)]) -> Option<([f32; 3], Option<u8>)> {
        let normals: Vec<Vec3> = ring.iter().map(|(_, c)| widen(&c.gradient)).collect();
        let mut apart = (EDGE_COSINE, 0, 0);
        for i in 0..normals.len() {
            for j in 0..i {
                let d = normals[i].dot(&normals[j]);
                if d < apart.0 {
                    apart = (d, i, j);
                }
            }
        }
        let (_, i, j) = apart;
        if i == j {
            return None;
        }
        let along = normals[i].cross(&normals[j]).try_normalize(1e-6)?;
        let third = (0..normals.len())
            .max_by(|&a, &b| normals[a].dot(&along).abs().total_cmp(&normals[b].dot(&along).abs()))?;
        let mut pieces = vec![ring[i].1.piece, ring[j].1.piece];
        if normals[third].dot(&along).abs() > 0.5 {
            pieces.push(ring[third].1.piece);
        }
        let mean = ring.iter().map(|(_, c)| widen(&c.position)).sum::<Vec3>() / real(ring.len());
        let low = self.lattice.node(add(self.block().at.map(|b| b * BLOCK), l));
        let h = self.lattice.cell;
        let found = meet(self.block().near.as_ref(), &pieces, mean, h).or_else(|| {
            pieces.truncate(2);
            meet(self.block().near.as_ref(), &pieces, mean, h)
        })?;
        let r = narrow(&found);
        let mut borrowed = None;
        for (face, k) in (0u8..).step_by(2).zip(0..3) {
            let x = (f64::from(r[k]) - low[k]) / h;
            let beyond = if x < 0.0 { Some((face, -x)) } else { (x > 1.0).then_some((face + 1, x - 1.0)) };
            let depth = match beyond {
                None => x.min(1.0 - x),
                Some((face, depth)) => {
                    if borrowed.replace(face).is_some() {
                        return None;
                    }
                    depth.min(1.0 - depth)
                }
            };
            if depth < INNER_MARGIN {
                return None;
            }
        }
        let free = borrowed.is_none_or(|face| !self.passed(across(l, face)));
        free.then_some((r, borrowed))
    }

    fn triangles(&self) -> Vec<([u32; 3], Side)> {
        let mut out = Vec::new();
        for &(cell, pattern) in &self.blocks[self.n].cells {
            let l = local(cell);
            for lp in loops(pattern) {
                let ring = self.around(l, lp);
                match self.inner(l) {
                    Some(centre) => self.cone(l, pattern, lp, &ring, centre, &mut out),
                    None => fan(lp, &ring, &mut out),
                }
            }
        }
        out
    }

    fn cone(
        &self,
        l: [i32; 3],
        pattern: u8,
        lp: &Loop,
        ring: &[(u32, &Crossing)],
        (f, inner): (u32, Inner),
        out: &mut Vec<([u32; 3], Side)>,
    ) {
        for k in 0..ring.len() {
            let (p, q) = (&ring[k], &ring[(k + 1) % ring.len()]);
            match self.flip(l, pattern, lp.faces[k], [p.1, q.1], &inner) {
                Some((g, true)) => {
                    out.push(([p.0, g, f], p.1.side));
                    out.push(([g, q.0, f], q.1.side));
                }
                Some((_, false)) => {}
                None => {
                    let side = nearest_side([&p.1.position, &q.1.position, &inner.at], &[p.1, q.1]);
                    out.push(([p.0, q.0, f], side));
                }
            }
        }
    }

    /// The inner vertex across the face when the two triangles at the segment are to be turned, and
    /// whether this cell is the one to draw them.
    fn flip(
        &self,
        l: [i32; 3],
        pattern: u8,
        face: u8,
        segment: [&Crossing; 2],
        here: &Inner,
    ) -> Option<(u32, bool)> {
        if ambiguous(pattern, face)
            || widen(&segment[0].gradient).dot(&widen(&segment[1].gradient)) > EDGE_COSINE
        {
            return None;
        }
        let (axis, upper) = (usize::from(face / 2), face % 2 == 1);
        let (g, there) = self.inner(across(l, face))?;
        let (below, above) = if upper { (here, &there) } else { (&there, here) };
        let mut base = l;
        base[axis] += i32::from(upper);
        let corner = self.lattice.node(add(self.block().at.map(|b| b * BLOCK), base));
        let (a, b) = (widen(&below.at), widen(&above.at));
        let s = (corner[axis] - a[axis]) / (b[axis] - a[axis]);
        let m = a + (b - a) * s;
        // The common face of the two boxes: longer when both have borrowed in the same direction.
        let both = here.borrowed.filter(|_| here.borrowed == there.borrowed);
        let inside = (0..3).filter(|&k| k != axis).all(|k| {
            let x = (m[k] - corner[k]) / self.lattice.cell;
            let low = if both.is_some_and(|f| usize::from(f) == 2 * k) { -1.0 } else { 0.0 };
            let high = if both.is_some_and(|f| usize::from(f) == 2 * k + 1) { 2.0 } else { 1.0 };
            x > low + INNER_MARGIN && x < high - INNER_MARGIN
        });
        inside.then_some((g, upper))
    }
}

/// Newton's method on the pieces, taking the shortest step to their tangent planes' common points.
fn meet(near: &dyn LocalField<'_>, pieces: &[u32], start: Vec3, cell: f64) -> Option<Vec3> {
    let mut x = start;
    for _ in 0..8 {
        let s: Vec<_> = pieces.iter().map(|&p| near.piece(p, &x)).collect();
        if s.iter().all(|s| s.value.abs() < ROOT_MM) {
            // A nearer third sheet would bury the point in material.
            return (near.value(&x) > -0.05 * cell).then_some(x);
        }
        let g = nalgebra::DMatrix::from_fn(s.len(), 3, |r, c| s[r].gradient[c]);
        let v = nalgebra::DVector::from_fn(s.len(), |r, _| -s[r].value);
        let gram = &g * g.transpose();
        if gram.determinant() < 1e-3 {
            return None;
        }
        let step = g.transpose() * gram.lu().solve(&v)?;
        x += Vec3::new(step[0], step[1], step[2]);
        if (x - start).norm() > 2.0 * cell {
            return None;
        }
    }
    None
}

/// A fan over the loop from the apex with the shortest diagonals.
fn fan(lp: &Loop, ring: &[(u32, &Crossing)], out: &mut Vec<([u32; 3], Side)>) {
    let n = ring.len();
    let cost = |a: usize| {
        let p = widen(&ring[a].1.position);
        ring.iter().map(|(_, c)| (widen(&c.position) - p).norm_squared()).sum::<f64>()
    };
    let apex = match n {
        3 => 0,
        _ => lp
            .apexes
            .iter()
            .map(|&a| usize::from(a))
            .min_by(|&a, &b| cost(a).total_cmp(&cost(b)))
            .unwrap_or(0),
    };
    for k in 1..n - 1 {
        let [p, q, r] = [&ring[apex], &ring[(apex + k) % n], &ring[(apex + k + 1) % n]];
        let at = [&p.1.position, &q.1.position, &r.1.position];
        out.push(([p.0, q.0, r.0], nearest_side(at, &[p.1, q.1, r.1])));
    }
}

/// The side whose normal at a corner agrees best with the triangle's.
fn nearest_side(at: [&[f32; 3]; 3], corners: &[&Crossing]) -> Side {
    if corners.iter().all(|c| c.side == corners[0].side) {
        return corners[0].side;
    }
    let [a, b, c] = at.map(widen);
    let n = (b - a).cross(&(c - a));
    let fit = |c: &&&Crossing| n.dot(&widen(&c.gradient));
    corners.iter().max_by(|a, b| fit(a).total_cmp(&fit(b))).map_or(Side::Fixture, |c| c.side)
}

fn add(a: [i32; 3], b: [i32; 3]) -> [i32; 3] {
    [a[0] + b[0], a[1] + b[1], a[2] + b[2]]
}

/// Local coordinates of the owned nodes of a block in the order of their index.
fn locals() -> impl Iterator<Item = [i32; 3]> {
    (0..BLOCK * BLOCK * BLOCK).map(|i| [i % BLOCK, i / BLOCK % BLOCK, i / (BLOCK * BLOCK)])
}

fn local(cell: u16) -> [i32; 3] {
    let i = i32::from(cell);
    [i % BLOCK, i / BLOCK % BLOCK, i / (BLOCK * BLOCK)]
}

#[expect(clippy::cast_possible_truncation, reason = "counts within a block stay below 1536")]
fn small(n: usize) -> u16 {
    n as u16
}

#[expect(clippy::cast_precision_loss, reason = "a loop has at most 12 vertices")]
fn real(n: usize) -> f64 {
    n as f64
}

#[expect(clippy::cast_possible_truncation, reason = "what is written is single precision")]
fn narrow(p: &Vec3) -> [f32; 3] {
    [p.x as f32 + 0.0, p.y as f32 + 0.0, p.z as f32 + 0.0]
}

fn widen(p: &[f32; 3]) -> Vec3 {
    Vec3::new(f64::from(p[0]), f64::from(p[1]), f64::from(p[2]))
}
