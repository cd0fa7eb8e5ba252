//! What can be wrong with a recording, said so that it can be put right.

use std::io;
use std::path::{Path, PathBuf};

use super::{MAX_SIDE_PX, MAX_TABLE_BYTES, SizePx};

/// Why a recording cannot be read or written.
#[derive(Debug, thiserror::Error)]
pub enum RecordingError {
    /// The operating system refused something.
    #[error("{}: cannot {doing}: {source}", file.display())]
    Io {
        /// The file or folder.
        file: PathBuf,
        /// What was tried.
        doing: &'static str,
        /// What the operating system said.
        source: io::Error,
    },
    /// Something else lies where a plain file is needed.
    #[error("{}: this is not a plain file; put the file itself here", file.display())]
    NotAFile {
        /// The path.
        file: PathBuf,
    },
    /// A table or note that is too large to be one.
    #[error("{}: {bytes} bytes, and at most {MAX_TABLE_BYTES} are read; split the recording", file.display())]
    TableTooLarge {
        /// The file.
        file: PathBuf,
        /// Its size.
        bytes: u64,
    },
    /// A table with a header and nothing under it.
    #[error("{}: there is no frame in it; a recording has one row per frame", file.display())]
    NoFrames {
        /// The file.
        file: PathBuf,
    },
    /// A row of a table.
    #[error("{}:{line}: {problem}", file.display())]
    Line {
        /// The table.
        file: PathBuf,
        /// The line, counted from 1.
        line: u64,
        /// What is wrong there.
        problem: LineProblem,
    },
    /// A frame's picture.
    #[error("{}: {problem}", file.display())]
    Picture {
        /// The picture.
        file: PathBuf,
        /// What is wrong with it.
        problem: PictureProblem,
    },
    /// The notes are not TOML.
    #[error("{}: {source}", file.display())]
    Notes {
        /// The notes.
        file: PathBuf,
        /// Where and why.
        source: toml::de::Error,
    },
    /// A new recording was to go into a folder with something in it.
    #[error("{}: the folder is not empty; name a new one, nothing is overwritten", folder.display())]
    FolderInUse {
        /// The folder.
        folder: PathBuf,
    },
    /// A frame that was handed over for writing does not follow the one before.
    #[error("{}: frame {frame} was not written: {problem}", folder.display())]
    NotWritten {
        /// The recording.
        folder: PathBuf,
        /// Its number, counted from 0.
        frame: u64,
        /// What is wrong with it.
        problem: LineProblem,
    },
}

/// What is wrong with a row of a table.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum LineProblem {
    /// Not the columns of this table.
    #[error("the first line is \"{came}\", expected \"{expected}\"")]
    Header {
        /// The first line.
        came: String,
        /// What belongs there.
        expected: String,
    },
    /// More or fewer values than columns.
    #[error("{came} values, expected {expected}: {columns}")]
    Columns {
        /// Values in the row.
        came: usize,
        /// Columns of the table.
        expected: usize,
        /// Their names.
        columns: String,
    },
    /// Bytes that are no text.
    #[error("this line is not UTF-8 text; save the table as UTF-8")]
    NotText,
    /// A value that is not what its column holds.
    #[error("{column} is \"{came}\", expected {expected}")]
    Value {
        /// The column.
        column: &'static str,
        /// What stands there.
        came: String,
        /// What belongs there.
        expected: &'static str,
    },
    /// A path that leads out of the recording.
    #[error(
        "file is \"{came}\", expected a path inside the recording's folder, without \"..\" and not absolute"
    )]
    PathOutside {
        /// The path.
        came: String,
    },
    /// Time stands still or goes backwards.
    #[error(
        "captured_us is {came}, expected more than {before} of the frame before; sort the frames by capture time and list each once"
    )]
    TimeNotLater {
        /// This frame's time.
        came: i64,
        /// The time of the one before.
        before: i64,
    },
    /// The belt goes backwards.
    #[error(
        "belt_mm is {came}, expected at least {before} of a frame before; a belt reading never decreases"
    )]
    BeltBackwards {
        /// This frame's reading.
        came: f64,
        /// The last one before.
        before: f64,
    },
    /// A frame of another size than the first.
    #[error("the picture is {came} px, expected {expected} px like the first one")]
    Size {
        /// This frame's size.
        came: SizePx,
        /// The first one's.
        expected: SizePx,
    },
    /// A frame without pixels, or larger than is read.
    #[error("the picture is {came} px, expected 1 x 1 to {MAX_SIDE_PX} x {MAX_SIDE_PX} px")]
    SizeRange {
        /// This frame's size.
        came: SizePx,
    },
    /// The pixels are not as many as the size says.
    #[error("the picture has {came} pixels, expected {expected}")]
    PixelCount {
        /// Pixels handed over.
        came: usize,
        /// Width times height.
        expected: usize,
    },
}

/// What is wrong with a frame's picture.
#[derive(Debug, thiserror::Error)]
pub enum PictureProblem {
    /// It does not begin like a PNG file.
    #[error("this is not a PNG file, or it ends within its header; frames are 8-bit gray PNG")]
    NotPng,
    /// PNG, but not 8-bit gray.
    #[error("the picture is {came}, expected 8-bit gray; convert it")]
    Kind {
        /// What it is.
        came: String,
    },
    /// Larger than any camera picture that is taken.
    #[error(
        "the picture says it is {came} px, and at most {MAX_SIDE_PX} x {MAX_SIDE_PX} px are read"
    )]
    TooLarge {
        /// What its header says.
        came: SizePx,
    },
    /// Not the size that the settings or the first frame name.
    #[error(
        "the picture is {came} px, expected {expected} px; every frame has the size set under [camera]"
    )]
    Size {
        /// What its header says.
        came: SizePx,
        /// What it should be.
        expected: SizePx,
    },
    /// The header is fine, but what follows is cut off or damaged.
    #[error(
        "the picture is cut off or damaged ({0}); copy it again or take its row out of frames.csv"
    )]
    Damaged(image::ImageError),
}

impl RecordingError {
    pub(super) fn io(file: &Path, doing: &'static str) -> impl FnOnce(io::Error) -> Self {
        let file = file.to_owned();
        move |source| Self::Io {
            file,
            doing,
            source,
        }
    }
}

/// The beginning of a value that came, fit for one line of a message.
pub(super) fn shown(value: &str) -> String {
    const LONGEST: usize = 60;
    let mut short: String = value
        .chars()
        .take(LONGEST)
        .flat_map(char::escape_debug)
        .collect();
    if value.chars().nth(LONGEST).is_some() {
        short.push_str("...");
    }
    short
}
