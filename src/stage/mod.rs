//! The gray stage: top-hat, threshold, fill, regions. A frame goes in, runs of foreground come out.

use crate::frames::Gray;

/// What the stage does, every size in pixels.
#[derive(Clone, Debug, PartialEq)]
pub struct Plan {
    /// Columns of the region of interest.
    pub width_px: usize,
    /// Rows of the region of interest.
    pub height_px: usize,
    /// Whether parts are brighter or darker than the belt.
    pub polarity: Polarity,
    /// The top-hat's flat structuring element.
    pub element: Element,
    /// How foreground is told from background after the top-hat.
    pub threshold: Threshold,
    /// Background regions (4-connected) that do not touch the border and have at most this many pixels are filled.
    pub fill_below_px: u64,
    /// Regions with fewer pixels are specks: counted and dropped.
    pub speck_below_px: u64,
}

/// Which way parts differ from the belt.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Polarity {
    /// Image minus its opening.
    Bright,
    /// Closing minus the image.
    Dark,
}

/// A flat structuring element, centred (an even size reaches one pixel further towards the start).
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Element {
    /// An upright rectangle.
    Rectangle {
        /// Columns, at least 1.
        width_px: usize,
        /// Rows, at least 1.
        height_px: usize,
    },
    /// A regular octagon as near as pixels allow, of odd diameter.
    Octagon {
        /// Columns and rows, odd.
        diameter_px: usize,
    },
}

/// Foreground is value > level.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Threshold {
    /// One level for every frame.
    Fixed {
        /// The level.
        level: u8,
    },
    /// Otsu's level of each frame, but never below the floor.
    Otsu {
        /// The lowest level that is used.
        floor: u8,
    },
    /// Pixels above `low` that are 8-connected to a pixel above `high`.
    Hysteresis {
        /// The lower level.
        low: u8,
        /// The upper level.
        high: u8,
    },
}

/// A horizontal run of foreground: row `y`, columns `x0..x1`.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub struct Run {
    /// Row.
    pub y: u32,
    /// First column.
    pub x0: u32,
    /// One past the last column.
    pub x1: u32,
}

/// One 8-connected region of foreground. Coordinates are pixel indices of the region of interest.
#[derive(Clone, Debug, PartialEq)]
pub struct Region {
    /// Number of pixels.
    pub area_px: u64,
    /// Leftmost column.
    pub x_min: u32,
    /// Topmost row.
    pub y_min: u32,
    /// One past the rightmost column.
    pub x_max: u32,
    /// One past the lowest row.
    pub y_max: u32,
    /// Mean column of the pixel centres, the first column being 0.
    pub centroid_x: f64,
    /// Mean row.
    pub centroid_y: f64,
    /// Central second moments: sums of dx*dx, dx*dy, dy*dy over the pixels.
    pub mu20: f64,
    /// See `mu20`.
    pub mu11: f64,
    /// See `mu20`.
    pub mu02: f64,
    /// Its runs in `Scene::runs`, sorted by row, then column.
    pub runs: std::ops::Range<usize>,
}

/// What the stage found in one frame. Regions are in the order of their first pixel, row by row.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Scene {
    /// Regions that are no specks.
    pub regions: Vec<Region>,
    /// The runs of those regions, region after region.
    pub runs: Vec<Run>,
    /// How many specks were dropped.
    pub specks: u32,
    /// The level that was used (`low` for hysteresis).
    pub level: u8,
}

/// The stage with its buffers.
pub struct Stage;

impl Stage {
    /// Makes every buffer for `plan`.
    pub fn new(_plan: &Plan) -> Self {
        todo!()
    }
    /// Runs all steps on `picture`, which must have the planned size.
    pub fn run(&mut self, _picture: Gray<'_>) -> &Scene {
        todo!()
    }
}
