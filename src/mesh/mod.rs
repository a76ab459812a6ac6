//! Indexed triangle meshes, where they came from and where they go being none of their business.

mod tri_mesh;

pub use tri_mesh::{Side, SkinMesh, TriMesh};
