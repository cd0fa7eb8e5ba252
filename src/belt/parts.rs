//! Merging the views of one part, and the moment at which its verdict is final.

use super::view::{Extent, View};
use crate::shape::{Judged, Reason, Reasons, Verdict};
use crate::units::Micros;

/// A piece that an edge of the picture cut off belongs to the part that holds at least this much of its box.
const FRAGMENT: f64 = 0.5;

/// Two boxes that share at least this much of the larger one show the same part, even if bad light or a burr that comes
/// and goes has moved its centroid.
const SAME_PART: f64 = 0.7;

/// Two boxes that share at least this much of the larger one show some of the same belt, whatever their centroids say.
const SAME_BELT: f64 = 0.2;

/// One physical thing on the belt, with its verdict.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Part {
    /// Counted from 1 in the order of the decisions.
    pub number: u64,
    /// Centroid along the belt.
    pub along_mm: f64,
    /// Centroid across the belt.
    pub across_mm: f64,
    /// Area in the view that speaks for it.
    pub area_mm2: f64,
    /// Everything that was ever seen of it.
    pub extent: Extent,
    /// Capture time of its first view.
    pub first_us: Micros,
    /// When its verdict became final.
    pub decided_us: Micros,
    /// Number of views, whole or partial.
    pub views: u32,
    /// Capture time of the view that speaks for it.
    pub spoken_us: Micros,
    /// What that view says; `None` if it was never seen whole.
    pub judged: Option<Judged>,
    /// What becomes of it, before the outlet is chosen.
    pub verdict: Verdict,
    /// Everything against it.
    pub reasons: Reasons,
}

/// A part that is still in view, or not decided yet. A decided one stays to take the views of its tail, which leaves
/// the picture after its leading edge has passed the point of decision.
#[derive(Clone, Debug)]
struct Track {
    latest: View,
    extent: Extent,
    first_us: Micros,
    views: u32,
    whole: Vec<View>,
    touching: bool,
    side: bool,
    decided: bool,
}

impl Track {
    fn begin(view: &View, mut whole: Vec<View>) -> Self {
        whole.clear();
        let mut track = Self {
            latest: *view,
            extent: view.extent,
            first_us: view.captured_us,
            views: 0,
            whole,
            touching: false,
            side: false,
            decided: false,
        };
        track.add(view);
        track
    }

    fn add(&mut self, view: &View) {
        self.latest = *view;
        self.extent = self.extent.union(view.extent);
        self.views += 1;
        self.side |= view.cut.side;
        if view.judged.is_some() {
            self.whole.push(*view);
        }
    }

    /// The whole view that speaks for the part: the median by severity, the worse one of two in the middle.
    fn spokesman(&mut self) -> Option<&View> {
        let severity = |view: &View| view.judged.map_or(f64::INFINITY, |judged| judged.severity);
        self.whole
            .sort_by(|a, b| severity(a).total_cmp(&severity(b)));
        self.whole.get(self.whole.len() / 2)
    }
}

/// How a part was seen in the frame that is being taken.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
enum Met {
    Not,
    Cut,
    Whole,
}

impl Met {
    fn by(view: &View) -> Self {
        if view.cut.any() {
            Self::Cut
        } else {
            Self::Whole
        }
    }
}

/// All parts between the camera and the point of decision.
#[derive(Clone, Debug)]
pub struct Parts {
    tracks: Vec<Track>,
    spare: Vec<Vec<View>>,
    pairs: Vec<(f64, usize, usize)>,
    joined: Vec<bool>,
    met: Vec<Met>,
    gate: Gate,
    decided: u64,
}

/// How far two views of one part may be apart: a fixed share for the pixels, and one that grows with time because the
/// belt may run faster or slower than stated.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Gate {
    /// What the picture alone may be off.
    pub base_mm: f64,
    /// What the belt may be off, for each second between the views.
    pub drift_mm_s: f64,
}

impl Gate {
    fn allows(&self, a: &View, b: &View, distance_mm: f64) -> bool {
        let apart = (a.captured_us - b.captured_us).as_seconds().abs();
        distance_mm <= self.base_mm + self.drift_mm_s * apart
    }
}

impl Parts {
    /// No parts yet.
    pub fn new(gate: Gate) -> Self {
        Self {
            tracks: Vec::new(),
            spare: Vec::new(),
            pairs: Vec::new(),
            joined: Vec::new(),
            met: Vec::new(),
            gate,
            decided: 0,
        }
    }

    /// Takes in all views of one frame: nearest pairs first, each part at most once; then pieces of known parts that
    /// the picture's edge cut off (a star leaves on two of its tips); then views that lie over a known part without
    /// matching it, which means that parts touch; what is left begins a part.
    ///
    /// `gone_mm` is the downstream edge of the frame: what lies wholly before it will not be seen again.
    pub fn take(&mut self, views: &[View], gone_mm: f64) {
        self.forget(gone_mm - self.gate.base_mm);
        self.joined.clear();
        self.joined.resize(views.len(), false);
        self.met.clear();
        self.met.resize(self.tracks.len(), Met::Not);
        self.join_nearest(views);
        self.join_fragments(views);
        self.join_overlapping(views);
        for (view, _) in views
            .iter()
            .zip(&self.joined)
            .filter(|(_, joined)| !**joined)
        {
            let whole = self.spare.pop().unwrap_or_default();
            self.tracks.push(Track::begin(view, whole));
            self.met.push(Met::by(view));
        }
        self.absorb_fragments();
    }

    fn forget(&mut self, gone_mm: f64) {
        let mut t = 0;
        while t < self.tracks.len() {
            let track = &self.tracks[t];
            if track.decided && track.extent.trail_mm < gone_mm {
                let gone = self.tracks.remove(t);
                self.spare.push(gone.whole);
            } else {
                t += 1;
            }
        }
    }

    fn join_nearest(&mut self, views: &[View]) {
        self.pairs.clear();
        for (v, view) in views.iter().enumerate() {
            for (t, track) in self.tracks.iter().enumerate() {
                let distance_mm = view.distance_mm(&track.latest);
                if self.gate.allows(view, &track.latest, distance_mm) {
                    self.pairs.push((distance_mm, v, t));
                }
            }
        }
        self.pairs
            .sort_unstable_by(|a, b| a.0.total_cmp(&b.0).then((a.1, a.2).cmp(&(b.1, b.2))));
        for &(_, v, t) in &self.pairs {
            if !self.joined[v] && self.met[t] == Met::Not {
                self.joined[v] = true;
                self.met[t] = Met::by(&views[v]);
                self.tracks[t].add(&views[v]);
            }
        }
    }

    /// First what the edge cut; then whole regions, which are pieces only of a part that the edge cuts in this frame:
    /// light that falls off towards a corner can part a tip from the rest.
    fn join_fragments(&mut self, views: &[View]) {
        for cut in [true, false] {
            for (v, view) in views.iter().enumerate() {
                if self.joined[v] || view.cut.side || view.cut.any() != cut {
                    continue;
                }
                let Some(t) = self.holder(view) else { continue };
                if cut || self.met[t] == Met::Cut {
                    self.joined[v] = true;
                    self.tracks[t].extent = self.tracks[t].extent.union(view.extent);
                    self.tracks[t].views += u32::from(self.met[t] == Met::Not);
                    self.met[t] = self.met[t].max(Met::Cut);
                }
            }
        }
    }

    /// The part whose box holds most of the view's.
    fn holder(&self, view: &View) -> Option<usize> {
        let held =
            |t: usize| self.tracks[t].extent.shared_mm2(view.extent) / view.extent.area_mm2();
        let best = (0..self.met.len()).max_by(|&a, &b| held(a).total_cmp(&held(b)));
        best.filter(|&t| held(t) >= FRAGMENT)
    }

    /// Pieces that came into the picture as parts of their own (a star may enter on two tips) end when the part that
    /// holds them is seen without them.
    fn absorb_fragments(&mut self) {
        let mut t = 0;
        while t < self.tracks.len() {
            if self.is_fragment(t) {
                let gone = self.tracks.remove(t);
                self.met.remove(t);
                self.spare.push(gone.whole);
            } else {
                t += 1;
            }
        }
    }

    fn is_fragment(&self, t: usize) -> bool {
        let piece = &self.tracks[t];
        let mine_mm2 = piece.extent.area_mm2();
        let holds = |(other, track): (usize, &Track)| {
            // What the side cuts will never be whole, and is rejected with all its pieces.
            let least = if piece.whole.is_empty() || track.side {
                Met::Cut
            } else {
                Met::Whole
            };
            let large = track.extent.area_mm2() * FRAGMENT >= mine_mm2 || piece.whole.is_empty();
            let seen = self.met[other] >= least;
            other != t
                && large
                && seen
                && track.extent.shared_mm2(piece.extent) >= FRAGMENT * mine_mm2
        };
        let unseen = self.met[t] == Met::Not && !piece.decided && !piece.side;
        unseen && self.tracks.iter().enumerate().any(holds)
    }

    fn join_overlapping(&mut self, views: &[View]) {
        for (v, view) in views.iter().enumerate() {
            if self.joined[v] {
                continue;
            }
            for (track, met) in self.tracks.iter_mut().zip(&mut self.met) {
                let larger_mm2 = view.extent.area_mm2().max(track.extent.area_mm2());
                let share = view.extent.shared_mm2(track.extent) / larger_mm2;
                if share < SAME_BELT {
                    continue;
                }
                track.touching |= share < SAME_PART || *met != Met::Not;
                if !self.joined[v] {
                    self.joined[v] = true;
                    *met = Met::by(view);
                    track.add(view);
                }
            }
        }
    }

    /// The leading edge of the part that is decided next.
    pub fn next_mm(&self) -> Option<f64> {
        self.next().map(|t| self.tracks[t].extent.lead_mm)
    }

    fn next(&self) -> Option<usize> {
        let order = |&a: &usize, &b: &usize| {
            let (a, b) = (self.tracks[a].extent, self.tracks[b].extent);
            a.lead_mm
                .total_cmp(&b.lead_mm)
                .then(a.top_mm.total_cmp(&b.top_mm))
        };
        (0..self.tracks.len())
            .filter(|&t| !self.tracks[t].decided)
            .min_by(order)
    }

    /// Decides the part with the foremost leading edge.
    pub fn decide(&mut self, now: Micros) -> Option<Part> {
        let track = self.next()?;
        let track = &mut self.tracks[track];
        track.decided = true;
        self.decided += 1;
        Some(final_verdict(track, self.decided, now))
    }
}

fn final_verdict(track: &mut Track, number: u64, now: Micros) -> Part {
    let (first_us, views, extent, touching) =
        (track.first_us, track.views, track.extent, track.touching);
    let latest = track.latest;
    let view = track.spokesman().copied();
    let judged = view.and_then(|view| view.judged);
    let mut reasons = judged.map_or(Reasons::NONE.with(Reason::Partial), |judged| judged.reasons);
    if touching {
        reasons = reasons.with(Reason::Touching);
    }
    let (along_mm, across_mm) = match &view {
        Some(view) => (view.along_mm, view.across_mm),
        None => (
            (extent.lead_mm + extent.trail_mm) / 2.0,
            (extent.top_mm + extent.bottom_mm) / 2.0,
        ),
    };
    Part {
        number,
        along_mm,
        across_mm,
        area_mm2: view.unwrap_or(latest).area_mm2,
        extent,
        first_us,
        decided_us: now,
        views,
        spoken_us: view.unwrap_or(latest).captured_us,
        judged,
        verdict: if reasons.is_empty() {
            Verdict::Keep
        } else {
            Verdict::Reject
        },
        reasons,
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::belt::Cut;
    use crate::shape::{Depth, Pose};

    const GATE: Gate = Gate {
        base_mm: 1.0,
        drift_mm_s: 8.0,
    };

    fn judged(severity: f64) -> Judged {
        Judged {
            shape: 0,
            pose: Pose::default(),
            fit: 0.98,
            missing: Depth {
                px: severity * 4.0,
                at: None,
            },
            excess: Depth::default(),
            reasons: if severity > 1.0 {
                Reasons::NONE.with(Reason::Missing)
            } else {
                Reasons::NONE
            },
            severity,
        }
    }

    /// A 38 mm part whose leading edge is at `lead_mm`, seen in frame `k`.
    fn whole(k: i64, lead_mm: f64, severity: f64) -> View {
        View {
            captured_us: Micros(k * 125_000),
            extent: Extent {
                lead_mm,
                trail_mm: lead_mm + 38.0,
                top_mm: 10.0,
                bottom_mm: 48.0,
            },
            along_mm: lead_mm + 19.0,
            across_mm: 29.0,
            area_mm2: 700.0,
            cut: Cut::default(),
            judged: Some(judged(severity)),
        }
    }

    /// Only `lead_mm..trail_mm` of a part, the rest being outside.
    fn piece(k: i64, lead_mm: f64, trail_mm: f64, across: (f64, f64), cut: Cut) -> View {
        View {
            captured_us: Micros(k * 125_000),
            extent: Extent {
                lead_mm,
                trail_mm,
                top_mm: across.0,
                bottom_mm: across.1,
            },
            along_mm: (lead_mm + trail_mm) / 2.0,
            across_mm: (across.0 + across.1) / 2.0,
            area_mm2: 20.0,
            cut,
            judged: None,
        }
    }

    const ENTERING: Cut = Cut {
        upstream: true,
        downstream: false,
        side: false,
    };
    const LEAVING: Cut = Cut {
        upstream: false,
        downstream: true,
        side: false,
    };

    fn all(parts: &mut Parts) -> Vec<Part> {
        std::iter::from_fn(|| parts.decide(Micros(7))).collect()
    }

    #[test]
    fn views_of_one_part_become_one_part() {
        let mut parts = Parts::new(GATE);
        parts.take(&[whole(0, 100.0, 0.2), whole(0, 155.0, 0.2)], 0.0);
        parts.take(&[whole(1, 155.9, 0.3), whole(1, 100.8, 0.3)], 0.0);
        let parts = all(&mut parts);
        assert_eq!(parts.len(), 2);
        assert_eq!(
            (parts[0].number, parts[0].views, parts[0].first_us),
            (1, 2, Micros(0))
        );
        assert!(parts[0].along_mm < parts[1].along_mm);
    }

    #[test]
    fn the_median_view_speaks_and_of_two_the_worse() {
        let mut parts = Parts::new(GATE);
        for (k, severity) in [(0, 0.4), (1, 3.0), (2, 0.5)] {
            parts.take(&[whole(k, 100.0, severity)], 0.0);
        }
        assert_eq!(all(&mut parts)[0].verdict, Verdict::Keep);
        for (k, severity) in [(0, 1.2), (1, 0.9)] {
            parts.take(&[whole(k, 300.0, severity)], 0.0);
        }
        let part = all(&mut parts)[0];
        assert_eq!((part.verdict, part.spoken_us), (Verdict::Reject, Micros(0)));
    }

    #[test]
    fn a_star_that_enters_and_leaves_on_two_tips_is_one_part() {
        let mut parts = Parts::new(GATE);
        parts.take(
            &[
                piece(0, 100.0, 105.0, (12.0, 18.0), ENTERING),
                piece(0, 102.5, 105.0, (40.0, 46.0), ENTERING),
            ],
            0.0,
        );
        parts.take(&[whole(1, 100.1, 0.2)], 0.0);
        parts.take(
            &[
                piece(2, 130.0, 138.0, (11.0, 17.0), LEAVING),
                piece(2, 130.0, 135.0, (41.0, 47.0), LEAVING),
            ],
            0.0,
        );
        let parts = all(&mut parts);
        assert_eq!(parts.len(), 1, "{parts:?}");
        assert_eq!(parts[0].verdict, Verdict::Keep);
        assert_eq!(parts[0].views, 3);
    }

    /// Light falls off towards the corner, and a tip parts from the rest that the edge cuts: a whole region, and a piece.
    #[test]
    fn a_tip_that_bad_light_parts_from_its_star_is_no_part() {
        let tip = |k| {
            let mut tip = whole(k, 102.0, 20.0);
            tip.extent = Extent {
                lead_mm: 102.0,
                trail_mm: 112.0,
                top_mm: 12.0,
                bottom_mm: 20.0,
            };
            (tip.along_mm, tip.across_mm) = (107.0, 16.0);
            tip
        };
        let mut parts = Parts::new(GATE);
        parts.take(
            &[tip(0), piece(0, 113.0, 120.0, (10.0, 48.0), ENTERING)],
            0.0,
        );
        parts.take(&[whole(1, 100.0, 0.2)], 0.0);
        parts.take(
            &[piece(2, 113.0, 138.0, (10.0, 48.0), LEAVING), tip(2)],
            0.0,
        );
        let parts = all(&mut parts);
        assert_eq!(parts.len(), 1, "{parts:#?}");
        assert_eq!(parts[0].verdict, Verdict::Keep);
    }

    #[test]
    fn something_that_lies_between_the_tips_of_a_star_is_a_part() {
        let other = |k| {
            let mut other = whole(k, 102.0, 20.0);
            other.extent = Extent {
                lead_mm: 102.0,
                trail_mm: 112.0,
                top_mm: 12.0,
                bottom_mm: 20.0,
            };
            (other.along_mm, other.across_mm) = (107.0, 16.0);
            other
        };
        let mut parts = Parts::new(GATE);
        for k in 0..3 {
            parts.take(&[whole(k, 100.0, 0.2), other(k)], 0.0);
        }
        assert_eq!(all(&mut parts).len(), 2);
    }

    #[test]
    fn a_part_that_was_never_whole_is_partial() {
        let mut parts = Parts::new(GATE);
        let side = Cut {
            side: true,
            ..Cut::default()
        };
        for k in 0..3 {
            parts.take(&[piece(k, 100.0, 138.0, (0.0, 12.0), side)], 0.0);
        }
        let parts = all(&mut parts);
        assert_eq!(parts.len(), 1);
        assert_eq!(parts[0].reasons, Reasons::NONE.with(Reason::Partial));
        assert_eq!((parts[0].views, parts[0].judged), (3, None));
    }

    #[test]
    fn a_piece_at_the_side_is_never_taken_for_a_piece_of_its_neighbour() {
        let mut parts = Parts::new(GATE);
        let side = Cut {
            side: true,
            ..ENTERING
        };
        parts.take(
            &[
                whole(0, 100.0, 0.2),
                piece(0, 110.0, 120.0, (0.0, 15.0), side),
            ],
            0.0,
        );
        parts.take(
            &[
                whole(1, 100.0, 0.2),
                piece(1, 110.0, 120.0, (0.0, 15.0), side),
            ],
            0.0,
        );
        assert_eq!(all(&mut parts).len(), 2);
    }

    #[test]
    fn a_pair_that_is_one_region_in_one_view_and_two_in_the_next_touches() {
        let mut parts = Parts::new(GATE);
        let mut pair = whole(0, 100.0, 0.5);
        pair.extent.trail_mm = 176.0;
        pair.along_mm = 138.0;
        parts.take(&[pair], 0.0);
        parts.take(&[whole(1, 100.0, 0.2), whole(1, 138.0, 0.2)], 0.0);
        let parts = all(&mut parts);
        assert_eq!(parts.len(), 1);
        assert!(parts[0].reasons.has(Reason::Touching));
    }

    /// The trailing half is still in view when the leading edge reaches the point of decision.
    #[test]
    fn the_tail_of_a_decided_part_is_no_part_of_its_own() {
        let mut parts = Parts::new(GATE);
        parts.take(&[whole(0, 100.0, 0.2)], 0.0);
        assert_eq!(all(&mut parts).len(), 1);
        parts.take(&[piece(1, 120.0, 138.0, (10.0, 48.0), LEAVING)], 120.0);
        assert_eq!(all(&mut parts), []);
        parts.take(&[whole(2, 170.0, 0.2)], 170.0);
        assert_eq!(all(&mut parts).len(), 1);
        assert_eq!(
            parts.tracks.len(),
            1,
            "what has left the picture is forgotten"
        );
    }

    /// Bad light at the edge hides a tab; in the next frame the part is whole and its centroid elsewhere.
    #[test]
    fn a_part_that_was_seen_without_its_tab_does_not_touch_anything() {
        let mut parts = Parts::new(GATE);
        let mut first = whole(0, 100.0, 5.0);
        first.extent.trail_mm -= 6.0;
        first.along_mm -= 4.0;
        parts.take(&[first], 0.0);
        parts.take(&[whole(1, 100.0, 0.2)], 0.0);
        parts.take(&[whole(2, 100.0, 0.2)], 0.0);
        let parts = all(&mut parts);
        assert_eq!((parts.len(), parts[0].verdict), (1, Verdict::Keep));
    }

    #[test]
    fn the_foremost_part_is_decided_first() {
        let mut parts = Parts::new(GATE);
        parts.take(&[whole(0, 155.0, 0.2), whole(0, 100.0, 0.2)], 0.0);
        assert_eq!(parts.next_mm(), Some(100.0));
        assert_eq!(
            all(&mut parts)
                .iter()
                .map(|part| part.along_mm)
                .collect::<Vec<_>>(),
            [119.0, 174.0]
        );
    }
}
