//! The same sorter on a recording's clock: every look takes effect at its due time, every event in its order.

use std::sync::atomic::{AtomicBool, Ordering};

use crate::clock::Monotonic;
use crate::inspect::Look;
use crate::sorter::{Event, Sorter};
use crate::units::Micros;

/// Looks in the order of their capture times.
pub trait Looks {
    /// What can go wrong on the way.
    type Error;

    /// Fills `look` with the next one; `false` at the end.
    ///
    /// # Errors
    /// Those of the frames behind it.
    fn next_into(&mut self, look: &mut Look) -> Result<bool, Self::Error>;
}

/// As fast as the PC can, or no faster than the recording's own time.
pub struct Pace {
    clock: Option<Monotonic>,
    latency_us: Micros,
    stop: &'static AtomicBool,
}

impl Pace {
    /// With a `clock` that was set to the recording's time nothing happens before its moment. `stop` ends the replay early.
    pub fn new(clock: Option<Monotonic>, latency_us: Micros, stop: &'static AtomicBool) -> Self {
        Self {
            clock,
            latency_us,
            stop,
        }
    }

    fn wait(&self, until: Micros) {
        if let Some(clock) = &self.clock {
            clock.sleep_until(until);
        }
    }

    fn is_late(&self, due_us: Micros) -> bool {
        self.clock.is_some_and(|clock| clock.now() > due_us)
    }
}

/// Runs `looks` through `sorter` to the last due switch and hands every event to `each`; `frame` is told of
/// every frame that took effect.
///
/// # Errors
/// The first error of `looks` or of `each`; the sorter is left where it was.
pub fn drive<L, E>(
    looks: &mut L,
    sorter: &mut Sorter,
    pace: &Pace,
    mut frame: impl FnMut(),
    mut each: impl FnMut(&Event) -> Result<(), E>,
) -> Result<(), E>
where
    L: Looks,
    E: From<L::Error>,
{
    let mut look = Look::default();
    while looks.next_into(&mut look)? {
        let due_us = look.captured_us + pace.latency_us;
        if pace.is_late(due_us) {
            // The recording's clock waits for this frame, so that a replay has the same result on every PC. A live belt
            // would not.
            sorter.count_overdue();
        }
        happen(sorter, due_us, pace, &mut each)?;
        pace.wait(due_us);
        sorter.take(&look);
        frame();
        if pace.stop.load(Ordering::Relaxed) {
            return Ok(());
        }
    }
    sorter.end_of_belt();
    happen(sorter, Micros::MAX, pace, &mut each)
}

/// Everything that is due up to `until`, each thing at its moment.
fn happen<E>(
    sorter: &mut Sorter,
    until: Micros,
    pace: &Pace,
    each: &mut impl FnMut(&Event) -> Result<(), E>,
) -> Result<(), E> {
    while let Some(at) = sorter.next_due().filter(|&at| at <= until) {
        pace.wait(at);
        while let Some(event) = sorter.poll(at) {
            each(&event)?;
        }
        if pace.stop.load(Ordering::Relaxed) {
            return Ok(());
        }
    }
    Ok(())
}
