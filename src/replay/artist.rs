//! Finds a part again in the frame that speaks for it, and draws it with its marks and figures.

use image::{GrayImage, Luma, RgbImage};

use super::pictures::{Marks, Sketch, draw_part};
use crate::belt::{Part, View};
use crate::frames::{Frame, Gray};
use crate::inspect::judge;
use crate::settings::{Geometry, Settings};
use crate::shape::{Judge, Judged, Silhouette, Verdict};
use crate::stage::{Level, Plan, Region, Stage};

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

    /// The region nearest to `at` (along and across the belt) with what was judged of it.
    fn draw(
        &mut self,
        frame: &Frame,
        at: (f64, f64),
        judged: Option<Judged>,
        title: String,
    ) -> RgbImage {
        let picture = frame.gray().window(self.geometry.window);
        let place = Place::new(at, frame, self.settings);
        let scene = self.stage.run(picture);
        let words = words(title, judged, self.settings);
        let Some(region) = place.nearest(&scene.regions, &self.geometry) else {
            return blank(picture, self.geometry, &words);
        };
        let runs = &scene.runs[region.runs.clone()];
        let drawing = judged.map(|judged| self.judge.drawing(region, runs, &judged));
        let marks = judged.zip(drawing.as_ref()).map(|(judged, drawing)| Marks {
            drawing,
            missing: judged.missing,
            excess: judged.excess,
        });
        draw_part(&Sketch {
            picture,
            part_px: box_px(region),
            marks,
            scale: self.geometry.scale,
            words: &words,
        })
    }

    /// What each step made of the part and half its size of belt around it; `frame` as for [`Artist::draw_part`]. Empty when
    /// nothing is found any more.
    pub fn steps(&mut self, frame: &Frame, part: &Part) -> Vec<(&'static str, GrayImage)> {
        let picture = frame.gray().window(self.geometry.window);
        let at = (part.along_mm, part.across_mm);
        let place = Place::new(at, frame, self.settings);
        let regions = &self.stage.run(picture).regions;
        let Some(part_px) = place.nearest(regions, &self.geometry).map(box_px) else {
            return Vec::new();
        };
        let shown = Crop::around(part_px, picture);
        let steps = self.stage.steps(picture);
        let step = |pixels| Gray {
            pixels,
            stride_px: picture.width_px,
            ..picture
        };
        vec![
            ("gray", shown.cut(picture)),
            ("top-hat", shown.cut(step(&steps.top_hat))),
            ("binary", shown.cut(step(&steps.binary))),
            ("filled", shown.cut(step(&steps.filled))),
        ]
    }
}

fn box_px(region: &Region) -> [usize; 4] {
    [region.x_min, region.y_min, region.x_max, region.y_max].map(|px| px as usize)
}

/// Where a part lies, and where the belt was when a frame showed it.
struct Place {
    at: (f64, f64),
    belt_mm: f64,
}

impl Place {
    fn new(at: (f64, f64), frame: &Frame, settings: &Settings) -> Self {
        let at_speed = || frame.captured_us.as_seconds() * settings.belt.speed_mm_s;
        Self {
            at,
            belt_mm: frame.belt_mm.unwrap_or_else(at_speed),
        }
    }

    fn nearest<'r>(&self, regions: &'r [Region], geometry: &Geometry) -> Option<&'r Region> {
        let apart = |region: &Region| {
            let along_mm = self.belt_mm - geometry.behind_upstream_mm(region.centroid_x + 0.5);
            let across_mm = geometry.below_top_mm(region.centroid_y + 0.5);
            (along_mm - self.at.0).hypot(across_mm - self.at.1)
        };
        regions.iter().min_by(|a, b| apart(a).total_cmp(&apart(b)))
    }
}

/// A piece of a picture.
#[derive(Clone, Copy)]
struct Crop {
    left: usize,
    top: usize,
    width: usize,
    height: usize,
}

impl Crop {
    /// A part and half its size around it, as far as the picture goes.
    fn around([left, top, right, bottom]: [usize; 4], picture: Gray<'_>) -> Self {
        let around = (right - left).max(bottom - top) / 2;
        let (left, top) = (left.saturating_sub(around), top.saturating_sub(around));
        Self {
            left,
            top,
            width: (right + around).min(picture.width_px) - left,
            height: (bottom + around).min(picture.height_px) - top,
        }
    }

    fn cut(self, picture: Gray<'_>) -> GrayImage {
        GrayImage::from_fn(self.width as u32, self.height as u32, |x, y| {
            Luma([picture.row(self.top + y as usize)[self.left + x as usize]])
        })
    }
}

/// A frame in which nothing is found any more: all of it, with the words.
fn blank(picture: Gray<'_>, geometry: Geometry, words: &[String]) -> RgbImage {
    let part_px = [0, 0, picture.width_px, picture.height_px];
    draw_part(&Sketch {
        picture,
        part_px,
        marks: None,
        scale: geometry.scale,
        words,
    })
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
