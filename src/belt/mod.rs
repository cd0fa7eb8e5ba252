//! The belt: where it is, what lies on it, and what nobody saw.

mod motion;

pub use motion::Motion;
