//! Keeps grid noise out of the narrow wedges where two sheets of wall meet.
//!
//! A layer of air between two walls is seen by the nodes without holes when it is sqrt(3) cells thick, the
//! thickness of a digital plane whose nodes are joined through faces. Where it is thinner, single nodes
//! of it stand out as bubbles and their chains as handles: topology of the grid, not of the solid. So the
//! air is grown again, from where it is thick into where it is thin, and a thin node joins only when that
//! changes nothing in the topology but, at most, joins two separate regions of air that really touch.
//! Nodes left over become material. No bubble and no handle can appear in the thin parts; what is lost is
//! some air thinner than about a cell, and it is counted.
//!
//! # Source
//! Simple points by counting components in the 26-neighbourhood: G. Bertrand, G. Malandain, "A new
//! characterization of three-dimensional simple points", Pattern Recognition Letters 15, 1994, for air
//! joined through faces and material joined through faces and edges, which is how [`super::cube`] reads
//! a face. Thickness of digital planes: É. Andres, R. Acharya, C. Sibata, "Discrete analytical hyperplanes",
//! Graphical Models and Image Processing 59, 1997. Growth in the order of the distance: homotopic region growing, e.g. J.-F. Mangin et al.,
//! J. Math. Imaging Vision 5, 1995.

use super::lattice::{BLOCK, Block, Lattice, NODES, State, node_index, padded_index, signed_f32};
use rayon::prelude::*;
use rustc_hash::FxHashMap;
use std::collections::BinaryHeap;

/// Air deeper than this many cells is thick: half of sqrt(3).
const THICK: f32 = 0.87;
/// A node is safe when the next node along some axis is deeper by this many cells (a flat wall gives 0.577).
const STEEP: f32 = 0.4;
/// A region of air may be born in the thin part when it is deeper than this many cells.
const BIRTH: f32 = 0.5;

/// What became of the thin air.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub(super) struct Filled {
    /// Nodes of air that became material.
    pub(super) nodes: usize,
    /// The deepest of them: how far above the surface, mm.
    pub(super) deepest_mm: f32,
}

const AXES: [[i32; 3]; 6] = [[1, 0, 0], [-1, 0, 0], [0, 1, 0], [0, -1, 0], [0, 0, 1], [0, 0, -1]];

fn plus(a: [i32; 3], b: [i32; 3]) -> [i32; 3] {
    [a[0] + b[0], a[1] + b[1], a[2] + b[2]]
}

/// Turns thin air that would only make noise into material: its values are negated.
pub(super) fn fill_thin_air(lattice: &mut Lattice<'_>) -> Filled {
    let mut air = Air::new(lattice);
    if air.weak.is_empty() {
        return Filled::default();
    }
    air.grow();
    let mut left: Vec<[i32; 3]> =
        air.weak.iter().filter(|(_, w)| w.joined.is_none()).map(|(&at, _)| at).collect();
    left.sort_unstable();
    let mut filled = Filled { nodes: left.len(), deepest_mm: 0.0 };
    for at in left {
        let (block, index) = locate(lattice, at);
        if let Some(block) = block {
            let v = &mut lattice.blocks[block].values[index];
            filled.deepest_mm = filled.deepest_mm.max(*v);
            *v = signed_f32(-f64::from(*v));
        }
    }
    filled
}

fn locate(lattice: &Lattice<'_>, at: [i32; 3]) -> (Option<usize>, usize) {
    let block = at.map(|c| c.div_euclid(BLOCK));
    let index = node_index(at.map(|c| c.rem_euclid(BLOCK)));
    match lattice.state(block) {
        State::Sampled(n) => (Some(n as usize), index),
        _ => (None, index),
    }
}

/// A thin node of air.
#[derive(Clone, Copy)]
struct Weak {
    value: f32,
    /// Its number in the union of regions, once it has joined.
    joined: Option<u32>,
}

struct Air<'l, 'f> {
    lattice: &'l Lattice<'f>,
    weak: FxHashMap<[i32; 3], Weak>,
    /// Region of each owned node of each block, 0 for none, counted within the block.
    labels: Vec<[u8; NODES]>,
    /// First region number of each block.
    base: Vec<u32>,
    /// Region number of unsampled air.
    outside: FxHashMap<[i32; 3], u32>,
    regions: Regions,
}

/// Disjoint sets.
#[derive(Default)]
struct Regions(Vec<u32>);

impl Regions {
    fn add(&mut self) -> u32 {
        let n = u32::try_from(self.0.len()).unwrap_or(u32::MAX);
        self.0.push(n);
        n
    }

    fn root(&mut self, mut a: u32) -> u32 {
        while self.0[a as usize] != a {
            self.0[a as usize] = self.0[self.0[a as usize] as usize];
            a = self.0[a as usize];
        }
        a
    }

    fn join(&mut self, a: u32, b: u32) {
        let (a, b) = (self.root(a), self.root(b));
        self.0[a.max(b) as usize] = a.min(b);
    }
}

impl<'l, 'f> Air<'l, 'f> {
    fn new(lattice: &'l Lattice<'f>) -> Self {
        let mut air = Self {
            lattice,
            weak: FxHashMap::default(),
            labels: Vec::new(),
            base: Vec::new(),
            outside: FxHashMap::default(),
            regions: Regions::default(),
        };
        air.find_weak();
        if !air.weak.is_empty() {
            air.label();
        }
        air
    }

    fn value(&self, at: [i32; 3]) -> f32 {
        let block = at.map(|c| c.div_euclid(BLOCK));
        match self.lattice.state(block) {
            State::Air => f32::INFINITY,
            State::Material => f32::NEG_INFINITY,
            State::Sampled(n) => {
                self.lattice.blocks[n as usize].values[node_index(at.map(|c| c.rem_euclid(BLOCK)))]
            }
        }
    }

    #[expect(clippy::cast_possible_truncation, reason = "a threshold, not a coordinate")]
    fn cell(&self) -> f32 {
        self.lattice.cell as f32
    }

    /// Nodes in a thin gap, or thin and without a deeper neighbour for another reason; then those whose
    /// only deeper neighbours are among them.
    fn find_weak(&mut self) {
        let cell = self.cell();
        let found: Vec<Vec<([i32; 3], f32)>> =
            self.lattice.blocks.par_iter().map(|b| weak_nodes(self.lattice, b, cell)).collect();
        let mut queue: Vec<([i32; 3], f32)> = found.into_iter().flatten().collect();
        self.weak.extend(queue.iter().map(|&(at, value)| (at, Weak { value, joined: None })));
        while let Some((at, _)) = queue.pop() {
            for step in AXES {
                let n = plus(at, step);
                let v = self.value(n);
                if v <= 0.0 || v >= THICK * cell || self.weak.contains_key(&n) {
                    continue;
                }
                let safe = AXES.iter().any(|&s| {
                    let m = plus(n, s);
                    self.value(m) - v >= STEEP * cell && !self.weak.contains_key(&m)
                });
                if !safe {
                    self.weak.insert(n, Weak { value: v, joined: None });
                    queue.push((n, v));
                }
            }
        }
    }

    /// Numbers the regions of the air that is not thin.
    fn label(&mut self) {
        let lattice = self.lattice;
        let weak = &self.weak;
        let labelled: Vec<([u8; NODES], u8)> =
            lattice.blocks.par_iter().map(|b| label_block(b, weak)).collect();
        for (labels, count) in labelled {
            let base = self.regions.0.len();
            self.base.push(u32::try_from(base).unwrap_or(u32::MAX));
            (0..count).for_each(|_| {
                self.regions.add();
            });
            self.labels.push(labels);
        }
        for (at, state) in lattice.states() {
            if state == State::Air {
                let n = self.regions.add();
                self.outside.insert(at, n);
            }
        }
        // Everything beyond the lattice is one region with the air blocks at its border.
        let border = self.regions.add();
        for (at, state) in lattice.states() {
            for axis in 0..3 {
                let mut next = at;
                next[axis] += 1;
                if state == State::Air {
                    let at_border = (0..3).any(|k| {
                        at[k] == lattice.first[k] || at[k] + 1 == lattice.first[k] + lattice.dims[k]
                    });
                    if at_border {
                        self.regions.join(self.outside[&at], border);
                    }
                }
                self.join_blocks(at, next, axis, border);
            }
        }
    }

    /// Joins the regions of two neighbouring blocks across the face between them.
    fn join_blocks(&mut self, a: [i32; 3], b: [i32; 3], axis: usize, border: u32) {
        let (sa, sb) = (self.lattice.state(a), self.lattice.state(b));
        if sa == State::Material || sb == State::Material {
            return;
        }
        for u in 0..BLOCK {
            for v in 0..BLOCK {
                let mut la = [u, u, u];
                la[(axis + 1) % 3] = v;
                la[(axis + 2) % 3] = u;
                la[axis] = BLOCK - 1;
                let mut lb = la;
                lb[axis] = 0;
                let ra = self.region_of(a, sa, la, border);
                let rb = self.region_of(b, sb, lb, border);
                if let (Some(ra), Some(rb)) = (ra, rb) {
                    self.regions.join(ra, rb);
                }
                if matches!((sa, sb), (State::Air, State::Air)) {
                    return;
                }
            }
        }
    }

    fn region_of(&self, block: [i32; 3], state: State, local: [i32; 3], border: u32) -> Option<u32> {
        match state {
            State::Air => Some(self.outside.get(&block).copied().unwrap_or(border)),
            State::Material => None,
            State::Sampled(n) => {
                let label = self.labels[n as usize][node_index(local)];
                (label > 0).then(|| self.base[n as usize] + u32::from(label) - 1)
            }
        }
    }

    /// The region of an accepted node of air; `None` for material and for thin air that has not joined.
    fn region(&self, at: [i32; 3]) -> Option<u32> {
        if let Some(w) = self.weak.get(&at) {
            return w.joined;
        }
        let block = at.map(|c| c.div_euclid(BLOCK));
        self.region_of(block, self.lattice.state(block), at.map(|c| c.rem_euclid(BLOCK)), 0)
    }

    fn grow(&mut self) {
        // Deepest first; ties by place, so that the order never depends on a hash.
        let mut queue: BinaryHeap<(u32, [i32; 3])> =
            self.weak.iter().map(|(&at, w)| (w.value.to_bits(), at)).collect();
        while let Some((_, at)) = queue.pop() {
            let Some(&Weak { value, joined: None }) = self.weak.get(&at) else { continue };
            let Some(touching) = self.may_join(at, value) else { continue };
            let me = self.regions.add();
            touching.iter().for_each(|&r| self.regions.join(me, r));
            self.weak.insert(at, Weak { value, joined: Some(me) });
            for z in -1..=1 {
                for y in -1..=1 {
                    for x in -1..=1 {
                        let n = plus(at, [x, y, z]);
                        if let Some(w) = self.weak.get(&n)
                            && w.joined.is_none()
                        {
                            queue.push((w.value.to_bits(), n));
                        }
                    }
                }
            }
        }
    }

    /// The regions a thin node would join, or `None` when joining would make a bubble or a handle.
    fn may_join(&mut self, at: [i32; 3], value: f32) -> Option<Vec<u32>> {
        let mut region = [None; 27];
        for (n, r) in region.iter_mut().enumerate().filter(|&(n, _)| n != 13) {
            *r = self.region(plus(at, offset(n)));
        }
        let around = Neighbourhood::of(std::array::from_fn(|n| region[n].is_some()));
        let mut touching: Vec<u32> =
            around.air.iter().filter_map(|&n| region[n]).map(|r| self.regions.root(r)).collect();
        let parts = touching.len();
        touching.sort_unstable();
        touching.dedup();
        match (parts, around.material_parts) {
            (0, _) => (value >= BIRTH * self.cell()).then_some(touching),
            (_, 0 | 1) if touching.len() == parts => Some(touching),
            _ => None,
        }
    }
}

fn weak_nodes(lattice: &Lattice<'_>, block: &Block<'_>, cell: f32) -> Vec<([i32; 3], f32)> {
    if !block.values.iter().any(|&v| v > 0.0 && v < THICK * cell) {
        return Vec::new();
    }
    let padded = lattice.padded(block);
    let mut out = Vec::new();
    for z in 0..BLOCK {
        for y in 0..BLOCK {
            for x in 0..BLOCK {
                let v = block.values[node_index([x, y, z])];
                let deeper = |s: [i32; 3]| padded[padded_index(plus([x, y, z], s))] - v >= STEEP * cell;
                if v > 0.0 && v < THICK * cell && !AXES.iter().any(|&s| deeper(s)) {
                    let at = plus(block.at.map(|b| b * BLOCK), [x, y, z]);
                    let p = lattice.node(at);
                    let s = block.near.sample(&p);
                    let facing = block.near.facing(&p, &s.gradient);
                    // Two walls face each other here and leave enough air: the nodes see it as it is.
                    if facing.is_finite() && s.value + facing >= f64::from(2.0 * THICK * cell) {
                        continue;
                    }
                    out.push((at, v));
                }
            }
        }
    }
    out
}

fn label_block(block: &Block<'_>, weak: &FxHashMap<[i32; 3], Weak>) -> ([u8; NODES], u8) {
    let origin = block.at.map(|b| b * BLOCK);
    let mut labels = [0u8; NODES];
    let mut count = 0u8;
    let mut stack = Vec::new();
    let open = |l: [i32; 3]| block.values[node_index(l)] > 0.0 && !weak.contains_key(&plus(origin, l));
    for start in 0..BLOCK * BLOCK * BLOCK {
        let l = [start % BLOCK, start / BLOCK % BLOCK, start / (BLOCK * BLOCK)];
        if labels[node_index(l)] != 0 || !open(l) || count == u8::MAX {
            continue;
        }
        count += 1;
        labels[node_index(l)] = count;
        stack.push(l);
        while let Some(l) = stack.pop() {
            for s in AXES {
                let n = plus(l, s);
                if n.iter().all(|c| (0..BLOCK).contains(c)) && labels[node_index(n)] == 0 && open(n) {
                    labels[node_index(n)] = count;
                    stack.push(n);
                }
            }
        }
    }
    (labels, count)
}

/// Offset of the neighbour numbered x + 1 + 3 (y + 1) + 9 (z + 1).
#[expect(clippy::cast_possible_truncation, clippy::cast_possible_wrap, reason = "n is below 27")]
fn offset(n: usize) -> [i32; 3] {
    let n = n as i32;
    [n % 3 - 1, n / 3 % 3 - 1, n / 9 - 1]
}

/// What the 26 neighbours of a node look like.
struct Neighbourhood {
    /// One face neighbour out of each region of air (joined through faces) that touches the node's faces.
    air: Vec<usize>,
    /// Parts of material (joined through faces and edges) that touch the node through faces or edges.
    material_parts: usize,
}

impl Neighbourhood {
    fn of(air: [bool; 27]) -> Self {
        let length = |a: usize, b: usize| {
            let (p, q) = (offset(a), offset(b));
            (0..3).map(|k| (p[k] - q[k]).abs()).sum::<i32>()
        };
        let close = |a: usize, b: usize| {
            let (p, q) = (offset(a), offset(b));
            (0..3).all(|k| (p[k] - q[k]).abs() <= 1)
        };
        // An edge neighbour counts as air only beside a face neighbour of air: farther round the paths
        // would leave the cells that the node takes part in (the geodesic neighbourhood of the source).
        let faces = [4, 10, 12, 14, 16, 22];
        let counts = |n: usize, wanted: bool| {
            air[n] == wanted
                && (!wanted || length(n, 13) != 2 || faces.iter().any(|&f| air[f] && length(f, n) == 1))
        };
        let flood = |wanted: bool, reach: i32| {
            let mut part = [0usize; 27];
            let mut firsts = Vec::new();
            for s in (0..27).filter(|&s| s != 13 && length(s, 13) <= reach) {
                if !counts(s, wanted) || part[s] != 0 {
                    continue;
                }
                firsts.push(s);
                part[s] = firsts.len();
                let mut stack = vec![s];
                while let Some(a) = stack.pop() {
                    #[expect(clippy::needless_range_loop, reason = "b names a neighbour, not only a slot")]
                    for b in 0..27 {
                        let step = length(a, b) <= reach && close(a, b);
                        if b != 13 && part[b] == 0 && step && counts(b, wanted) {
                            part[b] = firsts.len();
                            stack.push(b);
                        }
                    }
                }
            }
            firsts
        };
        Self { air: flood(true, 1), material_parts: flood(false, 2).len() }
    }
}

#[cfg(test)]
mod tests {
    use super::super::cube::{CORNERS, loops};
    use super::*;
    use proptest::prelude::*;
    use std::collections::BTreeMap;

    /// Euler number and number of parts of the surface in the 3 x 3 x 3 nodes' cells, closed by air outside.
    fn surface(air: &[bool; 27]) -> (i64, usize) {
        let inside = |p: [i32; 3]| {
            p.iter().all(|c| (-1..=1).contains(c)) && {
                let n = (p[0] + 1 + 3 * (p[1] + 1) + 9 * (p[2] + 1)).unsigned_abs() as usize;
                !air[n]
            }
        };
        let mut vertices = BTreeMap::new();
        let (mut faces, mut edges) = (0i64, 0i64);
        let mut parent: Vec<usize> = Vec::new();
        fn root(parent: &[usize], mut a: usize) -> usize {
            while parent[a] != a {
                a = parent[a];
            }
            a
        }
        for z in -2..=1 {
            for y in -2..=1 {
                for x in -2..=1 {
                    let pattern = (0..8u8)
                        .filter(|&c| inside(plus([x, y, z], CORNERS[usize::from(c)])))
                        .fold(0u8, |p, c| p | 1 << c);
                    for l in loops(pattern) {
                        faces += 1;
                        edges += i64::try_from(l.edges.len()).unwrap();
                        let mut first = None;
                        for &e in &l.edges {
                            let [a, b] = super::super::cube::EDGES[usize::from(e)];
                            let key = (
                                plus([x, y, z], CORNERS[usize::from(a)]),
                                plus([x, y, z], CORNERS[usize::from(b)]),
                            );
                            let fresh = parent.len();
                            let v = *vertices.entry(key).or_insert(fresh);
                            if v == fresh {
                                parent.push(fresh);
                            }
                            let r = root(&parent, v);
                            let f = *first.get_or_insert(r);
                            let f = root(&parent, f);
                            parent[r] = f;
                        }
                    }
                }
            }
        }
        let parts = (0..parent.len()).filter(|&a| parent[a] == a).count();
        // Every edge lies in two loops.
        (i64::try_from(vertices.len()).unwrap() - edges / 2 + faces, parts)
    }

    proptest! {
        #![proptest_config(ProptestConfig::with_cases(4000))]
        /// A node that joins one part of air beside one part of material leaves Euler number and number of
        /// parts of the surface as they are, and no other count does with both unchanged.
        #[test]
        fn simple_nodes_are_those_that_leave_the_surface_topology(bits in 0u32..1 << 26, sparse in 0u32..1 << 26) {
            for pattern in [bits, bits & sparse, bits | sparse] {
                let mut air: [bool; 27] = std::array::from_fn(|n| {
                    let k = if n > 13 { n - 1 } else { n };
                    n != 13 && pattern >> k & 1 == 1
                });
                let around = Neighbourhood::of(air);
                let before = surface(&air);
                air[13] = true;
                let after = surface(&air);
                let simple = around.air.len() == 1 && around.material_parts == 1;
                if simple {
                    prop_assert_eq!(before, after);
                }
            }
        }
    }

    #[test]
    fn a_bubble_a_bridge_and_a_flat_front_are_told_apart() {
        let none = [false; 27];
        let bubble = Neighbourhood::of(none);
        assert_eq!((bubble.air.len(), bubble.material_parts), (0, 1));
        let mut front = none;
        (0..9).for_each(|n| front[n] = true);
        let front = Neighbourhood::of(front);
        assert_eq!((front.air.len(), front.material_parts), (1, 1));
        let mut bridge = none;
        bridge[4] = true;
        bridge[22] = true;
        let bridge = Neighbourhood::of(bridge);
        assert_eq!((bridge.air.len(), bridge.material_parts), (2, 1));
        // A row of air on three sides of the node, material above and below: joining pierces the material.
        let mut sheet = [true; 27];
        sheet[4] = false;
        sheet[22] = false;
        let sheet = Neighbourhood::of(sheet);
        assert_eq!((sheet.air.len(), sheet.material_parts), (1, 2));
    }
}
