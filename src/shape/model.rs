//! A silhouette with everything derived from it that judging needs.

use super::field::Field;
use super::raster::{self, Cells, Placement};
use super::symmetry::Symmetry;
use super::{Bitmap, DistanceTransform, Pose, Silhouette};

/// A silhouette made ready for judging.
#[derive(Clone, Debug)]
pub struct Model {
    silhouette: Silhouette,
    symmetry: Symmetry,
    pub(super) centroid: (f64, f64),
    pub(super) area_px: u64,
    /// From the centroid to the farthest pixel centre of the majority.
    pub(super) radius_px: f64,
    /// Largest distance from a pixel of the majority to one that is not.
    pub(super) depth_px: f64,
    /// Pixel centres of the majority that are the first or last of their row, from the centroid.
    pub(super) rim: Vec<(f64, f64)>,
    /// How far edges of good parts are from the silhouette's, as a standard deviation.
    pub(super) spread_px: f64,
    pub(super) field: Field,
    cells: Cells,
}

impl Model {
    /// Derives everything from `silhouette`, whose majority must not be empty.
    pub fn new(silhouette: Silhouette) -> Self {
        let majority = silhouette.majority();
        assert!(majority.count() > 0, "a silhouette needs a majority");
        let centroid = silhouette.centroid();
        let ends = (0..majority.height_px()).filter_map(|y| {
            let first = majority.runs(y).next()?.0;
            let last = majority.runs(y).last()?.1 - 1;
            Some([first, last].map(|x| (x as f64 - centroid.0, y as f64 - centroid.1)))
        });
        let rim: Vec<_> = ends.flatten().collect();
        let deepest = DistanceTransform::default()
            .to_background(&majority)
            .iter()
            .max()
            .copied();
        let field = Field::new(&silhouette);
        let mut model = Self {
            symmetry: Symmetry::NONE,
            centroid,
            area_px: majority.count(),
            radius_px: rim.iter().map(|&(x, y)| x.hypot(y)).fold(0.0, f64::max),
            depth_px: f64::from(deepest.unwrap_or(0)).sqrt(),
            rim,
            spread_px: spread_px(&silhouette, &field),
            field,
            cells: Cells::new(&silhouette),
            silhouette,
        };
        model.symmetry = Symmetry::of(&model);
        model
    }

    /// What it was made from.
    pub fn silhouette(&self) -> &Silhouette {
        &self.silhouette
    }

    /// Which turns and mirrors cannot be told apart.
    pub fn symmetry(&self) -> Symmetry {
        self.symmetry
    }

    /// The pose at which the silhouette's pixels are the picture's.
    pub fn identity(&self) -> Pose {
        Pose {
            x_px: self.centroid.0,
            y_px: self.centroid.1,
            ..Pose::default()
        }
    }

    /// The cost (see [`super::align::cost`]) up to which a pose is that of a part without flaws. Parts differ by as much as
    /// the share is soft along the edge.
    pub(super) fn good_cost(&self, scale_px: f64) -> f64 {
        0.03 + 2.0 * (self.spread_px / scale_px).powi(2)
    }

    /// Puts every pixel that the silhouette covers at `pose` into `to`, whose pixel (0, 0) is the picture's pixel
    /// `origin`. Covered is what has a share of more than 127 at its centre, interpolated bilinearly and rounded; at
    /// whole-pixel shifts that is the majority itself.
    pub fn draw(&self, pose: Pose, origin: (i32, i32), to: &mut Bitmap) {
        let placement = Placement::new(pose, self.centroid);
        raster::draw(&self.silhouette, &self.cells, &placement, origin, to);
    }

    /// The smallest and largest columns and rows that pixels of the silhouette at `pose` can have: `[left, top, right,
    /// bottom]`, all inclusive.
    pub(super) fn bounds(&self, pose: Pose) -> [i32; 4] {
        // The interpolated edge lies less than a pixel beyond the outermost centres of the majority.
        let reach = self.radius_px + 2.0;
        let low = |at: f64| (at - reach).floor() as i32;
        let high = |at: f64| (at + reach).ceil() as i32;
        [
            low(pose.x_px),
            low(pose.y_px),
            high(pose.x_px),
            high(pose.y_px),
        ]
    }
}

/// Across an edge that is normally distributed with standard deviation s, the integral of 4 p (1 - p) is 4 s / sqrt(pi).
/// An edge that is sharp still differs by what pixels cannot tell: evenly over one pixel.
fn spread_px(silhouette: &Silhouette, field: &Field) -> f64 {
    let shares = silhouette
        .share
        .iter()
        .map(|&share| f64::from(share) / 255.0);
    let soft: f64 = shares.map(|p| 4.0 * p * (1.0 - p)).sum();
    (soft / field.edge_px().max(1.0) * std::f64::consts::PI.sqrt() / 4.0).max(0.29)
}
