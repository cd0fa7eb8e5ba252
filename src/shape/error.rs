//! What can be wrong with a taught shape.

use std::path::PathBuf;

use super::silhouette::MAX_SIDE_PX;

/// Why a taught shape cannot be made, read or written.
#[derive(Debug, thiserror::Error)]
pub enum ShapeError {
    /// No pixel is covered by the majority of the parts.
    #[error("the shape has no pixel that most parts cover (brighter than 127)")]
    Empty,
    /// More pixels than are allowed.
    #[error(
        "the shape would have {width_px} x {height_px} px; at most {MAX_SIDE_PX} x {MAX_SIDE_PX} px are allowed"
    )]
    TooLarge {
        /// Columns.
        width_px: u64,
        /// Rows.
        height_px: u64,
    },
    /// There is nothing to teach from.
    #[error("no good part to teach from: {came} came, at least {expected} are needed")]
    TooFewParts {
        /// How many there were.
        came: usize,
        /// How many are needed.
        expected: usize,
    },
    /// A file could not be read or written.
    #[error("{}: {source}", path.display())]
    File {
        /// Which one.
        path: PathBuf,
        /// What the system said.
        source: std::io::Error,
    },
    /// The picture is no 8-bit gray PNG.
    #[error("{}: {came}; expected an 8-bit gray PNG", path.display())]
    Picture {
        /// Which one.
        path: PathBuf,
        /// What it is instead.
        came: String,
    },
    /// The TOML file is not as it should be.
    #[error("{}: {problem}", path.display())]
    Note {
        /// Which one.
        path: PathBuf,
        /// What came and what was expected.
        problem: String,
    },
}

impl ShapeError {
    /// For `map_err` on a file operation.
    pub(super) fn file(path: &std::path::Path) -> impl FnOnce(std::io::Error) -> Self {
        let path = path.to_owned();
        |source| Self::File { path, source }
    }
}
