//! The sampling lattice: a sparse set of blocks of nodes near the zero set of a field.
//!
//! Node (i, j, k) sits at (i, j, k) times the cell edge, and the cell edge has at most 11 significant
//! bits: node coordinates are exact in f32, and a vertex on a lattice edge stays on it when rounded.
//!
//! Blocks that a 1-Lipschitz bound proves free of the zero set are never sampled, so time and memory
//! follow the surface. What is kept for them is one sign a block.

use super::probe::Probe;
use crate::field::{Field, LocalField};
use crate::geom::{Aabb, Vec3};
use rayon::prelude::*;

/// Cells along the edge of a block.
pub(super) const BLOCK: i32 = 8;
/// Nodes a block owns: those with local coordinates 0..8.
pub(super) const NODES: usize = 512;
/// Values are exact up to this many cells above zero; beyond, only "at least this".
const EXACT_CELLS: f64 = 1.8;
/// A block's narrowed field is valid this many cells beyond its nodes: far enough to see what faces its walls
/// across a thin gap.
const MARGIN: i32 = 2;
/// Significant bits of the cell edge.
const CELL_BITS: i32 = 11;

/// Rounds a cell edge down to a multiple of a power of two so that node coordinates are exact in f32.
pub(super) fn exact_cell(wanted_mm: f64) -> f64 {
    let ulp = (wanted_mm.log2().floor() - f64::from(CELL_BITS - 1)).exp2();
    (wanted_mm / ulp).floor() * ulp
}

/// A block that the surface may pass.
pub(super) struct Block<'f> {
    /// Block coordinates; its first node is at `BLOCK` times these.
    pub(super) at: [i32; 3],
    /// Field values at the owned nodes, mm; index x + 8 y + 64 z. Not positive: material.
    pub(super) values: Box<[f32; NODES]>,
    /// The field narrowed to the block.
    pub(super) near: Box<dyn LocalField<'f> + 'f>,
}

/// What is known of a block.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) enum State {
    /// All air.
    Air,
    /// All material.
    Material,
    /// Sampled: a number in [`Lattice::blocks`].
    Sampled(u32),
}

/// The sampled lattice.
pub(super) struct Lattice<'f> {
    /// Edge of a cell, mm.
    pub(super) cell: f64,
    /// Blocks along each axis.
    pub(super) dims: [i32; 3],
    /// Block coordinates of the first block.
    pub(super) first: [i32; 3],
    states: Vec<State>,
    /// The sampled blocks in a fixed order.
    pub(super) blocks: Vec<Block<'f>>,
}

impl<'f> Lattice<'f> {
    /// Samples `field` with the given cell edge (see [`exact_cell`]).
    pub(super) fn sample(field: &'f dyn Field, cell: f64) -> Self {
        let block_mm = cell * f64::from(BLOCK);
        let bounds = field.bounds().grown(1.01 * cell);
        let (first, dims) = block_range(&bounds, block_mm);
        let range = Range { low: [0; 3], high: dims };
        let grid = Grid { cell, first };
        let near = field.within(&grid.region(&range).grown(f64::from(MARGIN) * cell));
        let mut found = Vec::new();
        descend(&grid, &range, near, &mut found);
        let mut states = vec![State::Air; dims.iter().map(|&d| d.unsigned_abs() as usize).product()];
        let slot = |b: [i32; 3]| ((b[2] * dims[1] + b[1]) * dims[0] + b[0]).unsigned_abs() as usize;
        let mut active = Vec::new();
        for f in found {
            match f {
                Found::Material(r) => r.for_each(|b| states[slot(b)] = State::Material),
                Found::Active(b, near) => active.push((b, near)),
            }
        }
        active.sort_by_key(|(b, _)| slot(*b));
        let blocks: Vec<Block<'f>> = active
            .into_par_iter()
            .map(|(b, near)| {
                let at = [0, 1, 2].map(|k| b[k] + first[k]);
                let values = sample_block(&grid, at, near.as_ref());
                Block { at, values, near }
            })
            .collect();
        for (n, b) in (0u32..).zip(&blocks) {
            states[slot([0, 1, 2].map(|k| b.at[k] - first[k]))] = State::Sampled(n);
        }
        Self { cell, dims, first, states, blocks }
    }

    /// The state of a block; air outside the lattice.
    pub(super) fn state(&self, at: [i32; 3]) -> State {
        let b = [0, 1, 2].map(|k| at[k] - self.first[k]);
        if (0..3).any(|k| b[k] < 0 || b[k] >= self.dims[k]) {
            return State::Air;
        }
        self.states[((b[2] * self.dims[1] + b[1]) * self.dims[0] + b[0]).unsigned_abs() as usize]
    }

    /// Copies the nodes with local coordinates -1..=8 of block `b` into a 10 x 10 x 10 array, index
    /// (x + 1) + 10 (y + 1) + 100 (z + 1). Unsampled blocks give plus or minus infinity.
    pub(super) fn padded(&self, b: &Block<'_>) -> Box<[f32; 1000]> {
        let mut out = Box::new([f32::INFINITY; 1000]);
        for dz in -1..=1 {
            for dy in -1..=1 {
                for dx in -1..=1 {
                    let state = self.state([b.at[0] + dx, b.at[1] + dy, b.at[2] + dz]);
                    let span = |d: i32| match d {
                        -1 => -1..=-1,
                        0 => 0..=BLOCK - 1,
                        _ => BLOCK..=BLOCK,
                    };
                    for z in span(dz) {
                        for y in span(dy) {
                            for x in span(dx) {
                                let local = [x - BLOCK * dx, y - BLOCK * dy, z - BLOCK * dz];
                                out[padded_index([x, y, z])] = match state {
                                    State::Air => f32::INFINITY,
                                    State::Material => f32::NEG_INFINITY,
                                    State::Sampled(n) => self.blocks[n as usize].values[node_index(local)],
                                };
                            }
                        }
                    }
                }
            }
        }
        out
    }

    /// The position of a node, mm.
    pub(super) fn node(&self, n: [i32; 3]) -> Vec3 {
        Vec3::new(f64::from(n[0]), f64::from(n[1]), f64::from(n[2])) * self.cell
    }

    /// Gives up the values and keeps the narrowed fields.
    pub(super) fn into_probe(self, field: &'f dyn Field) -> Probe<'f> {
        Probe {
            field,
            block_mm: self.cell * f64::from(BLOCK),
            margin_mm: self.cell * f64::from(MARGIN),
            first: self.first,
            dims: self.dims,
            states: self.states,
            near: self.blocks.into_iter().map(|b| b.near).collect(),
        }
    }

    /// All blocks with their coordinates, in a fixed order.
    pub(super) fn states(&self) -> impl Iterator<Item = ([i32; 3], State)> + '_ {
        self.states.iter().enumerate().map(|(i, &s)| {
            let i = i32::try_from(i).unwrap_or(i32::MAX);
            let b = [i % self.dims[0], i / self.dims[0] % self.dims[1], i / (self.dims[0] * self.dims[1])];
            ([0, 1, 2].map(|k| b[k] + self.first[k]), s)
        })
    }
}

/// Index of an owned node in [`Block::values`].
pub(super) fn node_index(local: [i32; 3]) -> usize {
    (local[0] + BLOCK * (local[1] + BLOCK * local[2])).unsigned_abs() as usize
}

/// Index of a node in the array of [`Lattice::padded`].
pub(super) fn padded_index(local: [i32; 3]) -> usize {
    (local[0] + 1 + 10 * (local[1] + 1) + 100 * (local[2] + 1)).unsigned_abs() as usize
}

#[expect(clippy::cast_possible_truncation, reason = "the caller limits the number of blocks to a u32")]
pub(super) fn block_range(bounds: &Aabb, block_mm: f64) -> ([i32; 3], [i32; 3]) {
    let low = [0, 1, 2].map(|k| (bounds.min[k] / block_mm).floor() as i32);
    let high = [0, 1, 2].map(|k| (bounds.max[k] / block_mm).floor() as i32 + 1);
    (low, [0, 1, 2].map(|k| high[k] - low[k]))
}

struct Grid {
    cell: f64,
    first: [i32; 3],
}

impl Grid {
    /// The nodes of a range of blocks with one layer of cells around: what a block's cells can see.
    fn region(&self, r: &Range) -> Aabb {
        let p = |k: usize, b: i32, pad: i32| f64::from((b + self.first[k]) * BLOCK + pad) * self.cell;
        Aabb {
            min: Vec3::new(p(0, r.low[0], 0), p(1, r.low[1], 0), p(2, r.low[2], 0)),
            max: Vec3::new(p(0, r.high[0], 0), p(1, r.high[1], 0), p(2, r.high[2], 0)),
        }
    }
}

/// A range of blocks, relative to the first; `high` is exclusive.
struct Range {
    low: [i32; 3],
    high: [i32; 3],
}

impl Range {
    fn for_each(&self, mut f: impl FnMut([i32; 3])) {
        for z in self.low[2]..self.high[2] {
            for y in self.low[1]..self.high[1] {
                for x in self.low[0]..self.high[0] {
                    f([x, y, z]);
                }
            }
        }
    }

    fn halves(&self) -> Option<(Self, Self)> {
        let k = (0..3).max_by_key(|&k| self.high[k] - self.low[k])?;
        if self.high[k] - self.low[k] < 2 {
            return None;
        }
        let middle = self.low[k] + (self.high[k] - self.low[k]) / 2;
        let (mut a, mut b) = (Self { ..*self }, Self { ..*self });
        a.high[k] = middle;
        b.low[k] = middle;
        Some((a, b))
    }

    fn count(&self) -> i64 {
        (0..3).map(|k| i64::from(self.high[k] - self.low[k])).product()
    }
}

enum Found<'f> {
    Material(Range),
    Active([i32; 3], Box<dyn LocalField<'f> + 'f>),
}

fn descend<'f>(grid: &Grid, range: &Range, near: Box<dyn LocalField<'f> + 'f>, out: &mut Vec<Found<'f>>) {
    let Some((a, b)) = range.halves() else {
        out.push(Found::Active(range.low, near));
        return;
    };
    let visit = |r: &Range, out: &mut Vec<Found<'f>>| {
        let region = grid.region(r);
        let near = near.narrowed(&region.grown(f64::from(MARGIN) * grid.cell));
        let (low, high) = near.range(&region);
        if high < 0.0 {
            out.push(Found::Material(Range { ..*r }));
        } else if low <= 0.0 {
            descend(grid, r, near, out);
        }
    };
    if range.count() > 64 {
        let mut right = Vec::new();
        rayon::join(|| visit(&a, out), || visit(&b, &mut right));
        out.append(&mut right);
    } else {
        visit(&a, out);
        visit(&b, out);
    }
}

fn sample_block(grid: &Grid, at: [i32; 3], near: &dyn LocalField<'_>) -> Box<[f32; NODES]> {
    let mut values = Box::new([f32::INFINITY; NODES]);
    let corner = at.map(|b| b * BLOCK);
    split(grid, corner, [0; 3], BLOCK, near, &mut values);
    values
}

/// Fills the cube of `n`^3 nodes at local coordinates `low`.
fn split(
    grid: &Grid,
    corner: [i32; 3],
    low: [i32; 3],
    n: i32,
    near: &dyn LocalField<'_>,
    values: &mut [f32; NODES],
) {
    let node = |l: [i32; 3]| {
        Vec3::new(f64::from(corner[0] + l[0]), f64::from(corner[1] + l[1]), f64::from(corner[2] + l[2]))
            * grid.cell
    };
    let half = n / 2;
    for o in super::cube::CORNERS {
        let low = [0, 1, 2].map(|k| low[k] + half * o[k]);
        let region = Aabb { min: node(low), max: node(low.map(|l| l + half - 1)) };
        if half == 1 {
            values[node_index(low)] = signed_f32(near.value(&region.min));
            continue;
        }
        let (lowest, highest) = near.range(&region);
        let uniform = if lowest > EXACT_CELLS * grid.cell {
            Some(lowest)
        } else if highest < 0.0 {
            Some(highest)
        } else {
            None
        };
        match uniform {
            Some(v) => {
                Range { low, high: low.map(|l| l + half) }.for_each(|l| values[node_index(l)] = signed_f32(v))
            }
            None if half == BLOCK / 2 => {
                split(grid, corner, low, half, near.narrowed(&region).as_ref(), values);
            }
            None => split(grid, corner, low, half, near, values),
        }
    }
}

/// Rounds to f32 without losing the sign; zero counts as material.
#[expect(clippy::cast_possible_truncation, reason = "the sign is kept, the rest is a starting guess")]
pub(super) fn signed_f32(v: f64) -> f32 {
    if v > 0.0 { (v as f32).max(f32::MIN_POSITIVE) } else { (v as f32).min(0.0) }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn node_coordinates_are_exact_in_single_precision() {
        for wanted in [0.3, 0.6, 0.123_456, 1.0, 2.7] {
            let cell = exact_cell(wanted);
            assert!(cell <= wanted && cell > 0.999 * wanted);
            for k in [1, 77, 1023, 8191] {
                let x = f64::from(k) * cell;
                #[expect(
                    clippy::cast_possible_truncation,
                    clippy::float_cmp,
                    reason = "exactness is the point"
                )]
                let same = f64::from(x as f32) == x;
                assert!(same, "{k} * {cell}");
            }
        }
    }

    #[test]
    fn rounding_keeps_the_sign() {
        assert!(signed_f32(1e-300) > 0.0);
        assert!(signed_f32(-1e-300) <= 0.0);
        assert!(signed_f32(0.0) <= 0.0);
    }
}
