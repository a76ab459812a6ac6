//! The set as data, in words and in pictures. Measures nothing.

mod flat_arrays;
mod json;
pub mod picture;
mod record;

pub use json::{SCHEMA, SCHEMA_VERSION, set_json};
pub use record::{RegularityRecord, SetRecord, SkinRecord, SolidRecord, StageRecord, TotalsRecord};
