//! The verdict on one region: the best-fitting shape, how far from it the region is, and everything against it.

use crate::stage::{Region, Run};

use super::gauge::Gauge;
use super::gauged::{Asked, Gauged, Sizes};
use super::measure::Measurer;
use super::overlay::Overlay;
use super::pose::{Finder, Found};
use super::{Bitmap, Common, Judged, Limits, Model, Pose, Silhouette};

/// A region smaller than this part of a shape is not looked at closely: it is a crumb of it at best.
const CRUMB: f64 = 0.25;

/// Judges regions against the taught shapes, with its own buffers.
#[derive(Clone, Debug)]
pub struct Judge {
    shapes: Vec<(Model, Limits)>,
    common: Common,
    smallest_px: u64,
    finder: Finder,
    overlay: Overlay,
    gauge: Gauge,
    measurer: Measurer,
    /// Shapes with the best fit that their area allows, best first.
    order: Vec<(f64, usize)>,
}

/// One judged region drawn pixel by pixel, for a picture of it.
#[derive(Clone, Debug, PartialEq)]
pub struct Drawing {
    /// The picture's pixel (x, y) that is (0, 0) in the sets.
    pub origin: (i32, i32),
    /// The region.
    pub part: Bitmap,
    /// The taught shape at the found pose.
    pub taught: Bitmap,
    /// Taught pixels that the region lacks, in patches that count.
    pub missing: Bitmap,
    /// Pixels of the region outside the taught shape, in patches that count.
    pub excess: Bitmap,
}

impl Judge {
    /// `shapes` must have the picture's scale, and a majority each; there must be at least one.
    pub fn new(shapes: Vec<(Silhouette, Limits)>, common: Common) -> Self {
        assert!(!shapes.is_empty(), "there must be a shape to judge by");
        let ready = shapes
            .into_iter()
            .map(|(silhouette, limits)| (Model::new(silhouette), limits));
        let shapes: Vec<(Model, Limits)> = ready.collect();
        let largest_px = shapes
            .iter()
            .map(|(model, _)| model.radius_px)
            .fold(0.0, f64::max);
        let mut judge = Self {
            smallest_px: shapes
                .iter()
                .map(|(model, _)| model.area_px)
                .min()
                .unwrap_or(0),
            order: Vec::with_capacity(shapes.len()),
            shapes,
            common,
            finder: Finder::default(),
            overlay: Overlay::default(),
            gauge: Gauge::default(),
            measurer: Measurer::default(),
        };
        // Two of the largest side by side.
        let side = 4 * largest_px.ceil() as usize + 8;
        judge.reserve(side, side);
        judge
    }

    /// Makes room for regions of up to this size beyond the shapes' own, so that judging them needs no new memory.
    pub fn reserve(&mut self, width_px: usize, height_px: usize) {
        let reach = self
            .shapes
            .iter()
            .map(|(model, _)| model.radius_px)
            .fold(0.0, f64::max);
        let margin = 2 * reach.ceil() as usize + 8;
        let (width, height) = (width_px + margin, height_px + margin);
        self.overlay.reserve(width, height);
        self.gauge.reserve(width, height);
        self.measurer.reserve(width, height);
    }

    /// The shapes in the order in which they came.
    pub fn shapes(&self) -> &[(Model, Limits)] {
        &self.shapes
    }

    /// Judges one whole region; `runs` are its own, sorted by row, then column. See [`Gauged::verdict`].
    pub fn judge(&mut self, region: &Region, runs: &[Run]) -> Judged {
        let gauged = self.gauge(region, runs);
        gauged.verdict(&self.shapes[gauged.shape].1, &self.common)
    }

    /// Everything that [`Judge::judge`] needs to know of a region. The shape with the largest overlap over union is the one
    /// that it is held against. Further figures are taken if the shape's limits ask for them and the region fits it.
    pub fn gauge(&mut self, region: &Region, runs: &[Run]) -> Gauged {
        let mut gauged = self.lay_on(region, runs);
        if gauged.is_one(&self.common) {
            let asked = Asked::by(&self.shapes[gauged.shape].1);
            gauged.sizes = self.sizes(asked, &gauged, region, runs);
        }
        gauged
    }

    /// The same for limits that are not known yet: further figures are taken as `asked` for each shape, whatever fits.
    pub fn gauge_all(&mut self, asked: &[Asked], region: &Region, runs: &[Run]) -> Gauged {
        let mut gauged = self.lay_on(region, runs);
        gauged.sizes = self.sizes(asked[gauged.shape], &gauged, region, runs);
        gauged
    }

    fn sizes(&mut self, asked: Asked, gauged: &Gauged, region: &Region, runs: &[Run]) -> Sizes {
        let branch_above_px = self.shapes[gauged.shape].1.branch_above_px;
        asked.take(&mut self.measurer, region, runs, branch_above_px)
    }

    fn lay_on(&mut self, region: &Region, runs: &[Run]) -> Gauged {
        let (shape, found) = self.best(region, runs);
        let (missing, excess) = self
            .overlay
            .gauge(&mut self.gauge, self.common.flaw_below_px);
        Gauged {
            shape,
            pose: found.pose,
            fit: found.fit,
            covered: self.overlay.covered(),
            twice: 2 * self.overlay.outside_px() >= self.smallest_px,
            taught_px: self.taught_box(),
            missing,
            excess,
            sizes: Sizes::default(),
        }
    }

    /// See [`Gauged::taught_px`].
    fn taught_box(&self) -> [i32; 4] {
        let Overlay { origin, taught, .. } = &self.overlay;
        let [left, top, right, bottom] = taught.bounds();
        [
            left + origin.0,
            top + origin.1,
            right + origin.0,
            bottom + origin.1,
        ]
    }

    /// What `judge` saw, pixel by pixel. Takes its time and memory: it is for pictures.
    pub fn drawing(&mut self, region: &Region, runs: &[Run], judged: &Judged) -> Drawing {
        let model = &self.shapes[judged.shape].0;
        self.overlay.place(region, runs, model, judged.pose);
        let Overlay {
            origin,
            taught,
            part,
            ..
        } = &self.overlay;
        let below = self.common.flaw_below_px;
        Drawing {
            origin: *origin,
            part: part.clone(),
            taught: taught.clone(),
            missing: self.gauge.flaws(taught, part, below).clone(),
            excess: self.gauge.flaws(part, taught, below).clone(),
        }
    }

    /// The best-fitting shape and its pose; `overlay` holds it. The first of equals.
    fn best(&mut self, region: &Region, runs: &[Run]) -> (usize, Found) {
        self.rank(region.area_px);
        let mut best: Option<(usize, Found)> = None;
        let mut placed = 0;
        for &(bound, shape) in &self.order {
            // No overlap over union is larger than the smaller area over the larger.
            if best.is_some_and(|(_, found)| bound < found.fit) {
                break;
            }
            let model = &self.shapes[shape].0;
            let found = if (region.area_px as f64) < CRUMB * model.area_px as f64 {
                at_centroid(region, runs, model, &mut self.overlay)
            } else {
                self.finder.find(region, runs, model, &mut self.overlay)
            };
            placed = shape;
            let better = |&(other, best): &(usize, Found)| {
                found.fit > best.fit || (found.fit == best.fit && shape < other)
            };
            if best.as_ref().is_none_or(better) {
                best = Some((shape, found));
            }
        }
        let (shape, found) = best.unwrap_or((0, Found::default()));
        if placed != shape {
            self.overlay
                .place(region, runs, &self.shapes[shape].0, found.pose);
        }
        (shape, found)
    }

    fn rank(&mut self, area_px: u64) {
        let bound = |model: &Model| {
            let (a, b) = (area_px.min(model.area_px), area_px.max(model.area_px));
            a as f64 / b.max(1) as f64
        };
        self.order.clear();
        let shapes = self.shapes.iter().enumerate();
        self.order
            .extend(shapes.map(|(shape, (model, _))| (bound(model), shape)));
        self.order
            .sort_unstable_by(|a, b| b.0.total_cmp(&a.0).then(a.1.cmp(&b.1)));
    }
}

fn at_centroid(region: &Region, runs: &[Run], model: &Model, overlay: &mut Overlay) -> Found {
    let pose = Pose {
        x_px: region.centroid_x,
        y_px: region.centroid_y,
        ..Pose::default()
    };
    overlay.place(region, runs, model, pose);
    Found {
        pose,
        fit: overlay.fit(),
    }
}

#[cfg(test)]
mod tests {
    use super::super::bitmap::tests::any_bitmap;
    use super::super::drawn::{self, Flaw, Outline};
    use super::*;
    use proptest::prelude::*;

    const COMMON: Common = Common {
        flaw_below_px: 6.0,
        fit_at_least: 0.7,
    };

    fn limits() -> Limits {
        Limits {
            missing_px: 8.0,
            excess_px: 6.0,
            reject_flipped: true,
            area_px: None,
            length_px: None,
            width_px: None,
            holes: None,
            boundary_px: None,
            branches: None,
            branch_above_px: 20.0,
        }
    }

    fn star() -> Outline {
        Outline::star(76.0)
    }

    fn judge() -> Judge {
        let shape = |outline: &Outline| (drawn::silhouette(outline, 0.25).0, limits());
        Judge::new(vec![shape(&star()), shape(&Outline::gasket(60.0))], COMMON)
    }

    fn at(angle_deg: f64, flipped: bool) -> Pose {
        Pose {
            x_px: 101.3,
            y_px: 98.6,
            angle_deg,
            flipped,
        }
    }

    fn judged(judge: &mut Judge, picture: &Bitmap) -> Judged {
        let (region, runs) = picture.to_region().unwrap();
        judge.judge(&region, &runs)
    }

    fn reasons(judge: &mut Judge, outline: &Outline, pose: Pose, flaws: &[Flaw]) -> String {
        let picture = outline.draw(pose, flaws, (200, 200));
        judged(judge, &picture).reasons.to_string()
    }

    #[test]
    fn good_parts_go_to_their_shape() {
        let mut judge = judge();
        for (shape, outline) in [star(), Outline::gasket(60.0)].iter().enumerate() {
            for angle in [0.0, 11.0, 45.0, 90.0, 200.0, 359.0] {
                let found = judged(&mut judge, &outline.draw(at(angle, false), &[], (200, 200)));
                assert_eq!(
                    (found.shape, found.reasons.is_empty()),
                    (shape, true),
                    "{found:?}"
                );
                assert!(found.severity <= 1.0 && found.fit > 0.98 && !found.pose.flipped);
                assert!(found.missing.px < 2.0 && found.excess.px < 2.0, "{found:?}");
            }
        }
    }

    #[test]
    fn each_flaw_has_its_reason() {
        let mut judge = judge();
        let gasket = Outline::gasket(60.0);
        let bite = Flaw::Bite {
            x: -60.0,
            y: 0.0,
            radius: 14.0,
        };
        let burr = Flaw::Burr {
            x: -60.0,
            y: 0.0,
            radius: 12.0,
        };
        assert_eq!(
            reasons(&mut judge, &gasket, at(30.0, false), &[bite]),
            "missing"
        );
        assert_eq!(
            reasons(&mut judge, &gasket, at(30.0, false), &[burr]),
            "excess"
        );
        assert_eq!(reasons(&mut judge, &gasket, at(30.0, true), &[]), "flipped");
        assert_eq!(
            reasons(&mut judge, &gasket, at(30.0, true), &[burr]),
            "excess+flipped"
        );
        assert_eq!(reasons(&mut judge, &star(), at(30.0, true), &[]), "");
        let whole = Outline::disc(85.0);
        assert_eq!(reasons(&mut judge, &whole, at(0.0, false), &[]), "touching");
        let crumb = Outline::disc(20.0);
        assert_eq!(reasons(&mut judge, &crumb, at(0.0, false), &[]), "unknown");
        let bar = Outline::polygon(&[(-90.0, -30.0), (90.0, -30.0), (90.0, 30.0), (-90.0, 30.0)]);
        assert_eq!(reasons(&mut judge, &bar, at(0.0, false), &[]), "unknown");
    }

    #[test]
    fn two_grown_together_touch_and_a_large_burr_does_not() {
        let mut judge = judge();
        let mut pair = star().draw(at(10.0, false), &[], (400, 200));
        let other = Pose {
            x_px: 230.0,
            angle_deg: 40.0,
            ..at(0.0, false)
        };
        star().add_to(&mut pair, other, &[]);
        let found = judged(&mut judge, &pair);
        assert_eq!(found.reasons.to_string(), "touching");
        assert!(found.severity.is_infinite() && found.excess.px > 60.0);
        let burr = Flaw::Burr {
            x: 60.0,
            y: 20.0,
            radius: 25.0,
        };
        assert_eq!(
            reasons(&mut judge, &star(), at(10.0, false), &[burr]),
            "excess"
        );
    }

    #[test]
    fn the_worst_points_lie_on_the_flaws() {
        let mut judge = judge();
        let bite = Flaw::Bite {
            x: 0.0,
            y: -60.0,
            radius: 15.0,
        };
        let burr = Flaw::Burr {
            x: 0.0,
            y: 60.0,
            radius: 15.0,
        };
        let picture = Outline::gasket(60.0).draw(at(0.0, false), &[bite, burr], (200, 200));
        let (region, runs) = picture.to_region().unwrap();
        let found = judge.judge(&region, &runs);
        // The deepest pixels of a bite in a ring lie where it is farthest from both its sides, up to the bite's radius.
        assert!(
            found.missing.px > 13.0 && found.missing.px < 15.0,
            "{found:?}"
        );
        assert!((found.excess.px - 15.0).abs() <= 1.4, "{found:?}");
        let near = |at: Option<(i32, i32)>, x: f64, y: f64| {
            at.is_some_and(|at| (f64::from(at.0) - x).hypot(f64::from(at.1) - y) < 6.0)
        };
        assert!(near(found.missing.at, 101.3, 98.6 - 47.0), "{found:?}");
        assert!(near(found.excess.at, 101.3, 98.6 + 75.0), "{found:?}");

        let drawing = judge.drawing(&region, &runs, &found);
        let local = |at: Option<(i32, i32)>| {
            at.map(|(x, y)| (x - drawing.origin.0, y - drawing.origin.1))
                .unwrap()
        };
        let (missing, excess) = (local(found.missing.at), local(found.excess.at));
        assert!(
            drawing.missing.has(missing.0, missing.1) && drawing.taught.has(missing.0, missing.1)
        );
        assert!(drawing.excess.has(excess.0, excess.1) && drawing.part.has(excess.0, excess.1));
        assert_eq!(drawing.part.count(), region.area_px);
        assert_eq!(drawing.excess.count_common(&drawing.taught), 0);
        assert_eq!(drawing.missing.count_common(&drawing.part), 0);
    }

    proptest! {
        #![proptest_config(ProptestConfig::with_cases(40))]
        #[test]
        fn any_region_gets_a_verdict(set in any_bitmap(90)) {
            prop_assume!(set.count() > 0);
            let shape = |outline: &Outline| (drawn::silhouette(outline, 0.25).0, limits());
            let small = vec![shape(&Outline::star(20.0)), shape(&Outline::disc(9.0))];
            let found = judged(&mut Judge::new(small, COMMON), &set);
            prop_assert!((0.0..=1.0).contains(&found.fit) && found.severity >= 0.0);
            prop_assert_eq!(found.severity > 1.0, !found.reasons.is_empty());
            prop_assert!(found.pose.x_px.is_finite() && (0.0..360.0).contains(&found.pose.angle_deg));
        }
    }

    #[test]
    fn verdicts_do_not_depend_on_what_came_before() {
        let mut used = judge();
        let pictures =
            [0.0, 33.0, 71.0].map(|angle| star().draw(at(angle, false), &[], (200, 200)));
        let first: Vec<_> = pictures
            .iter()
            .map(|picture| judged(&mut used, picture))
            .collect();
        for (picture, first) in pictures.iter().zip(&first).rev() {
            assert_eq!(&judged(&mut used, picture), first);
            assert_eq!(&judged(&mut judge(), picture), first);
        }
    }
}
