//! The only file that reads a clock. Everything else is told the time.

use std::time::{Duration, Instant};

use crate::units::Micros;

/// A monotonic clock that was set once.
#[derive(Clone, Copy, Debug)]
pub struct Monotonic {
    set_at: Instant,
    set_to: Micros,
}

impl Monotonic {
    /// A clock that reads `now` at this moment, so that a replay can keep the recording's time.
    pub fn reading(now: Micros) -> Self {
        Self {
            set_at: Instant::now(),
            set_to: now,
        }
    }

    /// The present reading.
    pub fn now(&self) -> Micros {
        let since = i64::try_from(self.set_at.elapsed().as_micros()).unwrap_or(i64::MAX);
        self.set_to + Micros(since)
    }

    /// Sleeps until the clock reads `until`; returns at once if it already does.
    pub fn sleep_until(&self, until: Micros) {
        let ahead = until - self.now();
        if ahead > Micros::ZERO {
            std::thread::sleep(Duration::from_micros(ahead.0.unsigned_abs()));
        }
    }
}

/// Measures how long something takes, in nanoseconds.
#[derive(Clone, Copy, Debug)]
pub struct Stopwatch(Instant);

impl Stopwatch {
    /// Starts it.
    pub fn start() -> Self {
        Self(Instant::now())
    }

    /// The time since it was started or last lapped; it starts anew.
    pub fn lap_ns(&mut self) -> u64 {
        let now = Instant::now();
        let since = now.duration_since(self.0);
        self.0 = now;
        u64::try_from(since.as_nanos()).unwrap_or(u64::MAX)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn laps_add_up_to_the_whole() {
        let (mut whole, mut laps) = (Stopwatch::start(), Stopwatch::start());
        let clock = Monotonic::reading(Micros::ZERO);
        clock.sleep_until(Micros(400));
        let first = laps.lap_ns();
        clock.sleep_until(Micros(700));
        let second = laps.lap_ns();
        assert!(first >= 400_000, "{first}");
        assert!(whole.lap_ns() >= first + second);
    }

    #[test]
    fn starts_where_told_and_never_goes_back() {
        let clock = Monotonic::reading(Micros(5_000));
        let first = clock.now();
        clock.sleep_until(first + Micros(300));
        assert!(first >= Micros(5_000));
        assert!(clock.now() >= first + Micros(300));
    }
}
