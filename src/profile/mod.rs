//! Printing profiles: a process, a material, a machine, and the limits the checks use, each with its source.
//!
//! Six profiles are embedded ([`built_in_names`]); a file with the same keys overrides or adds one
//! ([`Profile::parse`]). All their numbers are screening values: defaults of this tool taken from
//! published guides, never the requirement of a standard.

mod built_in;
mod describe;
mod parse;

pub use built_in::built_in_names;
pub use describe::describe;
pub(crate) use parse::kind;
pub use parse::{Problem, ProfileErrors};

use serde::{Deserialize, Serialize};

/// A limit and where it comes from.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Limit {
    /// The number; its unit is in the name of the field that holds it.
    pub value: f64,
    /// A published source, or "common practice, no source".
    pub source: String,
}

/// What fills a sealed chamber when the print comes out of the machine.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Trapped {
    /// Air, and whatever supports were built inside.
    Air,
    /// Loose powder.
    Powder,
    /// Uncured liquid resin.
    Resin,
    /// Support material filling the chamber.
    Support,
}

impl Trapped {
    /// All kinds in their fixed order.
    pub const ALL: [Self; 4] = [Self::Air, Self::Powder, Self::Resin, Self::Support];

    /// The word used in profile files: `air`, `powder`, `resin`, `support`.
    #[must_use]
    pub const fn name(self) -> &'static str {
        match self {
            Self::Air => "air",
            Self::Powder => "powder",
            Self::Resin => "resin",
            Self::Support => "support",
        }
    }
}

/// A printing process with the limits the checks use. Lengths in mm, angles in degrees.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Profile {
    /// The name used in job files: `mex-pla`.
    pub name: String,
    /// What a person calls it.
    pub title: String,
    /// The process category by its ISO/ASTM 52900 name: `material extrusion`.
    pub process: String,
    /// Its abbreviation: `MEX`.
    pub process_code: String,
    /// The material.
    pub material: String,
    /// What is left in a chamber nothing opens.
    pub trapped: Trapped,
    /// Thinnest wall attached on two sides or more.
    pub wall_supported_mm: Limit,
    /// Thinnest wall attached on fewer than two sides.
    pub wall_unsupported_mm: Limit,
    /// Narrowest air between faces that must not fuse.
    pub clearance_mm: Limit,
    /// Smallest feature that survives; shells smaller than its cube are filled or dropped.
    pub feature_mm: Limit,
    /// Surface facing down needs support when its angle from the HORIZONTAL is below this; absent when
    /// the process carries overhangs by itself.
    pub overhang_deg: Option<Limit>,
    /// Longest unsupported bridge.
    pub bridge_mm: Option<Limit>,
    /// Smallest hole that lets powder or resin out.
    pub drain_mm: Option<Limit>,
    /// Holes wanted per chamber.
    pub drain_count: Option<Limit>,
    /// Thinnest stroke of raised or cut-in text.
    pub text_stroke_mm: Limit,
    /// Layer height.
    pub layer_mm: Limit,
    /// Build envelope x, y, z.
    pub envelope_mm: [f64; 3],
    /// Where the envelope comes from.
    pub envelope_source: String,
    /// Density of the printed material, g/cm3.
    pub density_g_cm3: Limit,
    /// Cautions to print with every set made for this process.
    pub cautions: Vec<String>,
}
