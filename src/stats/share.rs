//! Confidences and coverages.

use std::fmt;
use std::str::FromStr;

use thiserror::Error;

/// A number above 0 and below 1: a confidence, or the part of a population that is spoken of.
#[derive(Clone, Copy, Debug, PartialEq, PartialOrd)]
pub struct Share(f64);

/// Something that is not a share.
#[derive(Clone, Debug, Error, PartialEq)]
#[error("{came:?}: expected a percentage above 0 and below 100, such as 95 or 99.9")]
pub struct BadShare {
    /// What came.
    came: String,
}

impl Share {
    /// The usual confidence.
    pub const P95: Self = Self(0.95);

    /// All but certain.
    pub const P999: Self = Self(0.999);

    /// `None` unless `value` lies above 0 and below 1.
    pub fn new(value: f64) -> Option<Self> {
        (value > 0.0 && value < 1.0).then_some(Self(value))
    }

    /// The number itself.
    pub fn value(self) -> f64 {
        self.0
    }

    /// What is missing to 1.
    pub fn rest(self) -> f64 {
        1.0 - self.0
    }
}

/// In percent, as it is typed.
impl fmt::Display for Share {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        // Twelve digits hide that 0.999 * 100 is not quite 99.9.
        write!(f, "{}", (self.0 * 1e14).round() / 1e12)
    }
}

/// Reads a percentage.
impl FromStr for Share {
    type Err = BadShare;

    fn from_str(text: &str) -> Result<Self, BadShare> {
        let percent: Option<f64> = text.trim().trim_end_matches('%').trim_end().parse().ok();
        let share = percent.and_then(|percent| Self::new(percent / 100.0));
        share.ok_or_else(|| BadShare {
            came: text.to_owned(),
        })
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn percentages_are_read_and_written_as_typed() {
        for text in ["95", "99.9", "99.99", "50"] {
            assert_eq!(text.parse::<Share>().unwrap().to_string(), text);
        }
        assert_eq!(" 95 % ".parse::<Share>(), Ok(Share::P95));
        for text in ["0", "100", "-5", "nan", "inf", "", "ninety"] {
            assert!(text.parse::<Share>().is_err(), "{text:?}");
        }
    }
}
