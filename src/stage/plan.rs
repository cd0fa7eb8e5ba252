//! What the stage is asked to do, every size in pixels.

use crate::settings::{self, ElementKind, Settings, Tone};

/// What the stage does, every size in pixels.
#[derive(Clone, Debug, PartialEq)]
pub struct Plan {
    /// Columns of the region of interest.
    pub width_px: usize,
    /// Rows of the region of interest.
    pub height_px: usize,
    /// Whether parts are brighter or darker than the belt.
    pub polarity: Polarity,
    /// The top-hat's flat structuring element.
    pub element: Element,
    /// How foreground is told from background after the top-hat.
    pub threshold: Threshold,
    /// Background regions (4-connected) that do not touch the border and have at most this many pixels are filled.
    pub fill_below_px: u64,
    /// Regions with fewer pixels are specks: counted and dropped.
    pub speck_below_px: u64,
}

impl Plan {
    /// What the settings amount to.
    pub fn of(settings: &Settings) -> Self {
        let (window, size) = (settings.region_px(), settings.element_px());
        Self {
            width_px: window.width_px,
            height_px: window.height_px,
            polarity: match settings.picture.parts {
                Tone::Bright => Polarity::Bright,
                Tone::Dark => Polarity::Dark,
            },
            element: match settings.picture.element {
                ElementKind::Square => Element::Rectangle {
                    width_px: size,
                    height_px: size,
                },
                ElementKind::Octagon => Element::Octagon { diameter_px: size },
            },
            threshold: match settings.picture.threshold {
                settings::Threshold::Fixed { level } => Threshold::Fixed { level },
                settings::Threshold::Otsu { floor } => Threshold::Otsu { floor },
                settings::Threshold::Hysteresis { low, high } => {
                    Threshold::Hysteresis { low, high }
                }
            },
            fill_below_px: settings.fill_below_px(),
            speck_below_px: settings.speck_below_px(),
        }
    }
}

/// Which way parts differ from the belt.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Polarity {
    /// Image minus its opening.
    Bright,
    /// Closing minus the image.
    Dark,
}

/// A flat structuring element, centred (an even size reaches one pixel further towards the start).
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Element {
    /// An upright rectangle.
    Rectangle {
        /// Columns, at least 1.
        width_px: usize,
        /// Rows, at least 1.
        height_px: usize,
    },
    /// A regular octagon as near as pixels allow, of odd diameter.
    Octagon {
        /// Columns and rows, odd.
        diameter_px: usize,
    },
}

/// Foreground is value > level.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Threshold {
    /// One level for every frame.
    Fixed {
        /// The level.
        level: u8,
    },
    /// Otsu's level of each frame, but never below the floor.
    Otsu {
        /// The lowest level that is used.
        floor: u8,
    },
    /// Pixels above `low` that are 8-connected to a pixel above `high`.
    Hysteresis {
        /// The lower level.
        low: u8,
        /// The upper level.
        high: u8,
    },
}
