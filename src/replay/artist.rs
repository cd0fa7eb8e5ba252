//! Finds a part again in the frame that speaks for it, and draws it with its marks and figures.

use image::RgbImage;

use super::pictures::{Marks, Sketch, draw_part};
use crate::belt::Part;
use crate::frames::{Frame, Gray};
use crate::inspect::{common, limits};
use crate::settings::{Geometry, Settings};
use crate::shape::{Drawing, Judge, Judged, Silhouette};
use crate::stage::{Level, Plan, Region, Stage, Steps};

/// Stage and judge once more, for pictures.
pub struct Artist<'a> {
    settings: &'a Settings,
    geometry: Geometry,
    stage: Stage,
    judge: Judge,
}

impl<'a> Artist<'a> {
    /// The same steps that an inspector for these settings takes.
    pub fn new(settings: &'a Settings, taught: &[Silhouette], level: Level) -> Self {
        let shapes = settings.shapes.iter().map(|shape| limits(settings, shape));
        Self {
            settings,
            geometry: settings.geometry(),
            stage: Stage::new(&Plan::of(settings), level),
            judge: Judge::new(
                taught.iter().cloned().zip(shapes).collect(),
                common(settings),
            ),
        }
    }

    /// Looks for the part in `frame`, the one that was captured at `part.spoken_us`.
    pub fn find<'f>(&mut self, frame: &'f Frame, part: &Part) -> Sight<'f> {
        let picture = frame.gray().window(self.geometry.window);
        let place = Place::of(part, frame, self.settings);
        let scene = self.stage.run(picture);
        let region = place.nearest(&scene.regions, &self.geometry);
        let drawing = region.zip(part.judged).map(|(region, judged)| {
            let runs = &scene.runs[region.runs.clone()];
            self.judge.drawing(region, runs, &judged)
        });
        Sight {
            picture,
            part_px: region.map(box_px),
            drawing,
        }
    }

    /// The part as `frame` shows it, with its marks and figures; `frame` as for [`Artist::find`].
    pub fn draw(&mut self, frame: &Frame, part: &Part) -> RgbImage {
        let sight = self.find(frame, part);
        let words = words(part, self.settings);
        let marks = part.judged.zip(sight.drawing.as_ref());
        let all = [0, 0, sight.picture.width_px, sight.picture.height_px];
        draw_part(&Sketch {
            picture: sight.picture,
            part_px: sight.part_px.unwrap_or(all),
            marks: marks.map(|(judged, drawing)| Marks {
                drawing,
                missing: judged.missing,
                excess: judged.excess,
            }),
            scale: self.geometry.scale,
            words: &words,
        })
    }

    /// What each step makes of `picture`, a region of interest.
    pub fn steps(&mut self, picture: Gray<'_>) -> Steps {
        self.stage.steps(picture)
    }
}

/// A part found again.
pub struct Sight<'f> {
    /// The region of interest.
    pub picture: Gray<'f>,
    /// The part's box in it: left, top, right, bottom (the last two exclusive); `None` if nothing is found any more.
    pub part_px: Option<[usize; 4]>,
    /// Taught outline and flaws; `None` for a part that was never seen whole.
    pub drawing: Option<Drawing>,
}

fn box_px(region: &Region) -> [usize; 4] {
    [region.x_min, region.y_min, region.x_max, region.y_max].map(|px| px as usize)
}

/// Where a part lies, and where the belt was when a frame showed it.
struct Place<'a> {
    part: &'a Part,
    belt_mm: f64,
}

impl<'a> Place<'a> {
    fn of(part: &'a Part, frame: &Frame, settings: &Settings) -> Self {
        let at_speed = || frame.captured_us.as_seconds() * settings.belt.speed_mm_s;
        Self {
            part,
            belt_mm: frame.belt_mm.unwrap_or_else(at_speed),
        }
    }

    fn nearest<'r>(&self, regions: &'r [Region], geometry: &Geometry) -> Option<&'r Region> {
        let apart = |region: &Region| {
            let along_mm = self.belt_mm - geometry.behind_upstream_mm(region.centroid_x + 0.5);
            let across_mm = geometry.below_top_mm(region.centroid_y + 0.5);
            (along_mm - self.part.along_mm).hypot(across_mm - self.part.across_mm)
        };
        regions.iter().min_by(|a, b| apart(a).total_cmp(&apart(b)))
    }
}

fn words(part: &Part, settings: &Settings) -> Vec<String> {
    let mut words = vec![format!("part {}: {}", part.number, part.verdict)];
    if !part.reasons.is_empty() {
        words[0] = format!("{} ({})", words[0], part.reasons);
    }
    match part.judged {
        Some(judged) => words.extend(figures(&judged, settings)),
        None => words.push("never seen whole".to_owned()),
    }
    words
}

fn figures(judged: &Judged, settings: &Settings) -> [String; 2] {
    let (shape, scale) = (&settings.shapes[judged.shape], settings.scale());
    let line = |name: &str, px: f64, limit_mm: f64| {
        let mm = scale.mm(px);
        let left = limit_mm - mm;
        let how = if left >= 0.0 { "inside" } else { "beyond" };
        format!(
            "{name} {mm:5.2} mm, limit {limit_mm:.2}: {:.2} {how}",
            left.abs()
        )
    };
    [
        line("missing", judged.missing.px, shape.missing_mm),
        line("excess ", judged.excess.px, shape.excess_mm),
    ]
}
