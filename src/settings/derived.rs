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
//! decision_mm = view_mm + speed_mm_s * (1 + tolerance) * latency_s + DECISION_STEP_MM
//! ```
//!
//! everything that can be known about the piece and the step of belt behind it is known, and it is decided. An outlet can be reached when the signal
//! to open it need not leave before that:
//!
//! ```text
//! distance_mm - margin_mm - speed_mm_s * (1 + tolerance) * open_lead_s >= decision_mm
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

/// Belt that no frame shows is decided in steps of this length, so that a step's trailing end is past every frame too.
pub const DECISION_STEP_MM: f64 = 1.0;

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
        self.view_mm() + self.fastest_mm_in(self.latency_us()) + DECISION_STEP_MM
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
        let needed_mm = self.decision_mm() + outlet.margin_mm + lead_mm;
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

#[cfg(test)]
mod tests {
    use std::path::Path;

    use proptest::prelude::*;

    use super::*;
    use crate::settings::{ElementKind, RegionMm, parse};

    fn stars() -> Settings {
        let text = include_str!("../../config/oat-stars.toml");
        let loaded = parse(Path::new("oat-stars.toml"), text);
        loaded.unwrap_or_else(|error| panic!("{error}")).settings
    }

    /// MODBUS over Serial Line V1.02: 11-bit characters (2.5.1), t1.5 and t3.5 fixed above 19200 baud (2.5.1.1).
    /// Milliseconds: character, t1.5, t3.5, 8 bytes, 8 bytes with t3.5.
    #[test]
    fn serial_line_times_are_the_standards() {
        let table = [
            (
                1_200,
                [9.166_667, 13.75, 32.083_333, 73.333_333, 105.416_667],
            ),
            (
                2_400,
                [4.583_333, 6.875, 16.041_667, 36.666_667, 52.708_333],
            ),
            (
                4_800,
                [2.291_667, 3.437_5, 8.020_833, 18.333_333, 26.354_167],
            ),
            (
                9_600,
                [1.145_833, 1.718_75, 4.010_417, 9.166_667, 13.177_083],
            ),
            (
                19_200,
                [0.572_917, 0.859_375, 2.005_208, 4.583_333, 6.588_542],
            ),
            (38_400, [0.286_458, 0.75, 1.75, 2.291_667, 4.041_667]),
            (57_600, [0.190_972, 0.75, 1.75, 1.527_778, 3.277_778]),
            (115_200, [0.095_486, 0.75, 1.75, 0.763_889, 2.513_889]),
        ];
        for (baud, [character, t1_5, t3_5, message, switch]) in table {
            let line = Line {
                baud,
                ..stars().line
            };
            assert!(
                (line.character_us() / 1e3 - character).abs() < 1e-6,
                "{baud}"
            );
            let times = [
                (line.t1_5_us(), t1_5),
                (line.t3_5_us(), t3_5),
                (line.wire_us(8), message),
            ];
            // Whole microseconds, rounded up: the standard's times are least times.
            for (time, expected_ms) in times {
                let above_ms = time.as_ms() - expected_ms;
                assert!(
                    (-1e-6..1e-3).contains(&above_ms),
                    "{baud}: {time} for {expected_ms} ms"
                );
            }
            assert!((line.switch_us().as_ms() - switch).abs() < 2e-3, "{baud}");
        }
    }

    /// The element is the odd number of pixels nearest to it, found by trying them all.
    #[test]
    fn element_is_the_nearest_odd_number_of_pixels() {
        let mut settings = stars();
        for tenth_px in 10_u32..2_000 {
            let px = f64::from(tenth_px) / 10.0;
            settings.picture.element_mm = px * settings.camera.mm_per_px;
            let nearest = (1..2_100_usize).step_by(2).min_by(|a, b| {
                let off = |odd: usize| (odd as f64 - px).abs();
                off(*a).total_cmp(&off(*b)).then(b.cmp(a))
            });
            if tenth_px % 20 != 0 {
                assert_eq!(Some(settings.element_px()), nearest, "{px}");
            }
        }
        settings.picture.element_mm = 45.0;
        settings.picture.element = ElementKind::Octagon;
        assert_eq!(settings.element_px(), 181, "half way between 179 and 181");
    }

    /// 0.25 mm/px, so 16 px to the mm2; "not larger than" and "smaller than" meet whole pixels on their own sides.
    #[test]
    fn areas_keep_their_meaning_in_pixels() {
        let mut settings = stars();
        settings.picture.fill_below_mm2 = 2.0;
        settings.picture.speck_below_mm2 = 2.0;
        assert_eq!(
            (settings.fill_below_px(), settings.speck_below_px()),
            (32, 32)
        );
        settings.picture.fill_below_mm2 = 2.03;
        settings.picture.speck_below_mm2 = 2.03;
        assert_eq!(
            (settings.fill_below_px(), settings.speck_below_px()),
            (32, 33)
        );
        settings.picture.speck_below_mm2 = 0.0;
        assert_eq!(settings.speck_below_px(), 0);
    }

    #[test]
    fn region_is_rounded_to_pixels_and_stays_in_the_picture() {
        let mut settings = stars();
        settings.picture.region_mm = Some(RegionMm {
            left: 10.1,
            top: 5.0,
            width: 500.0,
            height: 20.1,
        });
        let window = Window {
            left_px: 40,
            top_px: 20,
            width_px: 600,
            height_px: 80,
        };
        assert_eq!(settings.region_px(), window);
        assert_eq!(settings.view_mm(), 160.0);
        settings.belt.travel = Travel::Left;
        assert_eq!(settings.view_mm(), 150.0);
        assert_eq!(settings.region_length_mm(), 150.0);
    }

    /// Elementary: 400 mm/s for 0.4 ms, 8 frames/s, 100 ms at 408 mm/s; lead 15 ms + 2.292 ms + 1.75 ms.
    #[test]
    fn the_example_amounts_to_what_it_says() {
        let settings = stars();
        let near = |left: f64, right: f64| assert!((left - right).abs() < 1e-9, "{left} {right}");
        near(settings.blur_mm(), 0.16);
        near(settings.frame_step_mm(), 50.0);
        near(settings.decision_mm(), 160.0 + 40.8 + 1.0);
        near(settings.whole_views(38.0), 2.44);
        let nozzle = &settings.outlets[0];
        assert_eq!(settings.open_lead_us(nozzle), Micros(19_042));
        assert_eq!(settings.close_lead_us(nozzle), Micros(24_042));
        let reach = settings.reach(nozzle);
        near(reach.needed_mm, 201.8 + 6.0 + 408.0 * 0.019_042);
        near(reach.slack_mm, 330.0 - reach.needed_mm);
        near(reach.slack_ms, reach.slack_mm / 0.408);
        // (38 + 12) mm at 400 mm/s, and 5 ms less because closing takes longer.
        near(settings.on_ms(nozzle, 38.0), 125.0 - 5.0);
        assert_eq!(settings.outlet_named("air-nozzle"), Some(0));
        assert_eq!(settings.outlet_named("flap"), None);
    }

    #[test]
    fn columns_are_measured_from_the_upstream_edge_and_rows_from_the_top() {
        let mut settings = stars();
        settings.picture.region_mm = Some(RegionMm {
            left: 10.0,
            top: 5.0,
            width: 100.0,
            height: 20.0,
        });
        assert_eq!(settings.geometry().behind_upstream_mm(0.0), 10.0);
        assert_eq!(settings.geometry().behind_upstream_mm(400.0), 110.0);
        assert_eq!(settings.geometry().below_top_mm(2.0), 5.5);
        settings.belt.travel = Travel::Left;
        assert_eq!(settings.geometry().behind_upstream_mm(0.0), 150.0);
        assert_eq!(settings.geometry().behind_upstream_mm(400.0), 50.0);
    }

    proptest! {
        /// The plain meaning of the point of decision: on a belt at its fastest no frame that shows a piece takes
        /// effect after it, and one that is captured as the piece leaves takes effect just one step before.
        #[test]
        fn nothing_that_sees_a_piece_takes_effect_after_its_decision(
            speed in 10.0..2_000.0_f64,
            tolerance in 0.0..20.0_f64,
            frames in 1.0..200.0_f64,
            latency in 1.0..500.0_f64,
            left in 0.0..60.0_f64,
            width in 20.0..90.0_f64,
            leftwards: bool,
            piece in 0.0..500.0_f64,
        ) {
            let mut settings = stars();
            settings.belt.speed_mm_s = speed;
            settings.belt.speed_tolerance_percent = tolerance;
            settings.camera.frames_per_s = frames;
            settings.camera.latency_ms = latency;
            settings.belt.travel = if leftwards { Travel::Left } else { Travel::Right };
            settings.picture.region_mm = Some(RegionMm { left, top: 0.0, width, height: 100.0 });
            let geometry = settings.geometry();
            let edges_mm = [0.0, geometry.window.width_px as f64].map(|x_px| geometry.behind_upstream_mm(x_px));
            let fastest = settings.fastest_mm_s();
            let effect_mm = |captured_s: f64| (captured_s + settings.latency_us().as_seconds()) * fastest - piece;
            let sees = |captured_s: f64| {
                let [one, other] = edges_mm.map(|behind_mm| captured_s * fastest - behind_mm);
                (one.min(other)..=one.max(other)).contains(&piece)
            };
            for frame in 0..((piece + 200.0) / fastest * frames).ceil() as u32 {
                let captured_s = f64::from(frame) / frames;
                if sees(captured_s) {
                    prop_assert!(effect_mm(captured_s) + DECISION_STEP_MM <= settings.decision_mm() + 1e-6);
                }
            }
            let leaving_s = (piece + settings.view_mm()) / fastest;
            prop_assert!(sees(leaving_s - 1e-9) && !sees(leaving_s + 1e-6));
            prop_assert!((effect_mm(leaving_s) + DECISION_STEP_MM - settings.decision_mm()).abs() < 1e-6);
        }
    }
}
