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
