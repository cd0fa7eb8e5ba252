//! The same code on a recording: driving it, comparing it with labels, writing down what came of it.

mod ahead;
mod drive;
mod outcome;
mod pictures;
mod score;
mod summary;

pub use ahead::Ahead;
pub use drive::{Looks, OneByOne, Pace, drive};
pub use outcome::{Outcome, Row, parts_csv, rows};
pub use pictures::{Sketch, draw_part};
pub use score::{Match, Score, score};
pub use summary::{Summary, WorstMargin, summarize};
