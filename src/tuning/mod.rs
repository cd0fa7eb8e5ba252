//! Settings against settings on the same recording: what a change does before the belt does.

mod change;
mod change_page;
mod edit;
mod journal;
mod layers;
mod mark;
mod mark_page;
mod pairs;
mod shift;
mod sweep;
mod sweep_page;
mod tolerance;
mod trial;
mod vary;

pub use change::{Change, Comparison, Seen, changes_csv, compare};
pub use change_page::{Sides, page_of_changes, said};
pub use edit::{KeyError, move_shapes, set, value_at};
pub use journal::{Finished, Journal, JournalError};
pub use layers::{Recipe, Stand};
pub use mark::{Proposal, propose};
pub use mark_page::sheet;
pub use pairs::{Pair, pair_parts};
pub use shift::Shift;
pub use sweep::{
    Costs, Point, Standing, SweepError, candidates, ranked, run, standings, stretches,
};
pub use sweep_page::{SweepPage, points_csv};
pub use tolerance::{GrayLevels, Holes, Proposed, limit};
pub use trial::{Bench, Tried, sorts, try_all};
pub use vary::{Axis, BadAxis, Choice, grid_size, points};
