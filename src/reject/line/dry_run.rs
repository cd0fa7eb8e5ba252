//! The line that opens no port: the very same bytes, sent nowhere.

use super::coils::{Coils, Request};
use super::{Line, LineCounts, LineError, LineFault, Mode, Signal};
use crate::reject::{Outlets, Switch};
use crate::units::Micros;

/// Says what a line would send, and when.
#[derive(Debug)]
pub struct DryRun {
    coils: Coils,
    counts: LineCounts,
}

impl DryRun {
    /// The device whose messages are made.
    pub fn new(coils: Coils) -> Self {
        Self {
            coils,
            counts: LineCounts::default(),
        }
    }
}

impl Line for DryRun {
    fn send(&mut self, switch: &Switch, signals: &mut Vec<Signal>) -> Result<(), LineError> {
        let due_us = switch.due_us;
        signals.extend(self.coils.switch(switch, false).map(|r| signal(due_us, &r)));
        Ok(())
    }

    fn all_off(&mut self, due_us: Micros, signals: &mut Vec<Signal>) -> Result<(), LineError> {
        signals.extend(self.coils.all_off(false).map(|r| signal(due_us, &r)));
        Ok(())
    }

    fn may_be_on(&self) -> Outlets {
        Outlets::NONE
    }

    fn counts(&self) -> &LineCounts {
        &self.counts
    }

    fn next_fault(&mut self) -> Option<LineFault> {
        None
    }
}

fn signal(due_us: Micros, request: &Request) -> Signal {
    Signal {
        due_us,
        sent_us: due_us,
        changed: request.changed,
        on: request.on.within(request.changed),
        frame: request.frame,
        mode: Mode::DryRun,
    }
}
