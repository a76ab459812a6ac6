//! What the derivatives of a surface at a point say about its shape there.

use super::{FirstJet, SecondJet, Vec3};

impl FirstJet {
    /// The unit normal towards side A, d1 x d2 / |d1 x d2|; NaN where the surface is not regular.
    #[must_use]
    pub fn normal(&self) -> Vec3 {
        let n = self.d1.cross(&self.d2);
        n / n.norm()
    }

    /// The larger and the smaller singular value of dF against the orthonormal tangent basis.
    #[must_use]
    pub fn singular_values(&self) -> [f64; 2] {
        singular_values(&self.d1, &self.d2)
    }
}

/// Singular values of the 3 x 2 matrix (d1 d2), larger first; the smaller one as area / larger, which keeps
/// its relative accuracy when the two are far apart.
fn singular_values(d1: &Vec3, d2: &Vec3) -> [f64; 2] {
    let (e, f, g) = (d1.norm_squared(), d1.dot(d2), d2.norm_squared());
    let larger = (0.5 * (e + g) + (0.5 * (e - g)).hypot(f)).sqrt();
    [larger, d1.cross(d2).norm() / larger]
}

/// Curvatures of a surface at a point.
///
/// Signs: positive where the surface bends away from the normal, so a sphere with side A outside has
/// `mean` = 1 / radius.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Curvature {
    /// Unit normal towards side A.
    pub normal: Vec3,
    /// |d1 x d2|: area of the image per area of the unit sphere.
    pub stretch: f64,
    /// Mean curvature H = (k1 + k2) / 2.
    pub mean: f64,
    /// Gauss curvature K = k1 k2.
    pub gauss: f64,
    /// The larger absolute value of the two principal curvatures.
    pub greatest: f64,
    /// The larger and the smaller singular value of dF.
    pub singular: [f64; 2],
}

impl Curvature {
    /// Curvatures from second derivatives in a chart with orthonormal tangent basis at the point.
    ///
    /// # Source
    /// Classical formulas (M. do Carmo, "Differential Geometry of Curves and Surfaces", 1976, section 3-3).
    #[must_use]
    pub fn of(jet: &SecondJet) -> Self {
        let n = jet.d1.cross(&jet.d2);
        let stretch = n.norm();
        let normal = n / stretch;
        let (e, f, g) = (jet.d1.norm_squared(), jet.d1.dot(&jet.d2), jet.d2.norm_squared());
        let (l, m, k) = (-jet.d11.dot(&normal), -jet.d12.dot(&normal), -jet.d22.dot(&normal));
        let area2 = stretch * stretch;
        let mean = (e * k - 2.0 * f * m + g * l) / (2.0 * area2);
        let gauss = (l * k - m * m) / area2;
        let greatest = mean.abs() + (mean * mean - gauss).max(0.0).sqrt();
        Self { normal, stretch, mean, gauss, greatest, singular: singular_values(&jet.d1, &jet.d2) }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn paraboloid_has_the_curvatures_of_its_quadratic_form() {
        // (2a, b, -(3 a^2 + 2 b^2) / 2): in unit-speed coordinates z = -(3/4 u^2 + 2 v^2) / 2
        let jet = SecondJet {
            position: Vec3::zeros(),
            d1: Vec3::new(2.0, 0.0, 0.0),
            d2: Vec3::y(),
            d11: Vec3::new(0.0, 0.0, -3.0),
            d12: Vec3::zeros(),
            d22: Vec3::new(0.0, 0.0, -2.0),
        };
        let c = Curvature::of(&jet);
        assert!((c.mean - 1.375).abs() < 1e-15 && (c.gauss - 1.5).abs() < 1e-15);
        assert!((c.greatest - 2.0).abs() < 1e-15);
        assert!((c.normal - Vec3::z()).norm() < 1e-15 && (c.stretch - 2.0).abs() < 1e-15);
        assert!((c.singular[0] - 2.0).abs() < 1e-15 && (c.singular[1] - 1.0).abs() < 1e-15);
    }
}
