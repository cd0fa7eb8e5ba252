//! The further measures of a region, each for a limit of its own.

use crate::stage::{Region, Run};

use super::Bitmap;
use super::feret::Hull;
use super::patches::{Joined, Patches};
use super::skeleton::Skeleton;

/// Everything that can be measured of a region besides its fit.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Measures {
    /// Number of pixels.
    pub area_px: u64,
    /// Maximum Feret diameter of the hull of the middles of all pixel sides.
    pub length_px: f64,
    /// Minimum Feret diameter of the same.
    pub width_px: f64,
    /// Background regions (4-connected) that do not reach the outside.
    pub holes: u32,
    /// Pixels with at least one of their eight neighbours outside the region: A minus A eroded by 3x3.
    pub boundary_px: u64,
    /// Branches of the skeleton that are longer than asked for: paths from an end to a fork.
    pub branches: u32,
}

/// Takes the measures of regions, each only when asked; its buffers are reused.
#[derive(Clone, Debug, Default)]
pub struct Measurer {
    set: Bitmap,
    scratch: Bitmap,
    hull: Hull,
    patches: Patches,
    skeleton: Skeleton,
}

impl Measurer {
    /// Makes room for regions of up to this size.
    pub(super) fn reserve(&mut self, width_px: usize, height_px: usize) {
        self.set.reserve(width_px, height_px);
        self.scratch.reserve(width_px, height_px);
        self.hull.reserve(height_px);
        self.patches.reserve(height_px);
        self.skeleton.reserve(width_px, height_px);
    }

    /// All of them; `runs` are the region's own.
    pub fn all(&mut self, region: &Region, runs: &[Run], branch_above_px: f64) -> Measures {
        let (length_px, width_px) = self.feret(region, runs);
        Measures {
            area_px: region.area_px,
            length_px,
            width_px,
            holes: self.holes(region, runs),
            boundary_px: self.boundary(region, runs),
            branches: self.branches(region, runs, branch_above_px),
        }
    }

    /// Longest and narrowest extent.
    pub fn feret(&mut self, region: &Region, runs: &[Run]) -> (f64, f64) {
        let feret = self.hull.feret(region, runs);
        (feret.length_px, feret.width_px)
    }

    /// See [`Measures::holes`].
    pub fn holes(&mut self, region: &Region, runs: &[Run]) -> u32 {
        self.crop(region, runs);
        // The crop has an empty border, so the outside is one of the patches.
        let outside = Bitmap::complement(&self.set, &mut self.scratch);
        self.patches.count(outside, Joined::Four) as u32 - 1
    }

    /// See [`Measures::boundary_px`].
    pub fn boundary(&mut self, region: &Region, runs: &[Run]) -> u64 {
        self.crop(region, runs);
        region.area_px - self.set.count_eroded()
    }

    /// See [`Measures::branches`].
    pub fn branches(&mut self, region: &Region, runs: &[Run], above_px: f64) -> u32 {
        self.crop(region, runs);
        self.skeleton.branches(&self.set, above_px)
    }

    /// The region with an empty border of one pixel.
    fn crop(&mut self, region: &Region, runs: &[Run]) {
        let side = |low: u32, high: u32| (high - low) as usize + 2;
        self.set.reset(
            side(region.x_min, region.x_max),
            side(region.y_min, region.y_max),
        );
        for run in runs {
            let column = |x: u32| (x - region.x_min) as usize + 1;
            self.set.insert_run(
                (run.y - region.y_min) as usize + 1,
                column(run.x0),
                column(run.x1),
            );
        }
    }
}

/// The skeleton of a set of pixels, by thinning after Guo and Hall (1989).
pub fn skeleton(set: &Bitmap) -> Bitmap {
    Skeleton::default().of(set)
}

#[cfg(test)]
mod tests {
    use super::super::bitmap::tests::{any_bitmap, bitmap, sample};
    use super::*;
    use proptest::prelude::*;

    fn measures(set: &Bitmap) -> Measures {
        let (region, runs) = set.to_region().unwrap();
        Measurer::default().all(&region, &runs, 2.0)
    }

    /// Digital discs x^2 + y^2 <= r^2: pixel counts by counting (OEIS A000328); no hole, and a boundary of one pixel per
    /// row end and column end, less those that are both.
    #[test]
    fn digital_discs_have_their_counted_pixels() {
        for (r, pixels) in [
            (1, 5),
            (2, 13),
            (3, 29),
            (5, 81),
            (10, 317),
            (25, 1961),
            (100, 31_417),
        ] {
            let side = 2 * r as usize + 1;
            let mut disc = Bitmap::new(side, side);
            for (x, y) in (0..side * side).map(|i| (i % side, i / side)) {
                if (x as i32 - r).pow(2) + (y as i32 - r).pow(2) <= r * r {
                    disc.insert(x, y);
                }
            }
            let found = measures(&disc);
            assert_eq!((found.area_px, found.holes), (pixels, 0));
            assert_eq!(found.length_px, f64::from(2 * r + 1));
        }
    }

    /// scikit-image's SAMPLE: published Euler numbers (8-connected) 0, and -1 once the pixel in row 7, third from the
    /// right, is cleared. It is one region, so there are one and two holes.
    #[test]
    fn the_published_sample_has_its_holes() {
        let mut set = sample();
        assert_eq!(measures(&set).area_px, 72);
        assert_eq!(measures(&set).holes, 1);
        set.remove(15, 7);
        assert_eq!(measures(&set).holes, 2);
    }

    #[test]
    fn holes_are_told_from_bays() {
        let set = bitmap(&["#######", "#.#.#.#", "#.###.#", "#####.."]);
        assert_eq!(measures(&set).holes, 2);
        // A corner is no way out for the background.
        let set = bitmap(&[".#.", "#.#", ".#."]);
        assert_eq!(measures(&set).holes, 1);
    }

    proptest! {
        #[test]
        fn the_boundary_is_what_a_3x3_erosion_takes(set in any_bitmap(70)) {
            prop_assume!(set.count() > 0);
            let inner = |x: i32, y: i32| (0..9).all(|i| set.has(x + i % 3 - 1, y + i / 3 - 1));
            let boundary = set.pixels().filter(|&(x, y)| !inner(x as i32, y as i32)).count();
            prop_assert_eq!(measures(&set).boundary_px, boundary as u64);
        }
    }
}
