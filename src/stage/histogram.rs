//! How often each gray value occurs.

/// Counts gray values two at a time: a table of pairs takes half as many steps as one of values. Steps that change the same
/// entry wait for each other, so even areas are counted eight pixels at a time, and every other pair is swapped.
pub(crate) struct Histogram {
    /// How often `low` and `high` stand side by side, at `256 * high + low`.
    pairs: Box<[u32; PAIRS]>,
    /// What was not counted in pairs.
    singles: [u64; 256],
}

const PAIRS: usize = 256 * 256;

/// A 1 in every byte.
const EVERY_BYTE: u64 = u64::MAX / 255;

impl Histogram {
    pub fn new() -> Self {
        let pairs = vec![0; PAIRS].into_boxed_slice();
        Self {
            pairs: pairs.try_into().expect("the length is that of the array"),
            singles: [0; 256],
        }
    }

    /// Counts the pixels of a row.
    pub fn add(&mut self, row: &[u8]) {
        let (eights, rest) = row.as_chunks();
        for &eight in eights {
            let word = u64::from_le_bytes(eight);
            let first = word & 0xff;
            if word == first * EVERY_BYTE {
                self.singles[first as usize] += 8;
                continue;
            }
            let [a, b, c, d] = [word, word >> 16, word >> 32, word >> 48].map(|pair| pair as u16);
            self.pairs[a as usize] += 1;
            self.pairs[b.swap_bytes() as usize] += 1;
            self.pairs[c as usize] += 1;
            self.pairs[d.swap_bytes() as usize] += 1;
        }
        for &pixel in rest {
            self.singles[pixel as usize] += 1;
        }
    }

    /// How often each value was counted since the last time. Counting starts again.
    pub fn take(&mut self) -> [u64; 256] {
        let mut counts = std::mem::replace(&mut self.singles, [0; 256]);
        let mut lows = [0u32; 256];
        for (row, high) in self
            .pairs
            .as_chunks_mut::<256>()
            .0
            .iter_mut()
            .zip(&mut counts)
        {
            for (low, count) in lows.iter_mut().zip(&*row) {
                *low += count;
            }
            *high += u64::from(row.iter().sum::<u32>());
            row.fill(0);
        }
        for (count, low) in counts.iter_mut().zip(lows) {
            *count += u64::from(low);
        }
        counts
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    proptest! {
        #[test]
        fn counts_every_pixel(
            rows in proptest::collection::vec(
                prop_oneof![
                    proptest::collection::vec(any::<u8>(), 0..100),
                    proptest::collection::vec(0..2u8, 0..100),
                    (any::<u8>(), 0..100usize).prop_map(|(value, len)| vec![value; len]),
                ],
                1..6,
            ),
        ) {
            let mut histogram = Histogram::new();
            for _ in 0..2 {
                rows.iter().for_each(|row| histogram.add(row));
                let counts = histogram.take();
                for value in 0..=255 {
                    let plain = rows.iter().flatten().filter(|&&v| v == value).count();
                    prop_assert_eq!(counts[value as usize], plain as u64);
                }
            }
        }
    }
}
