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

use super::element::{Segments, Span};
use super::kernels::{Extremum, Level, Rows, RowsMut};
use super::plan::{Plan, Polarity};
use super::slide::Slide;
use crate::frames::Gray;

/// Rows of a strip that is turned: whole cache lines.
const STRIP: usize = 64;

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
    /// What the passes along the rows start from and leave.
    middle: Vec<u8>,
    /// Rows of the opening or closing as they come out.
    band: Vec<u8>,
    diagonals: Option<Diagonals>,
}

impl TopHat {
    /// Makes the buffers for the size, the polarity and the element of `plan`.
    pub fn new(plan: &Plan, level: Level) -> Self {
        let Segments {
            across,
            down,
            diagonal,
        } = Segments::of(plan.element);
        let (width, height) = (plan.width_px, plan.height_px);
        let [first, second] = match plan.polarity {
            Polarity::Bright => [Extremum::Least, Extremum::Greatest],
            Polarity::Dark => [Extremum::Greatest, Extremum::Least],
        };
        // A closing starts with the reflected element, as an opening ends with it.
        let spans = |span: Span| match plan.polarity {
            Polarity::Bright => [span, span.reflected()],
            Polarity::Dark => [span.reflected(), span],
        };
        let [down_a, down_b] = spans(down);
        let down_second = Slide::new(second, down_b, width, height);
        Self {
            level,
            polarity: plan.polarity,
            width,
            height,
            down_first: Slide::new(first, down_a, width, height),
            across: Across::new([first, second], spans(across), width),
            middle: vec![0; width * height],
            band: vec![0; width * down_second.most_rows()],
            down_second,
            diagonals: (diagonal > 0)
                .then(|| Diagonals::new([first, second], diagonal, width, height)),
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
        self.run(picture, |y, upper, lower| {
            level.subtract(upper, lower, &mut out[y * width..][..width]);
        });
    }

    /// Calls `sink` with every row in order: its number, and two rows whose difference (first minus second, never
    /// negative) is the top-hat.
    pub(crate) fn run(&mut self, picture: Gray, mut sink: impl FnMut(usize, &[u8], &[u8])) {
        self.down_first.restart();
        self.down_second.restart();
        if self.diagonals.is_some() {
            self.shrink_and_grow_by_diagonals(picture);
            self.grow_rows(picture, self.height, &mut sink);
            return;
        }
        let mut turned = 0;
        while let Some(rows) = self.shrink_rows(picture) {
            let whole = match rows.end == self.height {
                true => self.height,
                false => rows.end / STRIP * STRIP,
            };
            self.across.run(self.level, &mut self.middle, turned..whole);
            turned = whole;
            self.grow_rows(picture, turned, &mut sink);
        }
    }

    /// One band of the first pass down the columns.
    fn shrink_rows(&mut self, picture: Gray) -> Option<std::ops::Range<usize>> {
        let rows = self.down_first.upcoming(self.height)?;
        let mut middle = RowsMut {
            pixels: &mut self.middle,
            stride_px: self.width,
        };
        let dst = middle.from(rows.start);
        self.down_first
            .step(self.level, self.height, rows_of(picture), dst);
        Some(rows)
    }

    /// The last pass down the columns, as far as `ready` rows allow.
    fn grow_rows(
        &mut self,
        picture: Gray,
        ready: usize,
        sink: &mut impl FnMut(usize, &[u8], &[u8]),
    ) {
        let width = self.width;
        while let Some(rows) = self.down_second.upcoming(ready) {
            let src = match &self.diagonals {
                Some(diagonals) => diagonals.grown(),
                None => Rows {
                    pixels: &self.middle,
                    stride_px: width,
                },
            };
            let dst = RowsMut {
                pixels: &mut self.band,
                stride_px: width,
            };
            self.down_second.step(self.level, ready, src, dst);
            for (y, hull) in rows.zip(self.band.chunks_exact(width.max(1))) {
                match self.polarity {
                    Polarity::Bright => sink(y, picture.row(y), hull),
                    Polarity::Dark => sink(y, hull, picture.row(y)),
                }
            }
        }
    }

    /// Everything but the last pass, for an octagon.
    fn shrink_and_grow_by_diagonals(&mut self, picture: Gray) {
        let Some(diagonals) = &mut self.diagonals else {
            return;
        };
        self.down_first
            .whole(self.level, rows_of(picture), diagonals.input());
        diagonals.shrink(self.level);
        for top in (0..self.height).step_by(STRIP) {
            let count = STRIP.min(self.height - top);
            let (src, mut dst) = diagonals.shrunk_and_input();
            self.across
                .strip(self.level, count, src.from(top), dst.from(top));
        }
        diagonals.grow(self.level);
    }
}

fn rows_of(picture: Gray<'_>) -> Rows<'_> {
    Rows {
        pixels: picture.pixels,
        stride_px: picture.stride_px,
    }
}

/// Both passes along the rows, one strip of rows at a time.
struct Across {
    width: usize,
    first: Slide,
    second: Slide,
    /// A strip, turned: a row for every column of the picture.
    turned: Vec<u8>,
    /// The same after the first pass.
    shrunk: Vec<u8>,
}

impl Across {
    fn new(ops: [Extremum; 2], spans: [Span; 2], width: usize) -> Self {
        Self {
            width,
            first: Slide::new(ops[0], spans[0], STRIP, width),
            second: Slide::new(ops[1], spans[1], STRIP, width),
            turned: vec![0; STRIP * width],
            shrunk: vec![0; STRIP * width],
        }
    }

    /// On `rows` of a picture without padding, in place.
    fn run(&mut self, level: Level, picture: &mut [u8], rows: std::ops::Range<usize>) {
        for top in rows.clone().step_by(STRIP) {
            let count = STRIP.min(rows.end - top);
            let strip = &mut picture[top * self.width..][..count * self.width];
            level.turn(
                self.width,
                count,
                Rows {
                    pixels: strip,
                    stride_px: self.width,
                },
                turned(&mut self.turned),
            );
            self.open(level);
            self.turn_back(
                level,
                count,
                RowsMut {
                    pixels: strip,
                    stride_px: self.width,
                },
            );
        }
    }

    /// On `count` rows, from one picture to another.
    fn strip(&mut self, level: Level, count: usize, src: Rows, dst: RowsMut) {
        level.turn(self.width, count, src, turned(&mut self.turned));
        self.open(level);
        self.turn_back(level, count, dst);
    }

    fn open(&mut self, level: Level) {
        let src = Rows {
            pixels: &self.turned,
            stride_px: STRIP,
        };
        self.first.whole(level, src, turned(&mut self.shrunk));
        let src = Rows {
            pixels: &self.shrunk,
            stride_px: STRIP,
        };
        self.second.whole(level, src, turned(&mut self.turned));
    }

    fn turn_back(&mut self, level: Level, count: usize, dst: RowsMut) {
        let src = Rows {
            pixels: &self.turned,
            stride_px: STRIP,
        };
        level.turn(count, self.width, src, dst);
    }
}

fn turned(pixels: &mut [u8]) -> RowsMut<'_> {
    RowsMut {
        pixels,
        stride_px: STRIP,
    }
}

/// The diagonal passes of an octagon, on pictures with a margin.
///
/// In a picture whose rows begin every `stride` bytes the pixel below and to the right is `stride + 1` bytes on: read
/// with rows of that length, diagonals stand upright, and the pass down the columns does for them too. `stride - 1` does
/// for the other diagonal. The margin is so wide that a diagonal segment cannot reach another row's pixels.
pub(crate) struct Diagonals {
    margin: usize,
    stride: usize,
    falling: [Slide; 2],
    rising: [Slide; 2],
    /// Margin neutral for the first extremum; what `shrink` starts from.
    flat: Vec<u8>,
    /// Margin neutral for the second one; what `grow` starts from.
    low: Vec<u8>,
    /// After the falling diagonal.
    half: Vec<u8>,
    /// After both.
    done: Vec<u8>,
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
            flat: vec![ops[0].neutral(); room],
            low: vec![ops[1].neutral(); room],
            half: vec![0; room],
            done: vec![0; room],
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

    fn grow(&mut self, level: Level) {
        self.both(level, 1);
    }

    fn grown(&self) -> Rows<'_> {
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
        top_hat.run(gray(picture), |y, upper, lower| {
            assert_eq!(y, next, "rows come in order");
            next += 1;
            let row = &mut out.cells[y * picture.width..][..picture.width];
            for ((out, u), l) in row.iter_mut().zip(upper).zip(lower) {
                *out = u.checked_sub(*l).expect("a top-hat is never negative");
            }
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
        top_hat.run(window, |y, upper, lower| {
            let row: Vec<u8> = upper.iter().zip(lower).map(|(u, l)| u - l).collect();
            assert_eq!(row, expected.cells[y * 20..][..20]);
        });
    }
}
