//! Skins: families of eversions and their sampling.

mod catalogue;
mod family;
mod linked;
mod ruled;
mod ruled_schedule;
mod sample;
pub mod times;

pub use catalogue::{FamilyError, FamilyInfo, families, family};
pub use family::{Family, Margins, StageSurface};
pub use ruled::{Ruled, RuledStage};
pub use ruled_schedule::Parameters;
pub use sample::{SampleError, sample};
