//! Opening a recording and playing it back frame by frame.

use std::io::Read;
use std::path::{Path, PathBuf};

use crate::frames::{Frame, FrameSource};
use crate::units::Micros;

use super::index::{self, Entry};
use super::table::open_small;
use super::{LABELS_FILE, Label, NOTES_FILE, RecordingError, SizePx, labels, picture};

/// A recording whose table and picture headers have been checked.
#[derive(Clone, Debug)]
pub struct Recording {
    folder: PathBuf,
    entries: Vec<Entry>,
    size: SizePx,
}

impl Recording {
    /// Opens the recording in `folder`, reads all of `frames.csv` and looks at every picture's header. All frames
    /// must have the size `expected`, or the first one's where none is given.
    ///
    /// # Errors
    /// The first thing that is wrong, before any frame is decoded.
    pub fn open(folder: &Path, expected: Option<SizePx>) -> Result<Self, RecordingError> {
        let entries = index::read(folder)?;
        let mut size = expected;
        for entry in &entries {
            size = Some(picture::check(&folder.join(&entry.file), size)?);
        }
        Ok(Self {
            folder: folder.to_owned(),
            size: size.expect("an index without frames is refused"),
            entries,
        })
    }

    /// The size of every frame.
    pub fn size(&self) -> SizePx {
        self.size
    }

    /// How many frames there are, at least one.
    #[expect(clippy::len_without_is_empty, reason = "a recording is never empty")]
    pub fn len(&self) -> usize {
        self.entries.len()
    }

    /// When the first and the last frame were captured.
    pub fn span_us(&self) -> (Micros, Micros) {
        let at = |entry: Option<&Entry>| entry.map_or(Micros::ZERO, |entry| entry.captured_us);
        (at(self.entries.first()), at(self.entries.last()))
    }

    /// Decodes frame `k`, counted from 0, reusing the buffer of `frame`.
    ///
    /// # Errors
    /// The picture cannot be read; the contents of `frame` are unspecified then.
    ///
    /// # Panics
    /// If there is no such frame.
    pub fn read_into(&self, k: usize, frame: &mut Frame) -> Result<(), RecordingError> {
        let entry = &self.entries[k];
        picture::read(&self.folder.join(&entry.file), self.size, &mut frame.pixels)?;
        frame.width_px = self.size.width_px;
        frame.height_px = self.size.height_px;
        frame.captured_us = entry.captured_us;
        frame.belt_mm = entry.belt_mm;
        Ok(())
    }

    /// The frame that was captured at that moment.
    pub fn frame_at(&self, captured_us: Micros) -> Option<usize> {
        self.entries
            .binary_search_by_key(&captured_us, |entry| entry.captured_us)
            .ok()
    }

    /// The frames from the first to the last. Any number of playbacks may run at once.
    pub fn play(&self) -> Playback<'_> {
        Playback {
            recording: self,
            next: 0,
        }
    }

    /// What `labels.csv` says, where there is one.
    ///
    /// # Errors
    /// See [`super::read_labels`].
    pub fn labels(&self) -> Result<Option<Vec<Label>>, RecordingError> {
        let file = self.folder.join(LABELS_FILE);
        there(&file)?
            .then(|| labels::read_labels(&file))
            .transpose()
    }

    /// What `recording.toml` says, where there is one.
    ///
    /// # Errors
    /// The file cannot be read, is too large or is not TOML.
    pub fn notes(&self) -> Result<Option<toml::Table>, RecordingError> {
        let file = self.folder.join(NOTES_FILE);
        if !there(&file)? {
            return Ok(None);
        }
        let mut text = String::new();
        open_small(&file)?
            .read_to_string(&mut text)
            .map_err(RecordingError::io(&file, "read it"))?;
        text.parse()
            .map(Some)
            .map_err(|source| RecordingError::Notes { file, source })
    }
}

fn there(file: &Path) -> Result<bool, RecordingError> {
    file.try_exists()
        .map_err(RecordingError::io(file, "look for it"))
}

/// The frames of a recording, one at a time.
#[derive(Clone, Debug)]
pub struct Playback<'a> {
    recording: &'a Recording,
    next: usize,
}

impl FrameSource for Playback<'_> {
    type Error = RecordingError;

    fn next_into(&mut self, frame: &mut Frame) -> Result<bool, RecordingError> {
        if self.next == self.recording.len() {
            return Ok(false);
        }
        self.recording.read_into(self.next, frame)?;
        self.next += 1;
        Ok(true)
    }
}
