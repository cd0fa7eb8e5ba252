//! A replay whose parts are all that is wanted: no line, no signals.

use std::io::IsTerminal;
use std::sync::atomic::Ordering;
use std::thread;

use anyhow::ensure;
use indicatif::{ProgressBar, ProgressStyle};

use super::interrupt::stop_flag;
use super::station::Station;
use crate::recording::Recording;
use crate::replay::{self, Outcome, Pace};
use crate::sorter::{Event, Sorter};

/// Runs `recording` through the sorter of `station`, as fast as the PC can.
pub(super) fn sort(
    station: &Station,
    recording: &Recording,
    bar: &ProgressBar,
) -> anyhow::Result<Outcome> {
    let settings = station.settings();
    let inspectors = (0..processors()).map(|_| station.inspector()).collect();
    let mut sorter = Sorter::of(settings)?;
    let stop = stop_flag()?;
    let pace = Pace::new(None, settings.latency_us(), stop);
    let mut outcome = Outcome::default();
    let each = |event: &Event| {
        outcome.note(event);
        anyhow::Ok(())
    };
    replay::run(
        recording,
        inspectors,
        &mut sorter,
        &pace,
        || bar.inc(1),
        each,
    )?;
    ensure!(
        !stop.load(Ordering::Relaxed),
        "stopped by hand; nothing was written"
    );
    outcome.health = sorter.health().clone();
    Ok(outcome)
}

/// A bar with the time left on a terminal, nothing elsewhere.
pub(super) fn progress(steps: usize, what: &str) -> ProgressBar {
    if !std::io::stderr().is_terminal() {
        return ProgressBar::hidden();
    }
    let template = format!("{{bar:40}} {{pos}}/{{len}} {what}, {{eta}} left");
    let style = ProgressStyle::with_template(&template).expect("the template is right");
    ProgressBar::new(steps as u64).with_style(style)
}

pub(super) fn processors() -> usize {
    thread::available_parallelism().map_or(1, usize::from)
}
