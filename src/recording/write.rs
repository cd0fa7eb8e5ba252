//! Writing a recording so that a crash leaves everything up to its last frame readable.

use std::fs::File;
use std::io::Write;
use std::path::{Path, PathBuf};

use crate::frames::Frame;

use super::index::{self, Order};
use super::{FRAMES_FILE, FRAMES_HEADER, LineProblem, NOTES_FILE, RecordingError, SizePx, picture};

/// A recording that is being written. A frame's picture is complete before its row is, and each row goes out in one
/// piece: whatever ends the program, the table lists whole pictures only.
#[derive(Debug)]
pub struct Writer {
    folder: PathBuf,
    table: File,
    order: Order,
    size: Option<SizePx>,
    frames: u64,
}

impl Writer {
    /// Starts a recording in `folder`, which is made if it is not there.
    ///
    /// # Errors
    /// The folder has something in it, or cannot be made.
    pub fn create(folder: &Path) -> Result<Self, RecordingError> {
        std::fs::create_dir_all(folder).map_err(RecordingError::io(folder, "make the folder"))?;
        let mut inside =
            std::fs::read_dir(folder).map_err(RecordingError::io(folder, "look into it"))?;
        if inside.next().is_some() {
            return Err(RecordingError::FolderInUse {
                folder: folder.to_owned(),
            });
        }
        let file = folder.join(FRAMES_FILE);
        let mut table = File::options()
            .append(true)
            .create_new(true)
            .open(&file)
            .map_err(RecordingError::io(&file, "create it"))?;
        writeln!(table, "{}", FRAMES_HEADER.join(","))
            .map_err(RecordingError::io(&file, "write it"))?;
        Ok(Self {
            folder: folder.to_owned(),
            table,
            order: Order::default(),
            size: None,
            frames: 0,
        })
    }

    /// Appends one frame.
    ///
    /// # Errors
    /// It does not follow the one before (time, belt reading, size), or cannot be written; the recording then ends
    /// with the frame before.
    pub fn write(&mut self, frame: &Frame) -> Result<(), RecordingError> {
        let name = format!("{:06}.png", self.frames);
        let row = [
            name.as_str(),
            &frame.captured_us.0.to_string(),
            &frame.belt_mm.map_or(String::new(), |mm| mm.to_string()),
        ];
        let (size, order) =
            self.check(frame, row)
                .map_err(|problem| RecordingError::NotWritten {
                    folder: self.folder.clone(),
                    frame: self.frames,
                    problem,
                })?;
        picture::write(&self.folder.join(&name), size, &frame.pixels)?;
        self.append(&format!("{}\n", row.join(",")))?;
        self.order = order;
        self.size = Some(size);
        self.frames += 1;
        Ok(())
    }

    /// How many frames have been written.
    pub fn frames(&self) -> u64 {
        self.frames
    }

    /// Writes `recording.toml`, over an earlier one.
    ///
    /// # Errors
    /// It cannot be written.
    pub fn write_notes(&self, notes: &str) -> Result<(), RecordingError> {
        let file = self.folder.join(NOTES_FILE);
        std::fs::write(&file, notes).map_err(RecordingError::io(&file, "write it"))
    }

    /// A row goes out whole or not at all, so that a disk that is full for a moment leaves no torn one.
    fn append(&mut self, row: &str) -> Result<(), RecordingError> {
        let written = self.table.metadata().and_then(|before| {
            self.table
                .write_all(row.as_bytes())
                .inspect_err(|_| drop(self.table.set_len(before.len())))
        });
        written.map_err(RecordingError::io(
            &self.folder.join(FRAMES_FILE),
            "write it",
        ))
    }

    /// The row must be one that the reader takes.
    fn check(&self, frame: &Frame, row: [&str; 3]) -> Result<(SizePx, Order), LineProblem> {
        let came = SizePx {
            width_px: frame.width_px,
            height_px: frame.height_px,
        };
        if !came.is_taken() {
            return Err(LineProblem::SizeRange { came });
        }
        if let Some(expected) = self.size.filter(|&expected| expected != came) {
            return Err(LineProblem::Size { came, expected });
        }
        if frame.pixels.len() != came.pixels() {
            return Err(LineProblem::PixelCount {
                came: frame.pixels.len(),
                expected: came.pixels(),
            });
        }
        let entry = index::parse(row)?;
        let mut order = self.order;
        order.follow(entry.captured_us, entry.belt_mm)?;
        Ok((came, order))
    }
}
