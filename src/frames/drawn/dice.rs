//! Seeded chance: the same seed and the same stream give the same numbers, whatever is drawn in between.

use rand::Rng;
use rand_pcg::Pcg64;

/// What a stream of numbers is for; each has its own numbers for the same seed.
#[derive(Clone, Copy, Debug)]
pub(super) enum Stream {
    /// The order of the kinds of parts, and the gaps between parts.
    Belt,
    /// One part.
    Part(u64),
    /// The crumbs on one stretch of belt.
    Crumbs(i64),
    /// The noise of one frame.
    Frame(u64),
    /// Belt and grain patterns.
    Pattern(u64),
}

/// A stream of numbers.
#[derive(Clone, Debug)]
pub(super) struct Dice(Pcg64);

impl Dice {
    /// The numbers of `stream` for `seed`.
    pub(super) fn new(seed: u64, stream: Stream) -> Self {
        let (kind, index) = match stream {
            Stream::Belt => (0, 0),
            Stream::Part(index) => (1, index),
            Stream::Crumbs(index) => (2, index.cast_unsigned()),
            Stream::Frame(index) => (3, index),
            Stream::Pattern(index) => (4, index),
        };
        let mut generator = Pcg64::new(u128::from(seed), u128::from(index) << 3 | kind);
        // Neighbouring states begin alike; a few steps set them apart.
        for _ in 0..4 {
            generator.next_u64();
        }
        Self(generator)
    }

    /// 64 even bits.
    pub(super) fn bits(&mut self) -> u64 {
        self.0.next_u64()
    }

    /// Even from `low` up to `high`.
    pub(super) fn between(&mut self, low: f64, high: f64) -> f64 {
        let unit = (self.bits() >> 11) as f64 / (1_u64 << 53) as f64;
        low + (high - low) * unit
    }

    /// A whole number below `count`, which is at least 1 and small.
    pub(super) fn below(&mut self, count: usize) -> usize {
        (self.between(0.0, count as f64) as usize).min(count - 1)
    }

    /// One way or the other.
    pub(super) fn coin(&mut self) -> bool {
        self.bits() >> 63 == 1
    }

    /// Fisher and Yates' shuffle (Knuth, The Art of Computer Programming, volume 2, algorithm P).
    pub(super) fn shuffle<T>(&mut self, cards: &mut [T]) {
        for last in (1..cards.len()).rev() {
            cards.swap(last, self.below(last + 1));
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn streams_repeat_and_differ() {
        let first = |seed, stream| Dice::new(seed, stream).bits();
        assert_eq!(first(1, Stream::Part(7)), first(1, Stream::Part(7)));
        let all = [
            first(1, Stream::Part(7)),
            first(2, Stream::Part(7)),
            first(1, Stream::Part(8)),
            first(1, Stream::Frame(7)),
            first(1, Stream::Crumbs(-7)),
            first(1, Stream::Belt),
        ];
        let distinct: std::collections::HashSet<_> = all.into_iter().collect();
        assert_eq!(distinct.len(), all.len());
    }

    #[test]
    fn numbers_fill_their_range_evenly() {
        let mut dice = Dice::new(3, Stream::Belt);
        let mut counts = [0; 4];
        for _ in 0..4000 {
            let value = dice.between(-1.0, 1.0);
            assert!((-1.0..1.0).contains(&value));
            counts[((value + 1.0) * 2.0) as usize] += 1;
        }
        assert!(
            counts.iter().all(|&n| (900..1100).contains(&n)),
            "{counts:?}"
        );
    }
}
