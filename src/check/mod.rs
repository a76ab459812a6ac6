//! Checks of a solid against a printing profile. Each returns findings; none stops a set.

mod finding;

pub use finding::{Finding, Verdict};
