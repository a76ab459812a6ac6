//! Skins: families of eversions and their sampling.

mod family;

pub use family::{Family, Margins, StageSurface};
