//! The diagonal passes of an octagon, on pictures with a margin.
//!
//! In a picture whose rows begin every `stride` bytes the pixel below and to the right is `stride + 1` bytes on: read
//! with rows of that length, diagonals stand upright, and the pass down the columns does for them too. `stride - 1` does
//! for the other diagonal. The margin is so wide that a diagonal segment cannot reach another row's pixels.

use super::buffer::Aligned;
use super::element::Span;
use super::kernels::{Extremum, Level, Rows, RowsMut};
use super::slide::Slide;

/// The passes with their buffers.
pub(crate) struct Diagonals {
    margin: usize,
    stride: usize,
    falling: [Slide; 2],
    rising: [Slide; 2],
    /// Margin neutral for the first extremum; what `shrink` starts from.
    flat: Aligned,
    /// Margin neutral for the second one; what `grow` starts from.
    low: Aligned,
    /// After the falling diagonal.
    half: Aligned,
    /// After both.
    done: Aligned,
}

impl Diagonals {
    pub fn new(ops: [Extremum; 2], steps: usize, width: usize, height: usize) -> Self {
        let stride = width + 2 * steps;
        let bytes = stride * (height + 2 * steps);
        let rows = |length: usize| bytes.div_ceil(length);
        let room = (rows(stride + 1) * (stride + 1)).max(rows(stride - 1) * (stride - 1));
        let span = Span {
            before: steps,
            after: steps,
        };
        let slides = |length| ops.map(|op| Slide::new(op, span, length, rows(length)));
        Self {
            margin: steps,
            stride,
            falling: slides(stride + 1),
            rising: slides(stride - 1),
            flat: Aligned::new(ops[0].neutral(), room),
            low: Aligned::new(ops[1].neutral(), room),
            half: Aligned::new(0, room),
            done: Aligned::new(0, room),
        }
    }

    /// Where the first pixel of the picture is.
    fn origin(&self) -> usize {
        self.margin * self.stride + self.margin
    }

    /// Where the picture goes.
    pub fn input(&mut self) -> RowsMut<'_> {
        let start = self.origin();
        RowsMut {
            pixels: &mut self.flat[start..],
            stride_px: self.stride,
        }
    }

    /// The first extremum, from the input.
    pub fn shrink(&mut self, level: Level) {
        self.both(level, 0);
    }

    /// What [`Self::shrink`] made, and where the input of [`Self::grow`] goes.
    pub fn shrunk_and_input(&mut self) -> (Rows<'_>, RowsMut<'_>) {
        let start = self.origin();
        let src = Rows {
            pixels: &self.done[start..],
            stride_px: self.stride,
        };
        (
            src,
            RowsMut {
                pixels: &mut self.low[start..],
                stride_px: self.stride,
            },
        )
    }

    /// The second extremum, from the input.
    pub fn grow(&mut self, level: Level) {
        self.both(level, 1);
    }

    /// What [`Self::grow`] made.
    pub fn grown(&self) -> Rows<'_> {
        Rows {
            pixels: &self.done[self.origin()..],
            stride_px: self.stride,
        }
    }

    fn both(&mut self, level: Level, which: usize) {
        let src = if which == 0 { &self.flat } else { &self.low };
        let sheared = |length| {
            move |pixels| Rows {
                pixels,
                stride_px: length,
            }
        };
        let (down, up) = (self.stride + 1, self.stride - 1);
        let half = RowsMut {
            pixels: &mut self.half,
            stride_px: down,
        };
        self.falling[which].whole(level, sheared(down)(src), half);
        let done = RowsMut {
            pixels: &mut self.done,
            stride_px: up,
        };
        self.rising[which].whole(level, sheared(up)(&self.half), done);
    }
}
