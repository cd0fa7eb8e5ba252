//! The same sorter on a recording's clock: every look takes effect at its due time, every event in its order.

use std::sync::atomic::{AtomicBool, Ordering};

use crate::clock::Monotonic;
use crate::frames::{Frame, FrameSource};
use crate::inspect::{Inspector, Look};
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

/// One frame after the other, inspected on the calling thread.
pub struct OneByOne<'a, S> {
    /// Where frames come from.
    pub source: S,
    /// Who looks at them.
    pub inspector: &'a mut Inspector,
    /// The frame's buffer, reused.
    pub frame: Frame,
}

impl<S: FrameSource> Looks for OneByOne<'_, S> {
    type Error = S::Error;

    fn next_into(&mut self, look: &mut Look) -> Result<bool, S::Error> {
        if !self.source.next_into(&mut self.frame)? {
            return Ok(false);
        }
        self.inspector.inspect(&self.frame, look);
        Ok(true)
    }
}

/// As fast as the PC can, or no faster than the recording's own time.
pub struct Pace {
    clock: Option<Monotonic>,
    latency_us: Micros,
    stop: &'static AtomicBool,
    late_frames: u64,
}

impl Pace {
    /// `real_time` keeps the recording's time, beginning at the first frame. `stop` ends the replay early.
    pub fn new(real_time: bool, latency_us: Micros, stop: &'static AtomicBool) -> Self {
        let clock = real_time.then(|| Monotonic::reading(Micros::ZERO));
        Self {
            clock,
            latency_us,
            stop,
            late_frames: 0,
        }
    }

    fn start(&mut self, first_us: Micros) {
        if let Some(clock) = &mut self.clock {
            *clock = Monotonic::reading(first_us);
        }
    }

    fn wait(&self, until: Micros) {
        if let Some(clock) = &self.clock {
            clock.sleep_until(until);
        }
    }

    /// Counts a frame that was not judged by its due time. The recording's clock stands still for it, so that a replay
    /// has the same result on every PC; a live station could not wait.
    fn judged(&mut self, due_us: Micros) {
        self.late_frames += u64::from(self.clock.is_some_and(|clock| clock.now() > due_us));
    }

    /// Frames that would have been overdue on a live belt.
    pub fn late_frames(&self) -> u64 {
        self.late_frames
    }

    /// The moment at which something really happens that is due at `due_us`.
    pub fn now(&self, due_us: Micros) -> Micros {
        self.clock.map_or(due_us, |clock| clock.now())
    }
}

/// Runs `looks` through `sorter` to the last due switch and hands every event to `each`.
///
/// # Errors
/// The first error of `looks` or of `each`; the sorter is left where it was.
pub fn drive<L, E>(
    looks: &mut L,
    sorter: &mut Sorter,
    pace: &mut Pace,
    mut each: impl FnMut(&Event, &Pace) -> Result<(), E>,
) -> Result<(), E>
where
    L: Looks,
    E: From<L::Error>,
{
    let mut look = Look::default();
    let mut started = false;
    while looks.next_into(&mut look)? {
        if !started {
            pace.start(look.captured_us);
            started = true;
        }
        let due_us = look.captured_us + pace.latency_us;
        pace.judged(due_us);
        happen(sorter, due_us, pace, &mut each)?;
        pace.wait(due_us);
        sorter.take(&look);
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
    each: &mut impl FnMut(&Event, &Pace) -> Result<(), E>,
) -> Result<(), E> {
    while let Some(at) = sorter.next_due().filter(|&at| at <= until) {
        pace.wait(at);
        while let Some(event) = sorter.poll(at) {
            each(&event, pace)?;
        }
        if pace.stop.load(Ordering::Relaxed) {
            return Ok(());
        }
    }
    Ok(())
}
