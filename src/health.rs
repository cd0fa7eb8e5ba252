//! Counters of what was done and of everything that did not go as planned.

use serde::Serialize;

/// What a station has counted since it started.
#[derive(Clone, Debug, Default, PartialEq, Serialize)]
pub struct Health {
    /// Frames whose verdicts took effect.
    pub frames: u64,
    /// Frames that were not judged by their due time.
    pub overdue_frames: u64,
    /// Crumbs that were too small to be parts.
    pub specks: u64,
    /// Parts that were decided.
    pub parts: u64,
    /// Belt that nobody saw in time.
    pub unseen_mm: f64,
}
