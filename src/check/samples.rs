//! Sample points spread evenly over a surface, the same every time.

use crate::geom::Vec3;
use crate::mesh::TriMesh;

/// A point of the surface.
#[derive(Clone, Copy, Debug)]
pub(super) struct Sample {
    pub(super) triangle: u32,
    pub(super) point: Vec3,
    /// The area it stands for, mm2.
    pub(super) area: f64,
}

/// Spreads about `wanted` samples over the triangles in proportion to their areas (mm2).
///
/// Meshes of no more than `wanted` triangles have at least one sample in each, finer meshes one in
/// every so much area. Triangles without area have none.
pub(super) fn over(mesh: &TriMesh, areas: &[f64], wanted: u32) -> Vec<Sample> {
    let total: f64 = areas.iter().sum();
    let cell = total / f64::from(wanted.max(1));
    if !cell.is_finite() || cell <= 0.0 {
        return Vec::new();
    }
    let each = areas.len() <= wanted as usize;
    let mut out = Vec::new();
    // Half a cell ahead, so that a surface of one cell has its sample.
    let mut before = 0.5;
    for (t, area) in (0_u32..).zip(areas) {
        let after = before + area / cell;
        let count = whole(after) - whole(before);
        before = after;
        let count = if each && *area > 0.0 { count.max(1) } else { count };
        in_triangle(mesh, t, *area, count, &mut out);
    }
    out
}

/// Adds `count` samples of triangle `t`: its middle for one, otherwise the points of the R2 sequence.
///
/// # Source
/// M. Roberts, "The Unreasonable Effectiveness of Quasirandom Sequences", 2018 (the sequence; folding it into a
/// triangle is usual).
pub(super) fn in_triangle(mesh: &TriMesh, t: u32, area: f64, count: u32, out: &mut Vec<Sample>) {
    const STEP: [f64; 2] = [0.754_877_666_246_692_8, 0.569_840_290_998_053_3];
    let [a, b, c] = mesh.corners(t as usize);
    let each = area / f64::from(count.max(1));
    if count == 1 {
        out.push(Sample { triangle: t, point: (a + b + c) / 3.0, area: each });
        return;
    }
    for i in 0..count {
        let at = |k: usize| (0.5 + f64::from(i + 1) * STEP[k]).fract();
        let (mut u, mut v) = (at(0), at(1));
        if u + v > 1.0 {
            (u, v) = (1.0 - u, 1.0 - v);
        }
        out.push(Sample { triangle: t, point: a + (b - a) * u + (c - a) * v, area: each });
    }
}

#[expect(clippy::cast_possible_truncation, reason = "counts of samples, far below 2^32; saturates")]
fn whole(x: f64) -> u32 {
    x.floor() as u32
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::mesh::shapes;

    #[test]
    fn samples_stand_for_the_whole_area_and_lie_in_their_triangles() {
        let mesh = shapes::cuboid(Vec3::zeros(), Vec3::new(10.0, 1.0, 1.0));
        let areas: Vec<f64> = (0..12)
            .map(|t| 0.5 * crate::mesh::measure::doubled_area_vector(&mesh.corners(t)).norm())
            .collect();
        for wanted in [1, 12, 500] {
            let all = over(&mesh, &areas, wanted);
            assert!(all.len() >= wanted as usize && all.len() <= wanted as usize + 12, "{}", all.len());
            let inside = |s: &Sample| (0..3).all(|k| s.point[k] >= 0.0 && s.point[k] <= [10.0, 1.0, 1.0][k]);
            assert!(all.iter().all(inside));
        }
        let sum: f64 = over(&mesh, &areas, 500).iter().map(|s| s.area).sum();
        assert!((sum - 42.0).abs() < 1e-9);
        assert!(over(&mesh, &[0.0; 12], 500).is_empty());
    }
}
