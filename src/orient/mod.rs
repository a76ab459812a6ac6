//! Build directions and placement on the plate.
