//! Finds where a silhouette lies: many coarse starts, a few of them refined, and overlap over union to decide.
//!
//! Starts are spread over the angles that look different, face up and face down, at the region's centroid. That serves
//! nearly every part. Only where the outcome is poor, as it is when a large piece is broken off or two parts have grown
//! together, starts that do not rely on the centroid join in: the silhouette pushed into each corner of the region's box,
//! and the middles of two equal parts side by side.

use crate::stage::{Region, Run};

use super::align::{self, Kernel, Place};
use super::edge;
use super::overlay::Overlay;
use super::{Model, Pose};

/// A pose and how well it fits.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Found {
    /// Where the silhouette lies; of poses that look the same the one with the smallest angle, face up.
    pub pose: Pose,
    /// Overlap over union.
    pub fit: f64,
}

/// Points for coarse work.
const FEW: usize = 96;
/// A good pose has this mean cost or less at a scale of [`FINE_PX`].
const GOOD_COST: f64 = 0.2;
const FINE_PX: f64 = 3.0;

/// The search with its buffers, none of which grows after it was made.
#[derive(Clone, Debug)]
pub(super) struct Finder {
    points: Vec<[f32; 2]>,
    few: Vec<[f32; 2]>,
    starts: Shortlist<32>,
    middle: Vec<(f64, f64)>,
}

impl Default for Finder {
    fn default() -> Self {
        Self {
            points: Vec::with_capacity(edge::MOST_POINTS),
            few: Vec::with_capacity(FEW),
            starts: Shortlist::default(),
            middle: Vec::with_capacity(8),
        }
    }
}

impl Finder {
    /// The best pose of `model` on the region. `overlay` holds both at that pose afterwards.
    pub(super) fn find(
        &mut self,
        region: &Region,
        runs: &[Run],
        model: &Model,
        overlay: &mut Overlay,
    ) -> Found {
        edge::collect(region, runs, &mut self.points);
        spread(&self.points, &mut self.few);
        let search = Search::new(region, runs, model);
        let mut best = Best::default();
        let cost = self.quickly(&search, overlay, &mut best);
        if cost > GOOD_COST {
            self.thoroughly(&search, overlay, &mut best);
        }
        overlay.place(region, runs, model, best.pose);
        Found {
            pose: best.pose,
            fit: best.fit,
        }
    }

    /// Starts at the centroid; returns the cost of the best.
    fn quickly(&mut self, search: &Search, overlay: &mut Overlay, best: &mut Best) -> f64 {
        let mut cost = f64::INFINITY;
        for &flipped in search.faces() {
            self.starts.clear();
            for angle in search.angles() {
                self.start(search, search.centroid, angle, flipped);
            }
            self.starts.truncate(5);
            cost = cost.min(self.refine(search, 2, overlay, best));
        }
        cost
    }

    /// Starts all over the region.
    fn thoroughly(&mut self, search: &Search, overlay: &mut Overlay, best: &mut Best) {
        for &flipped in search.faces() {
            self.starts.clear();
            for angle in search.angles() {
                search.middles(angle, flipped, &mut self.middle);
                for i in 0..self.middle.len() {
                    self.start(search, self.middle[i], angle, flipped);
                }
            }
            self.refine(search, 4, overlay, best);
        }
    }

    fn start(&mut self, search: &Search, middle: (f64, f64), angle: f64, flipped: bool) {
        let place = Place {
            x: middle.0,
            y: middle.1,
            angle,
            flipped,
        };
        let cost = align::cost(search.model, &self.few, &place, search.coarse_px);
        self.starts.offer(cost, place);
    }

    /// Refines the starts with few points, the best `keep` different ones with all points, and lets the overlap decide.
    /// Returns the lowest cost.
    fn refine(
        &mut self,
        search: &Search,
        keep: usize,
        overlay: &mut Overlay,
        best: &mut Best,
    ) -> f64 {
        let mut refined = Shortlist::<32>::default();
        for &(_, start) in self.starts.iter() {
            let mut place = start;
            for scale in [1.0, 0.7, 0.5, 0.35, 0.25, 0.25] {
                let scale_px = (scale * search.coarse_px).max(FINE_PX);
                align::step(search.model, &self.few, &mut place, Kernel::GemanMcClure { scale_px });
            }
            search.hold(&mut place);
            refined.offer(align::cost(search.model, &self.few, &place, FINE_PX), place);
        }
        let mut lowest = f64::INFINITY;
        let mut tried = Shortlist::<4>::default();
        for &(cost, place) in refined.iter() {
            if tried.len() == keep || tried.iter().any(|(_, other)| search.alike(&place, other)) {
                continue;
            }
            tried.offer(cost, place);
            lowest = lowest.min(self.finish(search, place, overlay, best));
        }
        lowest
    }

    fn finish(
        &self,
        search: &Search,
        mut place: Place,
        overlay: &mut Overlay,
        best: &mut Best,
    ) -> f64 {
        let model = search.model;
        for _ in 0..8 {
            let kernel = Kernel::Biweight { scale_px: FINE_PX };
            if align::step(model, &self.points, &mut place, kernel) < 0.005 {
                break;
            }
        }
        search.hold(&mut place);
        let pose = search.pose(&place);
        overlay.place(search.region, search.runs, model, pose);
        best.offer(pose, overlay.fit());
        align::cost(model, &self.points, &place, FINE_PX)
    }
}

/// Takes up to [`FEW`] of the points, spread over all of them but not in equal steps, so that no side is left out.
fn spread(points: &[[f32; 2]], few: &mut Vec<[f32; 2]>) {
    few.clear();
    if points.len() <= FEW {
        few.extend_from_slice(points);
        return;
    }
    for i in 0..FEW {
        let (from, to) = (i * points.len() / FEW, (i + 1) * points.len() / FEW);
        // Knuth's multiplicative hash (The Art of Computer Programming 3, 6.4) picks one of each stretch.
        let pick = (i as u32).wrapping_mul(2_654_435_769) >> 16;
        few.push(points[from + pick as usize % (to - from)]);
    }
}

/// What one search is about.
struct Search<'a> {
    region: &'a Region,
    runs: &'a [Run],
    model: &'a Model,
    /// Of the region, as all places, from its upper left pixel.
    centroid: (f64, f64),
    coarse_px: f64,
}

impl<'a> Search<'a> {
    fn new(region: &'a Region, runs: &'a [Run], model: &'a Model) -> Self {
        let origin = (f64::from(region.x_min), f64::from(region.y_min));
        Self {
            region,
            runs,
            model,
            centroid: (region.centroid_x - origin.0, region.centroid_y - origin.1),
            coarse_px: (0.15 * model.radius_px).max(4.0),
        }
    }

    fn faces(&self) -> &'static [bool] {
        if self.model.symmetry().mirror { &[false] } else { &[false, true] }
    }

    /// Angles (radians) close enough that one of them is within reach of the true one: nine degrees, less for shapes that
    /// are thin for their length.
    fn angles(&self) -> impl Iterator<Item = f64> + use<> {
        let span = self.model.symmetry().span_deg().to_radians();
        let thin = 1.5 * self.model.depth_px / self.model.radius_px.max(1.0);
        let step = thin.clamp(3_f64.to_radians(), 9_f64.to_radians());
        let count = (span / step).ceil().max(1.0) as u32;
        (0..count).map(move |i| span * f64::from(i) / f64::from(count))
    }

    /// Where the silhouette's centroid may be at this angle.
    fn middles(&self, angle: f64, flipped: bool, middles: &mut Vec<(f64, f64)>) {
        middles.clear();
        middles.push(self.centroid);
        let [left, top, right, bottom] = self.extent(angle, flipped);
        let region = self.region;
        let far = |low: u32, high: u32| f64::from(high - low) - 1.0;
        let (width, height) = (far(region.x_min, region.x_max), far(region.y_min, region.y_max));
        for x in [-left, width - right] {
            middles.extend([-top, height - bottom].map(|y| (x, y)));
        }
        if region.area_px as f64 > 1.3 * self.model.area_px as f64 {
            let (x, y) = self.half_way();
            middles.push((self.centroid.0 + x, self.centroid.1 + y));
            middles.push((self.centroid.0 - x, self.centroid.1 - y));
        }
    }

    /// How far the silhouette reaches from its centroid at this angle: left, top, right, bottom.
    fn extent(&self, angle: f64, flipped: bool) -> [f64; 4] {
        let (sin, cos) = angle.sin_cos();
        let side = if flipped { -1.0 } else { 1.0 };
        let turned = |&(u, v): &(f64, f64)| (cos * side * u - sin * v, sin * side * u + cos * v);
        let start = [f64::INFINITY, f64::INFINITY, f64::NEG_INFINITY, f64::NEG_INFINITY];
        self.model.rim.iter().map(turned).fold(start, |e, (x, y)| {
            [e[0].min(x), e[1].min(y), e[2].max(x), e[3].max(y)]
        })
    }

    /// From the region's centroid to the middle of one of two equal halves along its long axis. Two parts at distances d
    /// from there have a second moment of d squared more per pixel than each alone, which is about that across.
    fn half_way(&self) -> (f64, f64) {
        let Region { mu20, mu11, mu02, .. } = *self.region;
        let axis = 0.5 * f64::atan2(2.0 * mu11, mu20 - mu02);
        let spread = (mu20 - mu02).hypot(2.0 * mu11) / self.region.area_px as f64;
        let distance = spread.max(0.0).sqrt();
        (distance * axis.cos(), distance * axis.sin())
    }

    /// Keeps the middle in the region's box, where the silhouette's must be if the two have anything to do with each other.
    fn hold(&self, place: &mut Place) {
        let region = self.region;
        let within = |at: f64, low: u32, high: u32| at.clamp(0.0, f64::from(high - low));
        place.x = within(place.x, region.x_min, region.x_max);
        place.y = within(place.y, region.y_min, region.y_max);
    }

    fn alike(&self, a: &Place, b: &Place) -> bool {
        let span = self.model.symmetry().span_deg().to_radians();
        let turn = if span == 0.0 { 0.0 } else { (a.angle - b.angle).rem_euclid(span) };
        let turn = turn.min(span - turn);
        a.flipped == b.flipped
            && (a.x - b.x).hypot(a.y - b.y) < 1.5
            && turn * self.model.radius_px < 2.0
    }

    fn pose(&self, place: &Place) -> Pose {
        let region = self.region;
        let pose = place.pose((f64::from(region.x_min), f64::from(region.y_min)));
        Pose {
            angle_deg: self.model.symmetry().smallest_deg(pose.angle_deg),
            ..pose
        }
    }
}

/// The pose with the largest overlap so far. Of equal ones the first found stays, and face up is tried first.
#[derive(Clone, Copy, Debug, Default)]
struct Best {
    pose: Pose,
    fit: f64,
    any: bool,
}

impl Best {
    fn offer(&mut self, pose: Pose, fit: f64) {
        let tie = fit == self.fit && pose.flipped == self.pose.flipped && pose.angle_deg < self.pose.angle_deg;
        if !self.any || fit > self.fit || tie {
            *self = Self {
                pose,
                fit,
                any: true,
            };
        }
    }
}

/// The `N` places with the lowest costs, lowest first; of equal costs the one that came first.
#[derive(Clone, Debug)]
struct Shortlist<const N: usize> {
    places: [(f64, Place); N],
    len: usize,
}

impl<const N: usize> Default for Shortlist<N> {
    fn default() -> Self {
        Self {
            places: [(0.0, Place::default()); N],
            len: 0,
        }
    }
}

impl<const N: usize> Shortlist<N> {
    fn clear(&mut self) {
        self.len = 0;
    }

    fn truncate(&mut self, len: usize) {
        self.len = self.len.min(len);
    }

    fn len(&self) -> usize {
        self.len
    }

    fn iter(&self) -> impl Iterator<Item = &(f64, Place)> {
        self.places[..self.len].iter()
    }

    fn offer(&mut self, cost: f64, place: Place) {
        let at = self.places[..self.len].partition_point(|&(other, _)| other <= cost);
        if at == N {
            return;
        }
        self.len = (self.len + 1).min(N);
        self.places[at..self.len].rotate_right(1);
        self.places[at] = (cost, place);
    }
}
