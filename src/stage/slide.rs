//! A running extremum down the columns that can be fed band by band.

use std::ops::Range;

use super::buffer::Aligned;
use super::element::Span;
use super::kernels::{Cut, Extremum, Job, Level, Rows, RowsMut, memory_stride};

/// A step takes at most this many rows, so that what it writes is still in the cache for the next.
pub(crate) const BAND_ROWS: usize = 64;

/// The extremum over a vertical window around every pixel; what lies outside the picture is ignored.
pub(crate) struct Slide {
    op: Extremum,
    span: Span,
    cut: Cut,
    width_px: usize,
    height_px: usize,
    /// The kernel's memory of the blocks before.
    memory: Aligned,
    /// The next block.
    next: usize,
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
        let cut = Cut::of(span.size());
        Self {
            op,
            span,
            cut,
            width_px,
            height_px,
            memory: Aligned::new(0, cut.memory_rows() * memory_stride(width_px)),
            next: 0,
        }
    }

    /// Begins a new picture.
    pub fn restart(&mut self) {
        self.next = 0;
    }

    /// The next step of at most `most` blocks, if the `ready` first rows of the picture are enough for it.
    fn job(&self, ready: usize, most: usize) -> Option<Job> {
        let possible = match ready == self.height_px {
            true => Job::blocks_of(self.height_px, self.span, self.cut),
            false => ready / self.cut.length,
        };
        let count = possible.saturating_sub(self.next).min(most);
        (count > 0).then_some(Job {
            width_px: self.width_px,
            height_px: self.height_px,
            span: self.span,
            cut: self.cut,
            src_top: 0,
            first: self.next,
            count,
        })
    }

    /// How many blocks a step takes at most.
    fn blocks_per_step(&self) -> usize {
        BAND_ROWS / self.cut.length
    }

    /// The rows that the next step will yield; `None` if it needs more than `ready` rows, or if there is none.
    pub fn upcoming(&self, ready: usize) -> Option<Range<usize>> {
        let job = self.job(ready, self.blocks_per_step())?;
        Some(job.rows_out())
    }

    /// The first row that steps to come will read.
    pub fn needed(&self) -> usize {
        Job::first_row(self.next, self.span, self.cut)
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
        let memory = RowsMut {
            pixels: &mut self.memory,
            stride_px: memory_stride(self.width_px),
        };
        level.slide(self.op, job, src, dst, memory);
        self.next += job.count;
    }
}
