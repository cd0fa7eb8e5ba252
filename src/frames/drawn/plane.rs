//! Points of the belt's plane in millimetres.

use std::ops::{Add, Mul, Sub};

/// A point, or the way from one point to another. y points down, as in a picture.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub(super) struct Point {
    pub x_mm: f64,
    pub y_mm: f64,
}

impl Point {
    pub(super) const ORIGIN: Self = Self {
        x_mm: 0.0,
        y_mm: 0.0,
    };

    pub(super) fn new(x_mm: f64, y_mm: f64) -> Self {
        Self { x_mm, y_mm }
    }

    /// Unit length, turned from the x axis towards the y axis.
    pub(super) fn towards(angle_rad: f64) -> Self {
        Self::new(angle_rad.cos(), angle_rad.sin())
    }

    pub(super) fn dot(self, other: Self) -> f64 {
        self.x_mm * other.x_mm + self.y_mm * other.y_mm
    }

    /// Positive when `other` is turned from this one towards the y axis.
    pub(super) fn cross(self, other: Self) -> f64 {
        self.x_mm * other.y_mm - self.y_mm * other.x_mm
    }

    pub(super) fn length(self) -> f64 {
        self.dot(self).sqrt()
    }

    /// A quarter turn from the x axis towards the y axis.
    pub(super) fn quarter(self) -> Self {
        Self::new(-self.y_mm, self.x_mm)
    }

    /// Turned by the angle of `unit`, a way of length 1.
    pub(super) fn turned(self, unit: Self) -> Self {
        unit * self.x_mm + unit.quarter() * self.y_mm
    }

    /// Turned back by the angle of `unit`.
    pub(super) fn turned_back(self, unit: Self) -> Self {
        Self::new(self.dot(unit), unit.cross(self))
    }
}

impl Add for Point {
    type Output = Self;
    fn add(self, other: Self) -> Self {
        Self::new(self.x_mm + other.x_mm, self.y_mm + other.y_mm)
    }
}

impl Sub for Point {
    type Output = Self;
    fn sub(self, other: Self) -> Self {
        Self::new(self.x_mm - other.x_mm, self.y_mm - other.y_mm)
    }
}

impl Mul<f64> for Point {
    type Output = Self;
    fn mul(self, by: f64) -> Self {
        Self::new(self.x_mm * by, self.y_mm * by)
    }
}
