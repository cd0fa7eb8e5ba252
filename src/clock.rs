//! The only file that reads a clock. Everything else is told the time.

use std::time::{Duration, Instant};

use crate::units::Micros;

/// A monotonic clock that counts from the moment it was made.
#[derive(Clone, Copy, Debug)]
pub struct Monotonic {
    origin: Instant,
}

impl Monotonic {
    /// A clock that reads `now` at this moment, so that a replay can keep the recording's time.
    pub fn reading(now: Micros) -> Self {
        let since = Duration::from_micros(now.0.max(0).unsigned_abs());
        Self {
            origin: Instant::now() - since,
        }
    }

    /// The present reading.
    pub fn now(&self) -> Micros {
        Micros(i64::try_from(self.origin.elapsed().as_micros()).unwrap_or(i64::MAX))
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
