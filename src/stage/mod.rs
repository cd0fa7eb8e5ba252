//! The gray stage: top-hat, threshold, fill, regions. A frame goes in, runs of foreground come out.
//!
//! ```text
//! Gray ──> top-hat ──> threshold ──> fill ────────────> regions ──> Scene
//!          row bands   rows of bits  background runs    foreground runs
//!          (kernels)   to runs       4-connected        8-connected
//! ```
//!
//! Nothing is stored per pixel after the threshold: from there on the work is done on runs.
//!
//! ```
//! use beltwright::frames::Gray;
//! use beltwright::stage::{Element, Level, Plan, Polarity, Stage, Threshold};
//!
//! let plan = Plan {
//!     width_px: 5,
//!     height_px: 5,
//!     polarity: Polarity::Bright,
//!     element: Element::Rectangle { width_px: 3, height_px: 3 },
//!     threshold: Threshold::Fixed { level: 2 },
//!     fill_below_px: 0,
//!     speck_below_px: 1,
//! };
//! let pixels = [
//!     2, 3, 3, 3, 2, //
//!     3, 4, 5, 4, 3, //
//!     3, 5, 9, 5, 3, //
//!     3, 4, 5, 4, 3, //
//!     2, 3, 3, 3, 2,
//! ];
//! let picture = Gray { pixels: &pixels, width_px: 5, height_px: 5, stride_px: 5 };
//! let mut stage = Stage::new(&plan, Level::choose()?);
//! let scene = stage.run(picture);
//! assert_eq!(scene.regions.len(), 1);
//! assert_eq!(scene.regions[0].area_px, 1);
//! assert_eq!((scene.regions[0].centroid_x, scene.regions[0].centroid_y), (2.0, 2.0));
//! # Ok::<(), beltwright::stage::KernelError>(())
//! ```

mod plan;
mod scene;

mod kernels;

mod buffer;
mod element;

mod slide;

mod across;
mod diagonals;
mod tophat;

mod morphology;

mod forest;
mod histogram;
mod runs;

mod fill;
mod regions;
mod threshold;

mod again;
mod pipeline;
#[cfg(test)]
mod plain;
mod steps;

pub use again::{Again, OtsuLevels};
pub use kernels::{KernelError, Level};
pub use morphology::{dilation, erosion};
pub use pipeline::Stage;
pub use plan::{Element, Plan, Polarity, Threshold};
pub use scene::{Region, Run, Scene};
pub use steps::Steps;
pub use threshold::otsu_level;
pub use tophat::TopHat;
