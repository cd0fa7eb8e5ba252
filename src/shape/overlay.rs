//! A region and the silhouette at a pose, drawn into one crop of the picture.

use crate::stage::{Region, Run};

use super::gauge::Gauge;
use super::{Bitmap, Depth, Model, Pose};

/// The crop with both sets; its buffers are reused.
#[derive(Clone, Debug, Default)]
pub(super) struct Overlay {
    /// The picture's pixel that is the crop's (0, 0).
    pub(super) origin: (i32, i32),
    pub(super) taught: Bitmap,
    pub(super) part: Bitmap,
    part_px: u64,
    taught_px: u64,
    common_px: u64,
}

impl Overlay {
    pub(super) fn reserve(&mut self, width_px: usize, height_px: usize) {
        self.taught.reserve(width_px, height_px);
        self.part.reserve(width_px, height_px);
    }

    /// Draws both. The crop holds all of the region and all of the silhouette, with an empty border around them.
    pub(super) fn place(&mut self, region: &Region, runs: &[Run], model: &Model, pose: Pose) {
        let [left, top, right, bottom] = model.bounds(pose);
        let (left, top) = (left.min(region.x_min as i32), top.min(region.y_min as i32));
        let (right, bottom) = (
            right.max(region.x_max as i32),
            bottom.max(region.y_max as i32),
        );
        self.origin = (left - 1, top - 1);
        let size = ((right - left + 3) as usize, (bottom - top + 3) as usize);
        self.taught.reset(size.0, size.1);
        self.part.reset(size.0, size.1);
        let shift = |at: u32, origin: i32| (at as i32 - origin) as usize;
        for run in runs {
            let (x0, x1) = (shift(run.x0, self.origin.0), shift(run.x1, self.origin.0));
            self.part.insert_run(shift(run.y, self.origin.1), x0, x1);
        }
        model.draw(pose, self.origin, &mut self.taught);
        self.part_px = region.area_px;
        self.taught_px = self.taught.count();
        self.common_px = self.taught.count_common(&self.part);
    }

    /// Overlap over union, 0 to 1.
    pub(super) fn fit(&self) -> f64 {
        let union = self.part_px + self.taught_px - self.common_px;
        self.common_px as f64 / union.max(1) as f64
    }

    /// How much of the silhouette the region covers, 0 to 1.
    pub(super) fn covered(&self) -> f64 {
        self.common_px as f64 / self.taught_px.max(1) as f64
    }

    /// Pixels of the region outside the silhouette.
    pub(super) fn outside_px(&self) -> u64 {
        self.part_px - self.common_px
    }

    /// `(missing, excess)` with their places in the picture.
    pub(super) fn gauge(&self, gauge: &mut Gauge, flaw_below_px: f64) -> (Depth, Depth) {
        let (missing, excess) = gauge.both(&self.taught, &self.part, flaw_below_px);
        let in_picture = |depth: Depth| Depth {
            at: depth
                .at
                .map(|(x, y)| (x + self.origin.0, y + self.origin.1)),
            ..depth
        };
        (in_picture(missing), in_picture(excess))
    }
}
