//! The settings file: fields, defaults, ranges, and the checks between keys.

mod fields;

pub use fields::*;
