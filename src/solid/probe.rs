//! The exact field near the surface of a finished mesh, cheap to ask many times.

use super::lattice::State;
use crate::field::{Field, LocalField, Sample};
use crate::geom::{Aabb, Vec3};

/// The narrowed fields a mesh was made with, kept to measure what becomes of the mesh.
pub struct Probe<'f> {
    pub(super) field: &'f dyn Field,
    pub(super) block_mm: f64,
    pub(super) margin_mm: f64,
    pub(super) first: [i32; 3],
    pub(super) dims: [i32; 3],
    pub(super) states: Vec<State>,
    pub(super) near: Vec<Box<dyn LocalField<'f> + 'f>>,
}

impl<'f> Probe<'f> {
    /// The exact field at `p`. Quick within two cells of the blocks the surface passes; anywhere else the
    /// field is narrowed anew.
    #[must_use]
    pub fn sample(&self, p: &Vec3) -> Sample {
        match self.block(p) {
            Some(near) => near.sample(p),
            None => self.field.within(&Aabb { min: *p, max: *p }).sample(p),
        }
    }

    #[expect(clippy::cast_possible_truncation, reason = "a block number; out of range finds no block")]
    fn block(&self, p: &Vec3) -> Option<&(dyn LocalField<'f> + 'f)> {
        let at = [0, 1, 2].map(|k| (p[k] / self.block_mm).floor() as i32);
        if let Some(n) = self.sampled(at) {
            return Some(self.near[n].as_ref());
        }
        // A point just beyond a block still lies in the region its field is valid in.
        for dz in -1..=1 {
            for dy in -1..=1 {
                for dx in -1..=1 {
                    let b = [at[0] + dx, at[1] + dy, at[2] + dz];
                    let valid = (0..3).all(|k| {
                        let low = f64::from(b[k]) * self.block_mm;
                        p[k] >= low - self.margin_mm && p[k] <= low + self.block_mm + self.margin_mm
                    });
                    if let Some(n) = self.sampled(b).filter(|_| valid) {
                        return Some(self.near[n].as_ref());
                    }
                }
            }
        }
        None
    }

    fn sampled(&self, at: [i32; 3]) -> Option<usize> {
        let b = [0, 1, 2].map(|k| at[k].checked_sub(self.first[k]).unwrap_or(-1));
        if (0..3).any(|k| b[k] < 0 || b[k] >= self.dims[k]) {
            return None;
        }
        let slot = ((b[2] * self.dims[1] + b[1]) * self.dims[0] + b[0]).unsigned_abs() as usize;
        match self.states[slot] {
            State::Sampled(n) => Some(n as usize),
            _ => None,
        }
    }
}
