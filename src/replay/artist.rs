//! Finds a part again in the frame that speaks for it, and draws it with its marks and figures.

use image::RgbImage;

use super::pictures::{Marks, Sketch, draw_part};
use crate::belt::{Part, View};
use crate::frames::{Frame, Gray};
use crate::inspect::judge;
use crate::settings::{Geometry, Settings};
use crate::shape::{Drawing, Judge, Judged, Silhouette, Verdict};
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
        Self {
            settings,
            geometry: settings.geometry(),
            stage: Stage::new(&Plan::of(settings), level),
            judge: judge(settings, taught),
        }
    }

    /// A part as `frame` shows it; `frame` is the one that was captured at `part.spoken_us`.
    pub fn draw_part(&mut self, frame: &Frame, part: &Part) -> RgbImage {
        let mut title = format!("part {}: {}", part.number, part.verdict);
        if !part.reasons.is_empty() {
            title = format!("{title} ({})", part.reasons);
        }
        self.draw(frame, (part.along_mm, part.across_mm), part.judged, title)
    }

    /// One view of a part in `frame`.
    pub fn draw_view(&mut self, frame: &Frame, view: &View) -> RgbImage {
        let title = match view.judged {
            Some(judged) if judged.reasons.is_empty() => Verdict::Keep.to_string(),
            Some(judged) => format!("{} ({})", Verdict::Reject, judged.reasons),
            None => "not gauged".to_owned(),
        };
        self.draw(frame, (view.along_mm, view.across_mm), view.judged, title)
    }

    /// Looks for a part in `frame`, the one that was captured at `part.spoken_us`.
    pub fn find<'f>(&mut self, frame: &'f Frame, part: &Part) -> Sight<'f> {
        self.find_at(frame, (part.along_mm, part.across_mm), part.judged)
    }

    /// What each step makes of `picture`, a region of interest.
    pub fn steps(&mut self, picture: Gray<'_>) -> Steps {
        self.stage.steps(picture)
    }

    /// The region nearest to `at` (along and across the belt) with what was judged of it.
    fn find_at<'f>(
        &mut self,
        frame: &'f Frame,
        at: (f64, f64),
        judged: Option<Judged>,
    ) -> Sight<'f> {
        let geometry = self.geometry;
        let at_speed_mm = frame.captured_us.as_seconds() * self.settings.belt.speed_mm_s;
        let belt_mm = frame.belt_mm.unwrap_or(at_speed_mm);
        let picture = frame.gray().window(geometry.window);
        let scene = self.stage.run(picture);
        let apart = |region: &Region| {
            let along_mm = belt_mm - geometry.behind_upstream_mm(region.centroid_x + 0.5);
            let across_mm = geometry.below_top_mm(region.centroid_y + 0.5);
            (along_mm - at.0).hypot(across_mm - at.1)
        };
        let nearest = scene
            .regions
            .iter()
            .min_by(|a, b| apart(a).total_cmp(&apart(b)));
        let drawing = nearest.zip(judged).map(|(region, judged)| {
            let runs = &scene.runs[region.runs.clone()];
            self.judge.drawing(region, runs, &judged)
        });
        let box_px = |region: &Region| {
            [region.x_min, region.y_min, region.x_max, region.y_max].map(|px| px as usize)
        };
        Sight {
            picture,
            part_px: nearest.map(box_px),
            drawing,
        }
    }

    fn draw(
        &mut self,
        frame: &Frame,
        at: (f64, f64),
        judged: Option<Judged>,
        title: String,
    ) -> RgbImage {
        let sight = self.find_at(frame, at, judged);
        let marks = judged.zip(sight.drawing.as_ref());
        let all = [0, 0, sight.picture.width_px, sight.picture.height_px];
        draw_part(&Sketch {
            picture: sight.picture,
            // Nothing is found any more: all of the picture, with the words.
            part_px: sight.part_px.unwrap_or(all),
            marks: marks.map(|(judged, drawing)| Marks {
                drawing,
                missing: judged.missing,
                excess: judged.excess,
            }),
            scale: self.geometry.scale,
            words: &words(title, judged, self.settings),
        })
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

fn words(title: String, judged: Option<Judged>, settings: &Settings) -> Vec<String> {
    let mut words = vec![title];
    match judged {
        Some(judged) => words.extend(figures(&judged, settings)),
        None => words.push("not seen whole: the picture's edge cuts it".to_owned()),
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
