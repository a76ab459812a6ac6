//! The family `ruled`: one closed formula for every stage, round sphere to round sphere.
//!
//! # Source
//! A. and W. Bednorz, "Analytic sphere eversion using ruled surfaces", arXiv 1711.10466: the ruled cylinder,
//! the exponent kappa, the closing maps. Derived for this project: a q that does not depend on t, the
//! separation term of the poles, the ball map y / sqrt(|y|^2 + e^2), the schedule, and the form below that
//! has no coordinate singularity (numerators and denominators multiplied by rho^n).

use super::family::{Family, StageSurface};
use super::ruled_schedule::{self, Parameters};
use crate::geom::{Dual2, FirstJet, Jet2, Scalar, SecondJet, Surface, Vec3};

pub(super) use super::ruled_schedule::{MAX_ORDER, MIN_ORDER};

pub(super) const NAME: &str = "ruled";
pub(super) const SOURCE: &str = "after A. and W. Bednorz, \"Analytic sphere eversion using ruled surfaces\", \
     arXiv 1711.10466; separation term, ball map and schedule of this program";

/// The family `ruled` with one symmetry order.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Ruled {
    order: u32,
}

impl Ruled {
    /// The family of symmetry order 2..=5; `None` for any other order.
    #[must_use]
    pub fn new(order: u32) -> Option<Self> {
        (MIN_ORDER..=MAX_ORDER).contains(&order).then_some(Self { order })
    }

    /// The stage at `tau` (clamped into 0..=1) with its own type.
    #[must_use]
    pub fn stage_at(&self, tau: f64) -> RuledStage {
        RuledStage::new(self.order, tau)
    }
}

impl Family for Ruled {
    fn name(&self) -> &'static str {
        NAME
    }
    fn order(&self) -> u32 {
        self.order
    }
    fn source(&self) -> &'static str {
        SOURCE
    }
    fn stage(&self, tau: f64) -> Box<dyn StageSurface> {
        Box::new(self.stage_at(tau))
    }
    fn halfway_is_double_cover(&self) -> bool {
        self.order % 2 == 1
    }
}

/// One stage of the family `ruled`; lies in the closed unit ball.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct RuledStage {
    order: u32,
    tau: f64,
    par: Parameters,
    turn: (f64, f64),
}

impl RuledStage {
    fn new(order: u32, tau: f64) -> Self {
        let par = ruled_schedule::parameters(order, tau);
        Self { order, tau: tau.clamp(0.0, 1.0), par, turn: par.psi.sin_cos() }
    }

    /// The parameters of the formula at this time.
    #[must_use]
    pub const fn parameters(&self) -> &Parameters {
        &self.par
    }

    #[inline(always)]
    fn image<T: Scalar>(&self, x: [T; 3]) -> [T; 3] {
        match self.order {
            2 => self.formula::<T, 2>(x),
            3 => self.formula::<T, 3>(x),
            4 => self.formula::<T, 4>(x),
            _ => self.formula::<T, 5>(x),
        }
    }

    /// The whole formula for order `N`, at the unit vector (x, y, z). Letters as in the sources.
    ///
    /// `den` > 0 always: m = 0 forces D = xi rho^2n > 0 and rho > 0; and D > 0 always (rho = 0 gives
    /// m = om^2). So poles, axis points and equator are ordinary points.
    #[inline(always)]
    fn formula<T: Scalar, const N: u32>(&self, [x, y, z]: [T; 3]) -> [T; 3] {
        let p = &self.par;
        let r2 = x * x + y * y;
        let rho_n = half_power::<T, N>(r2);
        let rho_2n = if N.is_multiple_of(2) { rho_n.square() } else { whole_power::<T, N>(r2) };
        let (mut cn, mut sn) = (x, y);
        for _ in 1..N {
            (cn, sn) = (cn * x - sn * y, cn * y + sn * x);
        }
        let hz = z * p.om;
        let a = rho_n * p.t + sn;
        let b = cn + hz;
        let m = a.square() + b.square();
        let d = m + rho_2n * p.xi;
        let zeta = (hz * sn - rho_n * cn * (p.q / f64::from(N))) * p.l / d
            - hz * p.mu / (hz.square() + rho_2n * (p.nu * p.nu)).sqrt();
        let k = kappa_power::<T, N>(d);
        let g = r2 * k.square();
        let b2m = m * (p.b * p.b);
        let radial = zeta.exp() / (b2m + g);
        let across = radial * k * (2.0 * p.b);
        let (px, py) = (across * (x * a - y * b), across * (x * b + y * a));
        let pz = radial * (g - b2m) - p.zc;
        let shrink = (px.square() + py.square() + pz.square() + p.e * p.e).sqrt().recip();
        let (s, c) = self.turn;
        [(px * c - py * s) * shrink, (px * s + py * c) * shrink, pz * shrink]
    }
}

/// r2^N, N >= 2.
#[inline(always)]
fn whole_power<T: Scalar, const N: u32>(r2: T) -> T {
    let mut r = r2;
    for _ in 1..N {
        r = r * r2;
    }
    r
}

/// rho^N = r2^(N/2). For odd N the derivatives are written out, so that none of them divides by a power of
/// r2 that would overflow near the pole; at the pole itself (N >= 3) they are 0, the true limit.
#[inline(always)]
fn half_power<T: Scalar, const N: u32>(r2: T) -> T {
    match N {
        2 => r2,
        4 => r2.square(),
        _ => {
            let v = r2.value();
            if v <= 0.0 {
                return T::constant(0.0);
            }
            let root = v.sqrt();
            if N == 3 {
                r2.chain(v * root, 1.5 * root, 0.75 / root)
            } else {
                r2.chain(v * v * root, 2.5 * v * root, 3.75 * root)
            }
        }
    }
}

/// D^kappa with kappa = (N - 1) / (2 N).
#[inline(always)]
fn kappa_power<T: Scalar, const N: u32>(d: T) -> T {
    match N {
        2 => d.sqrt().sqrt(),
        3 => d.cbrt(),
        4 => {
            let quarter = d.sqrt().sqrt();
            quarter * quarter.sqrt()
        }
        _ => d.powf(0.4),
    }
}

impl Surface for RuledStage {
    fn position(&self, p: Vec3) -> Vec3 {
        Vec3::from(self.image([p.x, p.y, p.z]))
    }

    fn first(&self, p: Vec3, e1: Vec3, e2: Vec3) -> FirstJet {
        let x = |k: usize| Dual2 { v: p[k], a: e1[k], b: e2[k] };
        let [x, y, z] = self.image([x(0), x(1), x(2)]);
        FirstJet {
            position: Vec3::new(x.v, y.v, z.v),
            d1: Vec3::new(x.a, y.a, z.a),
            d2: Vec3::new(x.b, y.b, z.b),
        }
    }

    fn second(&self, p: Vec3, e1: Vec3, e2: Vec3) -> SecondJet {
        let x = |k: usize| Jet2 { v: p[k], a: e1[k], b: e2[k], aa: -p[k], ab: 0.0, bb: -p[k] };
        let [x, y, z] = self.image([x(0), x(1), x(2)]);
        SecondJet {
            position: Vec3::new(x.v, y.v, z.v),
            d1: Vec3::new(x.a, y.a, z.a),
            d2: Vec3::new(x.b, y.b, z.b),
            d11: Vec3::new(x.aa, y.aa, z.aa),
            d12: Vec3::new(x.ab, y.ab, z.ab),
            d22: Vec3::new(x.bb, y.bb, z.bb),
        }
    }
}

/// Samples of [-1, 1] in the search for the least fold value; Phi varies over S on a scale of about
/// nu / n >= 0.2, hundreds of times their distance.
const FOLD_SAMPLES: u32 = 2000;

impl StageSurface for RuledStage {
    fn tau(&self) -> f64 {
        self.tau
    }

    fn symmetry(&self) -> u32 {
        self.order
    }

    /// min over the fold of Phi / (L c), c = n - 1: the ruled cylinder is immersed exactly when it is
    /// positive (or Phi is negative all over, which does not happen), and every later map is a
    /// diffeomorphism. 1 at tau = 1/2 (reached at S = +-1).
    ///
    /// On the fold h = c cos(n phi), so Phi depends on S = sin(n phi) alone: the minimum over 2001 even
    /// samples, refined by golden-section search in the neighbouring cells to 1e-12 (relative) of the
    /// value. Double precision without directed rounding: a measurement, not an interval proof.
    fn fold_margin(&self) -> Option<f64> {
        let at = |k: u32| (2.0 * f64::from(k) / f64::from(FOLD_SAMPLES) - 1.0).clamp(-1.0, 1.0);
        let (mut best, mut low) = (0, f64::INFINITY);
        for k in 0..=FOLD_SAMPLES {
            let f = self.fold_value(at(k));
            if f < low {
                (best, low) = (k, f);
            }
        }
        let refined = crate::geom::golden_section_minimum(
            |s| self.fold_value(s),
            at(best.saturating_sub(1)),
            at((best + 1).min(FOLD_SAMPLES)),
        );
        Some(low.min(refined.1))
    }
}

impl RuledStage {
    /// Phi / (L c) on the fold at S = sin(n phi), |S| <= 1.
    fn fold_value(&self, s: f64) -> f64 {
        let p = &self.par;
        let n = f64::from(self.order);
        let c = n - 1.0;
        let cos2 = 1.0 - s * s;
        let w2 = (p.t + s).powi(2) + n * n * cos2;
        let h2 = c * c * cos2;
        let separation = p.mu * p.nu * p.nu * (h2 + p.nu * p.nu).powf(-1.5) * (p.xi + w2);
        let phi = p.l * c * (n - c * s * s) + p.l * (p.q - p.t) * s + separation * (p.t - c * s);
        phi / (p.l * c)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::geom::tangent_frame;

    #[test]
    fn jets_agree_with_central_differences_near_poles_too() {
        let points =
            [Vec3::z(), -Vec3::z(), Vec3::new(1e-6, -2e-6, 1.0), Vec3::new(0.3, -0.8, 0.4), Vec3::x()];
        for order in MIN_ORDER..=MAX_ORDER {
            let stage = RuledStage::new(order, 0.31);
            for p in points {
                let p = p.normalize();
                let (e1, e2) = tangent_frame(&p);
                let (first, second) = (stage.first(p, e1, e2), stage.second(p, e1, e2));
                let h = 1e-4;
                let f = |i: f64, j: f64| stage.position((p + e1 * (i * h) + e2 * (j * h)).normalize());
                let near = |got: Vec3, want: Vec3, tol: f64| {
                    assert!((got - want).norm() < tol, "order {order} at {p}: {got} against {want}");
                };
                near(first.position, f(0.0, 0.0), 1e-15);
                near(second.position, first.position, 1e-15);
                near(first.d1, (f(1.0, 0.0) - f(-1.0, 0.0)) / (2.0 * h), 2e-6);
                near(first.d2, (f(0.0, 1.0) - f(0.0, -1.0)) / (2.0 * h), 2e-6);
                near(second.d1, first.d1, 1e-13);
                near(second.d2, first.d2, 1e-13);
                let mid = 2.0 * f(0.0, 0.0);
                near(second.d11, (f(1.0, 0.0) - mid + f(-1.0, 0.0)) / (h * h), 2e-4);
                near(second.d22, (f(0.0, 1.0) - mid + f(0.0, -1.0)) / (h * h), 2e-4);
                let mixed = f(1.0, 1.0) - f(1.0, -1.0) - f(-1.0, 1.0) + f(-1.0, -1.0);
                near(second.d12, mixed / (4.0 * h * h), 2e-4);
            }
        }
    }

    #[test]
    fn halfway_fold_margin_is_one() {
        for order in MIN_ORDER..=MAX_ORDER {
            let margin = RuledStage::new(order, 0.5).fold_margin().unwrap();
            assert!((margin - 1.0).abs() < 1e-12, "{margin}");
        }
    }

    #[test]
    fn a_stage_outside_the_time_range_is_the_nearest_end() {
        assert_eq!(RuledStage::new(2, -3.0), RuledStage::new(2, 0.0));
        assert!(RuledStage::new(2, f64::NAN).position(Vec3::x()).x.is_nan());
        assert!(Ruled::new(6).is_none() && Ruled::new(1).is_none());
    }
}
