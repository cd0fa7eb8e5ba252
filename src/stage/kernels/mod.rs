//! The inner loops, once per instruction set: `scalar` is the definition, the others give the same bytes faster.
//!
//! Only this module chooses between them. [`Level::choose`] looks at the CPU once; the environment variable
//! `BELTWRIGHT_KERNELS` forces a level by name.
#![allow(unsafe_code)]

#[cfg(target_arch = "x86_64")]
mod avx2;
#[cfg(target_arch = "x86_64")]
mod avx512;
mod scalar;
#[cfg(test)]
mod tests;
mod view;
#[cfg(target_arch = "x86_64")]
mod wide;

use std::ops::Range;

use thiserror::Error;

use super::element::Span;

/// The environment variable that forces a level.
const FORCE: &str = "BELTWRIGHT_KERNELS";

/// Bytes of the nearest data cache that a kernel may count on.
#[cfg(target_arch = "x86_64")]
const NEAREST_CACHE: usize = 40 * 1024;

/// Which of two values wins.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) enum Extremum {
    /// The smaller: erosion.
    Least,
    /// The larger: dilation.
    Greatest,
}

impl Extremum {
    /// The value that never wins; it stands for "outside the picture".
    pub fn neutral(self) -> u8 {
        match self {
            Self::Least => u8::MAX,
            Self::Greatest => u8::MIN,
        }
    }
}

/// Rows of pixels that begin every `stride_px`.
#[derive(Clone, Copy)]
pub(crate) struct Rows<'a> {
    pub pixels: &'a [u8],
    pub stride_px: usize,
}

/// Rows of pixels to write.
pub(crate) struct RowsMut<'a> {
    pub pixels: &'a mut [u8],
    pub stride_px: usize,
}

impl<'a> Rows<'a> {
    /// The same rows without the first `top`; empty if there are no more.
    pub fn from(self, top: usize) -> Self {
        let pixels = self.pixels.get(top * self.stride_px..).unwrap_or(&[]);
        Self { pixels, ..self }
    }

    /// `width` pixels of row `y`.
    pub fn row(self, y: usize, width: usize) -> &'a [u8] {
        &self.pixels[y * self.stride_px..][..width]
    }
}

impl RowsMut<'_> {
    /// The same rows without the first `top`; empty if there are no more.
    pub fn from(&mut self, top: usize) -> RowsMut<'_> {
        let start = (top * self.stride_px).min(self.pixels.len());
        RowsMut {
            pixels: &mut self.pixels[start..],
            stride_px: self.stride_px,
        }
    }

    /// `width` pixels of row `y`.
    pub fn row(&mut self, y: usize, width: usize) -> &mut [u8] {
        &mut self.pixels[y * self.stride_px..][..width]
    }
}

/// A running extremum down the columns of a picture, or some blocks of it (see [`Level::slide`]).
#[derive(Clone, Copy, Debug)]
pub(crate) struct Job {
    /// Columns.
    pub width_px: usize,
    /// Rows of the picture.
    pub height_px: usize,
    /// The window.
    pub span: Span,
    /// The picture's row with which the source begins.
    pub src_top: usize,
    /// The first block.
    pub first: usize,
    /// How many blocks.
    pub count: usize,
}

/// One block of a [`Job`]: as many rows as the window is long.
#[derive(Clone, Copy, Debug)]
struct Block {
    /// Columns.
    width_px: usize,
    /// Rows of a whole block.
    size: usize,
    /// Its first row in the source.
    src: usize,
    /// Its rows inside the picture.
    rows_in: usize,
    /// Its first rows whose windows are centred above the picture and which yield nothing.
    skip: usize,
    /// The row after the last one that yields something.
    end: usize,
    /// Where the first yielded row goes in the job's output.
    out: usize,
    /// Whether there is no block before it, and so no suffix.
    is_first: bool,
    /// Whether no block comes after it, so that nobody needs its suffix.
    is_last: bool,
}

impl Job {
    /// The rows that come out: row `y` does when the last row of its window has gone in.
    pub fn rows_out(&self) -> Range<usize> {
        let clip = |j: usize| j.saturating_sub(self.span.after).min(self.height_px);
        let size = self.span.size();
        clip(self.first * size)..clip((self.first + self.count) * size)
    }

    fn blocks(self) -> impl Iterator<Item = Block> {
        let size = self.span.size();
        let start = self.rows_out().start;
        (self.first..self.first + self.count).map(move |index| {
            let top = index * size;
            Block {
                width_px: self.width_px,
                size,
                src: top - self.src_top,
                rows_in: self.height_px.saturating_sub(top).min(size),
                skip: self.span.after.saturating_sub(top).min(size),
                end: (self.height_px + self.span.after)
                    .saturating_sub(top)
                    .min(size),
                out: top.saturating_sub(self.span.after).saturating_sub(start),
                is_first: index == 0,
                is_last: top + size >= self.height_px + self.span.after,
            }
        })
    }
}

/// Why a level cannot be used.
#[derive(Clone, Debug, Error, PartialEq, Eq)]
pub enum KernelError {
    /// The name is none of ours.
    #[error("kernel level `{came}` is not known; expected one of: {expected}")]
    Unknown {
        /// What was asked for.
        came: String,
        /// The levels this CPU has.
        expected: String,
    },
    /// The name is right, the CPU is not.
    #[error("kernel level `{came}` was asked for, but this CPU has only: {available}")]
    Lacking {
        /// What was asked for.
        came: String,
        /// The levels this CPU has.
        available: String,
    },
}

/// An instruction set that this CPU was seen to have. All levels give the same results.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Level(Kind);

#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Kind {
    Scalar,
    #[cfg(target_arch = "x86_64")]
    Avx2,
    #[cfg(target_arch = "x86_64")]
    Avx512,
}

impl Kind {
    /// From the plainest to the fastest.
    const ALL: &[Self] = &[
        Self::Scalar,
        #[cfg(target_arch = "x86_64")]
        Self::Avx2,
        #[cfg(target_arch = "x86_64")]
        Self::Avx512,
    ];

    fn name(self) -> &'static str {
        match self {
            Self::Scalar => "scalar",
            #[cfg(target_arch = "x86_64")]
            Self::Avx2 => "avx2",
            #[cfg(target_arch = "x86_64")]
            Self::Avx512 => "avx512",
        }
    }

    fn is_here(self) -> bool {
        match self {
            Self::Scalar => true,
            #[cfg(target_arch = "x86_64")]
            Self::Avx2 => is_x86_feature_detected!("avx2"),
            #[cfg(target_arch = "x86_64")]
            Self::Avx512 => {
                is_x86_feature_detected!("avx2")
                    && is_x86_feature_detected!("avx512f")
                    && is_x86_feature_detected!("avx512bw")
            }
        }
    }
}

/// Runs the function of the chosen level.
macro_rules! dispatch {
    ($level:expr, $name:ident($($argument:expr),*)) => {
        match $level.0 {
            Kind::Scalar => scalar::$name($($argument),*),
            #[cfg(target_arch = "x86_64")]
            // SAFETY: a `Level` is only made for a kind whose instructions the CPU was seen to have.
            Kind::Avx2 => unsafe { avx2::$name($($argument),*) },
            #[cfg(target_arch = "x86_64")]
            // SAFETY: as above.
            Kind::Avx512 => unsafe { avx512::$name($($argument),*) },
        }
    };
}

impl Level {
    /// The definition; every CPU has it.
    pub const SCALAR: Self = Self(Kind::Scalar);

    /// The fastest level of this CPU, or the one that `BELTWRIGHT_KERNELS` names. It is logged.
    ///
    /// # Errors
    /// The variable names a level that is unknown or that the CPU lacks.
    pub fn choose() -> Result<Self, KernelError> {
        let level = match std::env::var_os(FORCE) {
            Some(name) => Self::named(&name.to_string_lossy())?,
            None => Self::available().last().unwrap_or(Self::SCALAR),
        };
        tracing::info!(level = level.name(), available = %names(), "stage kernels chosen");
        Ok(level)
    }

    /// The level called `name`.
    ///
    /// # Errors
    /// It is unknown, or the CPU lacks it.
    pub fn named(name: &str) -> Result<Self, KernelError> {
        let known = Kind::ALL.iter().copied().find(|kind| kind.name() == name);
        match known {
            Some(kind) if kind.is_here() => Ok(Self(kind)),
            Some(_) => Err(KernelError::Lacking {
                came: name.to_owned(),
                available: names(),
            }),
            None => Err(KernelError::Unknown {
                came: name.to_owned(),
                expected: names(),
            }),
        }
    }

    /// The levels of this CPU, from the plainest to the fastest.
    pub fn available() -> impl Iterator<Item = Self> {
        Kind::ALL
            .iter()
            .filter(|kind| kind.is_here())
            .map(|&k| Self(k))
    }

    /// How many levels were built in, whether or not this CPU has them.
    pub fn built_in() -> usize {
        Kind::ALL.len()
    }

    /// Its name, as `BELTWRIGHT_KERNELS` takes it.
    pub fn name(self) -> &'static str {
        self.0.name()
    }

    /// Some blocks of the running extremum down the columns after van Herk 1992 and Gil & Werman 1993: three comparisons
    /// a pixel whatever the window's length.
    ///
    /// `src` begins with row `src_top`, `dst` at the first row that comes out. With `suffix[o]` the extremum of
    /// rows `o..` of the *previous* block, row `o` of a block ends the window whose extremum is that of `suffix[o + 1]` and
    /// of rows `0..=o` of this block. Afterwards `suffix` holds that of the last block, arranged as the kernel likes, unless
    /// it was the picture's last; before the picture's first block it is not read. It has one row more than the window, for
    /// the kernel's own use, and rows of [`suffix_stride`] bytes. Rows outside the picture are ignored.
    pub(crate) fn slide(self, op: Extremum, job: Job, src: Rows, dst: RowsMut, suffix: RowsMut) {
        dispatch!(self, slide(op, job, src, dst, suffix));
    }

    /// Turns a picture over its main diagonal: `height` rows of `width` pixels in `src` become columns of `dst`.
    pub(crate) fn turn(self, width: usize, height: usize, src: Rows, dst: RowsMut) {
        dispatch!(self, turn(width, height, src, dst));
    }

    /// `out = upper - lower`, pixel by pixel, never below 0. All are equally long.
    pub(crate) fn subtract(self, upper: &[u8], lower: &[u8], out: &mut [u8]) {
        dispatch!(self, subtract(upper, lower, out));
    }

    /// Sets bit `x` of `bits` where `row[x] > level` and clears the others; pixel 0 is the lowest bit of the first word.
    /// `bits` has one word per 64 pixels begun.
    pub(crate) fn mark(self, row: &[u8], level: u8, bits: &mut [u64]) {
        dispatch!(self, mark(row, level, bits));
    }

    /// [`Level::subtract`] and [`Level::mark`] in one.
    pub(crate) fn mark_difference(self, upper: &[u8], lower: &[u8], level: u8, bits: &mut [u64]) {
        dispatch!(self, mark_difference(upper, lower, level, bits));
    }
}

/// The length of a row of the suffix buffer for pictures of this width: whole vectors of every level.
pub(crate) fn suffix_stride(width_px: usize) -> usize {
    width_px.next_multiple_of(64)
}

fn names() -> String {
    let names: Vec<_> = Level::available().map(Level::name).collect();
    names.join(", ")
}
