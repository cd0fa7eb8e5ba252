//! Times of many frames.

use serde::Serialize;

use crate::clock::Stopwatch;
use crate::frames::Frame;
use crate::inspect::{Inspector, Look};
use crate::laps::{Step, Watch};

/// What half, 99 of 100 and all of the times do not exceed (nearest rank: a time that was measured).
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct Spread {
    /// Median.
    pub p50_ms: f64,
    /// 99th percentile.
    pub p99_ms: f64,
    /// The longest.
    pub max_ms: f64,
}

impl Spread {
    /// Of times in nanoseconds; `None` of nothing.
    pub fn of(mut times_ns: Vec<u64>) -> Option<Self> {
        times_ns.sort_unstable();
        let at = |percent: usize| {
            let rank = (times_ns.len() * percent).div_ceil(100);
            Some(*times_ns.get(rank.checked_sub(1)?)? as f64 / 1e6)
        };
        Some(Self {
            p50_ms: at(50)?,
            p99_ms: at(99)?,
            max_ms: at(100)?,
        })
    }
}

/// Nanoseconds of one frame.
#[derive(Clone, Debug, Default)]
struct Laps {
    whole: u64,
    /// Top-hat, threshold, fill, regions.
    stage: [u64; 4],
    /// Each part that was judged.
    parts: Vec<u64>,
}

/// Sorts the laps of a frame by step.
struct Sorter<'a> {
    watch: Stopwatch,
    laps: &'a mut Laps,
}

impl Watch for Sorter<'_> {
    fn lap(&mut self, step: Step) {
        let ns = self.watch.lap_ns();
        match step {
            Step::Part => self.laps.parts.push(ns),
            _ => self.laps.stage[step as usize] += ns,
        }
    }
}

/// How long each step of each frame took.
#[derive(Clone, Debug, Default)]
pub struct Tally {
    read: Vec<u64>,
    frames: Vec<Laps>,
}

impl Tally {
    /// With room for this many frames.
    pub fn for_frames(frames: usize) -> Self {
        Self {
            read: Vec::with_capacity(frames),
            frames: Vec::with_capacity(frames),
        }
    }

    /// Times `read`.
    pub(super) fn read<E>(&mut self, read: impl FnOnce() -> Result<(), E>) -> Result<(), E> {
        let mut watch = Stopwatch::start();
        read()?;
        self.read.push(watch.lap_ns());
        Ok(())
    }

    /// Times `inspector` on one frame.
    pub(super) fn inspect(&mut self, inspector: &mut Inspector, frame: &Frame, look: &mut Look) {
        let mut laps = Laps {
            parts: Vec::with_capacity(64),
            ..Laps::default()
        };
        let mut whole = Stopwatch::start();
        let mut sorter = Sorter {
            watch: whole,
            laps: &mut laps,
        };
        inspector.inspect_watched(frame, look, &mut sorter);
        laps.whole = whole.lap_ns();
        self.frames.push(laps);
    }

    /// How many frames were timed.
    pub fn frames(&self) -> usize {
        self.frames.len()
    }

    /// Parts judged in a frame, on average.
    pub fn parts_per_frame(&self) -> f64 {
        let parts: usize = self.frames.iter().map(|laps| laps.parts.len()).sum();
        parts as f64 / self.frames.len().max(1) as f64
    }

    /// Reading a frame: decoding it, if it came from a file.
    pub fn reading(&self) -> Option<Spread> {
        Spread::of(self.read.clone())
    }

    /// One step of a frame, or one part; `None` if it never happened.
    pub fn step(&self, step: Step) -> Option<Spread> {
        let times = self.frames.iter();
        Spread::of(match step {
            Step::Part => times.flat_map(|laps| &laps.parts).copied().collect(),
            _ => times.map(|laps| laps.stage[step as usize]).collect(),
        })
    }

    /// A frame from its pixels to its verdicts.
    pub fn whole(&self) -> Option<Spread> {
        Spread::of(self.frames.iter().map(|laps| laps.whole).collect())
    }

    /// How long `steps` took together in each frame.
    pub(super) fn sums(&self, steps: &[Step]) -> impl Iterator<Item = u64> {
        self.frames.iter().map(|laps| {
            let of = |step: &Step| match step {
                Step::Part => laps.parts.iter().sum(),
                step => laps.stage[*step as usize],
            };
            steps.iter().map(of).sum()
        })
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn percentiles_are_the_nearest_rank() {
        assert_eq!(Spread::of(vec![]), None);
        let spread = |p50_ms, p99_ms, max_ms| {
            Some(Spread {
                p50_ms,
                p99_ms,
                max_ms,
            })
        };
        assert_eq!(Spread::of(vec![3_000_000]), spread(3.0, 3.0, 3.0));
        let ms = |ms: u64| ms * 1_000_000;
        assert_eq!(
            Spread::of((1..=200).rev().map(ms).collect()),
            spread(100.0, 198.0, 200.0)
        );
        assert_eq!(Spread::of(vec![ms(2), ms(1), ms(9)]), spread(2.0, 9.0, 9.0));
    }

    #[test]
    fn stage_steps_come_first() {
        let steps = [Step::TopHat, Step::Threshold, Step::Fill, Step::Regions];
        for (k, step) in steps.into_iter().enumerate() {
            assert_eq!(step as usize, k);
        }
    }
}
