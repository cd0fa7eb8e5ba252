//! Foreground is value > level: fixed, after Otsu, or with two levels.

use super::forest::Forest;
use super::plan::{Plan, Threshold};
use super::regions::connect;
use super::runs::RunRows;

/// The level that splits the counted gray values into two classes of greatest between-class variance (Otsu 1979): one class
/// is `<= level`, the other `> level`. Of several equally good levels the lowest. One single gray value gives that value,
/// nothing gives 0: no foreground.
pub fn otsu_level(counts: &[u64; 256]) -> u8 {
    let total: u64 = counts.iter().sum();
    let sum: u64 = counts.iter().zip(0..).map(|(&n, value)| n * value).sum();
    let (mut below, mut sum_below) = (0, 0);
    let mut best = (0.0, counts.iter().rposition(|&n| n > 0).unwrap_or(0));
    for (level, &n) in counts.iter().enumerate() {
        below += n;
        sum_below += n * level as u64;
        let above = total - below;
        if below == 0 || above == 0 {
            continue;
        }
        // total^2 times the variance; the difference is exact, so that equal splits compare equal.
        let apart = i128::from(total) * i128::from(sum_below) - i128::from(below) * i128::from(sum);
        let variance = (apart as f64) * (apart as f64) / (below as f64 * above as f64);
        if variance > best.0 {
            best = (variance, level);
        }
    }
    best.1 as u8
}

/// Keeps runs above the lower level whose region (8-connected) has a pixel above the upper one (Canny 1986).
pub(crate) struct Hysteresis {
    runs: RunRows,
    forest: Forest,
    /// For every run, then for every region: whether it has a pixel above the upper level.
    sure: Vec<bool>,
}

impl Hysteresis {
    /// With buffers if the plan asks for two levels.
    pub fn new(plan: &Plan) -> Self {
        let (width, height) = match plan.threshold {
            Threshold::Hysteresis { .. } => (plan.width_px, plan.height_px),
            _ => (0, 0),
        };
        let most = width.div_ceil(2) * height;
        Self {
            runs: RunRows::new(width, height),
            forest: Forest::new(most),
            sure: Vec::with_capacity(most),
        }
    }

    /// Begins a new picture.
    pub fn restart(&mut self) {
        self.runs.clear();
        self.sure.clear();
    }

    /// Adds a row of pixels above the lower level, and of those among them above the upper one.
    pub fn push_row(&mut self, low: &[u64], high: &[u64]) {
        self.runs.push_row(low);
        let row = self.runs.of_row(self.runs.height() - 1);
        for run in &self.runs.runs()[row] {
            self.sure.push(any_set(high, run.x0, run.x1));
        }
    }

    /// Writes the runs that stay to `kept`.
    pub fn keep_sure(&mut self, kept: &mut RunRows) {
        connect(&self.runs, &mut self.forest);
        for i in 0..self.sure.len() {
            let root = self.forest.find(i as u32);
            self.sure[root as usize] |= self.sure[i];
        }
        for y in 0..self.runs.height() {
            for i in self.runs.of_row(y) {
                if self.sure[self.forest.find(i as u32) as usize] {
                    let run = self.runs.runs()[i];
                    kept.push(run.x0, run.x1);
                }
            }
            kept.end_row();
        }
    }
}

/// Whether any of the bits `x0..x1` is set; the range is not empty.
fn any_set(bits: &[u64], x0: u32, x1: u32) -> bool {
    let (first, last) = (x0 as usize / 64, (x1 as usize - 1) / 64);
    let from = u64::MAX << (x0 % 64);
    let to = u64::MAX >> (63 - (x1 - 1) % 64);
    if first == last {
        return bits[first] & from & to != 0;
    }
    bits[first] & from != 0
        || bits[last] & to != 0
        || bits[first + 1..last].iter().any(|&word| word != 0)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::stage::plain::{self, Grid};
    use proptest::prelude::*;

    fn level_of(pixels: &[u8]) -> u8 {
        let mut counts = [0; 256];
        for &p in pixels {
            counts[p as usize] += 1;
        }
        otsu_level(&counts)
    }

    /// `test_thresholding.py` of scikit-image, `TestSimpleImage`: 2.
    #[test]
    fn scikit_image_otsu_5x5() {
        let pixels = [
            [0, 0, 1, 3, 5],
            [0, 1, 4, 3, 4],
            [1, 2, 5, 4, 1],
            [2, 4, 5, 2, 1],
            [4, 5, 1, 0, 0],
        ];
        assert_eq!(level_of(&pixels.concat()), 2);
    }

    /// The gradient 0, 10, .. 250 in the tests of imageproc's `contrast.rs`: 120.
    #[test]
    fn imageproc_otsu_gradient() {
        let pixels: Vec<u8> = (0..26).map(|i| i * 10).collect();
        assert_eq!(level_of(&pixels), 120);
    }

    #[test]
    fn a_constant_picture_has_no_foreground() {
        for value in [0, 1, 77, 255] {
            assert_eq!(level_of(&[value; 9]), value);
        }
        assert_eq!(level_of(&[]), 0);
    }

    #[test]
    fn any_set_looks_at_no_bit_beside_the_range() {
        for (x0, x1) in (0..200u32).flat_map(|a| (a + 1..=200).map(move |b| (a, b))) {
            for bit in [x0.wrapping_sub(1), x0, (x0 + x1) / 2, x1 - 1, x1] {
                let mut bits = [0u64; 4];
                if let Some(word) = bits.get_mut(bit as usize / 64) {
                    *word |= 1 << (bit % 64);
                }
                assert_eq!(
                    any_set(&bits, x0, x1),
                    (x0..x1).contains(&bit),
                    "{bit} in {x0}..{x1}"
                );
            }
        }
    }

    proptest! {
        #[test]
        fn otsu_is_the_best_of_all_levels(cells in proptest::collection::vec(0..40u8, 1..60)) {
            let expected = plain::otsu(&Grid { width: cells.len(), height: 1, cells: cells.clone() });
            prop_assert_eq!(level_of(&cells), expected);
        }
    }
}
