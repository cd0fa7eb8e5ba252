//! A running extremum down the columns that can be fed band by band.

use std::ops::Range;

use super::buffer::Aligned;
use super::element::Span;
use super::kernels::{Extremum, Job, Level, Rows, RowsMut, suffix_stride};

/// Bands have about this many rows, so that what one step writes is still in the cache for the next.
const BAND_ROWS: usize = 64;

/// The extremum over a vertical window around every pixel; what lies outside the picture is ignored.
pub(crate) struct Slide {
    op: Extremum,
    span: Span,
    width_px: usize,
    height_px: usize,
    /// The suffix extrema of the last block, and one row of the kernel's.
    suffix: Aligned,
    /// The next block.
    next: usize,
    /// How many blocks a picture has.
    blocks: usize,
}

impl Slide {
    /// For pictures of this size.
    pub fn new(op: Extremum, span: Span, width_px: usize, height_px: usize) -> Self {
        let reach = height_px.saturating_sub(1);
        // A window that reaches past the picture on one side sees the same as one that ends with it.
        let span = Span {
            before: span.before.min(reach),
            after: span.after.min(reach),
        };
        Self {
            op,
            span,
            width_px,
            height_px,
            suffix: Aligned::new(0, (span.size() + 1) * suffix_stride(width_px)),
            next: 0,
            blocks: match height_px {
                0 => 0,
                _ => (height_px + span.after).div_ceil(span.size()),
            },
        }
    }

    /// The most rows that one step yields.
    pub fn most_rows(&self) -> usize {
        self.blocks_per_step() * self.span.size()
    }

    fn blocks_per_step(&self) -> usize {
        BAND_ROWS.div_ceil(self.span.size())
    }

    /// Begins a new picture.
    pub fn restart(&mut self) {
        self.next = 0;
    }

    /// The next step, if the `ready` first rows of the picture are enough for it.
    fn job(&self, ready: usize, most: usize) -> Option<Job> {
        let possible = match ready == self.height_px {
            true => self.blocks,
            false => ready / self.span.size(),
        };
        let count = possible.saturating_sub(self.next).min(most);
        (count > 0).then_some(Job {
            width_px: self.width_px,
            height_px: self.height_px,
            span: self.span,
            src_top: 0,
            first: self.next,
            count,
        })
    }

    /// The rows that the next step will yield; `None` if it needs more than `ready` rows, or if there is none.
    pub fn upcoming(&self, ready: usize) -> Option<Range<usize>> {
        let job = self.job(ready, self.blocks_per_step())?;
        Some(job.rows_out())
    }

    /// The first row that steps to come will read.
    pub fn needed(&self) -> usize {
        self.next * self.span.size()
    }

    /// Yields the [`Self::upcoming`] rows into `dst`, which begins with the first of them; `src` begins with row `src_top`,
    /// which must not come after [`Self::needed`].
    pub fn step(&mut self, level: Level, ready: usize, src_top: usize, src: Rows, dst: RowsMut) {
        if let Some(mut job) = self.job(ready, self.blocks_per_step()) {
            job.src_top = src_top;
            self.run(level, job, src, dst);
        }
    }

    /// The whole picture at once.
    pub fn whole(&mut self, level: Level, src: Rows, dst: RowsMut) {
        self.restart();
        if let Some(job) = self.job(self.height_px, usize::MAX) {
            self.run(level, job, src, dst);
        }
    }

    fn run(&mut self, level: Level, job: Job, src: Rows, dst: RowsMut) {
        let suffix = RowsMut {
            pixels: &mut self.suffix,
            stride_px: suffix_stride(self.width_px),
        };
        level.slide(self.op, job, src, dst, suffix);
        self.next += job.count;
    }
}
