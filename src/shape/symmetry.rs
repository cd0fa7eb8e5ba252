//! Which turns of a silhouette cannot be told apart, and whether it has a face. Found from the silhouette itself.

use super::gauge::Gauge;
use super::overlay::Overlay;
use super::{Model, Pose};
use crate::stage::{Region, Run};

/// What leaves a silhouette the same.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Symmetry {
    /// How many turns of equal angle bring it back onto itself: 1 is none, 0 means that every turn does.
    pub turns: u32,
    /// Whether it is its own mirror image, so that face up and face down look the same.
    pub mirror: bool,
}

/// The most turns that are looked for; what has more is as good as round.
const MOST_TURNS: u32 = 36;

/// How far edges of perfectly equal parts seem to be apart once they are taught, as a standard deviation.
const EVEN_PX: f64 = 0.4;

impl Symmetry {
    /// Every pose looks different.
    pub const NONE: Self = Self {
        turns: 1,
        mirror: false,
    };

    /// Angles are told apart from 0 up to this.
    pub fn span_deg(self) -> f64 {
        if self.turns == 0 {
            0.0
        } else {
            360.0 / f64::from(self.turns)
        }
    }

    /// The smallest of the angles that look the same as this one.
    pub fn smallest_deg(self, angle_deg: f64) -> f64 {
        let span = self.span_deg();
        if span == 0.0 {
            return 0.0;
        }
        // The remainder of a tiny negative angle rounds up to the span itself.
        let rest = angle_deg.rem_euclid(span);
        if rest < span { rest } else { 0.0 }
    }

    /// Two poses look the same if both figures between them are at most 2 px, or 2 % of the radius in large pictures; more
    /// where good parts differ, since the mean of a few parts is then no more even than they are.
    pub(super) fn of(model: &Model) -> Self {
        let Some(mut same) = Same::new(model) else {
            return Self::NONE;
        };
        let turned = |angle_deg| Pose {
            angle_deg,
            ..model.identity()
        };
        // Turns that have nothing to do with one another or with the angles of corners.
        let round = [17.3, 47.9, 77.7, 101.3, 137.5]
            .iter()
            .all(|&angle| same.at(turned(angle)));
        let turns = if round {
            0
        } else {
            let found = (2..=MOST_TURNS)
                .rev()
                .find(|&n| same.at(turned(360.0 / f64::from(n))));
            found.unwrap_or(1)
        };
        let mirror = round || same.anywhere_mirrored(turns);
        Self { turns, mirror }
    }
}

/// The silhouette as a part, to be compared with itself at other poses.
struct Same<'a> {
    model: &'a Model,
    region: Region,
    runs: Vec<Run>,
    overlay: Overlay,
    gauge: Gauge,
    tolerance_px: f64,
}

impl<'a> Same<'a> {
    fn new(model: &'a Model) -> Option<Self> {
        let (region, runs) = model.silhouette().majority().to_region()?;
        let uneven_px = (model.spread_px.powi(2) - EVEN_PX * EVEN_PX)
            .max(0.0)
            .sqrt();
        Some(Self {
            model,
            region,
            runs,
            overlay: Overlay::default(),
            gauge: Gauge::default(),
            tolerance_px: (2.0 + 6.0 * uneven_px).max(0.02 * model.radius_px),
        })
    }

    fn fit(&mut self, pose: Pose) -> f64 {
        self.overlay
            .place(&self.region, &self.runs, self.model, pose);
        self.overlay.fit()
    }

    fn at(&mut self, pose: Pose) -> bool {
        self.fit(pose);
        let (missing, excess) = self.overlay.gauge(&mut self.gauge, 0.0);
        missing.px.max(excess.px) <= self.tolerance_px
    }

    /// Whether some turn of the mirror image is the silhouette again.
    fn anywhere_mirrored(&mut self, turns: u32) -> bool {
        let span = 360.0 / f64::from(turns);
        // Two pixels at the rim, then half a pixel.
        let coarse = (2.0 / self.model.radius_px.max(1.0))
            .to_degrees()
            .clamp(0.2, 9.0);
        let best = self.best_mirrored(0.0, coarse, (span / coarse).ceil() as u32);
        let best = self.best_mirrored(best - coarse, coarse / 4.0, 9);
        self.at(self.mirrored(best))
    }

    fn mirrored(&self, angle_deg: f64) -> Pose {
        Pose {
            angle_deg: angle_deg.rem_euclid(360.0),
            flipped: true,
            ..self.model.identity()
        }
    }

    /// The angle of the best fit among `count` from `first` on.
    fn best_mirrored(&mut self, first: f64, step: f64, count: u32) -> f64 {
        let mut best = (0.0, first);
        for angle in (0..count).map(|i| first + f64::from(i) * step) {
            let fit = self.fit(self.mirrored(angle));
            if fit > best.0 {
                best = (fit, angle);
            }
        }
        best.1
    }
}

#[cfg(test)]
mod tests {
    use super::super::drawn::{Outline, silhouette};
    use super::*;

    fn symmetry(outline: &Outline) -> (u32, bool) {
        let found = Model::new(silhouette(outline, 0.25).0).symmetry();
        (found.turns, found.mirror)
    }

    #[test]
    fn symmetry_is_found_from_the_picture() {
        assert_eq!(symmetry(&Outline::disc(40.0)), (0, true));
        assert_eq!(symmetry(&Outline::star(76.0)), (5, true));
        assert_eq!(symmetry(&Outline::gasket(60.0)), (1, false));
        let bar = [(-60.0, -10.0), (60.0, -10.0), (60.0, 10.0), (-60.0, 10.0)];
        assert_eq!(symmetry(&Outline::polygon(&bar)), (2, true));
        let square = [(-40.0, -40.0), (40.0, -40.0), (40.0, 40.0), (-40.0, 40.0)];
        assert_eq!(symmetry(&Outline::polygon(&square)), (4, true));
        // A parallelogram turns onto itself but has a face; an arrow has neither turn nor face.
        let slanted = [(-50.0, -20.0), (30.0, -20.0), (50.0, 20.0), (-30.0, 20.0)];
        assert_eq!(symmetry(&Outline::polygon(&slanted)), (2, false));
        let arrow = [(-50.0, -20.0), (50.0, 0.0), (-50.0, 20.0)];
        assert_eq!(symmetry(&Outline::polygon(&arrow)), (1, true));
    }

    #[test]
    fn angles_come_down_to_the_smallest() {
        let five = Symmetry {
            turns: 5,
            mirror: true,
        };
        assert_eq!(five.smallest_deg(73.0), 1.0);
        assert_eq!(five.smallest_deg(-1e-20), 0.0);
        assert_eq!(Symmetry { turns: 0, ..five }.smallest_deg(55.0), 0.0);
        assert_eq!(Symmetry::NONE.smallest_deg(-10.0), 350.0);
    }
}
