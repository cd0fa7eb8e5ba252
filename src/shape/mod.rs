//! The taught silhouette, where a part lies, and how far it is from the taught one.

mod align;
mod bitmap;
mod distance;
#[cfg(test)]
mod drawn;
mod edge;
mod error;
mod feret;
mod field;
mod findings;
mod gauge;
#[cfg(test)]
mod gauge_accuracy;
mod gauged;
mod judge;
mod measure;
mod model;
mod overlay;
mod patches;
mod pose;
#[cfg(test)]
mod pose_accuracy;
mod raster;
mod search;
mod severity;
mod shortlist;
mod silhouette;
mod skeleton;
mod store;
mod symmetry;
mod teach;
mod verdict;
mod widest;

pub use bitmap::Bitmap;
pub use distance::{DistanceTransform, NOWHERE};
pub use error::ShapeError;
pub use findings::{Finding, findings};
pub use gauge::gauge_masks;
pub use gauged::{Asked, Gauged, Sizes};
pub use judge::{Drawing, Judge};
pub use measure::{Measurer, Measures, skeleton};
pub use model::Model;
pub use silhouette::{MAX_SIDE_PX, Silhouette};
pub use store::{Figures, GrayPicture, Taught, read_gray};
pub use symmetry::Symmetry;
pub use teach::{LeftOut, Lesson, Pupil, Spread, Teacher};
pub use verdict::{Reason, Reasons, Verdict};

/// Where a silhouette lies in the picture. Pixel (0, 0) has its centre at (0.0, 0.0).
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct Pose {
    /// Column of the silhouette's centroid.
    pub x_px: f64,
    /// Row of the silhouette's centroid.
    pub y_px: f64,
    /// Turned from the x axis towards the y axis (clockwise as the picture is looked at), 0 to 360.
    pub angle_deg: f64,
    /// Mirrored (x of the silhouette negated) before it was turned.
    pub flipped: bool,
}

/// How deep or how far, and where that is.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct Depth {
    /// Distance between pixel centres; 0 where there is no such pixel.
    pub px: f64,
    /// The pixel where it is worst (x, y), in region-of-interest pixels.
    pub at: Option<(i32, i32)>,
}

/// What one shape's limits are, in pixels; `None` means not limited. Both ends belong to the good ones.
#[derive(Clone, Debug, PartialEq)]
pub struct Limits {
    /// Deepest good bite.
    pub missing_px: f64,
    /// Farthest good burr.
    pub excess_px: f64,
    /// Whether a face-down part is rejected.
    pub reject_flipped: bool,
    /// Pixels.
    pub area_px: Option<[f64; 2]>,
    /// Maximum Feret diameter.
    pub length_px: Option<[f64; 2]>,
    /// Minimum Feret diameter.
    pub width_px: Option<[f64; 2]>,
    /// Number of holes.
    pub holes: Option<[u32; 2]>,
    /// Pixels of A minus A eroded by 3x3.
    pub boundary_px: Option<[f64; 2]>,
    /// Number of skeleton branches longer than `branch_above_px`.
    pub branches: Option<[u32; 2]>,
    /// How long a branch must be to count.
    pub branch_above_px: f64,
}

/// What is the same for all shapes.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Common {
    /// Missing or excess patches (8-connected) with fewer pixels do not count.
    pub flaw_below_px: f64,
    /// A part that shares less than this with every shape (overlap over union) is unknown.
    pub fit_at_least: f64,
}

/// One view of a whole part, judged.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Judged {
    /// Index of the best-fitting shape.
    pub shape: usize,
    /// Where that shape lies.
    pub pose: Pose,
    /// Overlap over union with it.
    pub fit: f64,
    /// The deepest bite.
    pub missing: Depth,
    /// The farthest burr.
    pub excess: Depth,
    /// Everything against it.
    pub reasons: Reasons,
    /// How near the limits: the largest share of a limit that is used up. At most 1 is within; infinite where a reason
    /// has no figure (touching, flipped, unknown).
    pub severity: f64,
}
