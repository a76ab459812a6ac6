//! Numbers that carry derivatives: write a formula once over [`Scalar`], get its exact jets.
//!
//! - `f64`: the value only.
//! - [`Dual2`]: the value and its derivatives by two variables a, b.
//! - [`Jet2`]: also the three second derivatives.
//!
//! # Source
//! The rules are Leibniz' product rule and the chain rule to second order; see A. Griewank and A. Walther,
//! "Evaluating Derivatives", 2nd edition, SIAM 2008, chapters 3 and 13 (from memory).

use std::ops::{Add, Div, Mul, Neg, Sub};

/// A number that a formula can be evaluated over: a value, perhaps with derivatives.
///
/// The elementary functions follow `f64` at the edges of their domain: the root of a negative number is
/// NaN, and a derivative that does not exist (a root at 0) comes out infinite or NaN. Nothing panics.
pub trait Scalar:
    Copy
    + Add<Output = Self>
    + Sub<Output = Self>
    + Mul<Output = Self>
    + Div<Output = Self>
    + Neg<Output = Self>
    + Add<f64, Output = Self>
    + Sub<f64, Output = Self>
    + Mul<f64, Output = Self>
{
    /// A number that does not depend on the variables.
    fn constant(value: f64) -> Self;
    /// The value without its derivatives.
    fn value(self) -> f64;
    /// phi(self), given phi, phi' and phi'' at `self.value()`.
    fn chain(self, phi: f64, phi1: f64, phi2: f64) -> Self;

    /// self squared.
    #[inline(always)]
    fn square(self) -> Self {
        self * self
    }

    /// 1 / self.
    #[inline(always)]
    fn recip(self) -> Self {
        let r = 1.0 / self.value();
        self.chain(r, -r * r, 2.0 * r * r * r)
    }

    /// The square root.
    #[inline(always)]
    fn sqrt(self) -> Self {
        let x = self.value();
        let r = x.sqrt();
        let d = 0.5 / r;
        self.chain(r, d, -0.5 * d / x)
    }

    /// The cube root.
    #[inline(always)]
    fn cbrt(self) -> Self {
        let x = self.value();
        let r = x.cbrt();
        let d = r / (3.0 * x);
        self.chain(r, d, -2.0 * d / (3.0 * x))
    }

    /// e to the power of self.
    #[inline(always)]
    fn exp(self) -> Self {
        let r = self.value().exp();
        self.chain(r, r, r)
    }

    /// The natural logarithm.
    #[inline(always)]
    fn ln(self) -> Self {
        let x = self.value();
        let r = 1.0 / x;
        self.chain(x.ln(), r, -r * r)
    }

    /// self to a constant real power; meant for positive values.
    #[inline(always)]
    fn powf(self, power: f64) -> Self {
        let x = self.value();
        let r = x.powf(power);
        let d = power * r / x;
        self.chain(r, d, (power - 1.0) * d / x)
    }

    /// The sine.
    #[inline(always)]
    fn sin(self) -> Self {
        let (s, c) = self.value().sin_cos();
        self.chain(s, c, -s)
    }

    /// The cosine.
    #[inline(always)]
    fn cos(self) -> Self {
        let (s, c) = self.value().sin_cos();
        self.chain(c, -s, -c)
    }
}

impl Scalar for f64 {
    #[inline(always)]
    fn constant(value: f64) -> Self {
        value
    }
    #[inline(always)]
    fn value(self) -> f64 {
        self
    }
    #[inline(always)]
    fn chain(self, phi: f64, _phi1: f64, _phi2: f64) -> Self {
        phi
    }
}

/// A value and its derivatives by a and b.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Dual2 {
    /// The value.
    pub v: f64,
    /// d/da.
    pub a: f64,
    /// d/db.
    pub b: f64,
}

/// A value with first and second derivatives by a and b.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Jet2 {
    /// The value.
    pub v: f64,
    /// d/da.
    pub a: f64,
    /// d/db.
    pub b: f64,
    /// d2/da2.
    pub aa: f64,
    /// d2/da db.
    pub ab: f64,
    /// d2/db2.
    pub bb: f64,
}

impl Scalar for Dual2 {
    #[inline(always)]
    fn constant(value: f64) -> Self {
        Self { v: value, a: 0.0, b: 0.0 }
    }
    #[inline(always)]
    fn value(self) -> f64 {
        self.v
    }
    #[inline(always)]
    fn chain(self, phi: f64, phi1: f64, _phi2: f64) -> Self {
        Self { v: phi, a: phi1 * self.a, b: phi1 * self.b }
    }
}

impl Scalar for Jet2 {
    #[inline(always)]
    fn constant(value: f64) -> Self {
        Self { v: value, a: 0.0, b: 0.0, aa: 0.0, ab: 0.0, bb: 0.0 }
    }
    #[inline(always)]
    fn value(self) -> f64 {
        self.v
    }
    #[inline(always)]
    fn chain(self, phi: f64, phi1: f64, phi2: f64) -> Self {
        Self {
            v: phi,
            a: phi1 * self.a,
            b: phi1 * self.b,
            aa: phi1 * self.aa + phi2 * self.a * self.a,
            ab: phi1 * self.ab + phi2 * self.a * self.b,
            bb: phi1 * self.bb + phi2 * self.b * self.b,
        }
    }
}

impl Mul for Dual2 {
    type Output = Self;
    #[inline(always)]
    fn mul(self, g: Self) -> Self {
        Self { v: self.v * g.v, a: self.a * g.v + self.v * g.a, b: self.b * g.v + self.v * g.b }
    }
}

impl Mul for Jet2 {
    type Output = Self;
    #[inline(always)]
    fn mul(self, g: Self) -> Self {
        Self {
            v: self.v * g.v,
            a: self.a * g.v + self.v * g.a,
            b: self.b * g.v + self.v * g.b,
            aa: self.aa * g.v + 2.0 * self.a * g.a + self.v * g.aa,
            ab: self.ab * g.v + self.a * g.b + self.b * g.a + self.v * g.ab,
            bb: self.bb * g.v + 2.0 * self.b * g.b + self.v * g.bb,
        }
    }
}

/// The operations that act on every entry alike, and the mixed ones with a constant.
macro_rules! linear_operations {
    ($jet:ident { $($entry:ident),* }) => {
        impl Add for $jet {
            type Output = Self;
            #[inline(always)]
            fn add(self, g: Self) -> Self {
                Self { $($entry: self.$entry + g.$entry),* }
            }
        }
        impl Sub for $jet {
            type Output = Self;
            #[inline(always)]
            fn sub(self, g: Self) -> Self {
                Self { $($entry: self.$entry - g.$entry),* }
            }
        }
        impl Neg for $jet {
            type Output = Self;
            #[inline(always)]
            fn neg(self) -> Self {
                Self { $($entry: -self.$entry),* }
            }
        }
        impl Mul<f64> for $jet {
            type Output = Self;
            #[inline(always)]
            fn mul(self, k: f64) -> Self {
                Self { $($entry: self.$entry * k),* }
            }
        }
        impl Add<f64> for $jet {
            type Output = Self;
            #[inline(always)]
            fn add(self, k: f64) -> Self {
                Self { v: self.v + k, ..self }
            }
        }
        impl Sub<f64> for $jet {
            type Output = Self;
            #[inline(always)]
            fn sub(self, k: f64) -> Self {
                Self { v: self.v - k, ..self }
            }
        }
        impl Div for $jet {
            type Output = Self;
            #[inline(always)]
            #[expect(clippy::suspicious_arithmetic_impl, reason = "f / g = f (1/g)")]
            fn div(self, g: Self) -> Self {
                self * g.recip()
            }
        }
    };
}
linear_operations!(Dual2 { v, a, b });
linear_operations!(Jet2 { v, a, b, aa, ab, bb });

#[cfg(test)]
mod tests {
    use super::*;

    /// A formula that uses every operation; all arguments of roots and logarithms stay positive.
    fn formula<T: Scalar>(x: T, y: T) -> T {
        let m = x.square() + y.square() * 0.5 + 1.5;
        let k = m.sqrt() * m.cbrt() - m.powf(0.375);
        (k / (m + x * y)).exp() * (x - y).sin() + (-y).cos() * m.ln() - m.recip() - 2.0
    }

    #[test]
    fn jets_agree_with_central_differences() {
        let h = 1e-4;
        let f = |i: f64, j: f64, x: f64, y: f64| formula(x + i * h, y + j * h);
        for (x, y) in [(0.3, -0.7), (1.9, 0.4), (-1.2, 1.1), (0.0, 0.0)] {
            let c = |k: f64| Jet2 { v: k, ..Jet2::constant(0.0) };
            let jet = formula(Jet2 { a: 1.0, ..c(x) }, Jet2 { b: 1.0, ..c(y) });
            let dual = formula(Dual2 { v: x, a: 1.0, b: 0.0 }, Dual2 { v: y, a: 0.0, b: 1.0 });
            let f0 = f(0.0, 0.0, x, y);
            let near = |got: f64, want: f64| assert!((got - want).abs() < 2e-7, "{got} {want} at {x} {y}");
            near(jet.v, f0);
            near(dual.v, f0);
            near(jet.a, (f(1.0, 0.0, x, y) - f(-1.0, 0.0, x, y)) / (2.0 * h));
            near(jet.b, (f(0.0, 1.0, x, y) - f(0.0, -1.0, x, y)) / (2.0 * h));
            near(jet.aa, (f(1.0, 0.0, x, y) - 2.0 * f0 + f(-1.0, 0.0, x, y)) / (h * h));
            near(jet.bb, (f(0.0, 1.0, x, y) - 2.0 * f0 + f(0.0, -1.0, x, y)) / (h * h));
            let mixed = f(1.0, 1.0, x, y) - f(1.0, -1.0, x, y) - f(-1.0, 1.0, x, y) + f(-1.0, -1.0, x, y);
            near(jet.ab, mixed / (4.0 * h * h));
            assert!((dual.a - jet.a).abs() < 1e-14 && (dual.b - jet.b).abs() < 1e-14);
        }
    }

    #[test]
    fn jets_of_a_product_of_powers_are_those_computed_by_hand() {
        // f = x^3 y^2 at (2, 3): f = 72, f_x = 108, f_y = 48, f_xx = 108, f_xy = 72, f_yy = 16
        let x = Jet2 { a: 1.0, ..Jet2::constant(2.0) };
        let y = Jet2 { b: 1.0, ..Jet2::constant(3.0) };
        let f = x * x * x * y * y;
        assert_eq!(f, Jet2 { v: 72.0, a: 108.0, b: 48.0, aa: 108.0, ab: 72.0, bb: 16.0 });
    }
}
