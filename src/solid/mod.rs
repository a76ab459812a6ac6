//! From a field to a closed two-manifold mesh, simplified and audited.

mod audit;
mod cube;
mod deviation;
mod extract;
mod fill;
mod finish;
mod lattice;
mod level;
mod probe;
mod seams;
mod shells;
mod simplify;
mod solidify;

pub use audit::{Audit, Fault, FaultKind, KEPT_PER_KIND, audit};
pub use finish::finish;
pub use probe::Probe;
pub use shells::Shell;
pub use simplify::{Simplified, SimplifyError, SimplifySettings, simplify};
pub use solidify::{GridError, GridSettings, Meshed, block_estimate, solidify};
