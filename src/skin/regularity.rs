//! Figures of a stage: integrals, smallest radius of curvature, smallest singular value.

use super::extent::{AxisBall, enclosing_ball};
use super::family::StageSurface;
use super::sphere::{Place, SphereGrid, minimum_near};
use crate::geom::{Curvature, Surface, Vec3, gauss_legendre, tangent_frame};
use rayon::prelude::*;
use std::f64::consts::{PI, TAU};

/// Quarterings of the octahedron for the search of minima: 16386 samples, about 0.016 radians apart.
const LEVEL: u32 = 6;
/// Local minima followed up.
const FOLLOWED: usize = 24;
/// Nodes in z, and longitudes in one period of the symmetry, tried in turn.
const RULES: [(usize, u32); 4] = [(48, 32), (96, 64), (192, 128), (384, 256)];
/// Two rules in turn must agree this well (relative) for the later one to be accepted.
const AGREEMENT: f64 = 1e-10;

/// Figures of the exact skin of a stage, in the family's own coordinates.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct SkinFigures {
    /// Area, counted with multiplicity.
    pub area: f64,
    /// The winding number towards side A integrated over space: 4 pi / 3 for the unit sphere with side A
    /// outside, 0 at tau = 1/2, odd about it.
    pub signed_volume: f64,
    /// Integral of the Gauss curvature; 4 pi for every immersed sphere.
    pub total_curvature: f64,
    /// Integral of the squared mean curvature; 4 pi for the round sphere.
    pub bending_energy: f64,
    /// |total curvature / 4 pi - 1|: how well the quadrature has converged.
    pub quadrature_error: f64,
    /// Smallest principal radius of curvature.
    pub min_radius: f64,
    /// A point of the unit sphere where the skin is bent that much.
    pub min_radius_at: Vec3,
    /// Smallest singular value of dF against the round metric of the unit sphere.
    pub sigma_min: f64,
    /// Smallest ratio of the two singular values; 1 where the map is conformal.
    pub sigma_ratio_min: f64,
    /// The smallest enclosing ball.
    pub ball: AxisBall,
}

impl SkinFigures {
    /// Diameter of the smallest enclosing ball.
    #[must_use]
    pub fn diameter(&self) -> f64 {
        2.0 * self.ball.radius
    }
}

/// Measures a stage.
///
/// Integrals: Gauss nodes in z times even longitudes, refined until two rules agree to 1e-10 or 384 x 256
/// nodes a symmetry period are spent; see [`SkinFigures::quadrature_error`]. Minima: 16386 samples, the
/// 24 lowest local minima followed up to about 1e-9 of the value. Extents in a chosen rotation: see
/// [`super::extent()`].
///
/// A stage at tau = NaN gives NaN figures.
#[must_use]
pub fn figures(stage: &dyn StageSurface) -> SkinFigures {
    let sums = integrals(stage);
    let [area, signed_volume, total_curvature, bending_energy] = sums;
    let grid = SphereGrid::new(LEVEL);
    let shapes = grid.map(|p| {
        let c = curvature(stage, p);
        [1.0 / c.greatest, c.singular[1], c.singular[1] / c.singular[0]]
    });
    let least = |which: usize| {
        let values: Vec<f64> = shapes.iter().map(|s| s[which]).collect();
        let at = |p: &Vec3| {
            let c = curvature(stage, p);
            match which {
                0 => 1.0 / c.greatest,
                1 => c.singular[1],
                _ => c.singular[1] / c.singular[0],
            }
        };
        let mut best = Place { at: Vec3::z(), value: f64::INFINITY };
        for k in grid.local_minima(&values, FOLLOWED) {
            let low = minimum_near(at, grid.points[k], grid.spacing);
            if low.value < best.value {
                best = low;
            }
        }
        best
    };
    let (radius, sigma, ratio) = (least(0), least(1), least(2));
    SkinFigures {
        area,
        signed_volume,
        total_curvature,
        bending_energy,
        quadrature_error: (total_curvature / (4.0 * PI) - 1.0).abs(),
        min_radius: radius.value,
        min_radius_at: radius.at,
        sigma_min: sigma.value,
        sigma_ratio_min: ratio.value,
        ball: enclosing_ball(stage),
    }
}

fn curvature(surface: &dyn Surface, p: &Vec3) -> Curvature {
    let (e1, e2) = tangent_frame(p);
    Curvature::of(&surface.second(*p, e1, e2))
}

/// Area, signed volume, total curvature, bending energy.
fn integrals(stage: &dyn StageSurface) -> [f64; 4] {
    let mut last = [f64::NAN; 4];
    for (nodes, longitudes) in RULES {
        let sums = integrals_by(stage, nodes, longitudes);
        let agree = |k: usize| (sums[k] - last[k]).abs() <= AGREEMENT * sums[0].max(sums[k].abs());
        if (0..4).all(agree) {
            return sums;
        }
        last = sums;
    }
    last
}

fn integrals_by(stage: &dyn StageSurface, nodes: usize, longitudes: u32) -> [f64; 4] {
    let period = TAU / f64::from(stage.symmetry().max(1));
    let rows: Vec<[f64; 4]> = gauss_legendre(nodes)
        .par_iter()
        .map(|&(z, weight)| {
            let rho = (1.0 - z * z).sqrt();
            let mut sums = [0.0; 4];
            for k in 0..longitudes {
                let (s, c) = (period * f64::from(k) / f64::from(longitudes)).sin_cos();
                let p = Vec3::new(rho * c, rho * s, z);
                let (e1, e2) = tangent_frame(&p);
                let jet = stage.second(p, e1, e2);
                let shape = Curvature::of(&jet);
                sums[0] += shape.stretch;
                sums[1] += shape.stretch * shape.normal.dot(&jet.position) / 3.0;
                sums[2] += shape.stretch * shape.gauss;
                sums[3] += shape.stretch * shape.mean * shape.mean;
            }
            sums.map(|s| s * weight * TAU / f64::from(longitudes))
        })
        .collect();
    rows.iter().fold([0.0; 4], |t, r| std::array::from_fn(|k| t[k] + r[k]))
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::geom::{FirstJet, SecondJet};

    /// The ellipsoid of revolution with half axes a, a, c, side A outside.
    struct Spheroid(Vec3);

    impl Surface for Spheroid {
        fn position(&self, p: Vec3) -> Vec3 {
            p.component_mul(&self.0)
        }
        fn first(&self, p: Vec3, e1: Vec3, e2: Vec3) -> FirstJet {
            FirstJet { position: self.position(p), d1: self.position(e1), d2: self.position(e2) }
        }
        fn second(&self, p: Vec3, e1: Vec3, e2: Vec3) -> SecondJet {
            let j = self.first(p, e1, e2);
            let (d11, d12, d22) = (-j.position, Vec3::zeros(), -j.position);
            SecondJet { position: j.position, d1: j.d1, d2: j.d2, d11, d12, d22 }
        }
    }

    impl StageSurface for Spheroid {
        fn tau(&self) -> f64 {
            0.0
        }
        fn fold_margin(&self) -> Option<f64> {
            None
        }
    }

    #[test]
    fn an_oblate_spheroid_has_the_figures_of_the_textbook() {
        let (a, c) = (2.0_f64, 1.0_f64);
        let f = figures(&Spheroid(Vec3::new(a, a, c)));
        // area 2 pi a^2 + pi c^2 / e ln((1 + e) / (1 - e)), e^2 = 1 - c^2 / a^2
        let e = (1.0 - c * c / (a * a)).sqrt();
        let area = 2.0 * PI * a * a + PI * c * c / e * ((1.0 + e) / (1.0 - e)).ln();
        assert!((f.area / area - 1.0).abs() < 1e-12);
        assert!((f.signed_volume / (4.0 / 3.0 * PI * a * a * c) - 1.0).abs() < 1e-12);
        assert!(f.quadrature_error < 1e-12);
        // the rim is bent most: radius c^2 / a; the map squeezes most on the equator: c against a
        assert!((f.min_radius - c * c / a).abs() < 1e-9, "{}", f.min_radius);
        assert!(f.min_radius_at.z.abs() < 1e-4);
        assert!((f.sigma_min - c).abs() < 1e-9 && (f.sigma_ratio_min - c / a).abs() < 1e-9);
        assert!((f.ball.radius - a).abs() < 1e-12 && f.ball.z.abs() < 1e-6);
    }
}
