//! The flat top-hat: picture minus opening, or closing minus picture (Meyer 1979; Serra 1982).
//!
//! An opening is an erosion (running minima) and a dilation (running maxima) with the same element, turned about its
//! origin; both split into the segments of the element. The order here is: column, diagonals, row; row, diagonals,
//! column. The two passes along the rows stand side by side and are done on turned strips, where they run down columns
//! like the others.
//!
//! **Border.** What lies outside is ignored at every step. With a rectangle that splits into segments as it stands. An
//! octagon's diagonals lead outside and back again, so they run on a picture with a margin as wide as they are long, in
//! which the intermediate results are those of the endless plane. Then every pixel of the element that lies inside is
//! reached by a way that the passes follow, and none outside is.

use std::ops::Range;

use super::across::{Across, STRIP};
use super::buffer::{Aligned, LINE, Reel};
use super::diagonals::Diagonals;
use super::element::{Segments, Span};
use super::kernels::{Extremum, Level, Rows, RowsMut};
use super::plan::{Plan, Polarity};
use super::slide::{BAND_ROWS, Slide};
use crate::frames::Gray;

/// The top-hat with its buffers.
pub struct TopHat {
    level: Level,
    polarity: Polarity,
    width: usize,
    height: usize,
    /// Shrinks what the polarity looks for, down the columns.
    down_first: Slide,
    across: Across,
    /// Grows it again.
    down_second: Slide,
    /// What the passes along the rows start from and leave; not used by an octagon.
    middle: Reel,
    /// Rows of the opening or closing as they come out.
    band: Aligned,
    diagonals: Option<Diagonals>,
}

/// Some rows of the top-hat: the difference of two pictures.
pub(crate) struct Band<'a> {
    rows: Range<usize>,
    width: usize,
    upper: Rows<'a>,
    lower: Rows<'a>,
}

impl Band<'_> {
    /// Calls `sink` with every row in order: its number, and two rows whose difference (first minus second, never
    /// negative) is the top-hat.
    #[inline]
    pub fn each(self, mut sink: impl FnMut(usize, &[u8], &[u8])) {
        for (i, y) in self.rows.enumerate() {
            sink(
                y,
                self.upper.row(i, self.width),
                self.lower.row(i, self.width),
            );
        }
    }
}

impl TopHat {
    /// Makes the buffers for the size, the polarity and the element of `plan`.
    pub fn new(plan: &Plan, level: Level) -> Self {
        let segments = Segments::of(plan.element);
        let (width, height) = (plan.width_px, plan.height_px);
        let ops = match plan.polarity {
            Polarity::Bright => [Extremum::Least, Extremum::Greatest],
            Polarity::Dark => [Extremum::Greatest, Extremum::Least],
        };
        // A closing starts with the reflected element, as an opening ends with it.
        let spans = |span: Span| match plan.polarity {
            Polarity::Bright => [span, span.reflected()],
            Polarity::Dark => [span.reflected(), span],
        };
        let [span_first, span_second] = spans(segments.down);
        let down_first = Slide::new(ops[0], span_first, width, height);
        let down_second = Slide::new(ops[1], span_second, width, height);
        let live = BAND_ROWS + STRIP + segments.down.size();
        let steps = segments.diagonal;
        Self {
            level,
            polarity: plan.polarity,
            width,
            height,
            across: Across::new(ops, spans(segments.across), width),
            middle: Reel::new(width, if steps > 0 { 0 } else { height }, live),
            band: Aligned::new(0, width.next_multiple_of(LINE) * BAND_ROWS),
            down_first,
            down_second,
            diagonals: (steps > 0).then(|| Diagonals::new(ops, steps, width, height)),
        }
    }

    /// Writes the top-hat to `out`, without padding.
    ///
    /// # Panics
    /// If the picture has not the planned size or `out` is shorter.
    pub fn picture(&mut self, picture: Gray<'_>, out: &mut [u8]) {
        assert_eq!(
            (picture.width_px, picture.height_px),
            (self.width, self.height)
        );
        let (level, width) = (self.level, self.width);
        self.run(picture, |band| {
            band.each(|y, upper, lower| {
                level.subtract(upper, lower, &mut out[y * width..][..width])
            });
        });
    }

    /// Calls `sink` with all rows in order, some at a time.
    pub(crate) fn run(&mut self, picture: Gray, mut sink: impl FnMut(Band)) {
        self.down_first.restart();
        self.down_second.restart();
        self.middle.restart();
        if self.diagonals.is_some() {
            self.shrink_and_grow_by_diagonals(picture);
            self.grow_rows(picture, self.height, &mut sink);
            return;
        }
        let mut ready = 0;
        while let Some(rows) = self.shrink_rows(picture) {
            ready = self.across_rows(ready, rows.end);
            self.grow_rows(picture, ready, &mut sink);
        }
    }

    /// One band of the first pass down the columns.
    fn shrink_rows(&mut self, picture: Gray) -> Option<Range<usize>> {
        let rows = self.down_first.upcoming(self.height)?;
        let middle = self.middle.append(rows.len(), self.down_second.needed());
        let all = self.height;
        self.down_first
            .step(self.level, all, 0, rows_of(picture), middle);
        Some(rows)
    }

    /// Both passes along the rows from `top` on, in whole strips as far as `end`; where they end.
    fn across_rows(&mut self, mut top: usize, end: usize) -> usize {
        while end - top >= STRIP || (end == self.height && top < end) {
            let count = STRIP.min(end - top);
            self.across
                .in_place(self.level, count, self.middle.rows_from(top));
            top += count;
        }
        top
    }

    /// The last pass down the columns, as far as `ready` rows allow.
    fn grow_rows(&mut self, picture: Gray, ready: usize, sink: &mut impl FnMut(Band)) {
        let stride = self.width.next_multiple_of(LINE);
        while let Some(rows) = self.down_second.upcoming(ready) {
            let (top, src) = match &self.diagonals {
                Some(diagonals) => (0, diagonals.grown()),
                None => self.middle.rows(),
            };
            let band = RowsMut {
                pixels: &mut self.band,
                stride_px: stride,
            };
            self.down_second.step(self.level, ready, top, src, band);
            let hull = Rows {
                pixels: &self.band,
                stride_px: stride,
            };
            let seen = rows_of(picture).from(rows.start);
            let (upper, lower) = match self.polarity {
                Polarity::Bright => (seen, hull),
                Polarity::Dark => (hull, seen),
            };
            sink(Band {
                rows,
                width: self.width,
                upper,
                lower,
            });
        }
    }

    /// Everything but the last pass, for an octagon.
    fn shrink_and_grow_by_diagonals(&mut self, picture: Gray) {
        let (level, height) = (self.level, self.height);
        let Some(diagonals) = &mut self.diagonals else {
            return;
        };
        self.down_first
            .whole(level, rows_of(picture), diagonals.input());
        diagonals.shrink(level);
        for top in (0..height).step_by(STRIP) {
            let count = STRIP.min(height - top);
            let (src, mut dst) = diagonals.shrunk_and_input();
            self.across.run(level, count, src.from(top), dst.from(top));
        }
        diagonals.grow(level);
    }
}

fn rows_of(picture: Gray<'_>) -> Rows<'_> {
    Rows {
        pixels: picture.pixels,
        stride_px: picture.stride_px,
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::stage::plain::{self, Grid};
    use crate::stage::plan::{Element, Threshold};
    use proptest::prelude::*;

    fn plan(picture: &Grid<u8>, polarity: Polarity, element: Element) -> Plan {
        Plan {
            width_px: picture.width,
            height_px: picture.height,
            polarity,
            element,
            threshold: Threshold::Fixed { level: 0 },
            fill_below_px: 0,
            speck_below_px: 0,
        }
    }

    fn gray(picture: &Grid<u8>) -> Gray<'_> {
        Gray {
            pixels: &picture.cells,
            width_px: picture.width,
            height_px: picture.height,
            stride_px: picture.width,
        }
    }

    fn run(top_hat: &mut TopHat, picture: &Grid<u8>) -> Grid<u8> {
        let mut out = Grid::new(picture.width, picture.height, |_, _| 0);
        let mut next = 0;
        top_hat.run(gray(picture), |band| {
            band.each(|y, upper, lower| {
                assert_eq!(y, next, "rows come in order");
                next += 1;
                let row = &mut out.cells[y * picture.width..][..picture.width];
                for ((out, u), l) in row.iter_mut().zip(upper).zip(lower) {
                    *out = u.checked_sub(*l).expect("a top-hat is never negative");
                }
            });
        });
        assert_eq!(next, picture.height);
        out
    }

    /// Holds the top-hat against the plain definition, twice, so that what a frame leaves behind shows.
    fn check(picture: &Grid<u8>, element: Element) {
        for polarity in [Polarity::Bright, Polarity::Dark] {
            let expected = plain::top_hat(picture, polarity, element);
            for level in Level::available() {
                let mut top_hat = TopHat::new(&plan(picture, polarity, element), level);
                for _ in 0..2 {
                    assert_eq!(
                        run(&mut top_hat, picture),
                        expected,
                        "{element:?} {polarity:?} on {}x{} at {}",
                        picture.width,
                        picture.height,
                        level.name()
                    );
                }
            }
        }
    }

    /// Values without pattern, from the place and a seed.
    fn noise(width: usize, height: usize, seed: usize) -> Grid<u8> {
        Grid::new(width, height, |x, y| {
            let n = (x + y * width + 1).wrapping_mul(seed.wrapping_mul(0x9e37_79b9) | 1);
            ((n ^ (n >> 7)).wrapping_mul(0x85eb_ca6b) >> 13) as u8
        })
    }

    #[test]
    fn rectangles_at_all_small_sizes() {
        for (width, height) in pairs(1..=9, 1..=9) {
            let picture = noise(width, height, 3 * width + height);
            for (width_px, height_px) in pairs(1..=11, 1..=11) {
                check(
                    &picture,
                    Element::Rectangle {
                        width_px,
                        height_px,
                    },
                );
            }
        }
    }

    #[test]
    fn octagons_at_all_small_sizes() {
        for (width, height) in pairs(1..=12, 1..=12) {
            let picture = noise(width, height, 5 * width + height);
            for diameter_px in (1..=27).step_by(2) {
                check(&picture, Element::Octagon { diameter_px });
            }
        }
    }

    #[test]
    fn one_bright_pixel_anywhere_under_every_small_octagon() {
        for (width, height) in [(1, 1), (1, 9), (9, 1), (2, 9), (9, 9), (13, 6)] {
            for (bright_x, bright_y) in pairs(0..=width - 1, 0..=height - 1) {
                let lit = |x, y| if (x, y) == (bright_x, bright_y) { 0 } else { 9 };
                let picture = Grid::new(width, height, lit);
                for diameter_px in (3..=15).step_by(2) {
                    check(&picture, Element::Octagon { diameter_px });
                }
            }
        }
    }

    #[test]
    fn pictures_of_several_strips_and_bands() {
        for (width, height) in [(200, 130), (65, 64), (63, 200), (129, 65)] {
            let picture = noise(width, height, 7);
            for size in [2, 15, 63, 64, 65, 150] {
                check(
                    &picture,
                    Element::Rectangle {
                        width_px: size,
                        height_px: 3,
                    },
                );
                check(
                    &picture,
                    Element::Rectangle {
                        width_px: 3,
                        height_px: size,
                    },
                );
            }
            check(&picture, Element::Octagon { diameter_px: 31 });
        }
    }

    /// Taller than the reel, with windows shorter and longer than a band.
    #[test]
    fn a_picture_of_many_bands() {
        for height_px in [2, 63, 64, 65, 250] {
            let picture = noise(33, 1_500, height_px);
            let width_px = 2;
            check(
                &picture,
                Element::Rectangle {
                    width_px,
                    height_px,
                },
            );
        }
    }

    fn pairs(
        a: std::ops::RangeInclusive<usize>,
        b: std::ops::RangeInclusive<usize>,
    ) -> impl Iterator<Item = (usize, usize)> {
        a.flat_map(move |a| b.clone().map(move |b| (a, b)))
    }

    fn grid(most: usize) -> impl Strategy<Value = Grid<u8>> {
        (1..=most, 1..=most).prop_flat_map(|(width, height)| {
            proptest::collection::vec(any::<u8>(), width * height).prop_map(move |cells| Grid {
                width,
                height,
                cells,
            })
        })
    }

    proptest! {
        #![proptest_config(ProptestConfig::with_cases(48))]

        #[test]
        fn any_rectangle_on_any_picture(picture in grid(48), width_px in 1..70usize, height_px in 1..70usize) {
            check(&picture, Element::Rectangle { width_px, height_px });
        }

        #[test]
        fn any_octagon_on_any_picture(picture in grid(48), radius in 0..35usize) {
            check(&picture, Element::Octagon { diameter_px: 2 * radius + 1 });
        }

        /// The top-hat of what an opening leaves is nothing: openings are idempotent.
        #[test]
        fn an_opened_picture_has_no_top_hat(picture in grid(24), width_px in 1..9usize, height_px in 1..9usize) {
            let element = Element::Rectangle { width_px, height_px };
            let mut top_hat = TopHat::new(&plan(&picture, Polarity::Bright, element), Level::SCALAR);
            let hat = run(&mut top_hat, &picture);
            let opened = Grid::new(picture.width, picture.height, |x, y| picture.at(x, y) - hat.at(x, y));
            prop_assert!(run(&mut top_hat, &opened).cells.iter().all(|&v| v == 0));
        }
    }

    /// The example in the docstring of `skimage.morphology.white_tophat`, element 3x3.
    #[test]
    fn scikit_image_white_top_hat_example() {
        let cells = [
            [2, 3, 3, 3, 2],
            [3, 4, 5, 4, 3],
            [3, 5, 9, 5, 3],
            [3, 4, 5, 4, 3],
            [2, 3, 3, 3, 2],
        ];
        let picture = Grid {
            width: 5,
            height: 5,
            cells: cells.concat(),
        };
        let element = Element::Rectangle {
            width_px: 3,
            height_px: 3,
        };
        let mut top_hat = TopHat::new(&plan(&picture, Polarity::Bright, element), Level::SCALAR);
        assert_eq!(run(&mut top_hat, &picture).cells, DIAMOND.concat());
    }

    /// The example in the docstring of `skimage.morphology.black_tophat`, element 3x3.
    #[test]
    fn scikit_image_black_top_hat_example() {
        let cells = [
            [7, 6, 6, 6, 7],
            [6, 5, 4, 5, 6],
            [6, 4, 0, 4, 6],
            [6, 5, 4, 5, 6],
            [7, 6, 6, 6, 7],
        ];
        let picture = Grid {
            width: 5,
            height: 5,
            cells: cells.concat(),
        };
        let element = Element::Rectangle {
            width_px: 3,
            height_px: 3,
        };
        let mut top_hat = TopHat::new(&plan(&picture, Polarity::Dark, element), Level::SCALAR);
        assert_eq!(run(&mut top_hat, &picture).cells, DIAMOND.concat());
    }

    /// What both docstrings give.
    const DIAMOND: [[u8; 5]; 5] = [
        [0, 0, 0, 0, 0],
        [0, 0, 1, 0, 0],
        [0, 1, 5, 1, 0],
        [0, 0, 1, 0, 0],
        [0, 0, 0, 0, 0],
    ];

    /// The example in the docstring of `scipy.ndimage.grey_opening`, element 3x3: the values 0 to 35 in rows of 6, but 50
    /// at row 3, column 3.
    #[test]
    fn scipy_grey_opening_example() {
        let picture = Grid::new(6, 6, |x, y| {
            if (x, y) == (3, 3) {
                50
            } else {
                (6 * y + x) as u8
            }
        });
        let opening = [
            [0, 1, 2, 3, 4, 4],
            [6, 7, 8, 9, 10, 10],
            [12, 13, 14, 15, 16, 16],
            [18, 19, 20, 22, 22, 22],
            [24, 25, 26, 27, 28, 28],
            [24, 25, 26, 27, 28, 28],
        ];
        let element = Element::Rectangle {
            width_px: 3,
            height_px: 3,
        };
        let mut top_hat = TopHat::new(&plan(&picture, Polarity::Bright, element), Level::SCALAR);
        let hat = run(&mut top_hat, &picture);
        let opened: Vec<u8> = picture
            .cells
            .iter()
            .zip(&hat.cells)
            .map(|(p, h)| p - h)
            .collect();
        assert_eq!(opened, opening.concat());
    }

    #[test]
    fn a_window_of_a_larger_picture_sees_nothing_around_it() {
        let whole = noise(40, 30, 11);
        let window = gray(&whole).window(crate::frames::Window {
            left_px: 7,
            top_px: 5,
            width_px: 20,
            height_px: 17,
        });
        let cut = Grid::new(20, 17, |x, y| whole.at(x + 7, y + 5));
        let element = Element::Rectangle {
            width_px: 6,
            height_px: 9,
        };
        let mut top_hat = TopHat::new(&plan(&cut, Polarity::Bright, element), Level::SCALAR);
        let expected = run(&mut top_hat, &cut);
        let mut rows = 0;
        top_hat.run(window, |band| {
            band.each(|y, upper, lower| {
                let row: Vec<u8> = upper.iter().zip(lower).map(|(u, l)| u - l).collect();
                assert_eq!(row, expected.cells[y * 20..][..20]);
                rows += 1;
            });
        });
        assert_eq!(rows, 17);
    }
}
