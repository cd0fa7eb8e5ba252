//! Pictures of single parts, from frames that are read once more.

use maud::Markup;

use super::facts::Case;
use super::overlay::{Flaw, overlay};
use super::picture::{Crop, Picture, image};
use crate::belt::Part;
use crate::frames::{Frame, Gray};
use crate::recording::{Recording, RecordingError};
use crate::replay::{Artist, Sight};
use crate::shape::Depth;

/// Belt shown around a part.
const AROUND_PX: usize = 12;

/// Reads frames again for the parts that are shown.
pub struct Album<'a> {
    recording: &'a Recording,
    artist: Artist<'a>,
    frame: Frame,
}

impl<'a> Album<'a> {
    /// Pictures from `recording`, drawn by `artist`.
    pub fn new(recording: &'a Recording, artist: Artist<'a>) -> Self {
        Self {
            recording,
            artist,
            frame: Frame::default(),
        }
    }

    /// The part and a little belt around it, with outline, bite and burr; `None` when its frame is not part of the
    /// recording.
    ///
    /// # Errors
    /// Those of reading the frame.
    pub fn part(&mut self, case: &Case<'_>) -> Result<Option<Markup>, RecordingError> {
        if !self.turn_to(case.part)? {
            return Ok(None);
        }
        let sight = self.artist.find(&self.frame, case.part);
        let crop = Crop::around(whole_box(&sight), AROUND_PX, sight.picture);
        Ok(Some(marked(case, &sight, crop)))
    }

    /// What each step made of the part and half its size of belt around it, with the step's name.
    ///
    /// # Errors
    /// Those of reading the frame.
    pub fn steps(
        &mut self,
        case: &Case<'_>,
    ) -> Result<Vec<(&'static str, Markup)>, RecordingError> {
        if !self.turn_to(case.part)? {
            return Ok(Vec::new());
        }
        let sight = self.artist.find(&self.frame, case.part);
        let [left, top, right, bottom] = whole_box(&sight);
        let around_px = (right - left).max(bottom - top) / 2;
        let crop = Crop::around([left, top, right, bottom], around_px, sight.picture);
        let steps = self.artist.steps(sight.picture);
        let step = |pixels| Gray {
            pixels,
            stride_px: sight.picture.width_px,
            ..sight.picture
        };
        let plain = |name: &'static str, picture: Gray<'_>| {
            let alt = format!("part {}: {name}", case.part.number);
            (name, image(&Picture::of_gray(crop.cut(picture)), &alt))
        };
        Ok(vec![
            plain("gray", sight.picture),
            plain("top-hat", step(&steps.top_hat)),
            plain("binary", step(&steps.binary)),
            plain("filled", step(&steps.filled)),
            ("judged", marked(case, &sight, crop)),
        ])
    }

    fn turn_to(&mut self, part: &Part) -> Result<bool, RecordingError> {
        let Some(k) = self.recording.frame_at(part.spoken_us) else {
            return Ok(false);
        };
        if self.frame.captured_us != part.spoken_us || self.frame.pixels.is_empty() {
            self.recording.read_into(k, &mut self.frame)?;
        }
        Ok(true)
    }
}

/// The part and the taught shape over it, or all of the picture.
fn whole_box(sight: &Sight<'_>) -> [usize; 4] {
    let all = [0, 0, sight.picture.width_px, sight.picture.height_px];
    let [mut left, mut top, mut right, mut bottom] = sight.part_px.unwrap_or(all);
    if let Some(drawing) = &sight.drawing {
        let start = |at: i32| at.max(0) as usize;
        left = left.min(start(drawing.origin.0));
        top = top.min(start(drawing.origin.1));
        right = right.max(start(drawing.origin.0) + drawing.taught.width_px());
        bottom = bottom.max(start(drawing.origin.1) + drawing.taught.height_px());
    }
    [left, top, right, bottom]
}

/// The photograph with its marks laid over it.
fn marked(case: &Case<'_>, sight: &Sight<'_>, crop: Crop) -> Markup {
    let photo = Picture::of_gray(crop.cut(sight.picture));
    let flaws = case.part.judged.zip(case.figures).map(|(judged, figures)| {
        let flaw = |name, depth: Depth, mm, limit_mm| Flaw {
            name,
            at: depth.at,
            mm,
            limit_mm,
        };
        [
            flaw(
                "bite",
                judged.missing,
                figures.missing_mm,
                figures.missing_limit_mm,
            ),
            flaw(
                "burr",
                judged.excess,
                figures.excess_mm,
                figures.excess_limit_mm,
            ),
        ]
    });
    let name = format!("Part {}: {}", case.part.number, case.verdict());
    overlay(
        &name,
        &photo,
        crop,
        sight.drawing.as_ref(),
        flaws.as_ref().map_or(&[], |flaws| flaws),
    )
}
