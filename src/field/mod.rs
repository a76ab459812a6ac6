//! Distance fields: until it is meshed, everything is a field.

use crate::geom::{Aabb, Vec3};
use crate::mesh::Side;

/// What a field says at a point.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Sample {
    /// Negative in the material, positive in air, mm. 1-Lipschitz.
    pub value: f64,
    /// Unit vector of steepest increase where the value is smooth.
    pub gradient: Vec3,
    /// What the nearest boundary belongs to.
    pub side: Side,
}

/// A solid as the set where a 1-Lipschitz function is not positive.
pub trait Field: Send + Sync {
    /// A box that contains the solid.
    fn bounds(&self) -> Aabb;
    /// The same field, valid within `region` only, and cheaper there.
    fn within<'f>(&'f self, region: &Aabb) -> Box<dyn LocalField + 'f>;
}

/// A field narrowed to a region; narrowing again makes it cheaper still.
pub trait LocalField {
    /// The same field, valid within the smaller `region` only.
    fn narrowed<'f>(&'f self, region: &Aabb) -> Box<dyn LocalField + 'f>;
    /// The value at `p`, mm; exact in sign.
    fn value(&self, p: &Vec3) -> f64;
    /// Value, gradient and side at `p`.
    fn sample(&self, p: &Vec3) -> Sample;
}
