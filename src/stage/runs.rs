//! Foreground as runs, row by row.

use super::scene::Run;

/// The runs of a binary picture, sorted by row, then column; no two of a row touch.
#[derive(Clone, Debug, Default, PartialEq)]
pub(crate) struct RunRows {
    /// Columns of the picture.
    pub width_px: u32,
    runs: Vec<Run>,
    /// Where each row begins in `runs`, and the end.
    starts: Vec<u32>,
}

impl RunRows {
    /// Empty, with room for the most runs that a picture of this size can have.
    pub fn new(width_px: usize, height_px: usize) -> Self {
        let mut starts = Vec::with_capacity(height_px + 1);
        starts.push(0);
        Self {
            width_px: width_px as u32,
            runs: Vec::with_capacity(width_px.div_ceil(2) * height_px),
            starts,
        }
    }

    /// Begins a new picture.
    pub fn clear(&mut self) {
        self.runs.clear();
        self.starts.clear();
        self.starts.push(0);
    }

    /// Rows so far.
    pub fn height(&self) -> usize {
        self.starts.len() - 1
    }

    /// All runs.
    pub fn runs(&self) -> &[Run] {
        &self.runs
    }

    /// The numbers of the runs of row `y`.
    pub fn of_row(&self, y: usize) -> std::ops::Range<usize> {
        self.starts[y] as usize..self.starts[y + 1] as usize
    }

    /// Adds a run to the row that is being built.
    pub fn push(&mut self, x0: u32, x1: u32) {
        let y = self.height() as u32;
        self.runs.push(Run { y, x0, x1 });
    }

    /// Closes the row that is being built.
    pub fn end_row(&mut self) {
        self.starts.push(self.runs.len() as u32);
    }

    /// Adds a row of bits, the lowest of the first word being column 0; bits past the width are 0.
    pub fn push_row(&mut self, bits: &[u64]) {
        let mut carry = 0;
        let mut open = None;
        for (i, &word) in bits.iter().enumerate() {
            // A bit is set where the row changes between background and foreground.
            let mut edges = word ^ (word << 1 | carry);
            carry = word >> 63;
            while edges != 0 {
                let x = i as u32 * 64 + edges.trailing_zeros();
                match open.take() {
                    Some(x0) => self.push(x0, x),
                    None => open = Some(x),
                }
                edges &= edges - 1;
            }
        }
        if let Some(x0) = open {
            self.push(x0, self.width_px);
        }
        self.end_row();
    }

    /// Draws the runs as 255 into a picture of zeros without padding.
    pub fn draw(&self, pixels: &mut [u8]) {
        for run in &self.runs {
            let row = &mut pixels[run.y as usize * self.width_px as usize..];
            row[run.x0 as usize..run.x1 as usize].fill(255);
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    proptest! {
        #[test]
        fn drawing_gives_the_bits_back(
            rows in (1..200usize).prop_flat_map(|width| {
                proptest::collection::vec(proptest::collection::vec(any::<bool>(), width), 1..5)
            }),
        ) {
            let width = rows[0].len();
            let mut runs = RunRows::new(width, rows.len());
            for row in &rows {
                let mut bits = vec![0u64; width.div_ceil(64)];
                for (x, &set) in row.iter().enumerate() {
                    bits[x / 64] |= u64::from(set) << (x % 64);
                }
                runs.push_row(&bits);
            }
            let mut pixels = vec![0; width * rows.len()];
            runs.draw(&mut pixels);
            let drawn: Vec<bool> = pixels.iter().map(|&v| v == 255).collect();
            prop_assert_eq!(drawn, rows.concat());
            prop_assert!(runs.runs().windows(2).all(|w| w[0].y < w[1].y || w[0].x1 < w[1].x0));
        }
    }
}
