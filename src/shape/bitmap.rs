//! Sets of pixels as rows of bits.

use crate::stage::{Region, Run};

/// A set of pixels in a rectangle, one bit each; everything outside the rectangle is not in the set.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Bitmap {
    width_px: usize,
    height_px: usize,
    words: Vec<u64>,
}

impl Bitmap {
    /// An empty set in a rectangle of this size.
    pub fn new(width_px: usize, height_px: usize) -> Self {
        let mut bitmap = Self::default();
        bitmap.reset(width_px, height_px);
        bitmap
    }

    /// All pixels of a row-by-row gray picture that are brighter than 127. `gray` must hold `width_px * height_px` values.
    pub fn from_gray(gray: &[u8], width_px: usize, height_px: usize) -> Self {
        assert_eq!(gray.len(), width_px * height_px);
        let mut bitmap = Self::new(width_px, height_px);
        for (i, _) in gray.iter().enumerate().filter(|&(_, &value)| value > 127) {
            bitmap.insert(i % width_px, i / width_px);
        }
        bitmap
    }

    /// Empties the set and changes its size, keeping the buffer.
    pub fn reset(&mut self, width_px: usize, height_px: usize) {
        (self.width_px, self.height_px) = (width_px, height_px);
        self.words.clear();
        self.words.resize(width_px.div_ceil(64) * height_px, 0);
    }

    /// Makes room for rectangles of up to this size.
    pub fn reserve(&mut self, width_px: usize, height_px: usize) {
        let words = width_px.div_ceil(64) * height_px;
        self.words.reserve(words.saturating_sub(self.words.len()));
    }

    /// Columns.
    pub fn width_px(&self) -> usize {
        self.width_px
    }

    /// Rows.
    pub fn height_px(&self) -> usize {
        self.height_px
    }

    /// Whether pixel (x, y) is in the set; `false` outside the rectangle.
    pub fn has(&self, x: i32, y: i32) -> bool {
        let inside =
            x >= 0 && y >= 0 && (x as usize) < self.width_px && (y as usize) < self.height_px;
        inside && self.row(y as usize)[x as usize / 64] >> (x as usize % 64) & 1 != 0
    }

    /// Puts pixel (x, y), which must lie in the rectangle, into the set.
    pub fn insert(&mut self, x: usize, y: usize) {
        assert!(x < self.width_px && y < self.height_px);
        self.row_mut(y)[x / 64] |= 1 << (x % 64);
    }

    /// Takes pixel (x, y), which must lie in the rectangle, out of the set.
    pub fn remove(&mut self, x: usize, y: usize) {
        assert!(x < self.width_px && y < self.height_px);
        self.row_mut(y)[x / 64] &= !(1 << (x % 64));
    }

    /// Puts columns `x0..x1` of row `y` into the set; what lies outside the rectangle is left out.
    pub fn insert_run(&mut self, y: usize, x0: usize, x1: usize) {
        let x1 = x1.min(self.width_px);
        if y >= self.height_px || x0 >= x1 {
            return;
        }
        let row = self.row_mut(y);
        let (first, last) = (x0 / 64, (x1 - 1) / 64);
        let head = !0u64 << (x0 % 64);
        let tail = !0u64 >> (63 - (x1 - 1) % 64);
        if first == last {
            row[first] |= head & tail;
            return;
        }
        row[first] |= head;
        row[first + 1..last].fill(!0);
        row[last] |= tail;
    }

    /// Puts the pixels from (x, y) on rightwards whose bits are set into the set; `x` must be a multiple of 4 and there must be
    /// at most 4 bits. What lies outside the rectangle is left out.
    #[inline]
    pub(super) fn insert_few(&mut self, x: usize, y: usize, bits: u64) {
        debug_assert!(x.is_multiple_of(4) && bits < 16);
        if y < self.height_px && x < self.width_px {
            let room = self.width_px - x;
            let bits = if room < 4 {
                bits & ((1 << room) - 1)
            } else {
                bits
            };
            let words = self.width_px.div_ceil(64);
            self.words[y * words + x / 64] |= bits << (x % 64);
        }
    }

    /// How many pixels are in the set.
    pub fn count(&self) -> u64 {
        self.words
            .iter()
            .map(|word| u64::from(word.count_ones()))
            .sum()
    }

    /// How many pixels are in both sets, which must have the same size.
    pub fn count_common(&self, other: &Self) -> u64 {
        assert_eq!(
            (self.width_px, self.height_px),
            (other.width_px, other.height_px)
        );
        let pairs = self.words.iter().zip(&other.words);
        pairs.map(|(a, b)| u64::from((a & b).count_ones())).sum()
    }

    /// Becomes `a` without `b`, which must have the same size.
    pub fn become_difference(&mut self, a: &Self, b: &Self) {
        assert_eq!((a.width_px, a.height_px), (b.width_px, b.height_px));
        (self.width_px, self.height_px) = (a.width_px, a.height_px);
        self.words.clear();
        self.words
            .extend(a.words.iter().zip(&b.words).map(|(a, b)| a & !b));
    }

    /// Makes `to` the rectangle's pixels that are not in `set`, and returns it.
    pub(super) fn complement<'a>(set: &Self, to: &'a mut Self) -> &'a Self {
        to.reset(set.width_px, set.height_px);
        for y in 0..set.height_px {
            let mut end = 0;
            for (x0, x1) in set.runs(y) {
                to.insert_run(y, end, x0);
                end = x1;
            }
            to.insert_run(y, end, set.width_px);
        }
        to
    }

    /// How many pixels are in the set with all their eight neighbours: the set eroded by 3x3.
    pub(super) fn count_eroded(&self) -> u64 {
        let words = self.width_px.div_ceil(64);
        let across = |y: usize, word: usize| {
            let row = self.row(y);
            let before = if word > 0 { row[word - 1] >> 63 } else { 0 };
            let after = if word + 1 < words {
                row[word + 1] << 63
            } else {
                0
            };
            row[word] & (row[word] << 1 | before) & (row[word] >> 1 | after)
        };
        let inner = |y: usize| {
            let eroded = (0..words)
                .map(move |word| across(y - 1, word) & across(y, word) & across(y + 1, word));
            eroded.map(|word| u64::from(word.count_ones())).sum::<u64>()
        };
        (1..self.height_px.saturating_sub(1)).map(inner).sum()
    }

    /// The runs of row `y` from left to right, as `(x0, x1)` with `x1` one past the last column.
    pub fn runs(&self, y: usize) -> Runs<'_> {
        Runs {
            row: self.row(y),
            width_px: self.width_px,
            x: 0,
        }
    }

    /// Every pixel of the set, row by row.
    pub fn pixels(&self) -> impl Iterator<Item = (usize, usize)> {
        (0..self.height_px).flat_map(move |y| {
            self.runs(y)
                .flat_map(move |(x0, x1)| (x0..x1).map(move |x| (x, y)))
        })
    }

    /// The box around the set: left, top, right, bottom, the last two exclusive; all 0 when it is empty.
    pub fn bounds(&self) -> [i32; 4] {
        let mut bounds: Option<[usize; 4]> = None;
        for y in 0..self.height_px {
            for (x0, x1) in self.runs(y) {
                let [left, top, right, _] = bounds.unwrap_or([x0, y, x1, y]);
                bounds = Some([left.min(x0), top, right.max(x1), y + 1]);
            }
        }
        bounds.map_or([0; 4], |bounds| bounds.map(|px| px as i32))
    }

    /// The whole set as one region with its runs, whether it hangs together or not. `None` if the set is empty.
    pub fn to_region(&self) -> Option<(Region, Vec<Run>)> {
        let mut runs = Vec::new();
        for y in 0..self.height_px {
            runs.extend(self.runs(y).map(|(x0, x1)| Run {
                y: y as u32,
                x0: x0 as u32,
                x1: x1 as u32,
            }));
        }
        (!runs.is_empty()).then(|| (region_of(&runs), runs))
    }

    fn row(&self, y: usize) -> &[u64] {
        let words = self.width_px.div_ceil(64);
        &self.words[y * words..][..words]
    }

    fn row_mut(&mut self, y: usize) -> &mut [u64] {
        let words = self.width_px.div_ceil(64);
        &mut self.words[y * words..][..words]
    }
}

/// Area, box and moments of `runs`, which must not be empty.
fn region_of(runs: &[Run]) -> Region {
    let area_px: u64 = runs.iter().map(|run| u64::from(run.x1 - run.x0)).sum();
    let pixels = || {
        runs.iter()
            .flat_map(|run| (run.x0..run.x1).map(|x| (f64::from(x), f64::from(run.y))))
    };
    let mean = |of: fn((f64, f64)) -> f64| pixels().map(of).sum::<f64>() / area_px as f64;
    let (centroid_x, centroid_y) = (mean(|(x, _)| x), mean(|(_, y)| y));
    let moment = |of: fn(f64, f64) -> f64| -> f64 {
        let centred = pixels().map(|(x, y)| (x - centroid_x, y - centroid_y));
        centred.map(|(dx, dy)| of(dx, dy)).sum()
    };
    Region {
        area_px,
        x_min: runs.iter().map(|run| run.x0).min().unwrap_or(0),
        y_min: runs[0].y,
        x_max: runs.iter().map(|run| run.x1).max().unwrap_or(0),
        y_max: runs[runs.len() - 1].y + 1,
        centroid_x,
        centroid_y,
        mu20: moment(|dx, _| dx * dx),
        mu11: moment(|dx, dy| dx * dy),
        mu02: moment(|_, dy| dy * dy),
        runs: 0..runs.len(),
    }
}

/// The runs of one row; see [`Bitmap::runs`].
pub struct Runs<'a> {
    row: &'a [u64],
    width_px: usize,
    x: usize,
}

impl Runs<'_> {
    /// The first column from `x` on whose bit is `set`, or the width.
    fn next_bit(&self, x: usize, set: bool) -> usize {
        let flip = if set { 0 } else { !0u64 };
        let mut word = x / 64;
        if word >= self.row.len() {
            return self.width_px;
        }
        let mut bits = (self.row[word] ^ flip) & !0 << (x % 64);
        while bits == 0 {
            word += 1;
            if word == self.row.len() {
                return self.width_px;
            }
            bits = self.row[word] ^ flip;
        }
        (word * 64 + bits.trailing_zeros() as usize).min(self.width_px)
    }
}

impl Iterator for Runs<'_> {
    type Item = (usize, usize);

    fn next(&mut self) -> Option<(usize, usize)> {
        let x0 = self.next_bit(self.x, true);
        if x0 == self.width_px {
            self.x = x0;
            return None;
        }
        self.x = self.next_bit(x0, false);
        Some((x0, self.x))
    }
}

#[cfg(test)]
pub(crate) mod tests {
    use super::*;
    use proptest::prelude::*;

    /// Rows of `.` and `#`, as test pictures are written down.
    pub(crate) fn bitmap(rows: &[&str]) -> Bitmap {
        let mut bitmap = Bitmap::new(rows[0].len(), rows.len());
        for (y, row) in rows.iter().enumerate() {
            for (x, _) in row.bytes().enumerate().filter(|&(_, byte)| byte == b'#') {
                bitmap.insert(x, y);
            }
        }
        bitmap
    }

    /// Random sets of up to `side` times `side` pixels.
    pub(crate) fn any_bitmap(side: usize) -> impl Strategy<Value = Bitmap> {
        (1..=side, 1..=side).prop_flat_map(|(w, h)| {
            (prop::collection::vec(prop::bool::weighted(0.6), w * h)).prop_map(move |bits| {
                let gray: Vec<u8> = bits.into_iter().map(|bit| u8::from(bit) * 255).collect();
                Bitmap::from_gray(&gray, w, h)
            })
        })
    }

    proptest! {
        #[test]
        fn runs_are_the_pixels(set in any_bitmap(150)) {
            let mut again = Bitmap::new(set.width_px(), set.height_px());
            for y in 0..set.height_px() {
                let mut end = None;
                for (x0, x1) in set.runs(y) {
                    prop_assert!(x0 < x1 && end.is_none_or(|end| x0 > end));
                    end = Some(x1);
                    again.insert_run(y, x0, x1);
                }
            }
            prop_assert_eq!(&again, &set);
            let plain = (0..set.height_px() as i32)
                .flat_map(|y| (0..set.width_px() as i32).map(move |x| (x, y)))
                .filter(|&(x, y)| set.has(x, y));
            let plain: Vec<_> = plain.map(|(x, y)| (x as usize, y as usize)).collect();
            prop_assert_eq!(plain.len() as u64, set.count());
            prop_assert_eq!(plain, set.pixels().collect::<Vec<_>>());
        }
    }

    #[test]
    fn nothing_lies_outside() {
        let mut set = Bitmap::new(3, 2);
        set.insert_run(1, 1, 99);
        set.insert_run(2, 0, 3);
        assert_eq!(set.count(), 2);
        assert!(!set.has(-1, 0) && !set.has(3, 1) && !set.has(0, 2) && set.has(2, 1));
        assert_eq!(Bitmap::new(4, 4).to_region(), None);
    }

    /// Values of `skimage_SAMPLE` published in scikit-image's test_regionprops.py (area, bbox, centroid, central moments).
    #[test]
    fn a_region_has_the_published_area_box_and_moments() {
        let (region, _) = sample().to_region().unwrap();
        assert_eq!(region.area_px, 72);
        assert_eq!(
            (region.x_min, region.y_min, region.x_max, region.y_max),
            (0, 0, 18, 10)
        );
        assert!((region.centroid_y - 5.666_666_666_666_667).abs() < 1e-12);
        assert!((region.centroid_x - 9.444_444_444_444_445).abs() < 1e-12);
        assert!((region.mu02 - 436.0).abs() < 1e-9);
        assert!((region.mu20 - 1_259.777_777_777_777_4).abs() < 1e-9);
        assert!((region.mu11 + 87.333_333_333_333_03).abs() < 1e-9);
    }

    /// SAMPLE of scikit-image's test_regionprops.py.
    pub(crate) fn sample() -> Bitmap {
        bitmap(&[
            ".........#.##.....",
            "........####......",
            "........###.......",
            "........###.......",
            "......######......",
            "......###########.",
            "......###########.",
            "#.#..##.##..#####.",
            ".#######.##...####",
            ".##..###........##",
        ])
    }
}
