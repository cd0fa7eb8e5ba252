//! What did not go as the verdicts asked: counted, and told once.

use std::collections::VecDeque;

use serde::Serialize;

use crate::units::Micros;

/// Losses that nobody has asked for yet; beyond this they are only counted.
const UNREAD_LOSSES: usize = 256;

/// Figures over all outlets.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize)]
pub struct Counts {
    /// Windows that were asked for.
    pub windows: u64,
    /// Times an outlet was opened. Windows that overlap share one.
    pub pulses: u64,
    /// Openings that came too late for the first edge of their window.
    pub late: u64,
    /// Belt that passed before those outlets opened.
    pub late_mm: f64,
    /// The worst of them; [`Micros::MAX`] when the belt stood with the edge already past the outlet.
    pub latest_us: Micros,
    /// Windows that had wholly passed before their outlet could open.
    pub missed: u64,
    /// Their belt.
    pub missed_mm: f64,
    /// Outlets that were shut because they had been open too long.
    pub cut: u64,
    /// Belt that passed a shut outlet for that reason.
    pub cut_mm: f64,
    /// Windows that were still to come, or open, when the station ended.
    pub ended: u64,
    /// Their belt that had not passed the outlet.
    pub ended_mm: f64,
}

/// Why belt that should have been rejected passed its outlet.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Why {
    /// The outlet opened late.
    Late {
        /// By how much.
        by_us: Micros,
    },
    /// The window had passed before the outlet could open.
    Missed,
    /// The outlet had been open for as long as it may be.
    Cut,
    /// The station ended.
    Ended,
}

/// Belt that should have been rejected and passed its outlet.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Loss {
    /// Index of the outlet.
    pub outlet: usize,
    /// When it became certain.
    pub at_us: Micros,
    /// What happened.
    pub why: Why,
    /// How much belt.
    pub lost_mm: f64,
}

/// Counts and unread losses.
#[derive(Debug)]
pub(super) struct Ledger {
    pub(super) counts: Counts,
    losses: VecDeque<Loss>,
}

impl Ledger {
    pub(super) fn new() -> Self {
        Self {
            counts: Counts::default(),
            losses: VecDeque::with_capacity(UNREAD_LOSSES),
        }
    }

    pub(super) fn lose(&mut self, loss: Loss) {
        let counts = &mut self.counts;
        let (number, belt_mm) = match loss.why {
            Why::Late { by_us } => {
                counts.latest_us = counts.latest_us.max(by_us);
                (&mut counts.late, &mut counts.late_mm)
            }
            Why::Missed => (&mut counts.missed, &mut counts.missed_mm),
            Why::Cut => (&mut counts.cut, &mut counts.cut_mm),
            Why::Ended => (&mut counts.ended, &mut counts.ended_mm),
        };
        *number += 1;
        *belt_mm += loss.lost_mm;
        if self.losses.len() < UNREAD_LOSSES {
            self.losses.push_back(loss);
        }
    }

    pub(super) fn next_loss(&mut self) -> Option<Loss> {
        self.losses.pop_front()
    }
}
