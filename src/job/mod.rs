//! The job as data: what is asked for.

use crate::geom::Vec3;

/// A file format for the solids.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum Format {
    /// Binary STL.
    Stl,
    /// Wavefront OBJ with a material file.
    Obj,
    /// 3MF, core specification.
    ThreeMf,
}

impl Format {
    /// All formats in their fixed order.
    pub const ALL: [Self; 3] = [Self::Stl, Self::Obj, Self::ThreeMf];

    /// The name in job files and the file extension: `stl`, `obj`, `3mf`.
    #[must_use]
    pub const fn name(self) -> &'static str {
        match self {
            Self::Stl => "stl",
            Self::Obj => "obj",
            Self::ThreeMf => "3mf",
        }
    }
}

/// How the stages of a set are scaled.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Scale {
    /// Every stage has the greatest extent asked for.
    Each,
    /// One scale for all: the largest stage has the greatest extent asked for.
    Common,
}

/// One set to make, validated: every number is finite and in its documented range.
#[derive(Clone, Debug, PartialEq)]
pub struct Job {
    /// The set's title, as typed.
    pub title: String,
    /// Name of a built-in profile, or a path.
    pub profile: String,
    /// Formats to write, in order, no doubles.
    pub formats: Vec<Format>,
    /// Name of the family.
    pub family: String,
    /// Symmetry order.
    pub order: u32,
    /// The chosen times, each in 0..=1, in the order asked for.
    pub times: Vec<f64>,
    /// Greatest extent of the finished solid, wall included, mm.
    pub size_mm: f64,
    /// How `size_mm` applies to the stages.
    pub scale: Scale,
    /// Wall thickness, mm.
    pub wall_mm: f64,
    /// How far the printed surface may be from the exact one, mm.
    pub tolerance_mm: f64,
    /// Edge length of the sampling grid, mm; `None` lets the program choose from wall and tolerance.
    pub grid_mm: Option<f64>,
    /// Build direction in the family's own coordinates, a unit vector: becomes +z in the files.
    pub direction: Vec3,
    /// sRGB colour of side A.
    pub colour_a: [u8; 3],
    /// sRGB colour of side B.
    pub colour_b: [u8; 3],
}
