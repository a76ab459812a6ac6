//! Collecting vertices and triangles under the limits.

use super::COUNT_MAX;
use super::error::{Place, ReadError};
use crate::export::COORDINATE_MAX_MM;
use crate::geom::Vec3;
use crate::mesh::{Side, TriMesh};
use rustc_hash::FxHashMap;

/// Refuses a coordinate that is not finite or too large; minus zero becomes zero.
pub(super) fn checked_point(p: Vec3, place: impl Fn() -> Place) -> Result<Vec3, ReadError> {
    for &value in p.iter() {
        if value.is_nan() || value.abs() > COORDINATE_MAX_MM {
            return Err(ReadError::Coordinate { place: place(), value });
        }
    }
    Ok(p.add_scalar(0.0))
}

/// The index a new element gets, refused at the limit.
pub(super) fn next_index(
    len: usize,
    what: &'static str,
    place: impl Fn() -> Place,
) -> Result<u32, ReadError> {
    match u32::try_from(len) {
        Ok(index) if len < COUNT_MAX => Ok(index),
        _ => Err(ReadError::TooMany { what, place: place() }),
    }
}

/// Gives equal points equal indices, in the order of first appearance.
#[derive(Default)]
pub(super) struct Welder {
    /// The distinct points.
    pub(super) positions: Vec<Vec3>,
    seen: FxHashMap<[u64; 3], u32>,
}

impl Welder {
    /// The index of `p`, which must have passed [`checked_point`].
    pub(super) fn index(&mut self, p: Vec3, place: impl Fn() -> Place) -> Result<u32, ReadError> {
        let key = [p.x.to_bits(), p.y.to_bits(), p.z.to_bits()];
        if let Some(&index) = self.seen.get(&key) {
            return Ok(index);
        }
        let index = next_index(self.positions.len(), "vertices", place)?;
        self.seen.insert(key, index);
        self.positions.push(p);
        Ok(index)
    }
}

/// The mesh of these triangles without the vertices none of them uses; the order stays. Indices in range.
pub(super) fn compacted(positions: Vec<Vec3>, mut triangles: Vec<[u32; 3]>) -> TriMesh {
    const UNUSED: u32 = u32::MAX;
    let mut renumbered = vec![UNUSED; positions.len()];
    for &i in triangles.iter().flatten() {
        renumbered[i as usize] = 0;
    }
    let mut next = 0;
    let mut kept = Vec::with_capacity(positions.len());
    for (new, p) in renumbered.iter_mut().zip(positions) {
        if *new != UNUSED {
            *new = next;
            next += 1;
            kept.push(p);
        }
    }
    for t in &mut triangles {
        *t = t.map(|i| renumbered[i as usize]);
    }
    let sides = vec![Side::Fixture; triangles.len()];
    TriMesh { positions: kept, triangles, sides }
}
