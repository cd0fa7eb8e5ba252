//! The picture work on one frame: stage, then a verdict for every whole region. It knows nothing of the belt, so frames
//! may be inspected in any order and on any thread.

use crate::belt::{Cut, Extent, Stretch, View};
use crate::frames::Frame;
use crate::laps::{Step, Watch};
use crate::settings::{self, FaceDown, Geometry, Settings, Travel};
use crate::shape::{Common, Gauged, Judge, Judged, Limits, Reason, Silhouette};
use crate::stage::{self, Level, Region, Stage};
use crate::units::Micros;

/// A taught shape may reach this far over the picture's edge before the part counts as cut: the pose is not exact.
const OVER_PX: i32 = 2;

/// The belt that the region of interest shows when the belt reads 0; other readings move it along.
pub fn seen_at_zero(geometry: &Geometry) -> Stretch {
    along(geometry, 0.0, geometry.window.width_px as f64)
}

fn along(geometry: &Geometry, x_min: f64, x_max: f64) -> Stretch {
    let [a, b] = [x_min, x_max].map(|x_px| -geometry.behind_upstream_mm(x_px));
    Stretch {
        from_mm: a.min(b),
        to_mm: a.max(b),
    }
}

/// Where a region lies when the belt reads 0.
fn extent(geometry: &Geometry, region: &Region) -> Extent {
    let along = along(geometry, region.x_min.into(), region.x_max.into());
    Extent {
        lead_mm: along.from_mm,
        trail_mm: along.to_mm,
        top_mm: geometry.below_top_mm(region.y_min.into()),
        bottom_mm: geometry.below_top_mm(region.y_max.into()),
    }
}

/// Which edges a box of pixels reaches over: left, top, right, bottom, the last two exclusive.
fn cut(geometry: &Geometry, [left, top, right, bottom]: [i32; 4]) -> Cut {
    let (left, right) = (left <= 0, right >= geometry.window.width_px as i32);
    let (upstream, downstream) = match geometry.travel {
        Travel::Right => (left, right),
        Travel::Left => (right, left),
    };
    let side = top <= 0 || bottom >= geometry.window.height_px as i32;
    Cut {
        upstream,
        downstream,
        side,
    }
}

/// Like [`cut`] for the taught shape that lies on a region. Light that falls off, and a top-hat that knows only half of
/// its element's surroundings there, can hide the strip of a part along the picture's edge: the region keeps off the edge,
/// but the shape that fits it reaches over.
fn cut_of_shape(geometry: &Geometry, gauged: &Gauged, judged: &Judged) -> Cut {
    if judged.reasons.has(Reason::Unknown) || judged.reasons.has(Reason::Touching) {
        return Cut::default();
    }
    let [left, top, right, bottom] = gauged.taught_px;
    cut(
        geometry,
        [
            left + OVER_PX,
            top + OVER_PX,
            right - OVER_PX,
            bottom - OVER_PX,
        ],
    )
}

/// One region of one frame as it was measured, before any limit was asked; in millimetres on a belt that reads 0.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Sight {
    extent: Extent,
    along_mm: f64,
    across_mm: f64,
    area_mm2: f64,
    cut: Cut,
    gauged: Option<Gauged>,
}

impl Sight {
    /// `gauge` is asked for what the picture's edge does not cut.
    pub fn of(geometry: &Geometry, region: &Region, gauge: impl FnOnce() -> Gauged) -> Self {
        let box_px = [region.x_min, region.y_min, region.x_max, region.y_max].map(|px| px as i32);
        let cut = cut(geometry, box_px);
        Self {
            extent: extent(geometry, region),
            along_mm: -geometry.behind_upstream_mm(region.centroid_x + 0.5),
            across_mm: geometry.below_top_mm(region.centroid_y + 0.5),
            area_mm2: geometry.scale.mm2(region.area_px as f64),
            cut,
            gauged: (!cut.any()).then(gauge),
        }
    }
}

/// What makes verdicts of figures.
#[derive(Clone, Debug)]
pub struct Rules {
    geometry: Geometry,
    limits: Vec<Limits>,
    common: Common,
}

impl Rules {
    /// The settings' own.
    pub fn of(settings: &Settings) -> Self {
        let shapes = settings.shapes.iter();
        Self {
            geometry: settings.geometry(),
            limits: shapes.map(|shape| limits(settings, shape)).collect(),
            common: common(settings),
        }
    }

    /// The verdict on one region.
    pub fn spot(&self, sight: &Sight) -> Spot {
        let mut cut = sight.cut;
        let mut judged = None;
        if let Some(gauged) = &sight.gauged {
            let verdict = gauged.verdict(&self.limits[gauged.shape], &self.common);
            cut = cut_of_shape(&self.geometry, gauged, &verdict);
            judged = Some(verdict).filter(|_| !cut.any());
        }
        Spot {
            extent: sight.extent,
            along_mm: sight.along_mm,
            across_mm: sight.across_mm,
            area_mm2: sight.area_mm2,
            cut,
            judged,
        }
    }
}

/// One region of one frame, in millimetres on a belt that reads 0.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Spot {
    extent: Extent,
    along_mm: f64,
    across_mm: f64,
    area_mm2: f64,
    cut: Cut,
    /// The verdict on it; a region that the picture's edge cuts has none.
    pub judged: Option<Judged>,
}

/// Everything that one frame shows.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Look {
    /// When the frame was captured.
    pub captured_us: Micros,
    /// The belt reading that came with it.
    pub belt_mm: Option<f64>,
    /// Regions that are no specks.
    pub spots: Vec<Spot>,
    /// Specks that were dropped.
    pub specks: u32,
}

impl Look {
    /// The spots on a belt that read `belt_mm` when the frame was captured.
    pub fn views(&self, belt_mm: f64) -> impl Iterator<Item = View> {
        self.spots.iter().map(move |spot| View {
            captured_us: self.captured_us,
            extent: Extent {
                lead_mm: spot.extent.lead_mm + belt_mm,
                trail_mm: spot.extent.trail_mm + belt_mm,
                ..spot.extent
            },
            along_mm: spot.along_mm + belt_mm,
            across_mm: spot.across_mm,
            area_mm2: spot.area_mm2,
            cut: spot.cut,
            judged: spot.judged,
        })
    }
}

/// What holds for all shapes, in pixels.
pub fn common(settings: &Settings) -> Common {
    Common {
        flaw_below_px: settings.flaw_below_px(),
        fit_at_least: settings.judge.fit_at_least,
    }
}

/// One shape's limits, in pixels.
pub fn limits(settings: &Settings, shape: &settings::Shape) -> Limits {
    let scale = settings.scale();
    let lengths = |mm: Option<[f64; 2]>| mm.map(|ends| ends.map(|mm| scale.px(mm)));
    Limits {
        missing_px: scale.px(shape.missing_mm),
        excess_px: scale.px(shape.excess_mm),
        reject_flipped: shape.face_down == FaceDown::Reject,
        area_px: shape.area_mm2.map(|ends| ends.map(|mm2| scale.px2(mm2))),
        length_px: lengths(shape.length_mm),
        width_px: lengths(shape.width_mm),
        holes: shape.holes,
        boundary_px: lengths(shape.boundary_mm),
        branches: shape.branches,
        branch_above_px: scale.px(shape.branch_above_mm.unwrap_or(0.0)),
    }
}

/// A judge for these settings. `taught` has one silhouette for each of `settings.shapes`.
pub fn judge(settings: &Settings, taught: &[Silhouette]) -> Judge {
    let shapes = settings.shapes.iter().map(|shape| limits(settings, shape));
    Judge::new(
        taught.iter().cloned().zip(shapes).collect(),
        common(settings),
    )
}

/// Stage and judge with their buffers.
pub struct Inspector {
    geometry: Geometry,
    stage: Stage,
    judge: Judge,
    rules: Rules,
}

impl Inspector {
    /// Makes every buffer. `taught` has one silhouette for each of `settings.shapes`.
    pub fn new(settings: &Settings, taught: &[Silhouette], level: Level) -> Self {
        let geometry = settings.geometry();
        let mut judge = judge(settings, taught);
        judge.reserve(geometry.window.width_px, geometry.window.height_px);
        Self {
            geometry,
            stage: Stage::new(&stage::Plan::of(settings), level),
            judge,
            rules: Rules::of(settings),
        }
    }

    /// Looks at `frame`, which must have the size that the settings state, and fills `look`.
    pub fn inspect(&mut self, frame: &Frame, look: &mut Look) {
        self.inspect_watched(frame, look, &mut ());
    }

    /// The same, with `watch` told of the end of each step.
    pub fn inspect_watched(&mut self, frame: &Frame, look: &mut Look, watch: &mut impl Watch) {
        let picture = frame.gray().window(self.geometry.window);
        let scene = self.stage.run_watched(picture, watch);
        look.captured_us = frame.captured_us;
        look.belt_mm = frame.belt_mm;
        look.specks = scene.specks;
        look.spots.clear();
        for region in &scene.regions {
            let runs = &scene.runs[region.runs.clone()];
            let sight = Sight::of(&self.geometry, region, || {
                let gauged = self.judge.gauge(region, runs);
                watch.lap(Step::Part);
                gauged
            });
            look.spots.push(self.rules.spot(&sight));
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::units::{Scale, Window};

    fn geometry(travel: Travel) -> Geometry {
        Geometry {
            scale: Scale { mm_per_px: 0.25 },
            travel,
            picture_width_px: 640,
            window: Window {
                left_px: 40,
                top_px: 20,
                width_px: 560,
                height_px: 400,
            },
        }
    }

    fn region(x_min: u32, x_max: u32) -> Region {
        Region {
            area_px: 1,
            x_min,
            y_min: 4,
            x_max,
            y_max: 8,
            centroid_x: 0.0,
            centroid_y: 0.0,
            mu20: 0.0,
            mu11: 0.0,
            mu02: 0.0,
            runs: 0..0,
        }
    }

    /// `along_mm = belt_mm - (px from the upstream edge) * mm_per_px`; the leading edge has the smaller number.
    #[test]
    fn the_leading_edge_is_the_one_farther_from_the_upstream_edge() {
        let right = extent(&geometry(Travel::Right), &region(0, 100));
        assert_eq!((right.lead_mm, right.trail_mm), (-35.0, -10.0));
        assert_eq!((right.top_mm, right.bottom_mm), (6.0, 7.0));
        let left = extent(&geometry(Travel::Left), &region(0, 100));
        assert_eq!((left.lead_mm, left.trail_mm), (-150.0, -125.0));
    }

    #[test]
    fn the_region_of_interest_is_what_a_frame_covers() {
        let seen = seen_at_zero(&geometry(Travel::Right));
        assert_eq!((seen.from_mm, seen.to_mm), (-150.0, -10.0));
    }

    #[test]
    fn edges_are_told_by_the_way_parts_travel() {
        let entering = Cut {
            upstream: true,
            ..Cut::default()
        };
        assert_eq!(cut(&geometry(Travel::Right), [0, 4, 9, 8]), entering);
        assert_eq!(cut(&geometry(Travel::Left), [500, 4, 560, 8]), entering);
        assert!(cut(&geometry(Travel::Right), [5, 4, 9, 400]).side);
    }
}
