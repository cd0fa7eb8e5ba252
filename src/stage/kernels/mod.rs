//! The inner loops, once per instruction set: `scalar` is the definition, the others give the same bytes faster.
//!
//! Only this module chooses between them. [`Level::choose`] looks at the CPU once; the environment variable
//! `BELTWRIGHT_KERNELS` forces a level by name.
#![allow(unsafe_code)]

#[cfg(target_arch = "x86_64")]
mod avx2;
#[cfg(target_arch = "x86_64")]
mod avx512;
mod job;
mod scalar;
#[cfg(test)]
mod tests;
mod view;
#[cfg(target_arch = "x86_64")]
mod wide;

use thiserror::Error;

use job::Block;
pub(crate) use job::{Cut, Job};

/// The environment variable that forces a level.
const FORCE: &str = "BELTWRIGHT_KERNELS";

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

    /// The first `rows` rows, and the others.
    pub fn split(&mut self, rows: usize) -> (RowsMut<'_>, RowsMut<'_>) {
        let stride_px = self.stride_px;
        let (first, second) = self.pixels.split_at_mut(rows * stride_px);
        let first = RowsMut {
            pixels: first,
            stride_px,
        };
        (
            first,
            RowsMut {
                pixels: second,
                stride_px,
            },
        )
    }

    /// The same rows, to read only.
    pub fn read(&self) -> Rows<'_> {
        Rows {
            pixels: self.pixels,
            stride_px: self.stride_px,
        }
    }

    /// `width` pixels of row `y`.
    pub fn row(&mut self, y: usize, width: usize) -> &mut [u8] {
        &mut self.pixels[y * self.stride_px..][..width]
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

    /// Some blocks of the running extremum down the columns (see [`job`] for the method).
    ///
    /// `src` begins with row `src_top`, which must not come after [`Job::first_row`]; `dst` begins with the first row that
    /// comes out. Rows outside the picture are ignored. `memory` has [`Cut::memory_rows`] rows of [`memory_stride`] bytes,
    /// which the kernel arranges as it likes and which go from job to job; the first block of a picture does not read them.
    pub(crate) fn slide(self, op: Extremum, job: Job, src: Rows, dst: RowsMut, memory: RowsMut) {
        dispatch!(self, slide(op, job, src, dst, memory));
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

/// The length of a row of a kernel's memory for pictures of this width: whole vectors of every level.
pub(crate) fn memory_stride(width_px: usize) -> usize {
    width_px.next_multiple_of(64)
}

fn names() -> String {
    let names: Vec<_> = Level::available().map(Level::name).collect();
    names.join(", ")
}
