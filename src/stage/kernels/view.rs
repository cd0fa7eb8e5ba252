//! Columns of a picture, `WIDTH` bytes wide: the bounds of all rows are checked once, when the view is made.
#![allow(unsafe_code)]

use std::marker::PhantomData;

use super::{Rows, RowsMut};

/// Some rows of some columns.
#[derive(Clone, Copy)]
pub(super) struct View<'a, const WIDTH: usize> {
    first: *const u8,
    stride: usize,
    count: usize,
    pixels: PhantomData<&'a [u8]>,
}

/// Some rows of some columns to write.
pub(super) struct ViewMut<'a, const WIDTH: usize> {
    first: *mut u8,
    stride: usize,
    count: usize,
    pixels: PhantomData<&'a mut [u8]>,
}

/// Panics unless `count` rows of `width` bytes, the first at `start`, lie inside `len` bytes.
fn check(len: usize, start: usize, stride: usize, count: usize, width: usize) {
    let last = (count - 1)
        .checked_mul(stride)
        .and_then(|rows| rows.checked_add(start));
    let end = last.and_then(|last| last.checked_add(width));
    assert!(
        end.is_some_and(|end| end <= len),
        "the rows end after the picture"
    );
}

impl<'a, const WIDTH: usize> View<'a, WIDTH> {
    /// `count` rows, the first at byte `start` of `rows`.
    #[inline]
    pub fn new(rows: Rows<'a>, start: usize, count: usize) -> Self {
        let mut first = rows.pixels.as_ptr();
        if count > 0 {
            check(rows.pixels.len(), start, rows.stride_px, count, WIDTH);
            first = first.wrapping_add(start);
        }
        let (stride, pixels) = (rows.stride_px, PhantomData);
        Self {
            first,
            stride,
            count,
            pixels,
        }
    }

    /// Row `y`.
    #[inline]
    pub fn row(&self, y: usize) -> &'a [u8; WIDTH] {
        assert!(y < self.count);
        // SAFETY: every row below `count` lies inside the borrowed slice: checked in `new`.
        unsafe { &*self.first.add(y * self.stride).cast() }
    }
}

impl<'a, const WIDTH: usize> ViewMut<'a, WIDTH> {
    /// `count` rows, the first at byte `start` of `rows`.
    #[inline]
    pub fn new(rows: RowsMut<'a>, start: usize, count: usize) -> Self {
        let mut first = rows.pixels.as_mut_ptr();
        if count > 0 {
            check(rows.pixels.len(), start, rows.stride_px, count, WIDTH);
            first = first.wrapping_add(start);
        }
        let (stride, pixels) = (rows.stride_px, PhantomData);
        Self {
            first,
            stride,
            count,
            pixels,
        }
    }

    /// Row `y`.
    #[inline]
    pub fn row(&mut self, y: usize) -> &mut [u8; WIDTH] {
        assert!(y < self.count);
        // SAFETY: every row below `count` lies inside the slice, checked in `new`; it is borrowed for `'a`, and the
        // reference keeps `self` borrowed, so that there is no other one.
        unsafe { &mut *self.first.add(y * self.stride).cast() }
    }
}
