//! What a reader gives back besides the mesh.

use super::format::MeshFormat;
use crate::mesh::TriMesh;
use std::fmt;

/// A mesh read from a file, with what a person should know about the reading.
#[derive(Clone, Debug, PartialEq)]
pub struct Imported {
    /// The mesh, mm.
    pub mesh: TriMesh,
    /// The format it came in.
    pub format: MeshFormat,
    /// Bodies the file names: solids of an STL file, objects with faces of an OBJ file, placed meshes of a 3MF
    /// file; at least 1. Says nothing of how the surface hangs together.
    pub bodies: usize,
    /// What was assumed, converted or left out, in a fixed order.
    pub notes: Vec<ReadNote>,
}

/// Something assumed, converted or left out while reading.
#[derive(Clone, Debug, PartialEq)]
pub enum ReadNote {
    /// The format has no unit.
    UnitAssumed(MeshFormat),
    /// The file has a unit; coordinates were multiplied by `factor` to get mm.
    UnitGiven {
        /// The unit's name in the file.
        unit: &'static str,
        /// mm per unit.
        factor: f64,
    },
    /// Bytes after the last facet of a binary STL file.
    TrailingBytes(u64),
    /// An ASCII STL file that ends without `endsolid`.
    NoEndSolid,
    /// Faces with more than three corners, cut into fans from their first corner.
    Polygons(usize),
    /// Vertices that had the same place as an earlier one and were joined with it.
    Joined(usize),
    /// Lines of an OBJ file that are not faces: points, lines, free-form curves and surfaces.
    NotFaces(usize),
    /// Objects of a 3MF file left out because of their type.
    LeftOut {
        /// The type: `support`, `surface`, `other`.
        kind: &'static str,
        /// Placed objects left out.
        count: usize,
    },
    /// Placed objects that a transform mirrors; their triangles were turned to keep the outside out.
    Mirrored(usize),
    /// Extensions the 3MF file requires that are not read, by their prefixes.
    Extensions(String),
}

impl fmt::Display for ReadNote {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::UnitAssumed(format) => {
                write!(f, "{} carries no unit: coordinates were taken as millimetres", format.name())
            }
            Self::UnitGiven { unit, factor } => write!(f, "the file's unit is {unit} ({factor} mm)"),
            Self::TrailingBytes(n) => write!(f, "{n} bytes after the last facet were not read"),
            Self::NoEndSolid => write!(f, "the file ends without `endsolid`: it may have been cut off"),
            Self::Polygons(n) => {
                write!(
                    f,
                    "{n} faces with more than three corners were cut into triangles from their first corner"
                )
            }
            Self::Joined(n) => write!(f, "{n} vertices at the place of another were joined with it"),
            Self::NotFaces(n) => write!(f, "{n} points, lines or free-form elements were left out"),
            Self::LeftOut { kind, count } => write!(f, "{count} placed objects of type {kind} were left out"),
            Self::Mirrored(n) => {
                write!(f, "{n} placed objects are mirrored; their triangles were turned over")
            }
            Self::Extensions(names) => {
                write!(
                    f,
                    "the file requires the extensions {names}, which are not read: shape may be missing"
                )
            }
        }
    }
}
