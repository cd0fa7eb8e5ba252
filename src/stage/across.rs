//! Both passes along the rows, on turned strips of rows: there they run down columns like the others.

use super::buffer::{Aligned, LINE};
use super::element::Span;
use super::kernels::{Extremum, Level, Rows, RowsMut};
use super::slide::Slide;

/// Rows of a strip: turned, each of its rows is a cache line.
pub(crate) const STRIP: usize = 64;

/// Columns that are turned at a time.
const CHUNK: usize = 128;

/// The passes with their buffers.
pub(crate) struct Across {
    width: usize,
    first: Slide,
    second: Slide,
    /// A strip, turned: a row for every column of the picture. The result takes the place of what was read.
    turned: Aligned,
    /// The same after the first pass.
    shrunk: Aligned,
    /// Columns that have been turned back.
    drained: usize,
}

impl Across {
    pub fn new(ops: [Extremum; 2], spans: [Span; 2], width: usize) -> Self {
        Self {
            width,
            first: Slide::new(ops[0], spans[0], STRIP, width),
            second: Slide::new(ops[1], spans[1], STRIP, width),
            turned: Aligned::new(0, STRIP * width),
            shrunk: Aligned::new(0, STRIP * width),
            drained: 0,
        }
    }

    /// Reads `count` rows, at most [`STRIP`], and writes as many.
    pub fn run(&mut self, level: Level, count: usize, src: Rows, mut dst: RowsMut) {
        self.restart();
        for x in (0..self.width).step_by(CHUNK) {
            let done = self.feed(level, count, x, src);
            self.drain(level, count, done, &mut dst);
        }
    }

    /// Replaces `count` rows. Columns are written when they and all before them have been read.
    pub fn in_place(&mut self, level: Level, count: usize, mut rows: RowsMut) {
        self.restart();
        for x in (0..self.width).step_by(CHUNK) {
            let src = Rows {
                pixels: rows.pixels,
                stride_px: rows.stride_px,
            };
            let done = self.feed(level, count, x, src);
            self.drain(level, count, done, &mut rows);
        }
    }

    fn restart(&mut self) {
        self.first.restart();
        self.second.restart();
        self.drained = 0;
    }

    /// Takes the columns from `x` on and slides as far as they allow. Gives the number of columns that are done.
    fn feed(&mut self, level: Level, count: usize, x: usize, src: Rows) -> usize {
        let columns = CHUNK.min(self.width - x);
        let chunk = Rows {
            pixels: &src.pixels[x..],
            ..src
        };
        level.turn(columns, count, chunk, strip_mut(&mut self.turned, x));
        let ready = x + columns;
        let mut done = self.drained;
        while let Some(rows) = self.first.upcoming(ready) {
            let shrunk = strip_mut(&mut self.shrunk, rows.start);
            self.first
                .step(level, ready, 0, strip(&self.turned, 0), shrunk);
            while let Some(out) = self.second.upcoming(rows.end) {
                let turned = strip_mut(&mut self.turned, out.start);
                self.second
                    .step(level, rows.end, 0, strip(&self.shrunk, 0), turned);
                done = out.end;
            }
        }
        done
    }

    /// Turns finished columns back, whole cache lines as long as there are more to come.
    fn drain(&mut self, level: Level, count: usize, done: usize, dst: &mut RowsMut) {
        let end = match done == self.width {
            true => done,
            false => done / LINE * LINE,
        };
        let start = self.drained;
        if end > start {
            self.drained = end;
            let dst = RowsMut {
                pixels: &mut dst.pixels[start..],
                stride_px: dst.stride_px,
            };
            level.turn(count, end - start, strip(&self.turned, start), dst);
        }
    }
}

/// The turned rows from `top` on.
fn strip(pixels: &[u8], top: usize) -> Rows<'_> {
    Rows {
        pixels: &pixels[top * STRIP..],
        stride_px: STRIP,
    }
}

/// See [`strip`].
fn strip_mut(pixels: &mut [u8], top: usize) -> RowsMut<'_> {
    RowsMut {
        pixels: &mut pixels[top * STRIP..],
        stride_px: STRIP,
    }
}
