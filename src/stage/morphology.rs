//! Erosion and dilation on their own, for checks and for work off the line: they allocate.

use super::diagonals::Diagonals;
use super::element::{Segments, Span};
use super::kernels::{Extremum, Level, Rows, RowsMut};
use super::plan::Element;
use super::slide::Slide;
use crate::frames::Gray;

/// The smallest value under the element around every pixel (Serra 1982); what lies outside the picture is ignored.
/// Rows come without padding.
pub fn erosion(picture: Gray<'_>, element: Element, level: Level) -> Vec<u8> {
    extremum(Extremum::Least, Segments::of(element), picture, level)
}

/// The largest value under the element turned about its origin; otherwise as [`erosion`]. So the dilation of an erosion is
/// the opening, also for an even element.
pub fn dilation(picture: Gray<'_>, element: Element, level: Level) -> Vec<u8> {
    let segments = Segments::of(element);
    let turned = Segments {
        across: segments.across.reflected(),
        down: segments.down.reflected(),
        ..segments
    };
    extremum(Extremum::Greatest, turned, picture, level)
}

fn extremum(op: Extremum, segments: Segments, picture: Gray, level: Level) -> Vec<u8> {
    let (width, height) = (picture.width_px, picture.height_px);
    let mut pixels = vec![0; width * height];
    for (row, y) in pixels.chunks_exact_mut(width.max(1)).zip(0..) {
        row.copy_from_slice(picture.row(y));
    }
    if segments.diagonal > 0 {
        let mut diagonals = Diagonals::new([op, op], segments.diagonal, width, height);
        let mut input = diagonals.input();
        pixels
            .chunks_exact(width.max(1))
            .zip(0..)
            .for_each(|(row, y)| input.row(y, width).copy_from_slice(row));
        diagonals.shrink(level);
        let (shrunk, _) = diagonals.shrunk_and_input();
        pixels
            .chunks_exact_mut(width.max(1))
            .zip(0..)
            .for_each(|(row, y)| row.copy_from_slice(shrunk.row(y, width)));
    }
    let down = columns(op, segments.down, width, height, &pixels, level);
    let turned = turn(width, height, &down, level);
    let across = columns(op, segments.across, height, width, &turned, level);
    turn(height, width, &across, level)
}

fn columns(
    op: Extremum,
    span: Span,
    width: usize,
    height: usize,
    pixels: &[u8],
    level: Level,
) -> Vec<u8> {
    let mut out = vec![0; pixels.len()];
    let dst = RowsMut {
        pixels: &mut out,
        stride_px: width,
    };
    Slide::new(op, span, width, height).whole(
        level,
        Rows {
            pixels,
            stride_px: width,
        },
        dst,
    );
    out
}

fn turn(width: usize, height: usize, pixels: &[u8], level: Level) -> Vec<u8> {
    let mut out = vec![0; pixels.len()];
    let dst = RowsMut {
        pixels: &mut out,
        stride_px: height,
    };
    level.turn(
        width,
        height,
        Rows {
            pixels,
            stride_px: width,
        },
        dst,
    );
    out
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::stage::plain::{self, Grid};
    use proptest::prelude::*;

    proptest! {
        #[test]
        fn both_follow_their_definition(
            (width, height, cells) in (1..40usize, 1..40usize).prop_flat_map(|(w, h)| {
                (Just(w), Just(h), proptest::collection::vec(any::<u8>(), w * h))
            }),
            (width_px, height_px, radius) in (1..50usize, 1..50usize, 0..12usize),
        ) {
            let grid = Grid { width, height, cells };
            let gray = Gray { pixels: &grid.cells, width_px: width, height_px: height, stride_px: width };
            let octagon = Element::Octagon { diameter_px: 2 * radius + 1 };
            for element in [Element::Rectangle { width_px, height_px }, octagon] {
                let set = plain::set_of(element);
                for level in Level::available() {
                    prop_assert_eq!(erosion(gray, element, level), plain::erode(&grid, &set).cells);
                    let turned = plain::reflected(&set);
                    prop_assert_eq!(dilation(gray, element, level), plain::dilate(&grid, &turned).cells);
                }
            }
        }
    }
}
