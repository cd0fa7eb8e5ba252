//! The report of a replay, written to a file.

use std::path::{Path, PathBuf};

use anyhow::Context;

use super::files::write_whole;
use super::results::Results;
use super::station::Station;
use crate::health::Durations;
use crate::recording::Label;
use crate::replay::Score;
use crate::replay::report::{Report, SourceFile};
use crate::shape::Taught;

/// The settings file and the taught shapes, read for the record before the replay begins.
pub(super) fn sources(station: &Station) -> anyhow::Result<Vec<SourceFile>> {
    let loaded = &station.loaded;
    let mut files = vec![loaded.file().to_owned()];
    for shape in 0..loaded.settings.shapes.len() {
        files.extend(Taught::files(&loaded.shape_path(shape))?);
    }
    let read = |file: &PathBuf| {
        SourceFile::read(file).with_context(|| format!("cannot read {}", file.display()))
    };
    files.iter().map(read).collect()
}

/// Writes the report of a finished replay.
pub(super) fn write(
    file: &Path,
    results: &Results<'_>,
    sources: &[SourceFile],
    labels: Option<(&[Label], &Score)>,
    took: &Durations,
) -> anyhow::Result<()> {
    let name = results
        .folder
        .file_name()
        .unwrap_or(results.folder.as_os_str());
    let report = Report {
        name: name.to_string_lossy().into_owned(),
        span_us: results.recording.span_us(),
        settings: results.station.settings(),
        sources,
        outcome: results.outcome,
        labels,
        took,
    };
    let page = report.html(results.recording, results.station.artist())?;
    write_whole(file, page.as_bytes())
}
