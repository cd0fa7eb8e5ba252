//! Millimetres, pixels and microseconds, and the only conversions between them.
//!
//! Every quantity carries its unit in its name (`_mm`, `_px`, `_us`). Time is a monotonic [`Micros`];
//! lengths are plain `f64`, because they are multiplied far more often than they are confused.

use std::fmt;
use std::ops::{Add, AddAssign, Sub};

use serde::{Deserialize, Serialize};

/// A moment on a monotonic clock, or a stretch between two moments, in integer microseconds.
#[derive(
    Clone, Copy, Debug, Default, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize,
)]
#[serde(transparent)]
pub struct Micros(pub i64);

impl Micros {
    /// The zero of the clock, and the empty stretch.
    pub const ZERO: Self = Self(0);
    /// Later than everything that happens.
    pub const MAX: Self = Self(i64::MAX);

    /// The nearest whole microsecond to `ms` milliseconds.
    pub fn from_ms(ms: f64) -> Self {
        Self((ms * 1e3).round() as i64)
    }

    /// The nearest whole microsecond to `seconds`.
    pub fn from_seconds(seconds: f64) -> Self {
        Self((seconds * 1e6).round() as i64)
    }

    /// The same stretch in milliseconds.
    pub fn as_ms(self) -> f64 {
        self.0 as f64 / 1e3
    }

    /// The same stretch in seconds.
    pub fn as_seconds(self) -> f64 {
        self.0 as f64 / 1e6
    }
}

impl Add for Micros {
    type Output = Self;
    fn add(self, other: Self) -> Self {
        Self(self.0.saturating_add(other.0))
    }
}

impl AddAssign for Micros {
    fn add_assign(&mut self, other: Self) {
        *self = *self + other;
    }
}

impl Sub for Micros {
    type Output = Self;
    fn sub(self, other: Self) -> Self {
        Self(self.0.saturating_sub(other.0))
    }
}

impl fmt::Display for Micros {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{} us", self.0)
    }
}

/// How large a pixel is on the belt. Pixels are square.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Scale {
    /// Edge length of one pixel on the belt.
    pub mm_per_px: f64,
}

impl Scale {
    /// A length on the belt in pixels.
    pub fn px(self, mm: f64) -> f64 {
        mm / self.mm_per_px
    }

    /// A length in the picture in millimetres.
    pub fn mm(self, px: f64) -> f64 {
        px * self.mm_per_px
    }

    /// An area on the belt in pixels.
    pub fn px2(self, mm2: f64) -> f64 {
        mm2 / (self.mm_per_px * self.mm_per_px)
    }

    /// A pixel count as an area on the belt.
    pub fn mm2(self, px2: f64) -> f64 {
        px2 * self.mm_per_px * self.mm_per_px
    }
}

/// An upright rectangle of pixels.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize)]
pub struct Window {
    /// First column.
    pub left_px: usize,
    /// First row.
    pub top_px: usize,
    /// Columns.
    pub width_px: usize,
    /// Rows.
    pub height_px: usize,
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn milliseconds_round_to_the_nearest_microsecond() {
        assert_eq!(Micros::from_ms(0.0004), Micros(0));
        assert_eq!(Micros::from_ms(1.7506), Micros(1751));
        assert_eq!(Micros(1_500).as_ms(), 1.5);
    }

    /// Elementary: field of view over pixels, 100 mm on 1920 px.
    #[test]
    fn scale_goes_both_ways() {
        let scale = Scale {
            mm_per_px: 100.0 / 1920.0,
        };
        assert!((scale.mm(1.0) - 0.052_083_333_333_333_336).abs() < 1e-15);
        assert!((scale.px(scale.mm(7.25)) - 7.25).abs() < 1e-12);
        assert!((scale.px2(scale.mm2(400.0)) - 400.0).abs() < 1e-9);
    }
}
