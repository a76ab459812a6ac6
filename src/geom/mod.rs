//! Plain geometry: vectors, boxes, triangles, smooth surfaces. Knows nothing of meshes.

mod aabb;
mod surface;
mod triangle;

pub use aabb::Aabb;
pub use surface::{FirstJet, Placed, Placement, SecondJet, Surface, tangent_frame};
pub use triangle::{ClosestPoint, closest_point_on_triangle};

/// A point or a vector in space; positions are in mm unless a name says otherwise.
pub type Vec3 = nalgebra::Vector3<f64>;
