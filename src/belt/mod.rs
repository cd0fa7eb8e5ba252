//! The belt: where it is, what lies on it, and what nobody saw.

mod coverage;
mod motion;
mod parts;
mod view;

pub use coverage::{Coverage, Stretch};
pub use motion::Motion;
pub use parts::{Gate, Part, Parts};
pub use view::{Cut, Extent, View};
