//! Gray frames and where they come from.

pub mod drawn;

use crate::units::Micros;
pub use crate::units::Window;

/// One 8-bit gray picture of the belt, rows from top to bottom without padding.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Frame {
    /// Pixels per row.
    pub width_px: u32,
    /// Rows.
    pub height_px: u32,
    /// `width_px * height_px` gray values.
    pub pixels: Vec<u8>,
    /// When it was captured.
    pub captured_us: Micros,
    /// The belt reading at that moment, where one came with the frame.
    pub belt_mm: Option<f64>,
}

impl Frame {
    /// The whole frame as a picture.
    pub fn gray(&self) -> Gray<'_> {
        Gray {
            pixels: &self.pixels,
            width_px: self.width_px as usize,
            height_px: self.height_px as usize,
            stride_px: self.width_px as usize,
        }
    }
}

/// A borrowed 8-bit gray picture, possibly a window of a larger one.
#[derive(Clone, Copy, Debug)]
pub struct Gray<'a> {
    /// Starts at the first pixel of the first row; rows begin every `stride_px`.
    pub pixels: &'a [u8],
    /// Pixels per row.
    pub width_px: usize,
    /// Rows.
    pub height_px: usize,
    /// Distance between the starts of two rows, at least `width_px`.
    pub stride_px: usize,
}

impl<'a> Gray<'a> {
    /// Row `y`, `width_px` long.
    pub fn row(&self, y: usize) -> &'a [u8] {
        &self.pixels[y * self.stride_px..][..self.width_px]
    }

    /// The part of the picture inside `window`, which must lie inside it.
    pub fn window(&self, window: Window) -> Gray<'a> {
        Gray {
            pixels: &self.pixels[window.top_px * self.stride_px + window.left_px..],
            width_px: window.width_px,
            height_px: window.height_px,
            stride_px: self.stride_px,
        }
    }
}

/// Anything that yields frames in the order of their capture times.
pub trait FrameSource {
    /// What can go wrong while frames are read.
    type Error;

    /// Fills `frame` with the next one, reusing its buffer; `false` at the end.
    ///
    /// # Errors
    /// The source's own; the contents of `frame` are unspecified then.
    fn next_into(&mut self, frame: &mut Frame) -> Result<bool, Self::Error>;
}
