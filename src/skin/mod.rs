//! Skins: families of eversions and their sampling.

mod catalogue;
mod family;
mod ruled;
mod ruled_schedule;
pub mod times;

pub use catalogue::{FamilyError, FamilyInfo, families, family};
pub use family::{Family, Margins, StageSurface};
pub use ruled::{Ruled, RuledStage};
pub use ruled_schedule::Parameters;
