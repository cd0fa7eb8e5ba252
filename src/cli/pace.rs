//! `pace`: whether this PC keeps up with the settings.

use std::convert::Infallible;
use std::io::{self, Write};
use std::path::PathBuf;

use serde::Serialize;

use super::Outcome;
use super::station::Station;
use crate::frames::Frame;
use crate::inspect::Inspector;
use crate::laps::Step;
use crate::pace::{self, Headroom, Saving, Spread, Tally};
use crate::settings::Settings;

/// What saves a smaller share of a frame than this is not in the table.
const WORTH_SHOWING: f64 = 0.01;

/// Settings are compared on at most this share of the frames, one against the other.
const COMPARED: usize = 4;

/// Tells whether this PC keeps up: the time for each step of a frame, the highest frame rate, what costs most
///
/// Works on a recording, or on a drawn belt full of parts, on one thread. Stop whatever else the PC does first. Exit code 1
/// if it does not keep up: if more than one frame in a hundred takes longer than camera.latency_ms, or than from one frame
/// to the next.
#[derive(Debug, clap::Args)]
pub(super) struct Args {
    /// The recording: a folder with frames.csv [default: a drawn belt]
    recording: Option<PathBuf>,
    /// The settings file
    #[arg(long, value_name = "FILE")]
    settings: PathBuf,
    /// How many frames are timed; those of the recording again and again
    #[arg(long, value_name = "N", default_value_t = 500, value_parser = clap::value_parser!(u32).range(10..=1_000_000))]
    frames: u32,
    /// Print one JSON object instead of a table
    #[arg(long)]
    json: bool,
}

impl Args {
    pub(super) fn run(self, out: &mut dyn Write) -> anyhow::Result<Outcome> {
        let station = Station::open(&self.settings)?;
        let report = match &self.recording {
            Some(folder) => {
                let recording = station.recording(folder)?;
                let read =
                    |k: usize, frame: &mut Frame| recording.read_into(k % recording.len(), frame);
                let (tally, savings) = self.measure(&station, read)?;
                self.report(
                    &station,
                    folder.display().to_string(),
                    &tally,
                    savings,
                    tally.reading(),
                )
            }
            None => {
                let (scene, frames) = pace::drawn_frames(station.settings()).map_err(|error| {
                    anyhow::anyhow!("{}: {error}; or name a recording", self.settings.display())
                })?;
                let read = |k: usize, frame: &mut Frame| {
                    frame.clone_from(&frames[k % frames.len()]);
                    Ok::<(), Infallible>(())
                };
                let (tally, savings) = self.measure(&station, read)?;
                self.report(
                    &station,
                    format!("drawn {}", scene.name()),
                    &tally,
                    savings,
                    None,
                )
            }
        };
        if self.json {
            serde_json::to_writer_pretty(&mut *out, &report)?;
            writeln!(out)?;
        } else {
            report.table(out)?;
        }
        Ok(if report.keeps_up {
            Outcome::Done
        } else {
            Outcome::FellShort
        })
    }

    fn measure<E>(
        &self,
        station: &Station,
        mut read: impl FnMut(usize, &mut Frame) -> Result<(), E>,
    ) -> Result<(Tally, Vec<Saving>), E> {
        let frames = self.frames as usize;
        let tally = pace::time(station.inspector(), frames, &mut read)?;
        let inspector = |settings: &Settings| {
            let taught = &station.taught[..settings.shapes.len()];
            Inspector::new(settings, taught, station.level())
        };
        let compared = frames.div_ceil(COMPARED);
        let savings = pace::savings(station.settings(), compared, inspector, read)?;
        Ok((tally, savings))
    }

    fn report(
        &self,
        station: &Station,
        source: String,
        tally: &Tally,
        savings: Vec<Saving>,
        decode: Option<Spread>,
    ) -> Report {
        let settings = station.settings();
        let whole = tally.whole().expect("at least ten frames were timed");
        let headroom = Headroom::of(settings, &whole);
        let stage = STAGE.map(|(name, step)| (name, tally.step(step)));
        let steps = [("decode", decode)]
            .into_iter()
            .chain(stage)
            .chain([("whole frame", Some(whole))]);
        Report {
            settings: self.settings.display().to_string(),
            source,
            frames: tally.frames(),
            width_px: settings.camera.width_px,
            height_px: settings.camera.height_px,
            parts_per_frame: tally.parts_per_frame(),
            kernels: station.level().name(),
            steps: steps
                .filter_map(|(step, time)| Some(Row { step, time: time? }))
                .collect(),
            latency_ms: headroom.latency_ms,
            frame_interval_ms: headroom.interval_ms,
            frames_per_s: settings.camera.frames_per_s,
            highest_frames_per_s: headroom.highest_frames_per_s(),
            margin: headroom.margin(),
            costs_most: savings
                .first()
                .filter(|saving| saving.saves_ms > 0.0)
                .map(|saving| saving.instead.clone()),
            savings,
            keeps_up: headroom.keeps_up(),
            headroom,
            longest_ms: whole.max_ms,
            half_ms: whole.p50_ms,
        }
    }
}

const STAGE: [(&str, Step); 5] = [
    ("top-hat", Step::TopHat),
    ("threshold", Step::Threshold),
    ("fill", Step::Fill),
    ("regions", Step::Regions),
    ("pose and gauge of a part", Step::Part),
];

#[derive(Debug, Serialize)]
struct Report {
    settings: String,
    source: String,
    frames: usize,
    width_px: u32,
    height_px: u32,
    parts_per_frame: f64,
    kernels: &'static str,
    steps: Vec<Row>,
    latency_ms: f64,
    frame_interval_ms: f64,
    frames_per_s: f64,
    highest_frames_per_s: f64,
    margin: f64,
    savings: Vec<Saving>,
    costs_most: Option<String>,
    keeps_up: bool,
    #[serde(skip)]
    headroom: Headroom,
    #[serde(skip)]
    longest_ms: f64,
    /// Half of the frames take no longer.
    #[serde(skip)]
    half_ms: f64,
}

#[derive(Debug, Serialize)]
struct Row {
    step: &'static str,
    #[serde(flatten)]
    time: Spread,
}

impl Report {
    fn table(&self, out: &mut dyn Write) -> io::Result<()> {
        writeln!(out, "{}: {}", self.settings, self.verdict())?;
        writeln!(
            out,
            "  {} frames of {} x {} px ({}), {:.1} whole parts in each, kernels {}, one thread",
            self.frames,
            self.width_px,
            self.height_px,
            self.source,
            self.parts_per_frame,
            self.kernels
        )?;
        writeln!(out, "  {:<26}{:>9}{:>9}{:>9}", "in ms", "p50", "p99", "max")?;
        for Row { step, time } in &self.steps {
            let note = match *step {
                "decode" => "   not part of the frame: a camera needs none",
                _ => "",
            };
            let Spread {
                p50_ms,
                p99_ms,
                max_ms,
            } = time;
            writeln!(
                out,
                "  {step:<26}{p50_ms:>9.3}{p99_ms:>9.3}{max_ms:>9.3}{note}"
            )?;
        }
        writeln!(
            out,
            "  {:<26}{:>9.1} to the verdicts, {:.1} to the next frame",
            "set", self.latency_ms, self.frame_interval_ms
        )?;
        writeln!(
            out,
            "  {:<26}{:>9.1} a second with this latency; set are {:.1}, so {:.1} times as many",
            "highest frame rate", self.highest_frames_per_s, self.frames_per_s, self.margin
        )?;
        let worth_it = |saving: &&Saving| saving.saves_ms >= WORTH_SHOWING * self.half_ms;
        for (k, saving) in self.savings.iter().filter(worth_it).enumerate() {
            let name = match k {
                0 => "what would save most",
                _ => "",
            };
            writeln!(
                out,
                "  {name:<26}{:>9.3} {}",
                saving.saves_ms, saving.instead
            )?;
        }
        Ok(())
    }

    /// One sentence.
    fn verdict(&self) -> String {
        let Headroom { frame_ms, .. } = self.headroom;
        let took = format!("99 of 100 frames take at most {frame_ms:.2} ms");
        if !self.headroom.within_latency() {
            let latency_ms = self.latency_ms;
            return format!(
                "this PC does not keep up: {took}, and camera.latency_ms is {latency_ms}"
            );
        }
        if !self.headroom.within_interval() {
            let interval_ms = self.frame_interval_ms;
            return format!(
                "this PC does not keep up: {took}, and the next frame comes after {interval_ms:.2} ms"
            );
        }
        let longest = self.longest_ms;
        if longest > self.latency_ms {
            return format!(
                "this PC keeps up: {took}; but the longest took {longest:.2} ms, too late for its belt"
            );
        }
        format!("this PC keeps up: {took}")
    }
}
