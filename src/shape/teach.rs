//! Makes a silhouette from good parts: each is aligned to the mean of all, and every pixel gets the share of parts that
//! cover it.

use crate::stage::{Region, Run};

use super::gauge::Gauge;
use super::overlay::Overlay;
use super::pose::Finder;
use super::{Bitmap, Model, Pose, ShapeError, Silhouette};

/// How often the mean is taken anew from parts aligned to the last one.
const ROUNDS: usize = 3;

/// Collects good parts.
#[derive(Clone, Debug)]
pub struct Teacher {
    mm_per_px: f64,
    parts: Vec<(Region, Vec<Run>)>,
}

/// What came out of teaching.
#[derive(Clone, Debug, PartialEq)]
pub struct Lesson {
    /// The taught silhouette.
    pub silhouette: Silhouette,
    /// Every part against it, in the order in which they came.
    pub parts: Vec<Pupil>,
    /// How deep bites of the parts that were used are.
    pub missing_mm: Spread,
    /// How far they stick out.
    pub excess_mm: Spread,
}

/// One part against the taught silhouette, with nothing ignored.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Pupil {
    /// Overlap over union.
    pub fit: f64,
    /// Deepest bite.
    pub missing_mm: f64,
    /// Farthest burr.
    pub excess_mm: f64,
    /// Why it was left out, if it was.
    pub left_out: Option<LeftOut>,
}

/// Why a part was not used.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum LeftOut {
    /// It differs much more from the rest than the rest among themselves.
    FitsBadly,
    /// It lies face down.
    FaceDown,
}

/// Of all parts that were used.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct Spread {
    /// Half of the parts have less.
    pub median: f64,
    /// None has more.
    pub worst: f64,
}

impl Teacher {
    /// No part yet; they will come at this scale.
    pub fn new(mm_per_px: f64) -> Self {
        Self {
            mm_per_px,
            parts: Vec::new(),
        }
    }

    /// Adds one whole part that is known to be good; `runs` are the region's own.
    pub fn add(&mut self, region: &Region, runs: &[Run]) {
        self.parts.push((region.clone(), runs.to_vec()));
    }

    /// How many parts there are.
    pub fn count(&self) -> usize {
        self.parts.len()
    }

    /// Aligns and averages all parts. An error if there is none, or if they have nothing in common.
    pub fn finish(&self) -> Result<Lesson, ShapeError> {
        let first = self.typical().ok_or(ShapeError::TooFewParts {
            came: 0,
            expected: 1,
        })?;
        let mut class = self.attend(self.alone(first)?)?;
        let flipped = class.seats.iter().filter(|seat| seat.pose.flipped).count();
        if 2 * flipped > self.parts.len() {
            // The part that was begun with lies face down: begin with one of the others.
            let other = class
                .seats
                .iter()
                .position(|seat| seat.pose.flipped)
                .unwrap_or(first);
            class = self.attend(self.alone(other)?)?;
        }
        Ok(class.lesson(self.mm_per_px))
    }

    /// The part with the median area.
    fn typical(&self) -> Option<usize> {
        let mut order: Vec<usize> = (0..self.parts.len()).collect();
        order.sort_by_key(|&i| (self.parts[i].0.area_px, i));
        order.get(order.len().saturating_sub(1) / 2).copied()
    }

    fn alone(&self, part: usize) -> Result<Silhouette, ShapeError> {
        let (region, runs) = &self.parts[part];
        let (mask, _) = mask(region, runs);
        Silhouette::from_mask(&mask, self.mm_per_px)
    }

    fn attend(&self, mut silhouette: Silhouette) -> Result<Class, ShapeError> {
        for _ in 0..ROUNDS {
            let class = Class::seat(silhouette, &self.parts);
            silhouette = class.mean(&self.parts)?;
        }
        Ok(Class::seat(silhouette, &self.parts))
    }
}

/// The region as a set with an empty border, and the picture's pixel that is its (0, 0).
fn mask(region: &Region, runs: &[Run]) -> (Bitmap, (f64, f64)) {
    let side = |low: u32, high: u32| (high - low) as usize + 2;
    let mut mask = Bitmap::new(
        side(region.x_min, region.x_max),
        side(region.y_min, region.y_max),
    );
    for run in runs {
        let column = |x: u32| (x - region.x_min) as usize + 1;
        mask.insert_run(
            (run.y - region.y_min) as usize + 1,
            column(run.x0),
            column(run.x1),
        );
    }
    (
        mask,
        (f64::from(region.x_min) - 1.0, f64::from(region.y_min) - 1.0),
    )
}

/// All parts aligned to one silhouette.
struct Class {
    model: Model,
    seats: Vec<Seat>,
}

struct Seat {
    pose: Pose,
    fit: f64,
    missing_px: f64,
    excess_px: f64,
    left_out: Option<LeftOut>,
}

impl Class {
    fn seat(silhouette: Silhouette, parts: &[(Region, Vec<Run>)]) -> Self {
        let model = Model::new(silhouette);
        let (mut finder, mut overlay, mut gauge) =
            (Finder::default(), Overlay::default(), Gauge::default());
        let mut seat = |(region, runs): &(Region, Vec<Run>)| {
            let found = finder.find(region, runs, &model, &mut overlay);
            let (missing, excess) = overlay.gauge(&mut gauge, 0.0);
            Seat {
                pose: found.pose,
                fit: found.fit,
                missing_px: missing.px,
                excess_px: excess.px,
                left_out: found.pose.flipped.then_some(LeftOut::FaceDown),
            }
        };
        let mut seats: Vec<Seat> = parts.iter().map(&mut seat).collect();
        leave_out(&mut seats);
        Self { model, seats }
    }

    /// The share of parts in use at each pixel of the model's picture and somewhat around it.
    fn mean(&self, parts: &[(Region, Vec<Run>)]) -> Result<Silhouette, ShapeError> {
        let old = self.model.silhouette();
        let margin = 4 + old.width_px.max(old.height_px) / 10;
        let (width_px, height_px) = (old.width_px + 2 * margin, old.height_px + 2 * margin);
        let mut sums = vec![0.0_f64; width_px * height_px];
        let mut used = 0;
        for (seat, (region, runs)) in self.seats.iter().zip(parts) {
            if seat.left_out.is_none() {
                used += 1;
                self.add(seat.pose, margin, width_px, &mask(region, runs), &mut sums);
            }
        }
        let share = |sum: &f64| (255.0 * sum / f64::from(used.max(1))).round() as u8;
        let whole = Silhouette {
            width_px,
            height_px,
            mm_per_px: old.mm_per_px,
            share: sums.iter().map(share).collect(),
        };
        whole.trimmed()
    }

    /// Adds 1 where the part covers a place, between 0 and 1 along its edge.
    fn add(
        &self,
        pose: Pose,
        margin: usize,
        width_px: usize,
        (part, origin): &(Bitmap, (f64, f64)),
        sums: &mut [f64],
    ) {
        let (sin, cos) = pose.angle_deg.to_radians().sin_cos();
        let covered = |x: i32, y: i32| if part.has(x, y) { 1.0 } else { 0.0 };
        for (i, sum) in sums.iter_mut().enumerate() {
            let u = (i % width_px) as f64 - margin as f64 - self.model.centroid.0;
            let v = (i / width_px) as f64 - margin as f64 - self.model.centroid.1;
            let x = pose.x_px + cos * u - sin * v - origin.0;
            let y = pose.y_px + sin * u + cos * v - origin.1;
            let (left, top) = (x.floor(), y.floor());
            let (fx, fy) = (x - left, y - top);
            let (left, top) = (left as i32, top as i32);
            let upper = covered(left, top) * (1.0 - fx) + covered(left + 1, top) * fx;
            let lower = covered(left, top + 1) * (1.0 - fx) + covered(left + 1, top + 1) * fx;
            *sum += upper * (1.0 - fy) + lower * fy;
        }
    }

    fn lesson(self, mm_per_px: f64) -> Lesson {
        let pupil = |seat: &Seat| Pupil {
            fit: seat.fit,
            missing_mm: seat.missing_px * mm_per_px,
            excess_mm: seat.excess_px * mm_per_px,
            left_out: seat.left_out,
        };
        let parts: Vec<Pupil> = self.seats.iter().map(pupil).collect();
        let spread = |of: fn(&Pupil) -> f64| {
            let used = parts.iter().filter(|part| part.left_out.is_none());
            let values: Vec<f64> = used.map(of).collect();
            Spread {
                median: median(values.clone()),
                worst: values.into_iter().fold(0.0, f64::max),
            }
        };
        Lesson {
            missing_mm: spread(|part| part.missing_mm),
            excess_mm: spread(|part| part.excess_mm),
            silhouette: self.model.silhouette().clone(),
            parts,
        }
    }
}

/// Leaves out parts whose larger figure is more than three standard deviations and two pixels above the median, the
/// deviation being estimated from the median one (F. R. Hampel, "The influence curve and its role in robust estimation",
/// JASA 69, 1974).
fn leave_out(seats: &mut [Seat]) {
    let worse = |seat: &Seat| seat.missing_px.max(seat.excess_px);
    let used = seats.iter().filter(|seat| seat.left_out.is_none());
    let values: Vec<f64> = used.map(worse).collect();
    let middle = median(values.clone());
    let deviation = 1.4826 * median(values.iter().map(|value| (value - middle).abs()).collect());
    let most = middle + (3.0 * deviation).max(2.0);
    for seat in seats.iter_mut().filter(|seat| seat.left_out.is_none()) {
        if worse(seat) > most {
            seat.left_out = Some(LeftOut::FitsBadly);
        }
    }
}

/// The lower of the two middle ones of an even number; 0 of none.
fn median(mut values: Vec<f64>) -> f64 {
    values.sort_by(f64::total_cmp);
    values
        .get(values.len().saturating_sub(1) / 2)
        .copied()
        .unwrap_or(0.0)
}

#[cfg(test)]
mod tests {
    use rand::{RngExt, SeedableRng};
    use rand_pcg::Pcg64Mcg;

    use super::super::drawn::{self, Flaw, Outline};
    use super::super::gauge_masks;
    use super::*;

    fn lesson(outline: &Outline, parts: &[(bool, Vec<Flaw>)]) -> Lesson {
        let mut random = Pcg64Mcg::seed_from_u64(7);
        let mut teacher = Teacher::new(0.25);
        for (flipped, flaws) in parts {
            let mut place = || 100.0 + random.random_range(-5.0..5.0);
            let (x_px, y_px) = (place(), place());
            let pose = Pose {
                x_px,
                y_px,
                angle_deg: random.random_range(0.0..360.0),
                flipped: *flipped,
            };
            let (region, runs) = outline.draw(pose, flaws, (200, 200)).to_region().unwrap();
            teacher.add(&region, &runs);
        }
        teacher.finish().unwrap()
    }

    /// Compares the majorities at the pose at which they fit best.
    fn differ_px(taught: &Silhouette, outline: &Outline) -> f64 {
        let (truth, _) = drawn::silhouette(outline, 0.25);
        let (region, runs) = truth.majority().to_region().unwrap();
        let mut overlay = Overlay::default();
        Finder::default().find(&region, &runs, &Model::new(taught.clone()), &mut overlay);
        let (missing, excess) = gauge_masks(&overlay.taught, &overlay.part);
        missing.px.max(excess.px)
    }

    #[test]
    fn good_parts_give_the_drawn_shape() {
        for outline in [Outline::star(76.0), Outline::gasket(60.0)] {
            let lesson = lesson(&outline, &vec![(false, Vec::new()); 12]);
            assert!(
                lesson.parts.iter().all(|part| part.left_out.is_none()),
                "{lesson:?}"
            );
            assert!(
                lesson.missing_mm.worst <= 0.5 && lesson.excess_mm.worst <= 0.5,
                "{:?}",
                lesson.parts
            );
            assert!(lesson.missing_mm.median <= lesson.missing_mm.worst);
            assert!(differ_px(&lesson.silhouette, &outline) <= 1.5);
            let [taught, drawn] = [lesson.silhouette, drawn::silhouette(&outline, 0.25).0];
            assert_eq!(Model::new(taught).symmetry(), Model::new(drawn).symmetry());
        }
    }

    /// Parts whose corners lie up to 2 px off, as baked ones do: their mean is no perfect star, but still has no face.
    #[test]
    fn uneven_parts_keep_their_symmetry() {
        let mut random = Pcg64Mcg::seed_from_u64(3);
        let mut teacher = Teacher::new(0.25);
        for _ in 0..8 {
            let outline = Outline::star(76.0).uneven(|| random.random_range(-2.0..2.0));
            let pose = Pose {
                x_px: 100.0,
                y_px: 100.0,
                angle_deg: f64::from(teacher.count() as u32) * 77.0,
                flipped: false,
            };
            let (region, runs) = outline.draw(pose, &[], (200, 200)).to_region().unwrap();
            teacher.add(&region, &runs);
        }
        let lesson = teacher.finish().unwrap();
        assert!(lesson.excess_mm.median > 0.25, "{lesson:?}");
        let symmetry = Model::new(lesson.silhouette).symmetry();
        assert_eq!((symmetry.turns, symmetry.mirror), (5, true));
    }

    #[test]
    fn the_bore_stays_open() {
        let lesson = lesson(&Outline::gasket(60.0), &vec![(false, Vec::new()); 8]);
        let bores = lesson.silhouette.bores_mm2();
        let drawn = std::f64::consts::PI * (0.55_f64 * 60.0 * 0.25).powi(2);
        assert_eq!(bores.len(), 1);
        assert!((bores[0] / drawn - 1.0).abs() < 0.01, "{bores:?} {drawn}");
    }

    #[test]
    fn odd_parts_are_left_out_whichever_comes_first() {
        let bite = Flaw::Bite {
            x: -50.0,
            y: 20.0,
            radius: 20.0,
        };
        for bad in [0, 4] {
            let mut parts = vec![(false, Vec::new()); 9];
            parts[bad].1 = vec![bite];
            parts[bad + 1].0 = true;
            let outline = Outline::gasket(60.0);
            let lesson = lesson(&outline, &parts);
            for (i, part) in lesson.parts.iter().enumerate() {
                let expected = match i {
                    _ if i == bad => Some(LeftOut::FitsBadly),
                    _ if i == bad + 1 => Some(LeftOut::FaceDown),
                    _ => None,
                };
                assert_eq!(part.left_out, expected, "{i} {:?}", lesson.parts);
            }
            assert!(differ_px(&lesson.silhouette, &outline) <= 1.5);
        }
    }

    #[test]
    fn a_single_part_is_its_own_silhouette() {
        let outline = Outline::gasket(60.0);
        let lesson = lesson(&outline, &[(false, Vec::new())]);
        assert_eq!(lesson.missing_mm, Spread::default());
        assert_eq!(lesson.excess_mm, Spread::default());
        let nobody = Teacher::new(0.25).finish();
        assert!(matches!(nobody, Err(ShapeError::TooFewParts { .. })));
    }
}
