//! Lines.
pub mod rtu_timing;
