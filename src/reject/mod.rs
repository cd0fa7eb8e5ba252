//! From verdicts to signals: windows in belt millimetres, then messages with the moment at which they are due.

mod ledger;
pub mod line;
mod outlets;
mod planner;
mod window;

pub use ledger::{Counts, Loss, Why};
pub use outlets::{MAX_OUTLETS, Outlets};
pub use planner::{PlanError, Planner, Switch};
pub use window::OutletTiming;
