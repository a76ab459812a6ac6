//! Even samples of the unit sphere, and searches that start from them.

use crate::geom::{Surface, Vec3, tangent_frame};
use rayon::prelude::*;
use std::collections::BTreeMap;

/// An octahedron with corners on the axes, every triangle quartered `level` times on the unit sphere.
pub(super) fn quartered_octahedron(level: u32) -> (Vec<Vec3>, Vec<[u32; 3]>) {
    let mut points = vec![Vec3::x(), Vec3::y(), -Vec3::x(), -Vec3::y(), Vec3::z(), -Vec3::z()];
    let mut triangles: Vec<[u32; 3]> =
        vec![[0, 1, 4], [1, 2, 4], [2, 3, 4], [3, 0, 4], [1, 0, 5], [2, 1, 5], [3, 2, 5], [0, 3, 5]];
    for _ in 0..level {
        let mut middles = BTreeMap::new();
        let mut middle = |a: u32, b: u32| {
            *middles.entry((a.min(b), a.max(b))).or_insert_with(|| {
                let m = (points[a as usize] + points[b as usize]).normalize();
                points.push(m);
                u32::try_from(points.len() - 1).unwrap_or(u32::MAX)
            })
        };
        triangles = triangles
            .iter()
            .flat_map(|&[a, b, c]| {
                let (p, q, r) = (middle(a, b), middle(b, c), middle(c, a));
                [[a, p, r], [p, b, q], [r, q, c], [p, q, r]]
            })
            .collect();
    }
    (points, triangles)
}

/// Samples of the unit sphere with their adjacency.
pub(super) struct SphereGrid {
    pub(super) points: Vec<Vec3>,
    triangles: Vec<[u32; 3]>,
    /// No edge is longer than this, radians.
    pub(super) spacing: f64,
}

impl SphereGrid {
    /// 4^(level + 1) + 2 points.
    pub(super) fn new(level: u32) -> Self {
        let (points, triangles) = quartered_octahedron(level);
        let spacing = 2.0 / f64::from(1_u32 << level.min(20));
        Self { points, triangles, spacing }
    }

    /// `f` at every point.
    pub(super) fn map<R: Send>(&self, f: impl Fn(&Vec3) -> R + Sync + Send) -> Vec<R> {
        self.points.par_iter().map(f).collect()
    }

    /// The points where `values` is not greater than at any adjacent point, lowest first, at most `most`.
    pub(super) fn local_minima(&self, values: &[f64], most: usize) -> Vec<usize> {
        let mut lowest = vec![true; values.len()];
        for t in &self.triangles {
            let [a, b, c] = t.map(|v| v as usize);
            for (p, q) in [(a, b), (b, c), (c, a)] {
                if values[p] > values[q] {
                    lowest[p] = false;
                } else if values[q] > values[p] {
                    lowest[q] = false;
                }
            }
        }
        let mut found: Vec<usize> = (0..values.len()).filter(|k| lowest[*k]).collect();
        found.sort_by(|a, b| values[*a].total_cmp(&values[*b]).then(a.cmp(b)));
        found.truncate(most);
        found
    }
}

/// A point of the unit sphere and a value there.
#[derive(Clone, Copy, Debug)]
pub(super) struct Place {
    pub(super) at: Vec3,
    pub(super) value: f64,
}

/// Walks from `start` to a nearby minimum of `f` without derivatives: on a 3 x 3 stencil the fitted
/// quadratic proposes a step; the stencil shrinks when neither it nor a stencil point is lower. Ends at a
/// stencil of 1e-5 radians, where the value is within about 1e-10 of f'' of the minimum.
pub(super) fn minimum_near(f: impl Fn(&Vec3) -> f64, start: Vec3, reach: f64) -> Place {
    let mut best = Place { at: start, value: f(&start) };
    let mut h = reach;
    for _ in 0..200 {
        if h < 1e-5 {
            break;
        }
        let (e1, e2) = tangent_frame(&best.at);
        let centre = best;
        let at = |a: f64, b: f64| (centre.at + e1 * a + e2 * b).normalize();
        let mut v = [[0.0; 3]; 3];
        for (i, a) in [-h, 0.0, h].into_iter().enumerate() {
            for (j, b) in [-h, 0.0, h].into_iter().enumerate() {
                let p = at(a, b);
                v[i][j] = if i == 1 && j == 1 { centre.value } else { f(&p) };
                if v[i][j] < best.value {
                    best = Place { at: p, value: v[i][j] };
                }
            }
        }
        let (ga, gb) = ((v[2][1] - v[0][1]) / 2.0, (v[1][2] - v[1][0]) / 2.0);
        let (haa, hbb) = (v[2][1] - 2.0 * v[1][1] + v[0][1], v[1][2] - 2.0 * v[1][1] + v[1][0]);
        let hab = (v[2][2] - v[2][0] - v[0][2] + v[0][0]) / 4.0;
        let det = haa * hbb - hab * hab;
        let mut stays = true;
        if haa > 0.0 && det > 0.0 {
            let (a, b) = ((hab * gb - hbb * ga) / det, (hab * ga - haa * gb) / det);
            let length = a.hypot(b);
            let cut = (4.0 / length).min(1.0) * h;
            let p = at(a * cut, b * cut);
            let value = f(&p);
            if value < best.value {
                best = Place { at: p, value };
            }
            stays = length < 1.0;
        } else if best.value < centre.value {
            stays = false;
        }
        if stays {
            h *= 0.35;
        } else if best.value >= centre.value {
            h *= 0.5;
        }
    }
    best
}

/// Value, gradient and Hessian of a function on the sphere in the chart of [`Surface::second`].
pub(super) struct Quadratic {
    pub(super) value: f64,
    pub(super) gradient: [f64; 2],
    /// aa, ab, bb.
    pub(super) hessian: [f64; 3],
}

/// Climbs from `start` to a nearby maximum of a smooth function by Newton steps, and gradient steps where
/// the function is not concave; every step taken raises the value. Quadratic convergence: ends when a step
/// is below 1e-10 radians or nothing more is gained.
pub(super) fn maximum_near(f: impl Fn(&Vec3, Vec3, Vec3) -> Quadratic, start: Vec3, reach: f64) -> Place {
    let jet = |p: &Vec3| {
        let (e1, e2) = tangent_frame(p);
        (f(p, e1, e2), e1, e2)
    };
    let mut at = start;
    let (mut now, mut e1, mut e2) = jet(&at);
    for _ in 0..60 {
        let ([g1, g2], [h11, h12, h22]) = (now.gradient, now.hessian);
        let det = h11 * h22 - h12 * h12;
        let (mut a, mut b) = if det > 0.0 && h11 < 0.0 {
            ((h12 * g2 - h22 * g1) / det, (h12 * g1 - h11 * g2) / det)
        } else {
            let size = g1.hypot(g2).max(f64::MIN_POSITIVE);
            (g1 / size * reach, g2 / size * reach)
        };
        let length = a.hypot(b);
        if length.is_nan() || length < 1e-10 {
            break;
        }
        let cut = (reach / length).min(1.0);
        (a, b) = (a * cut, b * cut);
        let mut climbed = false;
        for _ in 0..40 {
            let p = (at + e1 * a + e2 * b).normalize();
            let (next, n1, n2) = jet(&p);
            if next.value > now.value {
                (at, now, e1, e2) = (p, next, n1, n2);
                climbed = true;
                break;
            }
            (a, b) = (0.5 * a, 0.5 * b);
            if a.hypot(b) < 1e-10 {
                break;
            }
        }
        if !climbed {
            break;
        }
    }
    Place { at, value: now.value }
}

/// The height of `surface` along `direction` as [`maximum_near`] wants it.
pub(super) fn height(surface: &dyn Surface, direction: Vec3) -> impl Fn(&Vec3, Vec3, Vec3) -> Quadratic {
    move |p, e1, e2| {
        let j = surface.second(*p, e1, e2);
        Quadratic {
            value: j.position.dot(&direction),
            gradient: [j.d1.dot(&direction), j.d2.dot(&direction)],
            hessian: [j.d11.dot(&direction), j.d12.dot(&direction), j.d22.dot(&direction)],
        }
    }
}

/// The squared distance of `surface` from `centre` as [`maximum_near`] wants it.
pub(super) fn distance2(surface: &dyn Surface, centre: Vec3) -> impl Fn(&Vec3, Vec3, Vec3) -> Quadratic {
    move |p, e1, e2| {
        let j = surface.second(*p, e1, e2);
        let r = j.position - centre;
        Quadratic {
            value: r.norm_squared(),
            gradient: [2.0 * r.dot(&j.d1), 2.0 * r.dot(&j.d2)],
            hessian: [
                2.0 * (r.dot(&j.d11) + j.d1.dot(&j.d1)),
                2.0 * (r.dot(&j.d12) + j.d1.dot(&j.d2)),
                2.0 * (r.dot(&j.d22) + j.d2.dot(&j.d2)),
            ],
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn minimum_of_a_quadratic_form_is_its_least_eigenvector() {
        // 5 x^2 + 2 y^2 + z^2 on the sphere: least 1 at the poles, greatest 5 on the x axis
        let f = |p: &Vec3| 5.0 * p.x * p.x + 2.0 * p.y * p.y + p.z * p.z;
        let grid = SphereGrid::new(3);
        let values = grid.map(f);
        let minima = grid.local_minima(&values, 10);
        assert_eq!(minima.len(), 2);
        let low = minimum_near(f, Vec3::new(0.3, -0.4, 0.8).normalize(), 0.2);
        assert!((low.value - 1.0).abs() < 1e-10 && low.at.z.abs() > 1.0 - 1e-10, "{low:?}");
    }
}
