//! `replay`: the sorter on a recording.

use std::io::{IsTerminal, Write};
use std::path::{Path, PathBuf};
use std::thread;

use anyhow::{Context, bail, ensure};
use indicatif::{ProgressBar, ProgressStyle};
use serde_json::json;

use super::files::write_whole;
use super::interrupt::stop_flag;
use super::station::Station;
use super::{Outcome as Ending, caution};
use crate::belt::Part;
use crate::inspect::Inspector;
use crate::recording::{Label, Recording, RecordingError, SizePx};
use crate::reject::Planner;
use crate::replay::{self, Ahead, Match, Outcome, Pace, Score, Summary};
use crate::settings::Policy;
use crate::shape::Verdict;
use crate::sorter::{self, Event, Sorter};

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
    /// The serial port of a relay board to try on the bench; only together with --armed
    #[arg(long, value_name = "PORT", requires = "armed")]
    line: Option<PathBuf>,
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
