//! Where the search for a pose starts, and which poses count as the same.

use crate::stage::{Region, Run};

use super::align::Place;
use super::overlay::Overlay;
use super::pose::Found;
use super::{Model, Pose};

/// One region and one silhouette. All places are measured from the region's upper left pixel.
pub(super) struct Search<'a> {
    pub(super) region: &'a Region,
    pub(super) runs: &'a [Run],
    pub(super) model: &'a Model,
    pub(super) centroid: (f64, f64),
    /// Distances above this are all the same while the pose is coarse.
    pub(super) coarse_px: f64,
}

impl<'a> Search<'a> {
    pub(super) fn new(region: &'a Region, runs: &'a [Run], model: &'a Model) -> Self {
        let origin = (f64::from(region.x_min), f64::from(region.y_min));
        Self {
            region,
            runs,
            model,
            centroid: (region.centroid_x - origin.0, region.centroid_y - origin.1),
            coarse_px: (0.15 * model.radius_px).max(4.0),
        }
    }

    /// Angles (radians) close enough that one of them is within reach of the true one: nine degrees, less for shapes that
    /// are thin for their length. None face down if that looks the same as face up.
    pub(super) fn angles(&self, flipped: bool) -> impl Iterator<Item = f64> + use<> {
        let span = self.model.symmetry().span_deg().to_radians();
        let thin = 1.5 * self.model.depth_px / self.model.radius_px.max(1.0);
        let step = thin.clamp(3_f64.to_radians(), 9_f64.to_radians());
        let needless = flipped && self.model.symmetry().mirror;
        let count = if needless {
            0
        } else {
            (span / step).ceil().max(1.0) as u32
        };
        (0..count).map(move |i| span * f64::from(i) / f64::from(count))
    }

    /// Where the silhouette's centroid may be at this angle if it is not at the region's: with the silhouette pushed into
    /// each corner of the region's box, and in the middles of two parts side by side.
    pub(super) fn middles(&self, angle: f64, flipped: bool, middles: &mut Vec<(f64, f64)>) {
        middles.clear();
        let [left, top, right, bottom] = self.extent(angle, flipped);
        let region = self.region;
        let far = |low: u32, high: u32| f64::from(high - low) - 1.0;
        let (width, height) = (
            far(region.x_min, region.x_max),
            far(region.y_min, region.y_max),
        );
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
        let start = [
            f64::INFINITY,
            f64::INFINITY,
            f64::NEG_INFINITY,
            f64::NEG_INFINITY,
        ];
        self.model.rim.iter().map(turned).fold(start, |e, (x, y)| {
            [e[0].min(x), e[1].min(y), e[2].max(x), e[3].max(y)]
        })
    }

    /// From the region's centroid to the middle of one of two equal halves along its long axis. Two parts at distances d
    /// from there have a second moment of d squared more per pixel than each alone, which is about that across.
    fn half_way(&self) -> (f64, f64) {
        let Region {
            mu20, mu11, mu02, ..
        } = *self.region;
        let axis = 0.5 * f64::atan2(2.0 * mu11, mu20 - mu02);
        let spread = (mu20 - mu02).hypot(2.0 * mu11) / self.region.area_px as f64;
        let distance = spread.max(0.0).sqrt();
        (distance * axis.cos(), distance * axis.sin())
    }

    /// Keeps the middle in the region's box, where the silhouette's must be if the two have anything to do with each other.
    pub(super) fn hold(&self, place: &mut Place) {
        let region = self.region;
        let within = |at: f64, low: u32, high: u32| at.clamp(0.0, f64::from(high - low));
        place.x = within(place.x, region.x_min, region.x_max);
        place.y = within(place.y, region.y_min, region.y_max);
    }

    /// Whether the two are the same but for a pixel or two.
    pub(super) fn alike(&self, a: &Place, b: &Place) -> bool {
        let span = self.model.symmetry().span_deg().to_radians();
        let turn = if span == 0.0 {
            0.0
        } else {
            (a.angle - b.angle).rem_euclid(span)
        };
        let turn = turn.min(span - turn);
        a.flipped == b.flipped
            && (a.x - b.x).hypot(a.y - b.y) < 1.5
            && turn * self.model.radius_px < 2.0
    }

    /// Draws the silhouette there into `overlay`.
    pub(super) fn place(&self, place: &Place, overlay: &mut Overlay) -> Found {
        let pose = self.pose(place);
        overlay.place(self.region, self.runs, self.model, pose);
        Found {
            pose,
            fit: overlay.fit(),
        }
    }

    /// The pose in the picture; of those that look the same the one with the smallest angle.
    fn pose(&self, place: &Place) -> Pose {
        let region = self.region;
        let pose = place.pose((f64::from(region.x_min), f64::from(region.y_min)));
        Pose {
            angle_deg: self.model.symmetry().smallest_deg(pose.angle_deg),
            ..pose
        }
    }
}
