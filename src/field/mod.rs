//! Distance fields: until it is meshed, everything is a field.
//!
//! A [`Field`] is a 1-Lipschitz function that is not positive in the material. Joining two solids is the
//! minimum of their fields, cutting is the maximum with the negative; the mesher in `solid` turns any
//! field into one closed mesh and asks nothing else of it.

mod sheet;

pub use sheet::{SheetError, SheetField};

use crate::geom::{Aabb, Vec3};
use crate::mesh::Side;

/// What a field says at a point.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Sample {
    /// Not positive in the material, positive in air, mm.
    pub value: f64,
    /// Unit vector of steepest increase; away from the material.
    pub gradient: Vec3,
    /// What the nearest boundary belongs to.
    pub side: Side,
    /// Which smooth piece of the boundary is meant; to be handed back to [`LocalField::piece`].
    pub piece: u32,
}

/// A solid as the set where a 1-Lipschitz function is not positive.
pub trait Field: Send + Sync {
    /// A box that contains the solid.
    fn bounds(&self) -> Aabb;
    /// The same field, valid within `region` only, and cheaper there.
    fn within(&self, region: &Aabb) -> Box<dyn LocalField<'_> + '_>;
    /// How far [`LocalField::sample`] may be from the exact value, mm.
    fn accuracy_mm(&self) -> f64;
}

/// A field narrowed to a region; narrowing again makes it cheaper still.
pub trait LocalField<'f>: Send + Sync {
    /// The same field, valid within the smaller `region` only.
    fn narrowed(&self, region: &Aabb) -> Box<dyn LocalField<'f> + 'f>;
    /// Bounds of the value over `region`, which must lie in the region this field is valid in, mm.
    fn range(&self, region: &Aabb) -> (f64, f64);
    /// The value at `p`, mm. Its sign is that of [`LocalField::sample`]; away from zero it may be less exact.
    fn value(&self, p: &Vec3) -> f64;
    /// Value, gradient, side and piece at `p`, to the accuracy of the field.
    fn sample(&self, p: &Vec3) -> Sample;
    /// The same for the smooth piece named by an earlier sample, whether or not it is the nearest at `p`:
    /// where two pieces meet in an edge, each can be followed past the edge.
    fn piece(&self, piece: u32, p: &Vec3) -> Sample;
    /// The least value at `p` over the pieces of the boundary that face the one in direction `gradient`
    /// across a gap: whose own gradient is more than 120 degrees away from it. Infinite when there is none
    /// in the region. Accurate to the chord error of the field.
    fn facing(&self, p: &Vec3, gradient: &Vec3) -> f64;
}
