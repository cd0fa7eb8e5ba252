//! Recordings: a folder with `frames.csv` and the frames as 8-bit gray PNG.
//!
//! ```text
//! shift-12/
//!   frames.csv        file,captured_us,belt_mm      one row per frame, in the order of capture
//!   000000.png ...    8-bit gray, all of one size
//!   labels.csv        along_mm,across_mm,verdict,note      optional: what a person says about each part
//!   recording.toml    optional: free notes, camera, scale
//! ```
//!
//! * `file` is a path inside the folder, with `/` between its parts.
//! * `captured_us` is a whole number of microseconds on a monotonic clock, larger in every row.
//! * `belt_mm` is the belt reading at that moment and never decreases; left empty, the stated speed holds.
//! * `along_mm` and `across_mm` are the belt coordinates of a part's centroid, `verdict` is `keep` or `reject`.
//!
//! What is read may come from anywhere: everything is checked before it is used, and memory stays bounded by
//! [`MAX_TABLE_BYTES`] and one frame of [`MAX_SIDE_PX`] squared, whatever the files claim.

mod error;
mod index;
mod labels;
mod picture;
mod read;
mod table;
mod write;

#[cfg(test)]
mod tests;

pub use error::{LineProblem, PictureProblem, RecordingError};
pub use labels::{Label, LabelWriter, labels_csv, read_labels};
pub use read::{Playback, Recording};
pub use write::Writer;

/// Largest width and height of a frame, the same as in the settings.
pub const MAX_SIDE_PX: u32 = 8192;

/// Largest `frames.csv`, `labels.csv` or `recording.toml` that is read: over a million frames.
pub const MAX_TABLE_BYTES: u64 = 64 << 20;

const FRAMES_FILE: &str = "frames.csv";
const LABELS_FILE: &str = "labels.csv";
const NOTES_FILE: &str = "recording.toml";
const FRAMES_HEADER: [&str; 3] = ["file", "captured_us", "belt_mm"];
const LABELS_HEADER: [&str; 4] = ["along_mm", "across_mm", "verdict", "note"];

/// Width and height of a picture.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct SizePx {
    /// Pixels per row.
    pub width_px: u32,
    /// Rows.
    pub height_px: u32,
}

impl SizePx {
    /// Whether pictures of this size are read and written.
    fn is_taken(self) -> bool {
        let sides = 1..=MAX_SIDE_PX;
        sides.contains(&self.width_px) && sides.contains(&self.height_px)
    }

    /// How many pixels that are, for a size that is taken.
    fn pixels(self) -> usize {
        self.width_px as usize * self.height_px as usize
    }
}

impl std::fmt::Display for SizePx {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        write!(f, "{} x {}", self.width_px, self.height_px)
    }
}
