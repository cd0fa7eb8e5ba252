//! What the settings amount to: sizes in pixels, the point of decision, lead times, wire times.
//!
//! # The point of decision
//!
//! A piece of belt crosses the picture's upstream edge at some belt reading. From then on it lies in view until the
//! belt has moved on by [`view_mm`](Settings::view_mm), the length from the upstream edge to the downstream edge of
//! the region of interest. The last frame that can see it was captured no later than that, and takes effect
//! `latency_ms` later, in which time a belt at its fastest moves `speed * (1 + tolerance) * latency`. So once the belt
//! has moved on by
//!
//! ```text
//! decision_mm = view_mm + speed_mm_s * (1 + tolerance) * latency_s
//! ```
//!
//! everything that can be known about the piece is known and it is decided. An outlet can be reached when the signal
//! to open it need not leave before that:
//!
//! ```text
//! distance_mm - margin_mm - speed_mm_s * (1 + tolerance) * open_lead_s >= decision_mm + UNSEEN_STEP_MM
//! ```
//!
//! # The serial line
//!
//! MODBUS over Serial Line Specification and Implementation Guide V1.02, sections 2.5.1 and 2.5.1.1: a character has
//! 11 bits; characters of one frame are at most 1.5 characters apart, frames at least 3.5; above 19200 baud both are
//! fixed at 750 and 1750 us.

use crate::units::{Micros, Scale, Window};

use super::fields::{Line, Outlet, Settings, Travel};

/// Bits of a character: start, 8 data, parity (or a second stop bit), stop.
const CHARACTER_BITS: f64 = 11.0;

/// Above this the silent times no longer shrink.
const FIXED_SILENCE_ABOVE_BAUD: u32 = 19_200;

/// Bytes of the message that switches one coil, and of its answer.
pub const SWITCH_BYTES: usize = 8;

/// Belt that no frame shows is decided in steps of this length, when the end of the step reaches the point of decision.
pub const UNSEEN_STEP_MM: f64 = 1.0;

/// Keeps a size that is exact on paper from slipping a pixel through rounding.
const ROUNDING: f64 = 1e-6;

/// Whether an outlet's signal can leave in time.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Reach {
    /// The shortest distance from the upstream edge at which the outlet can still be reached.
    pub needed_mm: f64,
    /// How much farther away it is; negative when it is too near.
    pub slack_mm: f64,
    /// The same as time at the belt's fastest.
    pub slack_ms: f64,
}

/// Sizes in the picture.
impl Settings {
    /// How large a pixel is on the belt.
    pub fn scale(&self) -> Scale {
        Scale {
            mm_per_px: self.camera.mm_per_px,
        }
    }

    /// The region of interest, its edges rounded to whole pixels and kept inside the picture.
    pub fn region_px(&self) -> Window {
        let (width, height) = (
            self.camera.width_px as usize,
            self.camera.height_px as usize,
        );
        let Some(region) = self.picture.region_mm else {
            return Window {
                left_px: 0,
                top_px: 0,
                width_px: width,
                height_px: height,
            };
        };
        let px = |mm: f64, most: usize| (self.scale().px(mm).round() as usize).min(most);
        let (left, top) = (px(region.left, width), px(region.top, height));
        Window {
            left_px: left,
            top_px: top,
            width_px: px(region.left + region.width, width) - left,
            height_px: px(region.top + region.height, height) - top,
        }
    }

    /// Width and height of the top-hat's element: the nearest odd number of pixels, the larger one in the middle.
    pub fn element_px(&self) -> usize {
        let px = self.scale().px(self.picture.element_mm) + ROUNDING;
        2 * (px / 2.0).floor() as usize + 1
    }

    /// Holes of at most this many pixels are filled.
    pub fn fill_below_px(&self) -> u64 {
        (self.scale().px2(self.picture.fill_below_mm2) + ROUNDING).floor() as u64
    }

    /// Regions of fewer pixels are specks.
    pub fn speck_below_px(&self) -> u64 {
        (self.scale().px2(self.picture.speck_below_mm2) - ROUNDING).ceil() as u64
    }

    /// Flaws of fewer pixels do not count.
    pub fn flaw_below_px(&self) -> f64 {
        self.scale().px2(self.judge.flaw_below_mm2)
    }

    /// How far the belt moves while the shutter is open.
    pub fn blur_mm(&self) -> f64 {
        self.belt.speed_mm_s * self.camera.exposure_ms / 1e3
    }

    /// Smallest limit of any shape for bites and burrs.
    pub fn smallest_limit_mm(&self) -> f64 {
        let limits = self
            .shapes
            .iter()
            .flat_map(|shape| [shape.missing_mm, shape.excess_mm]);
        limits.fold(f64::INFINITY, f64::min)
    }
}

/// How the region of interest lies on the belt.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Geometry {
    /// Size of a pixel.
    pub scale: Scale,
    /// Which way parts move.
    pub travel: Travel,
    /// Columns of the whole picture.
    pub picture_width_px: usize,
    /// The region of interest.
    pub window: Window,
}

impl Geometry {
    /// Distance from the picture's upstream edge to the column boundary `x_px` of the region of interest: its first
    /// pixel spans 0.0 to 1.0. A point's belt coordinate is the belt reading less this distance.
    pub fn behind_upstream_mm(&self, x_px: f64) -> f64 {
        let x_px = x_px + self.window.left_px as f64;
        self.scale.mm(match self.travel {
            Travel::Right => x_px,
            Travel::Left => self.picture_width_px as f64 - x_px,
        })
    }

    /// Distance from the picture's top edge to the row boundary `y_px` of the region of interest.
    pub fn below_top_mm(&self, y_px: f64) -> f64 {
        self.scale.mm(y_px + self.window.top_px as f64)
    }
}

/// Along the belt.
impl Settings {
    /// How the region of interest lies on the belt.
    pub fn geometry(&self) -> Geometry {
        Geometry {
            scale: self.scale(),
            travel: self.belt.travel,
            picture_width_px: self.camera.width_px as usize,
            window: self.region_px(),
        }
    }

    /// How far the true speed may be from the stated one, as a share of it.
    pub fn speed_tolerance(&self) -> f64 {
        self.belt.speed_tolerance_percent / 100.0
    }

    /// The belt's speed at its fastest.
    pub fn fastest_mm_s(&self) -> f64 {
        self.belt.speed_mm_s * (1.0 + self.speed_tolerance())
    }

    /// How far the belt moves at its fastest in `time`.
    pub fn fastest_mm_in(&self, time: Micros) -> f64 {
        self.fastest_mm_s() * time.as_seconds()
    }

    /// From one frame to the next.
    pub fn frame_interval_us(&self) -> Micros {
        Micros::from_seconds(1.0 / self.camera.frames_per_s)
    }

    /// How far the belt moves from one frame to the next at its stated speed.
    pub fn frame_step_mm(&self) -> f64 {
        self.belt.speed_mm_s / self.camera.frames_per_s
    }

    /// From capture to the moment at which a frame's verdicts take effect.
    pub fn latency_us(&self) -> Micros {
        Micros::from_ms(self.camera.latency_ms)
    }

    /// Length of the region of interest along the belt.
    pub fn region_length_mm(&self) -> f64 {
        self.scale().mm(self.region_px().width_px as f64)
    }

    /// From the picture's upstream edge to the region's downstream edge.
    pub fn view_mm(&self) -> f64 {
        let region = self.geometry();
        let ends = [0.0, region.window.width_px as f64].map(|x_px| region.behind_upstream_mm(x_px));
        ends[0].max(ends[1])
    }

    /// How far past the upstream edge a piece of belt is decided; see the top of this file.
    pub fn decision_mm(&self) -> f64 {
        self.view_mm() + self.fastest_mm_in(self.latency_us())
    }

    /// In how many frames a part of this length along the belt lies whole in view, on average: it is the whole number
    /// below or above. Zero when it is too long.
    pub fn whole_views(&self, part_length_mm: f64) -> f64 {
        ((self.region_length_mm() - part_length_mm) / self.frame_step_mm()).max(0.0)
    }
}

/// Outlets.
impl Settings {
    /// The outlet of that name, as an index into `outlets`.
    pub fn outlet_named(&self, name: &str) -> Option<usize> {
        self.outlets.iter().position(|outlet| outlet.name == name)
    }

    /// How long before the outlet must be open its signal leaves: message, the silence after it that ends it, valve.
    pub fn open_lead_us(&self, outlet: &Outlet) -> Micros {
        Micros::from_ms(outlet.open_delay_ms) + self.line.switch_us()
    }

    /// How long before the outlet must be shut its signal leaves.
    pub fn close_lead_us(&self, outlet: &Outlet) -> Micros {
        Micros::from_ms(outlet.close_delay_ms) + self.line.switch_us()
    }

    /// Whether the signal to open can leave after the point of decision, and how much there is to spare.
    pub fn reach(&self, outlet: &Outlet) -> Reach {
        let lead_mm = self.fastest_mm_in(self.open_lead_us(outlet));
        let needed_mm = self.decision_mm() + UNSEEN_STEP_MM + outlet.margin_mm + lead_mm;
        let slack_mm = outlet.distance_mm - needed_mm;
        Reach {
            needed_mm,
            slack_mm,
            slack_ms: slack_mm / self.fastest_mm_s() * 1e3,
        }
    }

    /// How long the coil is on for one part of this length along the belt: from the signal to open to the one to
    /// close. Not positive when closing takes so much longer that its signal would have to leave first.
    pub fn on_ms(&self, outlet: &Outlet, part_length_mm: f64) -> f64 {
        let window_mm = part_length_mm + 2.0 * outlet.margin_mm;
        window_mm / self.belt.speed_mm_s * 1e3 + outlet.open_delay_ms - outlet.close_delay_ms
    }
}

/// Times on the wire, in whole microseconds and never shorter than the standard asks.
impl Line {
    /// One character of 11 bits.
    pub fn character_us(&self) -> f64 {
        CHARACTER_BITS * 1e6 / f64::from(self.baud)
    }

    /// A message of this many bytes.
    pub fn wire_us(&self, bytes: usize) -> Micros {
        self.characters(bytes as f64)
    }

    /// The longest silence inside a frame.
    pub fn t1_5_us(&self) -> Micros {
        if self.baud > FIXED_SILENCE_ABOVE_BAUD {
            Micros(750)
        } else {
            self.characters(1.5)
        }
    }

    /// The shortest silence between two frames.
    pub fn t3_5_us(&self) -> Micros {
        if self.baud > FIXED_SILENCE_ABOVE_BAUD {
            Micros(1750)
        } else {
            self.characters(3.5)
        }
    }

    /// The message that switches one coil, and the silence that ends it.
    pub fn switch_us(&self) -> Micros {
        self.wire_us(SWITCH_BYTES) + self.t3_5_us()
    }

    /// The message that switches one coil and its answer, each with its silence: the line is busy for so long at least.
    pub fn exchange_us(&self) -> Micros {
        self.switch_us() + self.switch_us()
    }

    fn characters(&self, count: f64) -> Micros {
        Micros((count * self.character_us() - ROUNDING).ceil() as i64)
    }
}
