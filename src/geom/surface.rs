//! A smooth surface given over the unit sphere, and its placement in the printing frame.

use super::Vec3;

/// Position and first derivatives of a surface at a point of the unit sphere.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct FirstJet {
    /// F at the point.
    pub position: Vec3,
    /// dF along the first tangent vector.
    pub d1: Vec3,
    /// dF along the second tangent vector.
    pub d2: Vec3,
}

/// Position, first and second derivatives in the chart (a, b) -> (p + a e1 + b e2) / |..|.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct SecondJet {
    /// F at the point.
    pub position: Vec3,
    /// dF/da.
    pub d1: Vec3,
    /// dF/db.
    pub d2: Vec3,
    /// d2F/da2.
    pub d11: Vec3,
    /// d2F/da db.
    pub d12: Vec3,
    /// d2F/db2.
    pub d22: Vec3,
}

/// A map from the unit sphere to space, with exact derivatives: one stage of an eversion.
///
/// `p` must be a unit vector and (`e1`, `e2`) an orthonormal basis of its tangent plane with
/// e1 x e2 = p; then d1 x d2 points to side A.
pub trait Surface: Send + Sync {
    /// F(p).
    fn position(&self, p: Vec3) -> Vec3;
    /// F(p) and its first derivatives along `e1`, `e2`.
    fn first(&self, p: Vec3, e1: Vec3, e2: Vec3) -> FirstJet;
    /// F(p), first and second derivatives in the chart (p + a e1 + b e2) / |p + a e1 + b e2|.
    fn second(&self, p: Vec3, e1: Vec3, e2: Vec3) -> SecondJet;
}

/// An orthonormal tangent basis (e1, e2) at the unit vector `p`, with e1 x e2 = p.
///
/// # Source
/// T. Duff et al., "Building an Orthonormal Basis, Revisited", JCGT 6(1), 2017.
#[must_use]
pub fn tangent_frame(p: &Vec3) -> (Vec3, Vec3) {
    let s = 1.0_f64.copysign(p.z);
    let a = -1.0 / (s + p.z);
    let b = p.x * p.y * a;
    (Vec3::new(1.0 + s * p.x * p.x * a, s * b, -s * p.x), Vec3::new(b, s + p.y * p.y * a, -p.y))
}

/// A similarity from a family's own coordinates to millimetres in the printing frame:
/// x -> scale * rotation * x + shift, with `rotation` a proper rotation.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Placement {
    /// mm per unit of the family's own coordinates, > 0.
    pub scale: f64,
    /// A proper rotation (determinant +1).
    pub rotation: nalgebra::Rotation3<f64>,
    /// mm.
    pub shift: Vec3,
}

impl Placement {
    /// Leaves points where they are.
    #[must_use]
    pub fn identity() -> Self {
        Self { scale: 1.0, rotation: nalgebra::Rotation3::identity(), shift: Vec3::zeros() }
    }

    /// The image of a point.
    #[must_use]
    pub fn point(&self, x: &Vec3) -> Vec3 {
        self.vector(x) + self.shift
    }

    /// The image of a vector (scaled and turned, not shifted).
    #[must_use]
    pub fn vector(&self, x: &Vec3) -> Vec3 {
        self.rotation * x * self.scale
    }

    /// The 3 x 4 matrix, row by row: the linear part, then the shift in mm.
    #[must_use]
    pub fn rows(&self) -> [[f64; 4]; 3] {
        let m = self.rotation.matrix() * self.scale;
        std::array::from_fn(|r| [m[(r, 0)], m[(r, 1)], m[(r, 2)], self.shift[r]])
    }
}

/// A surface seen through a [`Placement`]: positions and derivatives come out in mm.
pub struct Placed<'s> {
    surface: &'s dyn Surface,
    placement: Placement,
}

impl<'s> Placed<'s> {
    /// Places `surface`.
    #[must_use]
    pub fn new(surface: &'s dyn Surface, placement: Placement) -> Self {
        Self { surface, placement }
    }
}

impl Surface for Placed<'_> {
    fn position(&self, p: Vec3) -> Vec3 {
        self.placement.point(&self.surface.position(p))
    }

    fn first(&self, p: Vec3, e1: Vec3, e2: Vec3) -> FirstJet {
        let j = self.surface.first(p, e1, e2);
        let v = |x: &Vec3| self.placement.vector(x);
        FirstJet { position: self.placement.point(&j.position), d1: v(&j.d1), d2: v(&j.d2) }
    }

    fn second(&self, p: Vec3, e1: Vec3, e2: Vec3) -> SecondJet {
        let j = self.surface.second(p, e1, e2);
        let v = |x: &Vec3| self.placement.vector(x);
        SecondJet {
            position: self.placement.point(&j.position),
            d1: v(&j.d1),
            d2: v(&j.d2),
            d11: v(&j.d11),
            d12: v(&j.d12),
            d22: v(&j.d22),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn tangent_frame_is_right_handed_at_both_poles_and_elsewhere() {
        for p in
            [Vec3::z(), -Vec3::z(), Vec3::x(), Vec3::new(0.6, 0.0, -0.8), Vec3::new(1.0, 2.0, -2.0) / 3.0]
        {
            let (e1, e2) = tangent_frame(&p);
            assert!((e1.cross(&e2) - p).norm() < 1e-15);
            assert!(e1.dot(&e2).abs() < 1e-15 && (e1.norm() - 1.0).abs() < 1e-15);
        }
    }
}
