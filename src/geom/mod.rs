//! Plain geometry: vectors, boxes, triangles, smooth surfaces. Knows nothing of meshes.

mod aabb;
mod curvature;
mod jet;
mod quadrature;
mod search;
mod surface;
mod triangle;

pub use aabb::Aabb;
pub use curvature::Curvature;
pub use jet::{Dual2, Jet2, Scalar};
pub use quadrature::gauss_legendre;
pub use search::golden_section_minimum;
pub use surface::{FirstJet, Placed, Placement, SecondJet, Surface, tangent_frame};
pub use triangle::{ClosestPoint, closest_point_on_triangle};

/// A point or a vector in space; positions are in mm unless a name says otherwise.
pub type Vec3 = nalgebra::Vector3<f64>;
