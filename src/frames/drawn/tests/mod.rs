//! The drawn belt against plain definitions.

mod figures;
mod layout;
mod pictures;
mod shapes;

use crate::settings::Settings;
use crate::units::Micros;

use super::body::{Body, Form};
use super::plane::Point;
use super::{Drawing, Scene};

/// Settings like those of the demo scenes, with a picture of this many pixels on 160 mm by 120 mm.
fn settings(scene: Scene, width_px: u32) -> Settings {
    let (parts, face_down, missing_mm) = match scene {
        Scene::OatStars => ("bright", "keep", 2.0),
        Scene::Gaskets => ("dark", "reject", 1.5),
    };
    let text = format!(
        r#"
        [camera]
        width_px = {width_px}
        height_px = {height_px}
        mm_per_px = {mm_per_px:?}
        frames_per_s = 8.0
        exposure_ms = 0.4
        latency_ms = 100.0
        [belt]
        speed_mm_s = 400.0
        speed_tolerance_percent = 1.0
        travel = "right"
        part_pitch_mm = 50.0
        [picture]
        parts = "{parts}"
        element_mm = 45.0
        threshold = {{ method = "otsu", floor = 30 }}
        fill_below_mm2 = 25.0
        speck_below_mm2 = 40.0
        [judge]
        flaw_below_mm2 = 1.0
        fit_at_least = 0.6
        [[shape]]
        name = "one"
        file = "one.toml"
        missing_mm = {missing_mm:?}
        excess_mm = 1.5
        face_down = "{face_down}"
        [[outlet]]
        name = "nozzle"
        coil = 0
        distance_mm = 330.0
        margin_mm = 6.0
        open_delay_ms = 15.0
        close_delay_ms = 20.0
        max_on_ms = 1000.0
        [reject]
        outlet = "nozzle"
        [line]
        unit = 1
        baud = 38400
        answer_within_ms = 50.0
        "#,
        height_px = width_px / 4 * 3,
        mm_per_px = 160.0 / f64::from(width_px),
    );
    toml::from_str(&text).unwrap()
}

fn drawing(scene: Scene, parts: u64, seed: u64) -> Drawing {
    Drawing {
        scene,
        parts,
        seed,
        first_us: Micros(1_000_000),
    }
}

/// Whether a point lies in the material of a polygon (chords of an outline), by counting crossings to the right.
fn inside_polygon(chords: &[(Point, Point)], at: Point) -> bool {
    let crossings = chords.iter().filter(|(a, b)| {
        (a.y_mm > at.y_mm) != (b.y_mm > at.y_mm) && {
            let share = (at.y_mm - a.y_mm) / (b.y_mm - a.y_mm);
            a.x_mm + share * (b.x_mm - a.x_mm) > at.x_mm
        }
    });
    crossings.count() % 2 == 1
}

/// Whether a point lies in a figure, from the figure's definition and without signed distances.
fn inside_form(form: &Form, at: Point) -> bool {
    let near_ray = |from: Point, along: Point, longest_mm: f64, radius_mm: f64| {
        let past_mm = (at - from).dot(along).clamp(0.0, longest_mm);
        (at - (from + along * past_mm)).length() < radius_mm
    };
    match *form {
        Form::Disc { centre, radius_mm } => (at - centre).length() < radius_mm,
        Form::Stroke {
            from,
            to,
            radius_mm,
        } => {
            let length_mm = (to - from).length();
            near_ray(from, (to - from) * (1.0 / length_mm), length_mm, radius_mm)
        }
        Form::Beyond { at: edge, outward } => (at - edge).dot(outward) > 0.0,
        Form::Wedge {
            apex,
            axis,
            half_rad,
            radius_mm,
        } => {
            let away = at - apex;
            let angle_rad = axis.cross(away).atan2(axis.dot(away));
            let edge = |side: f64| axis.turned(Point::towards(side * half_rad));
            angle_rad.abs() < half_rad
                || near_ray(apex, edge(1.0), 1e3, radius_mm)
                || near_ray(apex, edge(-1.0), 1e3, radius_mm)
        }
    }
}

/// The chords of the part's own outline before cuts and burrs.
fn scaled_chords(body: &Body) -> Vec<(Point, Point)> {
    let chords = body.nominal.outline.chords(0.05);
    chords
        .map(|(a, b)| (a * body.scale, b * body.scale))
        .collect()
}

/// A raster of truth values.
struct Raster {
    side_px: usize,
    mm_per_px: f64,
    set: Vec<bool>,
}

impl Raster {
    /// Pixels whose centre lies within `chords`, the origin in the middle.
    fn of(chords: &[(Point, Point)], reach_mm: f64, mm_per_px: f64) -> Self {
        let side_px = 2 * (reach_mm / mm_per_px).ceil() as usize;
        let mut raster = Self {
            side_px,
            mm_per_px,
            set: vec![false; side_px * side_px],
        };
        for y in 0..side_px {
            let y_mm = raster.centre(0, y).y_mm;
            let near: Vec<_> = chords
                .iter()
                .copied()
                .filter(|(a, b)| (a.y_mm > y_mm) != (b.y_mm > y_mm))
                .collect();
            for x in 0..side_px {
                raster.set[y * side_px + x] = inside_polygon(&near, raster.centre(x, y));
            }
        }
        raster
    }

    /// A drawn part.
    fn of_body(body: &Body, reach_mm: f64, mm_per_px: f64) -> Self {
        let mut raster = Self::of(&scaled_chords(body), reach_mm, mm_per_px);
        for at in 0..raster.set.len() {
            let point = raster.centre(at % raster.side_px, at / raster.side_px);
            let within = |form: &Form| inside_form(form, point);
            let kept = raster.set[at] && !body.cuts.iter().any(within);
            raster.set[at] = kept || body.burrs.iter().any(within);
        }
        raster
    }

    fn centre(&self, x: usize, y: usize) -> Point {
        let middle = self.side_px as f64 / 2.0;
        Point::new(x as f64 + 0.5 - middle, y as f64 + 0.5 - middle) * self.mm_per_px
    }

    /// For every pixel of value `of`, the distance to the nearest pixel of the other value, less half a pixel.
    fn distances_mm(&self, of: bool) -> Vec<f64> {
        let side = self.side_px as u32;
        let pixels = self
            .set
            .iter()
            .map(|&set| if set == of { 0 } else { 255 })
            .collect();
        let picture = image::GrayImage::from_raw(side, side, pixels).unwrap();
        let squares = imageproc::distance_transform::euclidean_squared_distance_transform(&picture);
        squares
            .iter()
            .map(|square| (square.sqrt() - 0.5).max(0.0) * self.mm_per_px)
            .collect()
    }

    /// Number of 8-connected pieces.
    fn pieces(&self) -> u32 {
        use imageproc::region_labelling::{Connectivity, connected_components};
        let side = self.side_px as u32;
        let pixels = self.set.iter().map(|&set| u8::from(set)).collect();
        let picture = image::GrayImage::from_raw(side, side, pixels).unwrap();
        let labels = connected_components(&picture, Connectivity::Eight, image::Luma([0]));
        labels.iter().copied().max().unwrap()
    }
}
