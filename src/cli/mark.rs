//! `mark`: labels proposed from the present verdicts, with pictures to correct them by.

use std::io::Write;
use std::path::PathBuf;

use super::Outcome as Ending;
use super::files::write_whole;
use super::sorting::{progress, sort};
use super::station::Station;
use crate::recording::{Label, labels_csv};
use crate::replay::LABEL_GATE;
use crate::replay::report::album::Album;
use crate::shape::Verdict;
use crate::tuning::{propose, sheet};

/// Proposes labels for a recording, to be corrected in any editor
///
/// Writes labels.csv into the recording's folder: the present verdicts, those nearest to a limit first, each with a note that
/// begins with "proposed". Beside it goes a sheet with a picture for each of them. What a person changed (the verdict, or the
/// note) stays when the command is run again; parts are told apart by their place on the belt.
#[derive(Debug, clap::Args)]
pub(super) struct Args {
    /// The recording: a folder with frames.csv
    recording: PathBuf,
    /// The settings file
    #[arg(long, value_name = "FILE")]
    settings: PathBuf,
    /// Where the picture sheet goes [default: labels.html in the recording's folder]
    #[arg(long, value_name = "FILE.html")]
    sheet: Option<PathBuf>,
    /// How many pictures the sheet has at most, the most doubtful first
    #[arg(long, value_name = "N", default_value_t = 200)]
    pictures: usize,
}

impl Args {
    pub(super) fn run(self, out: &mut dyn Write) -> anyhow::Result<Ending> {
        let station = Station::open(&self.settings)?;
        let recording = station.recording(&self.recording)?;
        let known = recording.labels()?.unwrap_or_default();
        let bar = progress(recording.len(), "frames");
        let outcome = sort(&station, &recording, &bar)?;
        bar.finish_and_clear();
        let settings = station.settings();
        let rows = propose(
            &outcome,
            settings,
            &known,
            settings.belt.part_pitch_mm * LABEL_GATE,
        );
        let labels: Vec<Label> = rows.iter().map(|row| row.label.clone()).collect();
        let name = self
            .recording
            .file_name()
            .unwrap_or(self.recording.as_os_str());
        let mut album = Album::new(&recording, station.artist());
        let page = sheet(&name.to_string_lossy(), &rows, self.pictures, &mut album)?;
        let (table, sheet) = (self.recording.join("labels.csv"), self.sheet());
        write_whole(&sheet, page.as_bytes())?;
        write_whole(&table, &labels_csv(&labels)?)?;
        let count = |by_person: bool, verdict: Verdict| {
            let of = |row: &&crate::tuning::Proposal| {
                row.by_person == by_person && row.label.verdict == verdict
            };
            rows.iter().filter(of).count()
        };
        for (name, by_person) in [("proposed", false), ("by a person", true)] {
            let [keep, reject] =
                [Verdict::Keep, Verdict::Reject].map(|verdict| count(by_person, verdict));
            writeln!(out, "  {name:<15} {keep} to keep, {reject} to reject")?;
        }
        writeln!(out, "  {:<15} {}", "labels", table.display())?;
        writeln!(out, "  {:<15} {}", "pictures", sheet.display())?;
        Ok(Ending::Done)
    }

    fn sheet(&self) -> PathBuf {
        let beside = || self.recording.join("labels.html");
        self.sheet.clone().unwrap_or_else(beside)
    }
}
