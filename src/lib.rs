//! Printable stages of the sphere eversion: from a formula to files for a printer.
//!
//! The data flow, one room of the house at a time (see DEVELOPERS.md for the map):
//!
//! 1. [`job`] reads what is wanted; [`profile`] knows the printing process and its limits.
//! 2. [`skin`] evaluates a family of formulas at a time `tau` and samples it into triangles.
//! 3. [`field`] is the distance to the skin; everything stays a field until it is meshed.
//! 4. [`solid`] meshes the field into a closed two-manifold, simplifies it and audits it.
//! 5. [`check`] measures the solid against the profile and returns findings.
//! 6. [`export`] writes STL, OBJ and 3MF; [`report`] words and draws what was measured.
//! 7. [`pipeline`] puts these in order for one stage, [`batch`] for a set, [`cli`] for a terminal.

pub mod units;

pub mod geom;
pub mod profile;

pub mod mesh;

pub mod check;
pub mod export;
pub mod field;
pub mod skin;
pub mod solid;

pub mod job;
pub mod orient;

pub mod report;

pub mod pipeline;

pub mod batch;

pub mod cli;
