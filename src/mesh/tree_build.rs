//! Building the box tree of [`super::Tree`]: binned surface-area heuristic, preorder nodes.

/// Triangles a leaf holds at most; 4 was the fastest of 1, 2, 4 and 8 for nearest points on a thin shell.
const LEAF: usize = 4;
/// Bins tried per axis when a node is split.
const BINS: usize = 16;
/// Below this many triangles a subtree is built by one thread.
const SERIAL: usize = 8192;
/// From this depth on nodes are halved by count, which bounds the depth of the whole tree by
/// `HALVE_FROM + 32`.
pub(super) const HALVE_FROM: usize = 48;
/// Box of a node, f32 rounded outward. Preorder: the left child follows its parent.
#[derive(Clone, Copy)]
pub(super) struct Node {
    pub(super) lo: [f32; 3],
    pub(super) hi: [f32; 3],
    /// Inner node: distance to the right child in the node list. Leaf: first triangle slot.
    pub(super) link: u32,
    /// 0 for an inner node, else the number of triangles of the leaf.
    pub(super) count: u32,
}

/// Box of one triangle while the tree is built.
#[derive(Clone, Copy)]
pub(super) struct Item {
    pub(super) lo: [f32; 3],
    pub(super) hi: [f32; 3],
    pub(super) id: u32,
}

pub(super) fn half_area(lo: &[f32; 3], hi: &[f32; 3]) -> f32 {
    let e = [hi[0] - lo[0], hi[1] - lo[1], hi[2] - lo[2]];
    e[0] * e[1] + e[1] * e[2] + e[2] * e[0]
}

/// The greatest f32 not above `x`.
#[expect(
    clippy::cast_possible_truncation,
    reason = "rounding to f32 is the purpose; the next line corrects its direction"
)]
pub(super) fn f32_below(x: f64) -> f32 {
    let y = x as f32;
    if f64::from(y) > x { y.next_down() } else { y }
}

/// The smallest f32 not below `x`.
#[expect(
    clippy::cast_possible_truncation,
    reason = "rounding to f32 is the purpose; the next line corrects its direction"
)]
pub(super) fn f32_above(x: f64) -> f32 {
    let y = x as f32;
    if f64::from(y) < x { y.next_up() } else { y }
}

#[derive(Clone, Copy)]
struct Bin {
    lo: [f32; 3],
    hi: [f32; 3],
    count: u32,
}

impl Bin {
    const EMPTY: Self = Self { lo: [f32::INFINITY; 3], hi: [f32::NEG_INFINITY; 3], count: 0 };

    fn join(&mut self, lo: &[f32; 3], hi: &[f32; 3], count: u32) {
        for k in 0..3 {
            self.lo[k] = self.lo[k].min(lo[k]);
            self.hi[k] = self.hi[k].max(hi[k]);
        }
        self.count += count;
    }
}

/// Builds the tree over `items`, which lie at slot `first` onward, and orders them.
pub(super) fn subtree(items: &mut [Item], first: u32, depth: usize) -> Vec<Node> {
    if items.len() <= SERIAL {
        let mut nodes = Vec::with_capacity(items.len());
        serial_subtree(items, first, depth, &mut nodes);
        return nodes;
    }
    let mut node = bounding_node(items);
    let mid = split(items, depth);
    let (left, right) = items.split_at_mut(mid);
    let second = first + index(left.len());
    let (l, r) = rayon::join(|| subtree(left, first, depth + 1), || subtree(right, second, depth + 1));
    node.link = index(l.len() + 1);
    let mut nodes = Vec::with_capacity(1 + l.len() + r.len());
    nodes.push(node);
    nodes.extend_from_slice(&l);
    nodes.extend_from_slice(&r);
    nodes
}

fn serial_subtree(items: &mut [Item], first: u32, depth: usize, nodes: &mut Vec<Node>) {
    let at = nodes.len();
    let mut node = bounding_node(items);
    if items.len() <= LEAF {
        node.link = first;
        node.count = index(items.len());
        nodes.push(node);
        return;
    }
    nodes.push(node);
    let mid = split(items, depth);
    let (left, right) = items.split_at_mut(mid);
    serial_subtree(left, first, depth + 1, nodes);
    nodes[at].link = index(nodes.len() - at);
    serial_subtree(right, first + index(left.len()), depth + 1, nodes);
}

/// Counts of triangles and nodes fit in 32 bits: triangles are numbered by `u32` from the start.
fn index(n: usize) -> u32 {
    u32::try_from(n).unwrap_or(u32::MAX)
}

fn bounding_node(items: &[Item]) -> Node {
    let mut b = Bin::EMPTY;
    for i in items {
        b.join(&i.lo, &i.hi, 1);
    }
    Node { lo: b.lo, hi: b.hi, link: 0, count: 0 }
}

/// Orders `items` into two parts, neither empty, and returns the size of the first.
fn split(items: &mut [Item], depth: usize) -> usize {
    let half = items.len() / 2;
    let key = |i: &Item, k: usize| i.lo[k] + i.hi[k];
    let (mut lo, mut hi) = ([f32::INFINITY; 3], [f32::NEG_INFINITY; 3]);
    for i in items.iter() {
        for k in 0..3 {
            lo[k] = lo[k].min(key(i, k));
            hi[k] = hi[k].max(key(i, k));
        }
    }
    let longest = (0..3).fold(0, |m, k| if hi[k] - lo[k] > hi[m] - lo[m] { k } else { m });
    let halve = |items: &mut [Item], k: usize| {
        items.select_nth_unstable_by(half, |a, b| key(a, k).total_cmp(&key(b, k)).then(a.id.cmp(&b.id)));
        half
    };
    if depth >= HALVE_FROM || items.len() <= 2 * LEAF {
        return halve(items, longest);
    }
    // Only the longest axis is tried: a third of the work of all three, and hardly a worse tree.
    let k = longest;
    let scale = 15.999 / (hi[k] - lo[k]);
    let slot = |i: &Item| bin((key(i, k) - lo[k]) * scale);
    let mut bins = [Bin::EMPTY; BINS];
    for i in items.iter() {
        bins[slot(i)].join(&i.lo, &i.hi, 1);
    }
    let mut below = [(0.0_f32, 0_u32); BINS];
    let mut acc = Bin::EMPTY;
    for (b, slot) in bins.iter().zip(&mut below) {
        acc.join(&b.lo, &b.hi, b.count);
        *slot = (half_area(&acc.lo, &acc.hi), acc.count);
    }
    let mut best: Option<(f32, usize)> = None;
    let mut above = Bin::EMPTY;
    for cut in (1..BINS).rev() {
        above.join(&bins[cut].lo, &bins[cut].hi, bins[cut].count);
        let (area, count) = below[cut - 1];
        if count == 0 || above.count == 0 {
            continue;
        }
        let cost = area * as_f32(count) + half_area(&above.lo, &above.hi) * as_f32(above.count);
        if best.is_none_or(|b| cost < b.0) {
            best = Some((cost, cut));
        }
    }
    let Some((_, cut)) = best else { return halve(items, k) };
    let mut mid = 0;
    for s in 0..items.len() {
        if slot(&items[s]) < cut {
            items.swap(s, mid);
            mid += 1;
        }
    }
    if mid == 0 || mid == items.len() { halve(items, k) } else { mid }
}

#[expect(clippy::cast_possible_truncation, reason = "saturates, NaN gives 0, and min keeps it in range")]
fn bin(x: f32) -> usize {
    (x as usize).min(BINS - 1)
}

fn as_f32(n: u32) -> f32 {
    n as f32
}
