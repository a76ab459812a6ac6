//! Axis-aligned boxes.

use super::Vec3;

/// A closed axis-aligned box, mm. Empty when `min > max` in some coordinate.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Aabb {
    /// The corner with the smallest coordinates.
    pub min: Vec3,
    /// The corner with the largest coordinates.
    pub max: Vec3,
}

impl Aabb {
    /// The box that contains nothing; the neutral element of [`Aabb::include`].
    pub const EMPTY: Self = Self {
        min: Vec3::new(f64::INFINITY, f64::INFINITY, f64::INFINITY),
        max: Vec3::new(f64::NEG_INFINITY, f64::NEG_INFINITY, f64::NEG_INFINITY),
    };

    /// The smallest box around the points; [`Aabb::EMPTY`] when there are none.
    pub fn around<'a>(points: impl IntoIterator<Item = &'a Vec3>) -> Self {
        let mut b = Self::EMPTY;
        for p in points {
            b.include(p);
        }
        b
    }

    /// Grows the box to contain `p`.
    pub fn include(&mut self, p: &Vec3) {
        self.min = self.min.inf(p);
        self.max = self.max.sup(p);
    }

    /// The box grown by `margin` mm on every side.
    #[must_use]
    pub fn grown(&self, margin: f64) -> Self {
        let m = Vec3::repeat(margin);
        Self { min: self.min - m, max: self.max + m }
    }

    /// The middle of the box.
    #[must_use]
    pub fn centre(&self) -> Vec3 {
        0.5 * (self.min + self.max)
    }

    /// The edge lengths, mm.
    #[must_use]
    pub fn extent(&self) -> Vec3 {
        self.max - self.min
    }

    /// Whether the box contains no point.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        (0..3).any(|k| self.min[k] > self.max[k])
    }

    /// The distance from `p` to the box, mm; 0 inside.
    #[must_use]
    pub fn distance(&self, p: &Vec3) -> f64 {
        let mut s = 0.0;
        for k in 0..3 {
            let d = (self.min[k] - p[k]).max(p[k] - self.max[k]).max(0.0);
            s += d * d;
        }
        s.sqrt()
    }
}
