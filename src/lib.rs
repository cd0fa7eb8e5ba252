//! Turns a camera over a conveyor and a line-side PC into a sorter.
//!
//! ```text
//! frames ──> stage ──> shape ──> belt ──> reject ──> line
//! gray       regions   verdict   parts    windows    bytes with the moment
//! pictures   as runs   in mm     merged   in mm      at which they are due
//! ```
//!
//! The modules stand in the order in which a frame flows through them, and a module uses only modules above it.
#![deny(unsafe_code)]

pub mod units;

pub mod clock;

pub mod laps;

pub mod health;

pub mod stats;

pub mod settings;

pub mod frames;

pub mod stage;

pub mod shape;

pub mod belt;

pub mod inspect;

pub mod reject;

pub mod sorter;

pub mod recording;

pub mod replay;

pub mod tuning;

pub mod pace;

pub mod cli;
