//! The set as data, in words and in pictures. Measures nothing.

mod cautions;
mod flat_arrays;
mod json;
pub mod picture;
mod record;
mod sheet;
mod words;

pub use cautions::cautions_text;
pub use json::{SCHEMA, SCHEMA_VERSION, set_json};
pub use record::{RegularityRecord, SetRecord, SkinRecord, SolidRecord, StageRecord, TotalsRecord};
pub use sheet::{SheetPictures, sheet_html};
