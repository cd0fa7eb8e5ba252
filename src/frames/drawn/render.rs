//! From a belt with parts to the gray values of a camera.
//!
//! Edges are drawn from the signed distance to the outline, so that they lie where the geometry says to a small
//! fraction of a pixel: the share of a pixel that a part covers is the share of a normal distribution as wide as the
//! pixel and the lens' blur together, averaged over the way the belt moves during the exposure. The level half way
//! between belt and part lies on the outline.

use crate::frames::Frame;
use crate::settings::Travel;

use super::belt::{Part, x_mm};
use super::dice::{Dice, Stream};
use super::look::{Crumb, Look, Spot};
use super::normal::{QUANTILES, quantiles, share_below};
use super::pattern::{Pattern, mix};
use super::plane::Point;

/// Standard deviation of the lens' blur.
const LENS_PX: f64 = 0.5;
/// Beyond this many standard deviations an edge shows no more.
const REACH: f64 = 4.0;
/// The gray value of black, and how many gray values white lies above it in the middle of the picture.
const BLACK: f32 = 1.0;
const WHITE: f32 = 268.0;
/// Gray values squared of shot noise per gray value.
const SHOT: f32 = 0.0085;
/// Threads of the belt's weave.
const WEAVE_MM: f64 = 2.3;

/// The view of the camera.
#[derive(Clone, Copy, Debug)]
pub(super) struct View {
    pub width_px: u32,
    pub height_px: u32,
    pub mm_per_px: f64,
    pub travel: Travel,
    /// How far the belt moves during the exposure.
    pub blur_px: f64,
}

impl View {
    /// How far the view reaches along the belt.
    pub(super) fn along_mm(&self) -> f64 {
        f64::from(self.width_px) * self.mm_per_px
    }

    /// The belt coordinate of the picture's left edge; it grows with x.
    pub(super) fn left_mm(&self, belt_mm: f64) -> f64 {
        match self.travel {
            Travel::Right => x_mm(self.travel, belt_mm),
            Travel::Left => x_mm(self.travel, belt_mm) - self.along_mm(),
        }
    }
}

/// Draws frames, with its own buffers.
#[derive(Clone, Debug)]
pub(super) struct Renderer {
    view: View,
    look: Look,
    seed: u64,
    clouds: Pattern,
    grain: Pattern,
    /// Per pixel: the share of the light in the middle.
    shade: Vec<f32>,
    /// Per column: the belt's weave.
    threads: Vec<f32>,
    /// Per pixel: reflectance of what it sees.
    seen: Vec<f32>,
    quantiles: Vec<f32>,
    /// Per gray value: standard deviation of the noise.
    noise: Vec<f32>,
    /// Where the belt is during the exposure, in millimetres about its middle.
    shifts_mm: Vec<f64>,
    /// Fewer of them for what has no sharp edges.
    coarse_mm: Vec<f64>,
    edge_mm: f64,
}

impl Renderer {
    pub(super) fn new(view: View, look: Look, seed: u64) -> Self {
        let pixels = view.width_px as usize * view.height_px as usize;
        let shot = |gray: u32| (look.noise * look.noise * (1.0 + SHOT * gray as f32)).sqrt();
        let shifts = |count: f64| {
            let step_px = view.blur_px / count;
            let at = |index: u32| (f64::from(index) + 0.5) * step_px - view.blur_px / 2.0;
            (0..count as u32)
                .map(|index| at(index) * view.mm_per_px)
                .collect()
        };
        Self {
            clouds: Pattern::new(seed, 0, 0.8, 1.25),
            grain: Pattern::new(seed, 1, 0.5, 1.0),
            shade: shade(&view, look.vignetting),
            threads: vec![0.0; view.width_px as usize],
            seen: vec![0.0; pixels],
            quantiles: quantiles(),
            noise: (0..256).map(shot).collect(),
            shifts_mm: shifts((view.blur_px * 2.0).ceil() + 1.0),
            coarse_mm: shifts((view.blur_px / 2.0).ceil().max(1.0)),
            // The pixel's own width counts like the lens' blur: variance 1/12.
            edge_mm: (LENS_PX * LENS_PX + 1.0 / 12.0).sqrt() * view.mm_per_px,
            view,
            look,
            seed,
        }
    }

    /// Draws the belt at the reading `belt_mm` with what lies on it.
    pub(super) fn draw<'a>(
        &mut self,
        belt_mm: f64,
        parts: impl Iterator<Item = (&'a Part, &'a [Spot])>,
        crumbs: impl Iterator<Item = &'a Crumb>,
        number: u64,
        frame: &mut Frame,
    ) {
        let left_mm = self.view.left_mm(belt_mm);
        self.belt(left_mm);
        for crumb in crumbs {
            self.crumb(crumb, left_mm);
        }
        for (part, spots) in parts {
            self.part(part, left_mm);
            for spot in spots {
                self.spot(part, spot, left_mm);
            }
        }
        self.expose(number, frame);
    }

    fn belt(&mut self, left_mm: f64) {
        let (look, mm_per_px) = (self.look, self.view.mm_per_px);
        let at_mm = |px: usize| (px as f64 + 0.5) * mm_per_px;
        let wave =
            |mm: f64| look.belt_weave / 2.0 * (mm / WEAVE_MM * std::f64::consts::TAU).cos() as f32;
        for (x, thread) in self.threads.iter_mut().enumerate() {
            *thread = average(&self.coarse_mm, |shift_mm| {
                wave(left_mm + at_mm(x) - shift_mm)
            });
        }
        for (y, row) in self.seen.chunks_exact_mut(self.threads.len()).enumerate() {
            let y_mm = at_mm(y);
            let stripe = look.belt * (1.0 + look.belt_stripes * self.clouds.at(3.0, y_mm * 1.7));
            let across = 1.0 + wave(y_mm);
            for (x, (seen, thread)) in row.iter_mut().zip(&self.threads).enumerate() {
                let clouds = average(&self.coarse_mm, |shift_mm| {
                    let x_mm = left_mm + at_mm(x) - shift_mm;
                    self.clouds.at(x_mm, y_mm) + self.clouds.at(y_mm * 0.31, x_mm * 0.31)
                });
                *seen = stripe * (across + thread + look.belt_clouds * clouds);
            }
        }
    }

    fn crumb(&mut self, crumb: &Crumb, left_mm: f64) {
        self.within(crumb.centre, crumb.radius_mm, left_mm, |this, seen, at| {
            let signed_mm = |shift| crumb.form.signed_mm(at - shift);
            let share = this.covered(signed_mm, signed_mm(Point::ORIGIN));
            *seen = mix(*seen, crumb.level, share);
            0.0
        });
    }

    fn part(&mut self, part: &Part, left_mm: f64) {
        let reach_mm = part.made.reach.farthest_mm();
        let look = self.look;
        // Every part has its own piece of the grain.
        let offset_mm = part.truth.part as f64 * 37.7;
        self.within(part.centre, reach_mm, left_mm, |this, seen, at| {
            let away = at - part.centre;
            let depth_mm = part.made.signed_mm(away);
            let free_mm = depth_mm - this.reach_mm();
            if free_mm > 0.0 {
                return free_mm;
            }
            let share = this.covered(|shift| part.made.signed_mm(away - shift), depth_mm);
            let own = part.made.own(away);
            let grain = this.grain.at(own.x_mm + offset_mm, own.y_mm);
            let level = look.part * (1.0 + look.grain * grain) * shading(&look, depth_mm);
            *seen = mix(*seen, level, share);
            0.0
        });
    }

    fn spot(&mut self, part: &Part, spot: &Spot, left_mm: f64) {
        let centre = part.centre + part.made.seen(spot.at);
        self.within(centre, spot.long_mm * 1.2, left_mm, |this, seen, at| {
            let own = part.made.own(at - part.centre);
            let share = average(&this.coarse_mm, |shift_mm| {
                let away = own - part.made.own(Point::new(shift_mm, 0.0)) - spot.at;
                let along = away.dot(spot.along) / spot.long_mm;
                let across = away.cross(spot.along) / spot.wide_mm;
                // From the middle of the spot to a little beyond its edge.
                let falling = (1.15 - along.hypot(across)) / 0.4;
                falling.clamp(0.0, 1.0) as f32
            });
            *seen = mix(*seen, spot.level, share * spot.cover);
            0.0
        });
    }

    /// How far from an outline its edge still shows.
    fn reach_mm(&self) -> f64 {
        REACH * self.edge_mm + self.view.blur_px / 2.0 * self.view.mm_per_px
    }

    /// The share of a pixel that is covered; `signed_mm` is the distance with the belt shifted, `depth_mm` without.
    fn covered(&self, signed_mm: impl Fn(Point) -> f64, depth_mm: f64) -> f32 {
        if depth_mm < -self.reach_mm() {
            return 1.0;
        }
        average(&self.shifts_mm, |shift_mm| {
            let shift = Point::new(shift_mm, 0.0);
            share_below(-signed_mm(shift) / self.edge_mm) as f32
        })
    }

    /// Calls `paint` for the pixels within `radius_mm` of `centre`, the edge's reach added; it answers how far on
    /// there is nothing to paint for sure.
    fn within(
        &mut self,
        centre: Point,
        radius_mm: f64,
        left_mm: f64,
        paint: impl Fn(&Self, &mut f32, Point) -> f64,
    ) {
        let mm_per_px = self.view.mm_per_px;
        let reach_mm = radius_mm + self.reach_mm();
        let span = |middle_mm: f64, count: u32| {
            let first = ((middle_mm - reach_mm) / mm_per_px - 0.5).ceil().max(0.0) as usize;
            let end = ((middle_mm + reach_mm) / mm_per_px + 0.5).floor().max(0.0) as usize;
            first..end.min(count as usize)
        };
        let columns = span(centre.x_mm - left_mm, self.view.width_px);
        let rows = span(centre.y_mm, self.view.height_px);
        let mut seen = std::mem::take(&mut self.seen);
        for y in rows {
            let row = &mut seen[y * self.view.width_px as usize..][..self.view.width_px as usize];
            let y_mm = (y as f64 + 0.5) * mm_per_px;
            let mut x = columns.start;
            while x < columns.end {
                let at = Point::new(left_mm + (x as f64 + 0.5) * mm_per_px, y_mm);
                let free_mm = paint(self, &mut row[x], at);
                x += 1 + (free_mm / mm_per_px) as usize;
            }
        }
        self.seen = seen;
    }

    /// Light, noise and the sensor.
    fn expose(&self, number: u64, frame: &mut Frame) {
        let mut dice = Dice::new(self.seed, Stream::Frame(number));
        frame.width_px = self.view.width_px;
        frame.height_px = self.view.height_px;
        frame.pixels.resize(self.seen.len(), 0);
        const PER_DRAW: usize = 5;
        let lit = self.seen.iter().zip(&self.shade);
        let mut bits = 0;
        for (index, (gray, (seen, shade))) in frame.pixels.iter_mut().zip(lit).enumerate() {
            if index % PER_DRAW == 0 {
                bits = dice.bits();
            }
            let value = BLACK + WHITE * seen * shade;
            let noise = self.noise[value.clamp(0.0, 255.0) as usize];
            let chance = self.quantiles[bits as usize % QUANTILES];
            bits >>= QUANTILES.trailing_zeros();
            *gray = (value + noise * chance).round().clamp(0.0, 255.0) as u8;
        }
    }
}

/// The mean over the exposure.
fn average(shifts_mm: &[f64], value: impl Fn(f64) -> f32) -> f32 {
    let sum: f32 = shifts_mm.iter().map(|&shift_mm| value(shift_mm)).sum();
    sum / shifts_mm.len() as f32
}

/// A rim that is a little darker, and a rounded edge that catches some light.
fn shading(look: &Look, depth_mm: f64) -> f32 {
    let bump = |middle_mm: f64, width_mm: f64| {
        let away = (depth_mm + middle_mm) / width_mm;
        (1.0 / (1.0 + away * away)) as f32
    };
    1.0 - look.rim * bump(0.0, 1.5) + look.bevel * bump(2.0, 0.6)
}

/// Light falls off with the fourth power of the cosine of the angle to the lens' axis (natural vignetting, the
/// cosine-fourth law of optics textbooks), the axis a little beside the middle of the picture.
fn shade(view: &View, vignetting: f64) -> Vec<f32> {
    let (width, height) = (f64::from(view.width_px), f64::from(view.height_px));
    let corner = (width * width + height * height) / 4.0;
    let (axis_x, axis_y) = (0.49 * width, 0.51 * height);
    (0..view.height_px)
        .flat_map(|y| (0..view.width_px).map(move |x| (f64::from(x) + 0.5, f64::from(y) + 0.5)))
        .map(|(x, y)| {
            let tan2 =
                (vignetting.sqrt() - 1.0) * ((x - axis_x).powi(2) + (y - axis_y).powi(2)) / corner;
            (1.0 / (1.0 + tan2).powi(2)) as f32
        })
        .collect()
}
