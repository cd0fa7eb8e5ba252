//! Closes holes: background regions (4-connected) that do not touch the border and are small enough.
//!
//! The background of a row lies between its runs: before the first, between two, after the last. These gaps are
//! labelled, not pixels. Row `y` with `k` runs has `k + 1` gaps, of which the first and the last may be empty; so the
//! gaps need not be stored, their ends are those of the runs. The first and the last one of a row, and all of the first
//! and the last row, are the outside; so rows of one run or none need no work.

use super::forest::Forest;
use super::runs::RunRows;

/// What the border belongs to.
const OUTSIDE: u32 = 0;

/// Fills holes, with its buffers.
pub(crate) struct Fill {
    limit_px: u64,
    gaps: Forest,
    areas: Vec<u64>,
}

impl Fill {
    pub fn new(limit_px: u64, width_px: usize, height_px: usize) -> Self {
        let most = (width_px.div_ceil(2) + 1) * height_px + 1;
        Self {
            limit_px,
            gaps: Forest::new(most),
            areas: Vec::with_capacity(most),
        }
    }

    /// Closes holes of up to this size from now on.
    pub fn set_limit(&mut self, limit_px: u64) {
        self.limit_px = limit_px;
    }

    /// Writes `runs` with its small holes closed to `filled`.
    pub fn run(&mut self, runs: &RunRows, filled: &mut RunRows) {
        filled.clear();
        self.connect(runs);
        self.measure(runs);
        for y in 0..runs.height() {
            self.fill_row(&Row::of(runs, y), filled);
            filled.end_row();
        }
    }

    fn fill_row(&mut self, row: &Row, filled: &mut RunRows) {
        let mut x0 = row.gap(0).1;
        for gap in 1..row.gaps() {
            let (start, end) = row.gap(gap);
            if !self.is_hole(row.name(gap)) {
                filled.push(x0, start);
                x0 = end;
            }
        }
    }

    fn is_hole(&mut self, name: u32) -> bool {
        name != OUTSIDE && {
            let root = self.gaps.find(name);
            root != OUTSIDE && self.areas[root as usize] <= self.limit_px
        }
    }

    /// Joins gaps that share a column with a gap of the row above.
    fn connect(&mut self, runs: &RunRows) {
        self.gaps.restart(runs.runs().len() + runs.height() + 1);
        for y in 1..runs.height() {
            let (above, below) = (Row::of(runs, y - 1), Row::of(runs, y));
            if above.has_inner() || below.has_inner() {
                self.connect_rows(&above, &below);
            }
        }
    }

    fn connect_rows(&mut self, above: &Row, below: &Row) {
        let (mut a, mut b) = (0, 0);
        while a < above.gaps() && b < below.gaps() {
            let ((a0, a1), (b0, b1)) = (above.gap(a), below.gap(b));
            if a0.max(b0) < a1.min(b1) {
                self.gaps.join(above.name(a), below.name(b));
            }
            if a1 <= b1 {
                a += 1;
            } else {
                b += 1;
            }
        }
    }

    /// Adds up the area of every set of gaps inside.
    fn measure(&mut self, runs: &RunRows) {
        self.areas.clear();
        self.areas.resize(runs.runs().len() + runs.height() + 1, 0);
        for y in 0..runs.height() {
            let row = Row::of(runs, y);
            for gap in 1..row.gaps() - 1 {
                let (start, end) = row.gap(gap);
                let root = self.gaps.find(row.name(gap));
                self.areas[root as usize] += u64::from(end - start);
            }
        }
    }
}

/// The gaps of one row.
struct Row<'a> {
    runs: &'a [super::scene::Run],
    width_px: u32,
    /// The name of its first gap, if that had one of its own.
    first: u32,
    /// Whether it is the first row or the last.
    is_border: bool,
}

impl<'a> Row<'a> {
    fn of(rows: &'a RunRows, y: usize) -> Self {
        let range = rows.of_row(y);
        Self {
            // Before it there are as many gaps as runs and rows, and the outside.
            first: (range.start + y + 1) as u32,
            runs: &rows.runs()[range],
            width_px: rows.width_px,
            is_border: y == 0 || y + 1 == rows.height(),
        }
    }

    /// Whether it has a gap between two runs.
    fn has_inner(&self) -> bool {
        self.runs.len() > 1
    }

    fn gaps(&self) -> usize {
        self.runs.len() + 1
    }

    fn name(&self, gap: usize) -> u32 {
        match self.is_border || gap == 0 || gap == self.runs.len() {
            true => OUTSIDE,
            false => self.first + gap as u32,
        }
    }

    /// Its first column and one past its last.
    fn gap(&self, gap: usize) -> (u32, u32) {
        let start = gap.checked_sub(1).map_or(0, |i| self.runs[i].x1);
        let end = self.runs.get(gap).map_or(self.width_px, |run| run.x0);
        (start, end)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::stage::plain::{self, Grid};
    use proptest::prelude::*;

    pub fn runs_of(set: &Grid<bool>) -> RunRows {
        let mut rows = RunRows::new(set.width, set.height);
        for y in 0..set.height {
            let mut bits = vec![0u64; set.width.div_ceil(64)];
            for x in 0..set.width {
                bits[x / 64] |= u64::from(set.at(x, y)) << (x % 64);
            }
            rows.push_row(&bits);
        }
        rows
    }

    fn filled(set: &Grid<bool>, limit: u64) -> Vec<bool> {
        let mut fill = Fill::new(limit, set.width, set.height);
        let mut rows = RunRows::new(set.width, set.height);
        let runs = runs_of(set);
        fill.run(&runs, &mut rows);
        let once = rows.clone();
        fill.run(&runs, &mut rows);
        assert_eq!(once, rows, "nothing is left over from the picture before");
        let mut pixels = vec![0; set.cells.len()];
        rows.draw(&mut pixels);
        for (a, b) in rows
            .runs()
            .iter()
            .zip(&rows.runs()[1.min(rows.runs().len())..])
        {
            assert!(
                (a.y, a.x1 + 1) <= (b.y, b.x0) || a.y < b.y,
                "runs stay apart"
            );
        }
        pixels.iter().map(|&v| v > 0).collect()
    }

    fn drawn(rows: &[&str]) -> Grid<bool> {
        Grid::new(rows[0].len(), rows.len(), |x, y| {
            rows[y].as_bytes()[x] == b'1'
        })
    }

    /// The example in the docstring of `scipy.ndimage.binary_fill_holes`.
    #[test]
    fn scipy_fill_holes_example() {
        let ring = drawn(&["00000", "01110", "01010", "01110", "00000"]);
        let full = drawn(&["00000", "01110", "01110", "01110", "00000"]);
        assert_eq!(filled(&ring, u64::MAX), full.cells);
        assert_eq!(filled(&ring, 1), full.cells);
        assert_eq!(filled(&ring, 0), ring.cells);
    }

    /// `test_binary_fill_holes02` of scipy: a ring closed only over corners holds a 4-connected background.
    #[test]
    fn scipy_diagonal_ring() {
        let ring = drawn(&[
            "00000000", "00011000", "00100100", "00100100", "00100100", "00011000", "00000000",
        ]);
        let full = drawn(&[
            "00000000", "00011000", "00111100", "00111100", "00111100", "00011000", "00000000",
        ]);
        assert_eq!(filled(&ring, u64::MAX), full.cells);
        assert_eq!(filled(&ring, 6), full.cells);
        assert_eq!(filled(&ring, 5), ring.cells);
    }

    proptest! {
        #[test]
        fn any_picture(
            (width, height, cells) in (1..90usize, 1..12usize).prop_flat_map(|(w, h)| {
                (Just(w), Just(h), proptest::collection::vec(proptest::bool::weighted(0.6), w * h))
            }),
            limit in prop_oneof![0..6u64, Just(u64::MAX)],
        ) {
            let set = Grid { width, height, cells };
            prop_assert_eq!(filled(&set, limit), plain::fill(&set, limit).cells);
        }
    }
}
