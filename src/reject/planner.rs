//! Windows of all outlets, and the switches that come of them in due order.

use std::collections::VecDeque;

use thiserror::Error;

use super::ledger::{Counts, Ledger, Loss};
use super::outlets::{MAX_OUTLETS, Outlets};
use super::window::{Change, OutletTiming, Track};
use crate::belt::Motion;
use crate::units::Micros;

/// Outlets that change at one moment.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Switch {
    /// When the signal has to go out.
    pub due_us: Micros,
    /// Those that change.
    pub changed: Outlets,
    /// All that are on from now on.
    pub on: Outlets,
}

/// The outlets cannot be planned for.
#[derive(Clone, Debug, PartialEq, Error)]
pub enum PlanError {
    /// More than fit in a set.
    #[error("{came} outlets are set, but one station switches at most {MAX_OUTLETS}")]
    TooManyOutlets {
        /// How many.
        came: usize,
    },
    /// A length that is no number.
    #[error("outlet {outlet} (counted from 0): distance and margin must be numbers")]
    NotANumber {
        /// Which one.
        outlet: usize,
    },
}

/// Turns windows into switches.
///
/// Times given to one planner never go backwards. The switches and their due moments do not depend on how often it is
/// polled, as long as windows are added in the same order at the same times. Before the belt's motion is corrected, poll
/// up to that moment: what is due by then was due under the old motion.
#[derive(Debug)]
pub struct Planner {
    tracks: Vec<Track>,
    on: Outlets,
    /// Everything before this has been switched.
    floor: Micros,
    /// Switched, and not yet polled.
    unread: VecDeque<Switch>,
    ledger: Ledger,
}

impl Planner {
    /// All outlets are off and nothing waits.
    pub fn new(outlets: Vec<OutletTiming>) -> Result<Self, PlanError> {
        if outlets.len() > MAX_OUTLETS {
            let came = outlets.len();
            return Err(PlanError::TooManyOutlets { came });
        }
        let finite = |o: &OutletTiming| o.distance_mm.is_finite() && o.margin_mm.is_finite();
        if let Some(outlet) = outlets.iter().position(|o| !finite(o)) {
            return Err(PlanError::NotANumber { outlet });
        }
        let tracks = outlets.into_iter().enumerate();
        Ok(Self {
            tracks: tracks.map(|(i, timing)| Track::new(i, timing)).collect(),
            on: Outlets::NONE,
            floor: Micros(i64::MIN),
            unread: VecDeque::with_capacity(64),
            ledger: Ledger::new(),
        })
    }

    /// At the moment `now` it is decided that the belt between two `along_mm` goes to `outlet`.
    ///
    /// `lead_mm` is the edge that comes first, the smaller number; both are finite. The outlet is open from
    /// `lead + distance - margin` to `trail + distance + margin`. What comes too late opens at once if some of it can
    /// still be hit. Everything due by `now` under `motion` counts as switched, whether or not it has been polled.
    ///
    /// # Panics
    /// When there is no such outlet.
    pub fn add(
        &mut self,
        now: Micros,
        motion: &Motion,
        outlet: usize,
        lead_mm: f64,
        trail_mm: f64,
    ) {
        debug_assert!(lead_mm <= trail_mm && (trail_mm - lead_mm).is_finite());
        self.advance(now, motion);
        self.tracks[outlet].add(now, motion, [lead_mm, trail_mm], &mut self.ledger);
    }

    /// When to poll next; `None` while nothing is to come, or the belt stands. The poll may find that the window has passed
    /// and that there is nothing to switch.
    pub fn next_due(&self, motion: &Motion) -> Option<Micros> {
        match self.unread.front() {
            Some(switch) => Some(switch.due_us),
            None => self.planned_us(motion),
        }
    }

    /// The earliest switch that is due by `now` and was not given yet. Ask until there is none.
    pub fn poll(&mut self, now: Micros, motion: &Motion) -> Option<Switch> {
        self.unread.pop_front().or_else(|| self.step(now, motion))
    }

    /// Ends: like [`Self::poll`], then one switch that turns everything off, then `None`. What was still to come is
    /// counted as ended.
    pub fn finish(&mut self, now: Micros, motion: &Motion) -> Option<Switch> {
        self.poll(now, motion).or_else(|| {
            for track in &mut self.tracks {
                track.end(now, motion, &mut self.ledger);
            }
            let open = std::mem::take(&mut self.on);
            self.switch(now, open)
        })
    }

    /// Figures so far.
    pub fn counts(&self) -> &Counts {
        &self.ledger.counts
    }

    /// The next loss that was not told yet. At most 256 are kept; all are counted.
    pub fn next_loss(&mut self) -> Option<Loss> {
        self.ledger.next_loss()
    }

    fn advance(&mut self, now: Micros, motion: &Motion) {
        while let Some(switch) = self.step(now, motion) {
            self.unread.push_back(switch);
        }
    }

    fn step(&mut self, now: Micros, motion: &Motion) -> Option<Switch> {
        while let Some(due_us) = self.planned_us(motion).filter(|&due| due <= now) {
            let changed = self.change_all(due_us, motion);
            if let Some(switch) = self.switch(due_us, changed) {
                return Some(switch);
            }
        }
        self.floor = self.floor.max(now);
        None
    }

    fn planned_us(&self, motion: &Motion) -> Option<Micros> {
        let next = |track: &Track| track.next_us(self.floor, motion);
        self.tracks.iter().filter_map(next).min()
    }

    fn change_all(&mut self, due_us: Micros, motion: &Motion) -> Outlets {
        let mut changed = Outlets::NONE;
        for (index, track) in self.tracks.iter_mut().enumerate() {
            if track.next_us(self.floor, motion) != Some(due_us) {
                continue;
            }
            match track.change(due_us, motion, &mut self.ledger) {
                Change::Nothing => continue,
                Change::On => self.on = self.on.with(index),
                Change::Off => self.on = self.on.without(Outlets::one(index)),
            }
            changed = changed.with(index);
        }
        self.floor = due_us;
        changed
    }

    fn switch(&self, due_us: Micros, changed: Outlets) -> Option<Switch> {
        (!changed.is_empty()).then_some(Switch {
            due_us,
            changed,
            on: self.on,
        })
    }
}

#[cfg(test)]
mod tests;
