//! Settings against settings on the same recording: what a change does before the belt does.

mod change;
mod change_page;
mod pairs;

pub use change::{Change, Comparison, Seen, changes_csv, compare};
pub use change_page::{Sides, page_of_changes, said};
pub use pairs::{Pair, pair_parts};
