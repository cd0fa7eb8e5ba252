//! How a running extremum is cut into blocks.
//!
//! The windows that end in a block of `length` rows begin in `length` rows further up; between those and the block lie the
//! rows that all of these windows have in common. So a window's extremum is that of a suffix of its first rows, of the
//! common rows, and of a prefix of the block: three comparisons a pixel whatever the window's length. With blocks one row
//! shorter than the window there are no common rows: that is the method of van Herk 1992 and Gil & Werman 1993. Blocks of
//! long windows are kept shorter here, so that everything but the picture stays in the nearest cache; the extremum of the
//! common rows is put together from those of the blocks before.

use std::ops::Range;

use crate::stage::element::Span;

/// The longest block.
const LONGEST: usize = 64;

/// How the rows of a window are cut.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) struct Cut {
    /// Rows of a block.
    pub length: usize,
    /// How many whole blocks before this one all windows have in common.
    pub common: usize,
    /// How many of the last rows of the block before those they have in common too.
    pub tail: usize,
}

impl Cut {
    /// For windows of `size` rows.
    pub fn of(size: usize) -> Self {
        let reach = (size - 1).max(1);
        let lengths = (LONGEST / 2).min(reach)..=LONGEST.min(reach);
        // Rows of a tail are looked at twice: as few of them as possible.
        let length = lengths
            .rev()
            .min_by_key(|length| reach % length)
            .unwrap_or(1);
        Self {
            length,
            common: reach / length - 1,
            tail: reach % length,
        }
    }

    /// How many blocks are remembered: the common ones, and the one whose tail is common.
    pub fn remembered(self) -> usize {
        self.common + 1
    }

    /// Rows of a kernel's memory: a suffix, and for every block that is remembered its extremum and that of its tail.
    pub fn memory_rows(self) -> usize {
        self.length + 2 * self.remembered()
    }
}

/// A running extremum down the columns of a picture, or some blocks of it (see [`super::Level::slide`]).
#[derive(Clone, Copy, Debug)]
pub(crate) struct Job {
    /// Columns.
    pub width_px: usize,
    /// Rows of the picture.
    pub height_px: usize,
    /// The window.
    pub span: Span,
    /// How it is cut.
    pub cut: Cut,
    /// The picture's row with which the source begins.
    pub src_top: usize,
    /// The first block.
    pub first: usize,
    /// How many blocks.
    pub count: usize,
}

/// One block of a job. Rows are counted from its first.
#[derive(Clone, Copy, Debug)]
pub(super) struct Block {
    /// Its number.
    pub index: usize,
    /// Columns.
    pub width_px: usize,
    /// How windows are cut.
    pub cut: Cut,
    /// Where its first row is in the source.
    pub front: usize,
    /// Its rows inside the picture.
    pub front_rows: usize,
    /// Where the first of the rows in which the windows begin, and that is inside the picture, is in the source.
    pub back: usize,
    /// Which of the rows in which the windows begin are inside the picture.
    pub back_rows: (usize, usize),
    /// The rows that end a window centred inside the picture.
    pub yields: (usize, usize),
    /// Where the first of these windows goes in the job's output.
    pub out: usize,
}

impl Job {
    /// How many blocks it takes for all rows to come out.
    pub fn blocks_of(height_px: usize, span: Span, cut: Cut) -> usize {
        match height_px {
            0 => 0,
            _ => (height_px + span.after).div_ceil(cut.length),
        }
    }

    /// The first row of the picture that a block looks at.
    pub fn first_row(block: usize, span: Span, cut: Cut) -> usize {
        (block * cut.length).saturating_sub(span.size() - 1)
    }

    /// The rows that come out: row `y` does when the last row of its window has gone in.
    pub fn rows_out(&self) -> Range<usize> {
        let last = self.first + self.count;
        self.row_out(self.first * self.cut.length)..self.row_out(last * self.cut.length)
    }

    fn row_out(&self, row_in: usize) -> usize {
        row_in.saturating_sub(self.span.after).min(self.height_px)
    }

    /// The blocks that it consists of.
    pub(super) fn blocks(self) -> impl Iterator<Item = Block> {
        (self.first..self.first + self.count).map(move |index| self.block(index))
    }

    fn block(&self, index: usize) -> Block {
        let (length, reach, height) = (self.cut.length, self.span.size() - 1, self.height_px);
        let top = index * length;
        // Windows begin in the rows `top - reach ..`, of which those above the picture are left out.
        let above = reach.saturating_sub(top).min(length);
        let below = (height + reach).saturating_sub(top).clamp(above, length);
        let from = self.span.after.saturating_sub(top).min(length);
        let to = (height + self.span.after)
            .saturating_sub(top)
            .clamp(from, length);
        Block {
            index,
            width_px: self.width_px,
            cut: self.cut,
            front: top - self.src_top,
            front_rows: height.saturating_sub(top).min(length),
            back: (top + above).saturating_sub(reach + self.src_top),
            back_rows: (above, below),
            yields: (from, to),
            out: self.row_out(top + from) - self.rows_out().start,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_parts_of_a_window_add_up() {
        for size in 2..5_000 {
            let cut = Cut::of(size);
            assert_eq!(cut.length + cut.common * cut.length + cut.tail + 1, size);
            assert!(cut.length <= LONGEST && cut.tail < cut.length);
            assert!(size <= LONGEST || cut.length >= LONGEST / 2);
        }
        assert_eq!(Cut::of(1).length, 1);
        assert_eq!(
            Cut::of(241),
            Cut {
                length: 60,
                common: 3,
                tail: 0
            }
        );
    }

    #[test]
    fn blocks_yield_every_row_once() {
        for height in 1..40 {
            for (before, after) in [(0, 0), (1, 1), (5, 0), (0, 5), (7, 6)] {
                let (before, after) = (before.min(height - 1), after.min(height - 1));
                let span = Span { before, after };
                let cut = Cut::of(span.size());
                let job = Job {
                    width_px: 1,
                    height_px: height,
                    span,
                    cut,
                    src_top: 0,
                    first: 0,
                    count: Job::blocks_of(height, span, cut),
                };
                let rows: usize = job
                    .blocks()
                    .map(|block| block.yields.1 - block.yields.0)
                    .sum();
                assert_eq!((rows, job.rows_out()), (height, 0..height));
            }
        }
    }
}
