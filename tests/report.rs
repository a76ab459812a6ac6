//! The set as data, in words and in pictures, seen from outside the library.
#![allow(clippy::unwrap_used, reason = "test code")]

mod report {
    mod json;
    mod pictures;
    pub(crate) mod sample;
    mod sheet;
}
