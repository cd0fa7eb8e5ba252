//! The same code on a recording: driving it, comparing it with labels, writing down what came of it.

mod ahead;
mod artist;
mod drive;
mod outcome;
mod pictures;
pub mod report;
mod score;
mod summary;

pub use ahead::Ahead;
pub use artist::{Artist, Sight};
pub use drive::{Looks, Pace, drive};
pub use outcome::{Outcome, Row, parts_csv, rows};

pub use score::{LABEL_GATE, Match, Placed, Score, score};
pub use summary::{Summary, WorstMargin, summarize};

use crate::health::Durations;
use crate::inspect::Inspector;
use crate::recording::{Recording, RecordingError};
use crate::sorter::{Event, Sorter};

/// Runs a whole recording through `sorter`, with one worker for each of `inspectors`; `frame` is told of every frame.
/// Tells how long the inspectors took: the one thing here that differs from run to run.
///
/// # Errors
/// The first of the recording's or of `each`.
pub fn run<E: From<RecordingError>>(
    recording: &Recording,
    inspectors: Vec<Inspector>,
    sorter: &mut Sorter,
    pace: &Pace,
    frame: impl FnMut(),
    each: impl FnMut(&Event) -> Result<(), E>,
) -> Result<Durations, E> {
    std::thread::scope(|scope| {
        let read = |k, frame: &mut _| recording.read_into(k, frame);
        let mut looks = Ahead::spawn(scope, inspectors, recording.len(), read);
        drive(&mut looks, sorter, pace, frame, each)?;
        Ok(looks.took().clone())
    })
}
