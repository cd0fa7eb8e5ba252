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

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn starts_where_told_and_never_goes_back() {
        let clock = Monotonic::reading(Micros(5_000));
        let first = clock.now();
        clock.sleep_until(first + Micros(300));
        assert!(first >= Micros(5_000));
        assert!(clock.now() >= first + Micros(300));
    }
}
