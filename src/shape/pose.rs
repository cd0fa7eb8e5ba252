//! Finds where a silhouette lies: many coarse starts, a few of them refined, and overlap over union to decide.
//!
//! Starts are spread over the angles that look different, face up and face down, at the region's centroid. That serves
//! nearly every part. Where the outcome is poorer than good parts give, more of them are refined; where it stays poor, as
//! it does when a large piece is broken off or two parts have grown together, starts that do not rely on the centroid
//! join in.

use crate::stage::{Region, Run};

use super::align::{self, Kernel, Place};
use super::overlay::Overlay;
use super::search::Search;
use super::shortlist::Shortlist;
use super::{Model, Pose, edge};

/// A pose and how well it fits.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub(super) struct Found {
    /// Where the silhouette lies; of poses that look the same the one with the smallest angle, face up.
    pub(super) pose: Pose,
    /// Overlap over union.
    pub(super) fit: f64,
}

/// How many poses are looked at with all points in the end, at most.
const FINALISTS: usize = 4;
/// Points for coarse work.
const FEW: usize = 96;
/// Distances above this are all the same once the pose is fine.
const FINE_PX: f64 = 3.0;
/// With a higher cost than this, the pose itself is in doubt.
const POOR_COST: f64 = 0.3;
/// The coarse steps: what part of the coarse distance, and so on down to the fine one.
const COARSE: [f64; 3] = [1.0, 0.7, 0.5];
const FINER: [f64; 3] = [0.35, 0.25, 0.25];

/// The search with its buffers, none of which grows after it was made.
#[derive(Clone, Debug)]
pub(super) struct Finder {
    points: Vec<[f32; 2]>,
    few: Vec<[f32; 2]>,
    middles: Vec<(f64, f64)>,
    finalists: Shortlist<FINALISTS>,
}

impl Default for Finder {
    fn default() -> Self {
        Self {
            points: Vec::with_capacity(edge::MOST_POINTS),
            few: Vec::with_capacity(FEW),
            middles: Vec::with_capacity(8),
            finalists: Shortlist::default(),
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
        self.finalists.clear();
        let search = Search::new(region, runs, model);
        let starts = [false, true].map(|flipped| self.at_centroid(&search, flipped));
        for starts in &starts {
            self.refine(&search, starts.first(5));
        }
        if self.lowest_cost() > model.good_cost(FINE_PX) {
            for starts in &starts {
                self.refine(&search, starts.after(5));
            }
        }
        if self.lowest_cost() > POOR_COST {
            for flipped in [false, true] {
                let starts = self.elsewhere(&search, flipped);
                self.refine(&search, starts.first(24));
            }
        }
        self.decide(&search, overlay)
    }

    fn lowest_cost(&self) -> f64 {
        self.finalists
            .as_slice()
            .first()
            .map_or(f64::INFINITY, |&(cost, _)| cost)
    }

    /// Starts at the region's centroid.
    fn at_centroid(&self, search: &Search, flipped: bool) -> Shortlist<16> {
        let mut starts = Shortlist::default();
        for angle in search.angles(flipped) {
            self.start(search, search.centroid, angle, flipped, &mut starts);
        }
        starts
    }

    /// Starts all over the region.
    fn elsewhere(&mut self, search: &Search, flipped: bool) -> Shortlist<24> {
        let mut starts = Shortlist::default();
        for angle in search.angles(flipped) {
            search.middles(angle, flipped, &mut self.middles);
            for &middle in &self.middles {
                self.start(search, middle, angle, flipped, &mut starts);
            }
        }
        starts
    }

    fn start<const N: usize>(
        &self,
        search: &Search,
        middle: (f64, f64),
        angle: f64,
        flipped: bool,
        starts: &mut Shortlist<N>,
    ) {
        let place = Place {
            x: middle.0,
            y: middle.1,
            angle,
            flipped,
        };
        let cost = align::cost(search.model, &self.few, &place, search.coarse_px);
        starts.offer(cost, place);
    }

    /// Takes coarse steps from every start with few points, finer ones from the best of those, and adds what is new to the
    /// finalists, by its cost with all points.
    fn refine(&mut self, search: &Search, starts: &[(f64, Place)]) {
        let mut coarse = Shortlist::<4>::default();
        for &(_, start) in starts {
            let place = self.steps(search, start, &COARSE);
            let cost = align::cost(search.model, &self.few, &place, 0.5 * search.coarse_px);
            let tried = coarse.as_slice().iter();
            if !tried.clone().any(|(_, other)| search.alike(&place, other)) {
                coarse.offer(cost, place);
            }
        }
        let mut fine = Shortlist::<2>::default();
        for &(_, place) in coarse.as_slice() {
            let place = self.steps(search, place, &FINER);
            let tried = self.finalists.as_slice().iter().chain(fine.as_slice());
            if !tried.clone().any(|(_, other)| search.alike(&place, other)) {
                fine.offer(align::cost(search.model, &self.few, &place, FINE_PX), place);
            }
        }
        for &(_, place) in fine.as_slice() {
            let cost = align::cost(search.model, &self.points, &place, FINE_PX);
            self.finalists.offer(cost, place);
        }
    }

    fn steps(&self, search: &Search, mut place: Place, scales: &[f64]) -> Place {
        for scale in scales {
            let scale_px = (scale * search.coarse_px).max(FINE_PX);
            let kernel = Kernel::GemanMcClure { scale_px };
            align::step(search.model, &self.few, &mut place, kernel);
        }
        search.hold(&mut place);
        place
    }

    /// Of the finalists that may be the best, the one with the largest overlap. Only those that overlap about as much as
    /// the best are finished.
    fn decide(&self, search: &Search, overlay: &mut Overlay) -> Found {
        let within = 1.3 * self.lowest_cost() + 0.01;
        let likely = self
            .finalists
            .as_slice()
            .iter()
            .filter(|(cost, _)| *cost <= within);
        let mut fits = [0.0_f64; FINALISTS];
        let only = likely.clone().count() == 1;
        if !only {
            for (fit, &(_, place)) in fits.iter_mut().zip(likely.clone()) {
                *fit = search.place(&place, overlay).fit;
            }
        }
        let enough = fits.iter().copied().fold(0.0, f64::max) - 0.01;
        let mut best: Option<Found> = None;
        let mut last = Found::default();
        for (_, &(_, place)) in fits.iter().zip(likely).filter(|&(&fit, _)| fit >= enough) {
            last = search.place(&self.finish(search, place), overlay);
            if best.is_none_or(|best| last.beats(&best)) {
                best = Some(last);
            }
        }
        // There always is a finalist, since there always is a start.
        let best = best.unwrap_or_default();
        if last != best {
            overlay.place(search.region, search.runs, search.model, best.pose);
        }
        best
    }

    fn finish(&self, search: &Search, mut place: Place) -> Place {
        let kernel = Kernel::Biweight { scale_px: FINE_PX };
        for _ in 0..8 {
            if align::step(search.model, &self.points, &mut place, kernel) < 0.02 {
                break;
            }
        }
        search.hold(&mut place);
        place
    }
}

impl Found {
    /// A larger overlap; of equal ones face up, then the smaller angle.
    fn beats(&self, other: &Self) -> bool {
        let rank = |found: &Self| (found.pose.flipped, found.pose.angle_deg);
        self.fit > other.fit || (self.fit == other.fit && rank(self) < rank(other))
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
