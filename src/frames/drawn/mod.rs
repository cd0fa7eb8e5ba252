//! A drawn belt: frames from a seed, and with them what is true of every part.
//!
//! ```text
//! nominal shape ──> body ──> part on the belt ──> frame
//! lines and arcs    bites    position, angle      blur, light, noise
//!                   burrs        └──> truth: figures in mm from the same geometry
//! ```
//!
//! Nothing here uses the code that judges pictures. The figures of a part are computed from the distance to the exact
//! outline and from the figures that were cut away or added, to 0.005 mm:
//!
//! * `missing_mm` is the largest inside distance of the nominal shape over what is missing of it,
//! * `excess_mm` is the largest distance to the nominal shape over what is too much,
//!
//! both at the part's true position and angle and at nominal size. A tip that has broken off is therefore as deep as
//! it was thick, not as it was long.
//!
//! A frame's time and belt reading are those of the middle of its exposure. Pixel x covers x to x + 1, so
//! `along_mm = belt_mm - x * mm_per_px` where parts travel to the right, and
//! `along_mm = belt_mm - (width_px - x) * mm_per_px` where they travel to the left; `across_mm = y * mm_per_px`.

use std::collections::VecDeque;
use std::convert::Infallible;

use crate::settings::Settings;
use crate::units::Micros;

use super::{Frame, FrameSource};

mod belt;
mod body;
mod dice;
mod flaw;
mod job;
mod look;
mod make;
mod mask;
mod nominal;
mod normal;
mod outline;
mod pattern;
mod plane;
mod render;
mod search;
mod truth;

#[cfg(test)]
mod tests;

pub use job::{Drawing, DrawnError, Scene};
pub use mask::{Mask, mask};
pub use truth::{Against, Kind, Truth};

use belt::{Part, Parts};
use job::Job;
use look::{Crumb, Look, STRETCH_MM, Spot};
use render::{Renderer, View};

/// What is true of the parts of a drawing, in the order in which they were laid on the belt. The same parts lie on the
/// [`DrawnBelt`] of the same drawing.
///
/// # Errors
/// The scene cannot be drawn with these settings.
pub fn truths(
    drawing: &Drawing,
    settings: &Settings,
) -> Result<impl Iterator<Item = Truth>, DrawnError> {
    Ok(Parts::new(Job::new(drawing, settings)?).map(|part| part.truth))
}

/// The frames of a drawing, from an empty belt until the last part has left the picture. It holds only what is in
/// view or about to be.
#[derive(Clone, Debug)]
pub struct DrawnBelt {
    job: Job,
    look: Look,
    view: View,
    renderer: Renderer,
    speed_mm_s: f64,
    frames_per_s: f64,
    next_frame: u64,
    parts: Parts,
    /// The next part that is not in view yet.
    waiting: Option<Part>,
    shown: VecDeque<(Part, Vec<Spot>)>,
    crumbs: VecDeque<(i64, Crumb)>,
    next_stretch: i64,
    /// Where the last part so far ends.
    ends_mm: f64,
}

/// No crumb reaches farther into the next stretch of belt.
const CRUMB_REACH_MM: f64 = 5.0;

impl DrawnBelt {
    /// Prepares the drawing.
    ///
    /// # Errors
    /// The scene cannot be drawn with these settings.
    pub fn new(drawing: &Drawing, settings: &Settings) -> Result<Self, DrawnError> {
        Self::with_look(drawing, settings, Look::of(drawing.scene))
    }

    fn with_look(drawing: &Drawing, settings: &Settings, look: Look) -> Result<Self, DrawnError> {
        let job = Job::new(drawing, settings)?;
        let (camera, belt) = (&settings.camera, &settings.belt);
        let view = View {
            width_px: camera.width_px,
            height_px: camera.height_px,
            mm_per_px: camera.mm_per_px,
            travel: belt.travel,
            blur_px: belt.speed_mm_s * camera.exposure_ms / 1e3 / camera.mm_per_px,
        };
        let mut parts = Parts::new(job.clone());
        Ok(Self {
            waiting: parts.next(),
            parts,
            renderer: Renderer::new(view, look, drawing.seed),
            speed_mm_s: belt.speed_mm_s,
            frames_per_s: camera.frames_per_s,
            next_frame: 0,
            shown: VecDeque::new(),
            crumbs: VecDeque::new(),
            next_stretch: stretch_of(-view.along_mm() - CRUMB_REACH_MM),
            ends_mm: 0.0,
            job,
            look,
            view,
        })
    }

    /// Lays everything on the belt that is in view at this reading, and forgets what has left.
    fn advance(&mut self, belt_mm: f64) {
        while self.next_stretch <= stretch_of(belt_mm + CRUMB_REACH_MM) {
            let end_mm = (self.next_stretch + 1) as f64 * STRETCH_MM;
            self.lay_parts(end_mm + 2.0 * CRUMB_REACH_MM);
            let near = self.shown.iter().map(|(part, _)| part);
            let crumbs = look::crumbs(&self.look, &self.job, self.next_stretch, near);
            let stretch = self.next_stretch;
            self.crumbs
                .extend(crumbs.into_iter().map(|crumb| (stretch, crumb)));
            self.next_stretch += 1;
        }
        let left_mm = belt_mm - self.view.along_mm() - CRUMB_REACH_MM;
        self.shown.retain(|(part, _)| part.ends_mm > left_mm);
        self.crumbs
            .retain(|&(stretch, _)| stretch >= stretch_of(left_mm));
    }

    fn lay_parts(&mut self, until_mm: f64) {
        while let Some(part) = self.waiting.take_if(|part| part.begins_mm < until_mm) {
            self.ends_mm = self.ends_mm.max(part.ends_mm);
            let spots = look::spots(&self.look, &self.job, &part.made);
            self.shown.push_back((part, spots));
            self.waiting = self.parts.next();
        }
    }
}

fn stretch_of(along_mm: f64) -> i64 {
    (along_mm / STRETCH_MM).floor() as i64
}

impl FrameSource for DrawnBelt {
    type Error = Infallible;

    fn next_into(&mut self, frame: &mut Frame) -> Result<bool, Infallible> {
        let since_us = Micros::from_seconds(self.next_frame as f64 / self.frames_per_s);
        let belt_mm = since_us.as_seconds() * self.speed_mm_s;
        self.advance(belt_mm);
        if self.waiting.is_none() && belt_mm - self.view.along_mm() > self.ends_mm {
            return Ok(false);
        }
        let parts = self
            .shown
            .iter()
            .map(|(part, spots)| (part, spots.as_slice()));
        let crumbs = self.crumbs.iter().map(|(_, crumb)| crumb);
        self.renderer
            .draw(belt_mm, parts, crumbs, self.next_frame, frame);
        frame.captured_us = self.job.drawing.first_us + since_us;
        frame.belt_mm = Some(belt_mm);
        self.next_frame += 1;
        Ok(true)
    }
}
