//! What every kernel has to do, stamped into each kernel's file: all widths from 0 to twice the widest tile and one more,
//! starts that are not aligned, rows further apart than they are wide, and bytes around the output that must not change.

use super::{Block, Extremum, Job, Level, Rows, RowsMut, suffix_stride};
use crate::stage::element::Span;

/// The widest tile of any level, in bytes.
const TILE: usize = 256;

/// Widths up to this are tested.
const WIDEST: usize = 2 * TILE + 1;

/// Bytes before and after everything that is written.
const GUARD: usize = 96;

/// What guard bytes hold.
const MARK: u8 = 0xa5;

/// Makes the tests of one level.
macro_rules! stamp {
    ($name:literal) => {
        use crate::stage::kernels::tests as shared;

        #[test]
        fn slide() {
            shared::on($name, shared::slide);
        }

        #[test]
        fn slide_in_steps() {
            shared::on($name, shared::slide_in_steps);
        }

        #[test]
        fn turn() {
            shared::on($name, shared::turn);
        }

        #[test]
        fn subtract() {
            shared::on($name, shared::subtract);
        }

        #[test]
        fn mark() {
            shared::on($name, shared::mark);
        }
    };
}
pub(super) use stamp;

/// Runs a check at a level, or says that the CPU lacks it.
pub(super) fn on(name: &str, check: fn(Level)) {
    match Level::named(name) {
        Ok(level) => check(level),
        Err(error) => println!("NOT CHECKED: {error}"),
    }
}

#[test]
fn how_many_levels_are_checked() {
    let here: Vec<_> = Level::available().map(Level::name).collect();
    println!(
        "checked {} of {} levels: {here:?}",
        here.len(),
        Level::built_in()
    );
    assert!(here.contains(&"scalar"));
}

/// Values without pattern.
fn noise(len: usize, seed: usize) -> Vec<u8> {
    let mut state = (seed as u32).wrapping_mul(0x9e37_79b9) | 1;
    let mut next = || {
        state ^= state << 13;
        state ^= state >> 17;
        state ^= state << 5;
        (state >> 11) as u8
    };
    (0..len).map(|_| next()).collect()
}

/// A picture that begins at an odd place of a larger buffer.
struct Source {
    bytes: Vec<u8>,
    start: usize,
    stride: usize,
}

impl Source {
    fn new(width: usize, height: usize, seed: usize) -> Self {
        let (start, stride) = (seed % 67, width + [0, 1, 37][seed % 3]);
        // The last row ends with the buffer: reading past it panics or trips the sanitizer.
        let len = start
            + if height > 0 {
                (height - 1) * stride + width
            } else {
                0
            };
        Self {
            bytes: noise(len, seed),
            start,
            stride,
        }
    }

    fn rows(&self) -> Rows<'_> {
        Rows {
            pixels: &self.bytes[self.start..],
            stride_px: self.stride,
        }
    }

    fn at(&self, x: usize, y: usize) -> u8 {
        self.bytes[self.start + y * self.stride + x]
    }
}

/// A picture to write, between guard bytes.
struct Target {
    bytes: Vec<u8>,
    start: usize,
    stride: usize,
    width: usize,
    height: usize,
}

impl Target {
    fn new(width: usize, height: usize, seed: usize) -> Self {
        let (start, stride) = (GUARD + seed % 61, width + [5, 0, 64][seed % 3]);
        Self {
            bytes: vec![MARK; start + height * stride + GUARD],
            start,
            stride,
            width,
            height,
        }
    }

    /// The picture, and nothing behind its last row.
    fn rows(&mut self) -> RowsMut<'_> {
        let len = self.height.saturating_sub(1) * self.stride + self.width;
        let end = self.start + if self.height > 0 { len } else { 0 };
        RowsMut {
            pixels: &mut self.bytes[self.start..end],
            stride_px: self.stride,
        }
    }

    /// Every pixel is as expected and every other byte untouched.
    fn check(&self, what: &str, expected: impl Fn(usize, usize) -> u8) {
        for (i, &byte) in self.bytes.iter().enumerate() {
            let place = i.checked_sub(self.start).and_then(|i| {
                let (x, y) = (i % self.stride.max(1), i / self.stride.max(1));
                (x < self.width && y < self.height).then_some((x, y))
            });
            match place {
                Some((x, y)) => assert_eq!(byte, expected(x, y), "{what}: ({x}, {y})"),
                None => assert_eq!(byte, MARK, "{what}: byte {i} is outside the picture"),
            }
        }
    }
}

/// A whole picture as one job.
fn whole(width_px: usize, height_px: usize, span: Span) -> Job {
    Job {
        width_px,
        height_px,
        span,
        src_top: 0,
        first: 0,
        count: (height_px + span.after).div_ceil(span.size()),
    }
}

/// A suffix buffer; what it holds at first does not matter.
fn suffix(width: usize, span: Span) -> Vec<u8> {
    vec![MARK; (span.size() + 1) * suffix_stride(width)]
}

/// The extremum over a window by its definition.
fn extremum(op: Extremum, source: &Source, height: usize, span: Span, x: usize, y: usize) -> u8 {
    let window = y.saturating_sub(span.before)..(y + span.after + 1).min(height);
    let values = window.map(|y| source.at(x, y));
    match op {
        Extremum::Least => values.min(),
        Extremum::Greatest => values.max(),
    }
    .expect("the window holds its own pixel")
}

pub(super) fn slide(level: Level) {
    for width in 0..=WIDEST {
        for (i, (before, after)) in [(0, 0), (1, 0), (0, 1), (2, 1), (3, 5), (8, 8)]
            .into_iter()
            .enumerate()
        {
            let height = [9, 1, 20, 2, 33, 17][(i + width) % 6];
            // The slides of the stage never reach further than the picture.
            let span = Span {
                before: before.min(height - 1),
                after: after.min(height - 1),
            };
            let source = Source::new(width, height, 7 * width + i);
            for op in [Extremum::Least, Extremum::Greatest] {
                let mut target = Target::new(width, height, 3 * width + i);
                let mut suffix = suffix(width, span);
                let suffix = RowsMut {
                    pixels: &mut suffix,
                    stride_px: suffix_stride(width),
                };
                level.slide(
                    op,
                    whole(width, height, span),
                    source.rows(),
                    target.rows(),
                    suffix,
                );
                let what = format!("{op:?} {width}x{height} {span:?}");
                target.check(&what, |x, y| extremum(op, &source, height, span, x, y));
            }
        }
    }
}

pub(super) fn slide_in_steps(level: Level) {
    let (op, height) = (Extremum::Least, 40);
    for width in [31, 32, 65, 128, 200] {
        for span in [
            Span {
                before: 3,
                after: 2,
            },
            Span {
                before: 0,
                after: 6,
            },
            Span {
                before: 20,
                after: 1,
            },
        ] {
            let source = Source::new(width, height, width);
            let mut target = Target::new(width, height, width);
            let mut suffix = suffix(width, span);
            let all = whole(width, height, span);
            for first in (0..all.count).step_by(2) {
                let job = Job {
                    first,
                    count: 2.min(all.count - first),
                    src_top: (first * span.size()).min(height),
                    ..all
                };
                let mut dst = target.rows();
                let suffix = RowsMut {
                    pixels: &mut suffix,
                    stride_px: suffix_stride(width),
                };
                level.slide(
                    op,
                    job,
                    source.rows().from(job.src_top),
                    dst.from(job.rows_out().start),
                    suffix,
                );
            }
            target.check("in steps", |x, y| extremum(op, &source, height, span, x, y));
        }
    }
}

pub(super) fn turn(level: Level) {
    let small = 0..=WIDEST;
    let sizes = small.flat_map(|a| [0, 1, 15, 16, 17, 31, 33, 63, 64, 65, 129].map(|b| (a, b)));
    for (i, (a, b)) in sizes.enumerate() {
        for (width, height) in [(a, b), (b, a)] {
            let source = Source::new(width, height, i);
            let mut target = Target::new(height, width, i / 2);
            level.turn(width, height, source.rows(), target.rows());
            target.check(&format!("{width}x{height}"), |x, y| source.at(y, x));
        }
    }
}

pub(super) fn subtract(level: Level) {
    for width in 0..=WIDEST {
        let (upper, lower) = (
            Source::new(width, 1, width),
            Source::new(width, 1, width + 1),
        );
        let mut target = Target::new(width, 1, width);
        let rows = target.rows();
        level.subtract(
            upper.rows().row(0, width),
            lower.rows().row(0, width),
            rows.pixels,
        );
        target.check("subtract", |x, _| {
            upper.at(x, 0).saturating_sub(lower.at(x, 0))
        });
    }
}

pub(super) fn mark(level: Level) {
    for width in 0..=WIDEST {
        let (upper, lower) = (
            Source::new(width, 1, width),
            Source::new(width, 1, width + 1),
        );
        let (u, l) = (upper.rows().row(0, width), lower.rows().row(0, width));
        for threshold in [0, 1, 60, 127, 128, 254, 255] {
            let mut bits = vec![u64::MAX; width.div_ceil(64) + 1];
            let (inside, guard) = bits.split_at_mut(width.div_ceil(64));
            level.mark(u, threshold, inside);
            check_bits(inside, width, |x| u[x] > threshold);
            inside.fill(u64::MAX);
            level.mark_difference(u, l, threshold, inside);
            check_bits(inside, width, |x| u[x].saturating_sub(l[x]) > threshold);
            assert_eq!(guard, [u64::MAX]);
        }
    }
}

/// Every bit is as expected, and those past the width are 0.
fn check_bits(bits: &[u64], width: usize, expected: impl Fn(usize) -> bool) {
    for x in 0..bits.len() * 64 {
        let set = bits[x / 64] >> (x % 64) & 1 == 1;
        assert_eq!(set, x < width && expected(x), "bit {x} of {width}");
    }
}

#[test]
fn blocks_yield_every_row_once() {
    for height in 1..40 {
        for (before, after) in [(0, 0), (1, 1), (5, 0), (0, 5), (7, 6)] {
            let span = Span {
                before: before.min(height - 1),
                after: after.min(height - 1),
            };
            let job = whole(1, height, span);
            let rows: usize = job.blocks().map(|Block { skip, end, .. }| end - skip).sum();
            assert_eq!((rows, job.rows_out()), (height, 0..height));
            assert_eq!(job.blocks().filter(|block| block.is_last).count(), 1);
        }
    }
}

#[test]
fn an_unknown_level_is_an_error_that_names_the_others() {
    let error = Level::named("mmx").expect_err("no such level");
    assert!(error.to_string().contains("`mmx`") && error.to_string().contains("scalar"));
}
