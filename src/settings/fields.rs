//! The settings file, key by key. The ranges stand here once: the loader checks them and the editor schema shows them.

use std::path::PathBuf;

use schemars::JsonSchema;
use serde::{Deserialize, Serialize};

/// Everything that is set for one station.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
#[serde(deny_unknown_fields)]
pub struct Settings {
    /// The camera's picture and when its verdicts take effect.
    pub camera: Camera,
    /// The belt under the camera.
    pub belt: Belt,
    /// From a gray picture to regions.
    pub picture: Picture,
    /// What holds for every part, whatever its shape.
    pub judge: Judge,
    /// The taught shapes with their limits.
    #[serde(rename = "shape")]
    #[schemars(length(min = 1))]
    pub shapes: Vec<Shape>,
    /// The outlets along the belt.
    #[serde(rename = "outlet", default)]
    pub outlets: Vec<Outlet>,
    /// What happens to parts that are not kept.
    pub reject: Reject,
    /// The serial line to the reject device.
    pub line: Line,
}

/// The camera's picture and when its verdicts take effect.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
#[serde(deny_unknown_fields)]
pub struct Camera {
    /// Pixels per row.
    #[schemars(range(min = 16, max = 8192))]
    pub width_px: u32,
    /// Rows.
    #[schemars(range(min = 16, max = 8192))]
    pub height_px: u32,
    /// Edge length of a pixel on the belt.
    #[schemars(range(min = 0.001, max = 10.0))]
    pub mm_per_px: f64,
    /// Frames in a second.
    #[schemars(range(min = 0.1, max = 2000.0))]
    pub frames_per_s: f64,
    /// How long the shutter is open.
    #[schemars(range(min = 0.001, max = 1000.0))]
    pub exposure_ms: f64,
    /// From capture to the moment at which the verdicts of a frame take effect, on every PC alike.
    #[schemars(range(min = 1.0, max = 10000.0))]
    pub latency_ms: f64,
}

/// The belt under the camera.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
#[serde(deny_unknown_fields)]
pub struct Belt {
    /// Stated speed.
    #[schemars(range(min = 1.0, max = 10000.0))]
    pub speed_mm_s: f64,
    /// How far the true speed may be from the stated one.
    #[schemars(range(min = 0.0, max = 20.0))]
    pub speed_tolerance_percent: f64,
    /// Which way parts move through the picture.
    pub travel: Travel,
    /// The smallest distance along the belt from one part's leading edge to the next one's in the same lane.
    #[schemars(range(min = 1.0, max = 100000.0))]
    pub part_pitch_mm: f64,
    /// What happens to belt that nobody saw in time.
    #[serde(default)]
    pub unseen: Policy,
}

/// Which way parts move through the picture.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize, JsonSchema)]
#[serde(rename_all = "lowercase")]
pub enum Travel {
    /// They enter at the left edge.
    Right,
    /// They enter at the right edge.
    Left,
}

/// What happens to something that could not be judged.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize, JsonSchema)]
#[serde(rename_all = "lowercase")]
pub enum Policy {
    /// It is rejected.
    #[default]
    Reject,
    /// It stays on the belt.
    Keep,
    /// The station stops with every outlet off.
    Stop,
}

/// From a gray picture to regions.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
#[serde(deny_unknown_fields)]
pub struct Picture {
    /// Whether parts are brighter or darker than the belt.
    pub parts: Tone,
    /// The part of the picture that is looked at, measured from its top left corner; all of it when left out.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub region_mm: Option<RegionMm>,
    /// The top-hat's structuring element.
    #[serde(default)]
    pub element: ElementKind,
    /// Its width and height. Larger than the part's widest inside.
    #[schemars(range(min = 0.001, max = 10000.0))]
    pub element_mm: f64,
    /// How foreground is told from background.
    pub threshold: Threshold,
    /// Holes in a part up to this size are closed.
    #[schemars(range(min = 0.0, max = 1000000.0))]
    pub fill_below_mm2: f64,
    /// Anything smaller than this is a crumb: counted, not judged.
    #[schemars(range(min = 0.0, max = 1000000.0))]
    pub speck_below_mm2: f64,
}

/// Whether parts are brighter or darker than the belt.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize, JsonSchema)]
#[serde(rename_all = "lowercase")]
pub enum Tone {
    /// Bright parts on a dark belt.
    Bright,
    /// Dark parts on a bright belt.
    Dark,
}

/// An upright rectangle in the picture.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
#[serde(deny_unknown_fields)]
pub struct RegionMm {
    /// From the picture's left edge.
    #[schemars(range(min = 0.0, max = 100000.0))]
    pub left: f64,
    /// From the picture's top edge.
    #[schemars(range(min = 0.0, max = 100000.0))]
    pub top: f64,
    /// Along the rows.
    #[schemars(range(min = 0.001, max = 100000.0))]
    pub width: f64,
    /// Down the columns.
    #[schemars(range(min = 0.001, max = 100000.0))]
    pub height: f64,
}

/// The top-hat's structuring element.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize, JsonSchema)]
#[serde(rename_all = "lowercase")]
pub enum ElementKind {
    /// A square.
    #[default]
    Square,
    /// A regular octagon: rounder, takes a little longer.
    Octagon,
}

/// How foreground is told from background: value > level after the top-hat.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize, JsonSchema)]
#[serde(tag = "method", rename_all = "lowercase", deny_unknown_fields)]
pub enum Threshold {
    /// One level for every frame.
    Fixed {
        /// The level, in gray values of 0 to 255.
        level: u8,
    },
    /// Otsu's level of each frame, never below the floor.
    Otsu {
        /// The lowest level that is used, so that an empty belt is not split into noise.
        floor: u8,
    },
    /// Two levels: above `low`, and joined to something above `high`.
    Hysteresis {
        /// The lower level.
        low: u8,
        /// The upper level.
        high: u8,
    },
}

/// What holds for every part, whatever its shape.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
#[serde(deny_unknown_fields)]
pub struct Judge {
    /// Missing or excess patches smaller than this are pixel noise along the edge and do not count.
    #[schemars(range(min = 0.0, max = 1000000.0))]
    pub flaw_below_mm2: f64,
    /// A part that shares less than this with every taught shape (overlap over union) is `unknown`.
    #[schemars(range(min = 0.0, max = 1.0))]
    pub fit_at_least: f64,
    /// What happens to a part that was never seen whole.
    #[serde(default)]
    pub partial: Policy,
}

/// A taught shape with its limits.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
#[serde(deny_unknown_fields)]
pub struct Shape {
    /// A short name, as it stands in tables and lists.
    #[schemars(length(min = 1, max = 40))]
    pub name: String,
    /// The taught shape, made by `teach`; a relative path starts at this settings file.
    #[schemars(length(min = 1, max = 4096))]
    pub file: PathBuf,
    /// The deepest bite that is still good.
    #[schemars(range(min = 0.0, max = 1000.0))]
    pub missing_mm: f64,
    /// The farthest burr that is still good.
    #[schemars(range(min = 0.0, max = 1000.0))]
    pub excess_mm: f64,
    /// What happens to a part that lies face down.
    #[serde(default)]
    pub face_down: FaceDown,
    /// Where good parts of this shape go; left out, they stay on the belt.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    #[schemars(length(min = 1, max = 40))]
    pub outlet: Option<String>,
    /// Area, `[low, high]`.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    #[schemars(inner(range(min = 0.0, max = 1000000.0)))]
    pub area_mm2: Option<[f64; 2]>,
    /// Longest extent (maximum Feret diameter), `[low, high]`.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    #[schemars(inner(range(min = 0.0, max = 10000.0)))]
    pub length_mm: Option<[f64; 2]>,
    /// Narrowest extent (minimum Feret diameter), `[low, high]`.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    #[schemars(inner(range(min = 0.0, max = 10000.0)))]
    pub width_mm: Option<[f64; 2]>,
    /// Number of holes, `[low, high]`.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    #[schemars(inner(range(min = 0, max = 10000)))]
    pub holes: Option<[u32; 2]>,
    /// Length of the boundary (pixels that touch the outside), `[low, high]`.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    #[schemars(inner(range(min = 0.0, max = 100000.0)))]
    pub boundary_mm: Option<[f64; 2]>,
    /// Number of skeleton branches longer than `branch_above_mm`, `[low, high]`.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    #[schemars(inner(range(min = 0, max = 10000)))]
    pub branches: Option<[u32; 2]>,
    /// How long a skeleton branch must be to count.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    #[schemars(range(min = 0.001, max = 1000.0))]
    pub branch_above_mm: Option<f64>,
}

/// What happens to a part that lies face down.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize, JsonSchema)]
#[serde(rename_all = "lowercase")]
pub enum FaceDown {
    /// It is rejected as `flipped`.
    #[default]
    Reject,
    /// It is judged like any other.
    Keep,
}

/// An outlet along the belt: a nozzle, a pusher or a flap.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
#[serde(deny_unknown_fields)]
pub struct Outlet {
    /// A short name, as it stands in tables and lists.
    #[schemars(length(min = 1, max = 40))]
    pub name: String,
    /// Its coil on the Modbus device, counted from 0 as on the wire.
    #[schemars(range(min = 0, max = 65535))]
    pub coil: u16,
    /// From the picture's upstream edge to the middle of the outlet, along the belt.
    #[schemars(range(min = 0.0, max = 100000.0))]
    pub distance_mm: f64,
    /// How much earlier it opens and later it closes than the part's edges ask for.
    #[schemars(range(min = 0.0, max = 10000.0))]
    pub margin_mm: f64,
    /// From the signal to the open valve.
    #[schemars(range(min = 0.0, max = 10000.0))]
    pub open_delay_ms: f64,
    /// From the signal to the shut valve.
    #[schemars(range(min = 0.0, max = 10000.0))]
    pub close_delay_ms: f64,
    /// The longest it may stay open at a stretch.
    #[schemars(range(min = 1.0, max = 600000.0))]
    pub max_on_ms: f64,
}

/// What happens to parts that are not kept.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
#[serde(deny_unknown_fields)]
pub struct Reject {
    /// The outlet that rejected parts and unseen belt go to.
    #[schemars(length(min = 1, max = 40))]
    pub outlet: String,
    /// Whether `--armed` may send signals at all.
    #[serde(default)]
    pub allow_armed: bool,
}

/// The serial line to the reject device: Modbus RTU.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
#[serde(deny_unknown_fields)]
pub struct Line {
    /// The device's unit address.
    #[schemars(range(min = 1, max = 247))]
    pub unit: u8,
    /// Bits in a second.
    #[schemars(range(min = 1200, max = 921_600))]
    pub baud: u32,
    /// Parity bit; a character has 11 bits with or without it, as the standard asks.
    #[serde(default)]
    pub parity: Parity,
    /// How long an answer may take.
    #[schemars(range(min = 1.0, max = 5000.0))]
    pub answer_within_ms: f64,
}

/// Parity bit. Without one there are two stop bits, so that a character keeps its 11 bits.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize, JsonSchema)]
#[serde(rename_all = "lowercase")]
pub enum Parity {
    /// Even: the standard's default.
    #[default]
    Even,
    /// Odd.
    Odd,
    /// None, with two stop bits.
    None,
}
