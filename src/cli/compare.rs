//! `compare`: which parts of a recording two settings treat differently.

use std::io::Write;
use std::path::PathBuf;

use anyhow::ensure;

use super::Outcome as Ending;
use super::files::write_whole;
use super::sorting::{progress, sort};
use super::station::{Station, frame_size};
use crate::recording::Recording;
use crate::replay::LABEL_GATE;
use crate::replay::report::album::Album;
use crate::replay::report::words::mm;
use crate::tuning::{Change, Comparison, Sides, changes_csv, compare, page_of_changes, said};

/// Lists every part that two settings treat differently
///
/// Parts are matched by their place on the belt. A part differs when its verdict, its reasons or its outlet do, or when
/// only one of the settings finds it. With --expect-same the exit code is 1 if anything differs: a recording becomes the
/// acceptance test of a plant's settings.
#[derive(Debug, clap::Args)]
pub(super) struct Args {
    /// The recording: a folder with frames.csv
    recording: PathBuf,
    /// The settings, called A
    #[arg(long, value_name = "FILE")]
    settings: PathBuf,
    /// The other settings, called B
    #[arg(long, value_name = "FILE")]
    against: PathBuf,
    /// List parts that came this near to another verdict, too
    #[arg(long, value_name = "MM", value_parser = margin)]
    margin: Option<f64>,
    /// Write the list as a table
    #[arg(long, value_name = "FILE.csv")]
    csv: Option<PathBuf>,
    /// Write the list with pictures
    #[arg(long, value_name = "FILE.html")]
    report: Option<PathBuf>,
    /// Exit code 1 if anything differs
    #[arg(long)]
    expect_same: bool,
}

fn margin(text: &str) -> Result<f64, String> {
    let mm = text
        .parse()
        .ok()
        .filter(|mm: &f64| mm.is_finite() && *mm >= 0.0);
    mm.ok_or_else(|| "expected millimetres, 0 or more".to_owned())
}

impl Args {
    pub(super) fn run(self, out: &mut dyn Write) -> anyhow::Result<Ending> {
        let a = Station::open(&self.settings)?;
        let b = Station::open(&self.against)?;
        let recording = a.recording(&self.recording)?;
        ensure!(
            frame_size(b.settings()) == recording.size(),
            "{}: camera.width_px and height_px are {}; {}'s frames are {} px",
            self.against.display(),
            frame_size(b.settings()),
            self.recording.display(),
            recording.size()
        );
        let bar = progress(2 * recording.len(), "frames");
        let outcomes = [sort(&a, &recording, &bar)?, sort(&b, &recording, &bar)?];
        bar.finish_and_clear();
        let pitch_mm = |station: &Station| station.settings().belt.part_pitch_mm;
        let gate_mm = pitch_mm(&a).min(pitch_mm(&b)) * LABEL_GATE;
        let comparison = compare(
            (&outcomes[0], a.settings()),
            (&outcomes[1], b.settings()),
            gate_mm,
            self.margin,
        );
        if let Some(file) = &self.csv {
            write_whole(file, &changes_csv(&comparison)?)?;
        }
        if let Some(file) = &self.report {
            write_whole(
                file,
                self.page(&comparison, &recording, [&a, &b])?.as_bytes(),
            )?;
        }
        self.print(&comparison, out)?;
        Ok(if self.expect_same && !comparison.same() {
            Ending::FellShort
        } else {
            Ending::Done
        })
    }

    fn page(
        &self,
        comparison: &Comparison,
        recording: &Recording,
        stations: [&Station; 2],
    ) -> anyhow::Result<String> {
        let mut sides = Sides {
            names: [&self.settings, &self.against].map(|file| file.display().to_string()),
            albums: stations.map(|station| Album::new(recording, station.artist())),
        };
        let name = self
            .recording
            .file_name()
            .unwrap_or(self.recording.as_os_str());
        let name = name.to_string_lossy();
        Ok(page_of_changes(&name, comparison, self.margin, &mut sides)?)
    }

    fn print(&self, comparison: &Comparison, out: &mut dyn Write) -> anyhow::Result<()> {
        for change in &comparison.differing {
            writeln!(out, "{}", line(change))?;
        }
        if let Some(margin_mm) = self.margin {
            for change in &comparison.near {
                let left_mm = change.flips_after_mm().map(mm).unwrap_or_default();
                writeln!(out, "same, {left_mm} mm from a flip: {}", line(change))?;
            }
            let near = comparison.near.len();
            writeln!(
                out,
                "  {:<15} {near} within {margin_mm} mm of another verdict",
                "near"
            )?;
        }
        let (differ, parts) = (comparison.differing.len(), comparison.parts);
        writeln!(out, "  {:<15} {differ} of {parts} parts", "different")?;
        let [a_mm, b_mm] = comparison.unseen_mm;
        writeln!(
            out,
            "  {:<15} {a_mm:.1} mm with A, {b_mm:.1} mm with B",
            "unseen belt"
        )?;
        Ok(())
    }
}

/// Where it lies, what A says of it, what B says.
fn line(change: &Change) -> String {
    let place = change.any().map_or_else(String::new, |seen| {
        format!("{:.1}, {:.1} mm", seen.part.along_mm, seen.part.across_mm)
    });
    let side = |seen: &Option<crate::tuning::Seen>| {
        let seen = seen.as_ref();
        let figures = seen.and_then(|seen| Some((seen.missing_mm()?, seen.excess_mm()?)));
        let figures = figures.map_or_else(String::new, |(missing, excess)| {
            format!(", missing {} mm, excess {} mm", mm(missing), mm(excess))
        });
        format!("{}{figures}", said(seen))
    };
    format!("{place}: A {}; B {}", side(&change.a), side(&change.b))
}
