//! What the stage hands on.

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
