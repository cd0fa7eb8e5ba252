//! What every kernel has to do, stamped into each kernel's file: all widths from 0 to twice the widest tile and one more,
//! starts that are not aligned, rows further apart than they are wide, and bytes around the output that must not change.

use super::{Cut, Extremum, Job, Level, Rows, RowsMut, memory_stride};
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

    /// Rows `top..end`, and nothing behind them.
    fn rows_between(&self, top: usize, end: usize, width: usize) -> Rows<'_> {
        let last = self.start + end.saturating_sub(1) * self.stride + width;
        Rows {
            pixels: self.bytes[..last]
                .get(self.start + top * self.stride..)
                .unwrap_or(&[]),
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

    /// Forgets what was written.
    fn clear(&mut self) {
        self.bytes.fill(MARK);
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
    let cut = Cut::of(span.size());
    Job {
        width_px,
        height_px,
        span,
        cut,
        src_top: 0,
        first: 0,
        count: Job::blocks_of(height_px, span, cut),
    }
}

/// A kernel's memory for a job; what it holds at first does not matter.
fn memory(job: &Job) -> Vec<u8> {
    vec![MARK; job.cut.memory_rows() * memory_stride(job.width_px)]
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
                let job = whole(width, height, span);
                slide_by(level, op, job.count.max(1), job, &source, &mut target);
                let what = format!("{op:?} {width}x{height} {span:?}");
                target.check(&what, |x, y| extremum(op, &source, height, span, x, y));
            }
        }
    }
}

pub(super) fn slide_in_steps(level: Level) {
    let short = [(3, 2), (0, 6), (20, 1)].map(|reach| (40, reach));
    // These have rows in common: whole blocks, tails, both, or a block and no tail.
    let long = [
        (100, 100),
        (40, 60),
        (120, 120),
        (0, 199),
        (70, 0),
        (64, 65),
        (250, 250),
    ]
    .map(|reach| (260, reach));
    for (height, (before, after)) in short.into_iter().chain(long) {
        for width in [31, 32, 65, 128, 300] {
            let (op, span) = (Extremum::Least, Span { before, after });
            let source = Source::new(width, height, width);
            let mut target = Target::new(width, height, width);
            let all = whole(width, height, span);
            for step in [1, 2, 5, 100] {
                target.clear();
                slide_by(level, op, step, all, &source, &mut target);
                target.check("in steps", |x, y| extremum(op, &source, height, span, x, y));
            }
        }
    }
}

/// Slides `step` blocks at a time; the source begins as late as it may and ends as early.
fn slide_by(
    level: Level,
    op: Extremum,
    step: usize,
    all: Job,
    source: &Source,
    target: &mut Target,
) {
    let mut memory = memory(&all);
    for first in (0..all.count).step_by(step) {
        let count = step.min(all.count - first);
        let job = Job {
            first,
            count,
            src_top: Job::first_row(first, all.span, all.cut).min(all.height_px),
            ..all
        };
        let end = ((first + count) * all.cut.length).min(all.height_px);
        let src = source.rows_between(job.src_top, end, all.width_px);
        let mut dst = target.rows();
        let memory = RowsMut {
            pixels: &mut memory,
            stride_px: memory_stride(all.width_px),
        };
        level.slide(op, job, src, dst.from(job.rows_out().start), memory);
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
fn an_unknown_level_is_an_error_that_names_the_others() {
    let error = Level::named("mmx").expect_err("no such level");
    assert!(error.to_string().contains("`mmx`") && error.to_string().contains("scalar"));
}
