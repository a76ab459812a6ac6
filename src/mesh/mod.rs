//! Indexed triangle meshes, where they came from and where they go being none of their business.

mod components;
pub mod crossing;
mod edges;
pub mod measure;
pub mod shapes;
mod tree;
mod tree_build;
mod tri_mesh;
mod weld;

pub use components::{Component, components};
pub use edges::{Edge, EdgeTable, EdgeUse, Fans, NO_TRIANGLE};
pub use tree::{Hit, RayHit, Tree};
pub use tri_mesh::{Side, SkinMesh, TriMesh};
pub use weld::first_equal;
