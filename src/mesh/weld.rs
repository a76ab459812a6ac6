//! Points at the same place.

use crate::geom::Vec3;
use rustc_hash::FxHashMap;

/// For each point the number of the first point with equal coordinates (-0.0 equals 0.0), itself when it is
/// the first. A point with a coordinate that is not a number equals only itself.
#[must_use]
pub fn first_equal(points: &[Vec3]) -> Vec<u32> {
    let mut seen: FxHashMap<[u64; 3], u32> = FxHashMap::default();
    seen.reserve(points.len());
    (0_u32..)
        .zip(points)
        .map(|(i, p)| {
            if p.iter().any(|x| x.is_nan()) {
                return i;
            }
            *seen.entry([0, 1, 2].map(|k| (p[k] + 0.0).to_bits())).or_insert(i)
        })
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn signed_zeros_are_equal_and_nan_is_not() {
        let n = Vec3::new(f64::NAN, 0.0, 0.0);
        let p = [Vec3::zeros(), Vec3::x(), Vec3::new(-0.0, 0.0, -0.0), n, n, Vec3::x()];
        assert_eq!(first_equal(&p), [0, 1, 0, 3, 4, 1]);
    }
}
