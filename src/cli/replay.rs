//! `replay`: the sorter on a recording.

use std::io::{IsTerminal, Write};
use std::path::PathBuf;
use std::sync::atomic::Ordering;
use std::thread;

use anyhow::ensure;
use indicatif::{ProgressBar, ProgressStyle};

use super::interrupt::stop_flag;
use super::report;
use super::results::Results;
use super::station::Station;
use super::{DeviceFailed, Outcome as Ending, caution};
use crate::clock::Monotonic;
use crate::health::Durations;
use crate::recording::{Label, Recording};
use crate::reject::line::{Coils, DryRun, Line, LineError, LineFault, ModbusSerial, Signal};
use crate::replay::{self, Outcome, Pace, Score};
use crate::sorter::{Event, Sorter};
use crate::units::Micros;

/// On the bench: time to turn everything off before the recording begins.
const HEAD_START_US: Micros = Micros(1_000_000);

/// Sorts a recorded belt: verdicts with their reasons in mm, and the signals that would switch the outlets
///
/// A dry run: no port is opened. The same recording and settings give the same parts and signals on every run.
#[derive(Debug, clap::Args)]
pub(super) struct Args {
    /// The recording: a folder with frames.csv
    recording: PathBuf,
    /// The settings file
    #[arg(long, value_name = "FILE")]
    settings: PathBuf,
    /// Keep the recording's own time instead of going as fast as the PC can
    #[arg(long)]
    paced: bool,
    /// Write a table of all parts
    #[arg(long, value_name = "FILE.csv")]
    parts: Option<PathBuf>,
    /// Write a table of all signals
    #[arg(long, value_name = "FILE.csv")]
    signals: Option<PathBuf>,
    /// Compare with the recording's labels.csv; exit code 1 if anything disagrees
    #[arg(long)]
    check_labels: bool,
    /// Draw one picture of each part into this folder
    #[arg(long, value_name = "DIR")]
    pictures: Option<PathBuf>,
    /// Write a report: one HTML file with counts, error bounds, charts and pictures. Takes in labels.csv where there is one
    #[arg(long, value_name = "FILE.html")]
    report: Option<PathBuf>,
    /// The serial port of a relay board to try on the bench; only together with --armed
    #[arg(long, value_name = "PORT", requires = "armed")]
    line: Option<String>,
    /// Really switch the outlets, in real time. Needs --line, and allow_armed = true in the settings
    #[arg(long, requires = "line")]
    armed: bool,
    /// Print one JSON object instead of tables
    #[arg(long)]
    json: bool,
    /// Print only what went wrong
    #[arg(long)]
    quiet: bool,
    /// Worker threads that decode and inspect ahead [default: one for each processor]
    #[arg(long, value_name = "N", value_parser = clap::value_parser!(u16).range(1..=256))]
    workers: Option<u16>,
}

impl Args {
    pub(super) fn run(self, out: &mut dyn Write) -> anyhow::Result<Ending> {
        let station = Station::open(&self.settings)?;
        let recording = station.recording(&self.recording)?;
        let labels = self.labels(&recording)?;
        // Read before the replay, as the settings were.
        let sources = match &self.report {
            Some(_) => report::sources(&station)?,
            None => Vec::new(),
        };
        let (first_us, _) = recording.span_us();
        let clock =
            (self.paced || self.armed).then(|| Monotonic::reading(first_us - HEAD_START_US));
        let mut line = self.line(&station, clock)?;
        let mut signals = Vec::new();
        // Before and after: whatever an earlier program left on. Not part of the table, which a dry run must equal.
        line.all_off(first_us - HEAD_START_US, &mut Vec::new())
            .map_err(device)?;
        let ran = self.sort(&station, &recording, clock, &mut *line, &mut signals);
        let off = line.all_off(first_us, &mut Vec::new()).map_err(device);
        let (outcome, took) = ran?;
        off?;
        if stop_flag()?.load(Ordering::Relaxed) {
            eprintln!(
                "stopped by hand after {} parts: every outlet is off, nothing was written",
                outcome.parts.len()
            );
            return Ok(Ending::FellShort);
        }
        let results = Results {
            station: &station,
            folder: &self.recording,
            recording: &recording,
            outcome: &outcome,
            signals: &signals,
        };
        let score = labels
            .as_deref()
            .map(|labels| (labels, results.score(labels)));
        if let Some(file) = &self.report {
            let labels = score.as_ref().map(|(labels, score)| (*labels, score));
            report::write(file, &results, &sources, labels, &took)?;
        }
        self.tell(
            &results,
            score.filter(|_| self.check_labels),
            &mut *line,
            out,
        )
    }

    /// Writes the tables and pictures that were asked for, then tells what came of it.
    fn tell(
        &self,
        results: &Results<'_>,
        score: Option<(&[Label], Score)>,
        line: &mut dyn Line,
        out: &mut dyn Write,
    ) -> anyhow::Result<Ending> {
        if let Some(file) = &self.parts {
            results.write_parts(file)?;
        }
        if let Some(file) = &self.signals {
            results.write_signals(file)?;
        }
        if let Some(folder) = &self.pictures {
            results.draw_pictures(folder)?;
        }
        let faults: Vec<LineFault> = std::iter::from_fn(|| line.next_fault()).collect();
        if self.json {
            results.print_json(score.as_ref(), line.counts(), &faults, out)?;
        } else {
            results.print_table(score.as_ref(), &faults, self.quiet, out)?;
        }
        let agrees = score.is_none_or(|(_, score)| score.agrees());
        let whole = agrees && results.outcome.stopped.is_none();
        Ok(if whole {
            Ending::Done
        } else {
            Ending::FellShort
        })
    }

    /// The labels, where they are of use: the comparison must have them, the report takes what is there.
    fn labels(&self, recording: &Recording) -> anyhow::Result<Option<Vec<Label>>> {
        if !self.check_labels && self.report.is_none() {
            return Ok(None);
        }
        let labels = recording.labels()?;
        ensure!(
            labels.is_some() || !self.check_labels,
            "{}: no labels.csv to compare with; leave --check-labels out, or write one",
            self.recording.display()
        );
        Ok(labels)
    }

    /// The dry run, or the port with every precaution taken.
    fn line(&self, station: &Station, clock: Option<Monotonic>) -> anyhow::Result<Box<dyn Line>> {
        let settings = station.settings();
        let coils: Vec<u16> = settings.outlets.iter().map(|outlet| outlet.coil).collect();
        let coils = Coils::new(settings.line.unit, &coils)?;
        let (Some(port), Some(clock), true) = (&self.line, clock, self.armed) else {
            return Ok(Box::new(DryRun::new(coils)));
        };
        ensure!(
            settings.reject.allow_armed,
            "{}: reject.allow_armed is false, so nothing may be sent; set it to true once the outlets are safe to move",
            self.settings.display()
        );
        caution::print();
        let line = ModbusSerial::open(port, &settings.line, coils, clock).map_err(device)?;
        Ok(Box::new(line))
    }

    /// Runs the recording through the sorter; every switch goes to `line` at its moment.
    fn sort(
        &self,
        station: &Station,
        recording: &Recording,
        clock: Option<Monotonic>,
        line: &mut dyn Line,
        signals: &mut Vec<Signal>,
    ) -> anyhow::Result<(Outcome, Durations)> {
        let settings = station.settings();
        let workers = self.workers.map_or_else(processors, usize::from);
        let inspectors = (0..workers).map(|_| station.inspector()).collect();
        let mut sorter = Sorter::of(settings)?;
        let stop = stop_flag()?;
        let pace = Pace::new(clock, settings.latency_us(), stop);
        let mut outcome = Outcome::default();
        let bar = self.progress(recording.len());
        let each = |event: &Event| {
            outcome.note(event);
            if let Event::Switch(switch) = event {
                line.send(switch, signals).map_err(device)?;
            }
            anyhow::Ok(())
        };
        let took = replay::run(
            recording,
            inspectors,
            &mut sorter,
            &pace,
            || bar.inc(1),
            each,
        )?;
        bar.finish_and_clear();
        outcome.health = sorter.health().clone();
        Ok((outcome, took))
    }

    /// A bar on a terminal, nothing elsewhere.
    fn progress(&self, frames: usize) -> ProgressBar {
        if self.quiet || !std::io::stderr().is_terminal() {
            return ProgressBar::hidden();
        }
        let style = ProgressStyle::with_template("{bar:40} {pos}/{len} frames, {eta} left");
        ProgressBar::new(frames as u64).with_style(style.expect("the template is right"))
    }
}

fn processors() -> usize {
    thread::available_parallelism().map_or(1, usize::from)
}

fn device(error: LineError) -> DeviceFailed {
    DeviceFailed(error.into())
}
