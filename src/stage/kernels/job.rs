//! How a running extremum is cut into blocks.

use std::ops::Range;

use crate::stage::element::Span;

/// A running extremum down the columns of a picture, or a part of it (see [`super::Level::slide`]).
#[derive(Clone, Copy, Debug)]
pub(crate) struct Job {
    /// Columns.
    pub width_px: usize,
    /// Rows of the picture.
    pub height_px: usize,
    /// The window.
    pub span: Span,
    /// The picture's row with which the source begins.
    pub src_top: usize,
    /// The first row that goes in.
    pub from: usize,
    /// One past the last row that goes in. Rows past the picture push the last windows out.
    pub to: usize,
}

/// What a [`Job`] does to one block of as many rows as the window is long. Rows are counted from the block's first.
#[derive(Clone, Copy, Debug)]
pub(super) struct Block {
    /// Columns.
    pub width_px: usize,
    /// Rows of a whole block.
    pub size: usize,
    /// Where the block's first row is in the source.
    pub src: usize,
    /// Its rows inside the picture that are there by now.
    pub rows_in: usize,
    /// The first row that goes in; what came before it is kept in the prefix.
    pub from: usize,
    /// The row that ends the first window that is centred inside the picture, or `to`.
    pub first_out: usize,
    /// One past the last row that goes in.
    pub to: usize,
    /// Where the window that `first_out` ends goes in the job's output.
    pub out: usize,
    /// Whether there is no block before it, and so no suffix.
    pub is_first: bool,
    /// Whether a suffix is needed now: the block is complete and there is another one.
    pub wants_suffix: bool,
}

impl Job {
    /// All rows that have to go in for all rows to come out.
    pub fn rows(height_px: usize, span: Span) -> usize {
        match height_px {
            0 => 0,
            _ => height_px + span.after,
        }
    }

    /// The rows that come out: row `y` does when the last row of its window has gone in.
    pub fn rows_out(&self) -> Range<usize> {
        self.row_out(self.from)..self.row_out(self.to)
    }

    fn row_out(&self, row_in: usize) -> usize {
        row_in.saturating_sub(self.span.after).min(self.height_px)
    }

    /// The blocks that it touches.
    pub(super) fn blocks(self) -> impl Iterator<Item = Block> {
        let size = self.span.size();
        let (start, rows) = (self.rows_out().start, Self::rows(self.height_px, self.span));
        (self.from / size..self.to.div_ceil(size)).map(move |index| {
            let top = index * size;
            let (from, to) = (self.from.max(top) - top, self.to.min(top + size) - top);
            let first_out = self.span.after.saturating_sub(top).clamp(from, to);
            Block {
                width_px: self.width_px,
                size,
                src: top - self.src_top,
                rows_in: self.height_px.saturating_sub(top).min(to),
                from,
                first_out,
                to,
                out: self.row_out(top + first_out) - start,
                is_first: index == 0,
                wants_suffix: to == size && top + size < rows,
            }
        })
    }
}
