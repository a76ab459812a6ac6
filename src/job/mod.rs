//! The job as data: what is asked for.

mod keys;
mod parse;
mod problem;
mod write;

pub use keys::{Default, FILE_BYTES_MAX, KEYS, Key, Kind, TIMES_MAX, TITLE_CHARS, reference};
pub use parse::{Known, is_profile_path, parse};
pub use problem::{Cause, JobErrors, Problem};

#[cfg(test)]
mod tests;

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

impl Scale {
    /// Both, in their fixed order.
    pub const ALL: [Self; 2] = [Self::Each, Self::Common];

    /// The name in job files: `each`, `common`.
    #[must_use]
    pub const fn name(self) -> &'static str {
        match self {
            Self::Each => "each",
            Self::Common => "common",
        }
    }
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

/// The built-in starter set, made when no job file is given: five stages of the ruled family, 80 mm, from
/// the round sphere to the halfway model.
#[must_use]
pub fn starter() -> Job {
    Job {
        title: "From sphere to halfway model in five stages".to_owned(),
        profile: "mex-pla".to_owned(),
        formats: vec![Format::Stl, Format::ThreeMf],
        family: "ruled".to_owned(),
        order: 2,
        times: vec![0.0, 0.2, 0.31, 0.42, 0.5],
        size_mm: 80.0,
        scale: Scale::Each,
        wall_mm: 2.0,
        tolerance_mm: 0.05,
        grid_mm: None,
        direction: Vec3::z(),
        colour_a: [0x1f, 0x7a, 0x7a],
        colour_b: [0xe3, 0xc0, 0x8f],
    }
}
