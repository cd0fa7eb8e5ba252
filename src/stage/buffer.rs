//! Buffers that begin with a cache line, so that whole vectors do not straddle two.

use std::ops::{Deref, DerefMut};

use super::kernels::{Rows, RowsMut};

/// Bytes of a cache line.
pub(crate) const LINE: usize = 64;

/// Bytes, the first of which begins a cache line.
pub(crate) struct Aligned {
    bytes: Vec<u8>,
    start: usize,
    len: usize,
}

impl Aligned {
    pub fn new(value: u8, len: usize) -> Self {
        let bytes = vec![value; len + LINE - 1];
        let start = bytes.as_ptr().align_offset(LINE).min(LINE - 1);
        Self { bytes, start, len }
    }
}

impl Deref for Aligned {
    type Target = [u8];
    fn deref(&self) -> &[u8] {
        &self.bytes[self.start..][..self.len]
    }
}

impl DerefMut for Aligned {
    fn deref_mut(&mut self) -> &mut [u8] {
        &mut self.bytes[self.start..][..self.len]
    }
}

/// The newest rows of a picture that is made from top to bottom: as many as are still needed, so that they stay in the
/// cache.
pub(crate) struct Reel {
    pixels: Aligned,
    stride: usize,
    /// Rows that fit.
    room: usize,
    /// The picture's row that comes first here.
    top: usize,
    /// Rows so far.
    end: usize,
}

impl Reel {
    /// With space for `most` rows that are needed at a time, and more, so that they seldom have to be moved.
    pub fn new(width: usize, height: usize, most: usize) -> Self {
        let stride = width.next_multiple_of(LINE);
        let room = height.min(most + 64);
        Self {
            pixels: Aligned::new(0, room * stride),
            stride,
            room,
            top: 0,
            end: 0,
        }
    }

    /// Begins a new picture.
    pub fn restart(&mut self) {
        (self.top, self.end) = (0, 0);
    }

    /// Adds `count` rows and gives them to be written. Rows before `needed` may be dropped.
    pub fn append(&mut self, count: usize, needed: usize) -> RowsMut<'_> {
        if self.end - self.top + count > self.room {
            let (from, to) = (needed - self.top, self.end - self.top);
            self.pixels
                .copy_within(from * self.stride..to * self.stride, 0);
            self.top = needed;
        }
        let start = (self.end - self.top) * self.stride;
        self.end += count;
        RowsMut {
            pixels: &mut self.pixels[start..],
            stride_px: self.stride,
        }
    }

    /// The first row that is kept, and all rows from there on.
    pub fn rows(&self) -> (usize, Rows<'_>) {
        let rows = Rows {
            pixels: &self.pixels,
            stride_px: self.stride,
        };
        (self.top, rows)
    }

    /// The rows from `y` on, to be changed.
    pub fn rows_from(&mut self, y: usize) -> RowsMut<'_> {
        RowsMut {
            pixels: &mut self.pixels[(y - self.top) * self.stride..],
            stride_px: self.stride,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn aligned_bytes_begin_a_line() {
        for len in [0, 1, 63, 64, 1000] {
            let bytes = Aligned::new(7, len);
            assert_eq!(bytes.as_ptr().addr() % LINE, 0);
            assert_eq!(*bytes, vec![7; len]);
        }
    }

    #[test]
    fn a_reel_keeps_what_is_needed() {
        let mut reel = Reel::new(3, 2000, 40);
        for picture in 0..2u8 {
            reel.restart();
            for (band, y) in (0..2000usize).step_by(20).enumerate() {
                let mut rows = reel.append(20, y.saturating_sub(20));
                (0..20).for_each(|i| rows.row(i, 3).fill(band as u8 + picture));
                let (top, rows) = reel.rows();
                for kept in y.saturating_sub(20)..y + 20 {
                    assert_eq!(rows.row(kept - top, 3), [(kept / 20) as u8 + picture; 3]);
                }
            }
        }
    }
}
