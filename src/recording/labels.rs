//! `labels.csv`: what a person, or a drawing, says about each part.

use std::fs::File;
use std::path::{Path, PathBuf};

use crate::shape::Verdict;

use super::error::shown;
use super::table::{Table, length_mm};
use super::{LABELS_FILE, LABELS_HEADER, LineProblem, RecordingError};

/// One labelled part.
#[derive(Clone, Debug, PartialEq)]
pub struct Label {
    /// The part's centroid along the belt.
    pub along_mm: f64,
    /// The part's centroid from the picture's top edge.
    pub across_mm: f64,
    /// What should become of it.
    pub verdict: Verdict,
    /// Anything worth saying about it.
    pub note: String,
}

/// Reads and checks a label table. The rows may stand in any order.
///
/// # Errors
/// The first thing that is wrong in it, with its line.
pub fn read_labels(file: &Path) -> Result<Vec<Label>, RecordingError> {
    let mut table = Table::open(file, LABELS_HEADER)?;
    let mut labels = Vec::new();
    while let Some((values, line)) = table.next()? {
        labels.push(parse(values).map_err(|problem| table.error(line, problem))?);
    }
    Ok(labels)
}

fn parse([along_mm, across_mm, verdict, note]: [&str; 4]) -> Result<Label, LineProblem> {
    Ok(Label {
        along_mm: length_mm("along_mm", along_mm)?,
        across_mm: length_mm("across_mm", across_mm)?,
        verdict: match verdict {
            "keep" => Verdict::Keep,
            "reject" => Verdict::Reject,
            came => {
                return Err(LineProblem::Value {
                    column: "verdict",
                    came: shown(came),
                    expected: "keep or reject",
                });
            }
        },
        note: note.to_owned(),
    })
}

/// Labels as a table with its header; positions to a thousandth of a millimetre.
///
/// # Errors
/// Those of the CSV writer.
pub fn labels_csv(labels: &[Label]) -> Result<Vec<u8>, csv::Error> {
    let mut table = csv::Writer::from_writer(Vec::new());
    table.write_record(LABELS_HEADER)?;
    for label in labels {
        table.write_record(typed(label))?;
    }
    table
        .into_inner()
        .map_err(|error| csv::Error::from(error.into_error()))
}

fn typed(label: &Label) -> [String; 4] {
    [
        format!("{:.3}", label.along_mm),
        format!("{:.3}", label.across_mm),
        label.verdict.to_string(),
        label.note.clone(),
    ]
}

/// Writes `labels.csv` row by row.
pub struct LabelWriter {
    file: PathBuf,
    table: csv::Writer<File>,
}

impl LabelWriter {
    /// Starts the label table of the recording in `folder`.
    ///
    /// # Errors
    /// There is one already, or it cannot be written.
    pub fn create(folder: &Path) -> Result<Self, RecordingError> {
        let file = folder.join(LABELS_FILE);
        let made = File::create_new(&file).map_err(RecordingError::io(&file, "create it"))?;
        let mut writer = Self {
            file,
            table: csv::Writer::from_writer(made),
        };
        writer.row(LABELS_HEADER)?;
        Ok(writer)
    }

    /// Appends one label; positions are written to a thousandth of a millimetre.
    ///
    /// # Errors
    /// It cannot be written.
    pub fn write(&mut self, label: &Label) -> Result<(), RecordingError> {
        let [along_mm, across_mm, verdict, note] = &typed(label);
        self.row([along_mm, across_mm, verdict, note])
    }

    /// Writes what is still held back.
    ///
    /// # Errors
    /// It cannot be written.
    pub fn finish(mut self) -> Result<(), RecordingError> {
        let flushed = self.table.flush();
        flushed.map_err(RecordingError::io(&self.file, "write it"))
    }

    fn row(&mut self, values: [&str; 4]) -> Result<(), RecordingError> {
        self.table.write_record(values).map_err(|error| {
            RecordingError::io(&self.file, "write it")(std::io::Error::from(error))
        })
    }
}
