//! How a stage stands on the build plate: the build direction turned to +z, the scale, the place on the plate.

mod placement;

pub use placement::{OrientError, place, rotation_to_z, scale_for_extent};
