//! Counters of what was done and of everything that did not go as planned.

use serde::Serialize;

use crate::units::Micros;

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

/// Buckets for each doubling of the time.
const PER_OCTAVE_LOG2: u32 = 3;
const BUCKETS: usize = 64 << PER_OCTAVE_LOG2;

/// How long something took, however often it was done: counts in buckets that are an eighth of their octave wide, so that
/// memory stays the same and nothing is off by more than an eighth.
#[derive(Clone, Debug, PartialEq)]
pub struct Durations {
    counts: Vec<u64>,
    longest: Micros,
}

/// One bucket.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Bucket {
    /// The shortest time that belongs to it.
    pub from: Micros,
    /// The shortest time that does not any more.
    pub to: Micros,
    /// How often.
    pub count: u64,
}

impl Default for Durations {
    fn default() -> Self {
        Self {
            counts: vec![0; BUCKETS],
            longest: Micros::ZERO,
        }
    }
}

impl Durations {
    /// Counts one more. Less than a microsecond counts as one.
    pub fn add(&mut self, took: Micros) {
        let us = took.0.max(1).unsigned_abs();
        let octave = us.ilog2();
        let within = (us << PER_OCTAVE_LOG2 >> octave) as usize & ((1 << PER_OCTAVE_LOG2) - 1);
        self.counts[(octave << PER_OCTAVE_LOG2) as usize + within] += 1;
        self.longest = self.longest.max(took);
    }

    /// How many were counted.
    pub fn count(&self) -> u64 {
        self.counts.iter().sum()
    }

    /// The longest, exactly.
    pub fn longest(&self) -> Micros {
        self.longest
    }

    /// The buckets that are not empty, rising.
    pub fn buckets(&self) -> impl Iterator<Item = Bucket> {
        let edge = |k: usize| {
            let (octave, within) = (k >> PER_OCTAVE_LOG2, k & ((1 << PER_OCTAVE_LOG2) - 1));
            let eighths = ((1 << PER_OCTAVE_LOG2) + within as u128) << octave;
            Micros(i64::try_from(eighths >> PER_OCTAVE_LOG2).unwrap_or(i64::MAX))
        };
        let filled = self
            .counts
            .iter()
            .enumerate()
            .filter(|(_, count)| **count > 0);
        filled.map(move |(k, &count)| Bucket {
            from: edge(k),
            to: edge(k + 1),
            count,
        })
    }

    /// A time that this share of them did not exceed, rounded up to the end of its bucket; `None` of nothing.
    pub fn not_exceeded_by(&self, share: f64) -> Option<Micros> {
        let wanted = (self.count() as f64 * share).ceil() as u64;
        let mut seen = 0;
        let reached = self.buckets().find(|bucket| {
            seen += bucket.count;
            seen >= wanted
        });
        reached.map(|bucket| bucket.to.min(self.longest))
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    proptest! {
        #[test]
        fn every_time_lies_in_its_bucket(us in 1..i64::MAX / 2) {
            let mut durations = Durations::default();
            durations.add(Micros(us));
            let bucket = durations.buckets().next().unwrap();
            prop_assert!(bucket.from.0 <= us && us < bucket.to.0, "{us} {bucket:?}");
            prop_assert!(us < 8 || (bucket.to.0 - bucket.from.0) as f64 <= us as f64 / 8.0 + 1.0);
        }
    }

    #[test]
    fn shares_are_counted_from_the_shortest() {
        let mut durations = Durations::default();
        assert_eq!(durations.not_exceeded_by(0.5), None);
        for us in 1..=100 {
            durations.add(Micros(us * 1000));
        }
        assert_eq!(durations.count(), 100);
        let half = durations.not_exceeded_by(0.5).unwrap();
        assert!((50_000..=57_000).contains(&half.0), "{half}");
        assert_eq!(durations.not_exceeded_by(1.0), Some(Micros(100_000)));
        assert_eq!(durations.longest(), Micros(100_000));
    }
}
