//! CSV tables with a fixed header, read row by row with the line each row stands on.

use std::fs::File;
use std::io::{Read, Take};
use std::path::{Path, PathBuf};

use super::error::shown;
use super::{LineProblem, MAX_TABLE_BYTES, RecordingError};

/// A table whose header has been checked.
pub(super) struct Table<const COLUMNS: usize> {
    file: PathBuf,
    header: [&'static str; COLUMNS],
    reader: csv::Reader<Take<File>>,
    row: csv::StringRecord,
}

impl<const COLUMNS: usize> Table<COLUMNS> {
    /// Opens `file` and checks its size and header.
    pub(super) fn open(
        file: &Path,
        header: [&'static str; COLUMNS],
    ) -> Result<Self, RecordingError> {
        let reader = csv::ReaderBuilder::new()
            .has_headers(false)
            .flexible(true)
            .from_reader(open_small(file)?);
        let mut table = Self {
            file: file.to_owned(),
            header,
            reader,
            row: csv::StringRecord::new(),
        };
        table.check_header()?;
        Ok(table)
    }

    /// The next row's values and its line; `None` at the end.
    pub(super) fn next(&mut self) -> Result<Option<([&str; COLUMNS], u64)>, RecordingError> {
        if !self.read()? {
            return Ok(None);
        }
        let line = self.line();
        if self.row.len() != COLUMNS {
            let problem = LineProblem::Columns {
                came: self.row.len(),
                expected: COLUMNS,
                columns: self.header.join(", "),
            };
            return Err(self.error(line, problem));
        }
        Ok(Some((
            std::array::from_fn(|column| &self.row[column]),
            line,
        )))
    }

    /// `problem` on `line` of this table.
    pub(super) fn error(&self, line: u64, problem: LineProblem) -> RecordingError {
        RecordingError::Line {
            file: self.file.clone(),
            line,
            problem,
        }
    }

    fn check_header(&mut self) -> Result<(), RecordingError> {
        self.read()?;
        if self.row.iter().eq(self.header) {
            return Ok(());
        }
        let came: Vec<_> = self.row.iter().collect();
        let problem = LineProblem::Header {
            came: shown(&came.join(",")),
            expected: self.header.join(","),
        };
        Err(self.error(1, problem))
    }

    fn read(&mut self) -> Result<bool, RecordingError> {
        let line = self.reader.position().line();
        self.reader
            .read_record(&mut self.row)
            .map_err(|error| match error.into_kind() {
                csv::ErrorKind::Io(source) => RecordingError::io(&self.file, "read it")(source),
                csv::ErrorKind::Utf8 { pos, .. } => {
                    let line = pos.map_or(line, |at| at.line());
                    self.error(line, LineProblem::NotText)
                }
                _ => self.error(line, LineProblem::NotText),
            })
    }

    fn line(&self) -> u64 {
        self.row.position().map_or(1, csv::Position::line)
    }
}

/// Opens a plain file of at most [`MAX_TABLE_BYTES`]; no more is read even if it grows meanwhile.
pub(super) fn open_small(file: &Path) -> Result<Take<File>, RecordingError> {
    let opened = open_plain(file)?;
    let bytes = opened
        .metadata()
        .map_err(RecordingError::io(file, "read its size"))?
        .len();
    if bytes > MAX_TABLE_BYTES {
        return Err(RecordingError::TableTooLarge {
            file: file.to_owned(),
            bytes,
        });
    }
    Ok(opened.take(MAX_TABLE_BYTES))
}

/// Opens a plain file. The kind is looked at first: opening a named pipe would wait for ever.
pub(super) fn open_plain(file: &Path) -> Result<File, RecordingError> {
    let kind = std::fs::metadata(file).map_err(RecordingError::io(file, "open it"))?;
    if !kind.is_file() {
        return Err(RecordingError::NotAFile {
            file: file.to_owned(),
        });
    }
    File::open(file).map_err(RecordingError::io(file, "open it"))
}

/// A finite number of at most a million kilometres either way, so that sums of a few stay exact enough.
pub(super) fn length_mm(column: &'static str, came: &str) -> Result<f64, LineProblem> {
    const LARGEST_MM: f64 = 1e12;
    came.parse()
        .ok()
        .filter(|mm: &f64| mm.abs() <= LARGEST_MM)
        .ok_or_else(|| LineProblem::Value {
            column,
            came: shown(came),
            expected: "a number of millimetres, with a point",
        })
}
