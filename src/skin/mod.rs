//! Skins: families of eversions, their sampling and their figures.

mod catalogue;
mod extent;
mod family;
mod linked;
mod overlap;
mod regularity;
mod ruled;
mod ruled_schedule;
mod sample;
mod sphere;
pub mod times;

pub use catalogue::{FamilyError, FamilyInfo, families, family};
pub use extent::{AxisBall, enclosing_ball, extent};
pub use family::{Family, Margins, StageSurface};
pub use overlap::{SheetOverlap, sheet_overlap};
pub use regularity::{SkinFigures, figures};
pub use ruled::{Ruled, RuledStage};
pub use ruled_schedule::Parameters;
pub use sample::{SampleError, sample};
