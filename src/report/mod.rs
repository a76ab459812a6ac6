//! The set as data, in words and in pictures. Measures nothing.

mod record;

pub use record::{RegularityRecord, SetRecord, SkinRecord, SolidRecord, StageRecord};
