//! The taught silhouette as a picture: its majority, its size, other scales.

use super::patches::{Joined, Patches};
use super::{Bitmap, ShapeError};

/// Silhouettes have at most this many columns and rows.
pub const MAX_SIDE_PX: usize = 4096;

/// A taught silhouette: for every pixel the share of good parts that cover it.
#[derive(Clone, Debug, PartialEq)]
pub struct Silhouette {
    /// Columns.
    pub width_px: usize,
    /// Rows.
    pub height_px: usize,
    /// Edge length of a pixel on the belt.
    pub mm_per_px: f64,
    /// Row by row; 255 is covered by all good parts. The silhouette proper is value > 127 (the majority).
    pub share: Vec<u8>,
}

impl Silhouette {
    /// Every pixel of `mask` is covered by all parts, with a border of one empty pixel. The mask must not be empty.
    pub fn from_mask(mask: &Bitmap, mm_per_px: f64) -> Result<Self, ShapeError> {
        let (width_px, height_px) = (mask.width_px(), mask.height_px());
        let mut share = vec![0; width_px * height_px];
        mask.pixels()
            .for_each(|(x, y)| share[y * width_px + x] = 255);
        let whole = Self {
            width_px,
            height_px,
            mm_per_px,
            share,
        };
        whole.trimmed()
    }

    /// The same silhouette with a border of exactly one pixel that no part covers; an error if no majority is left or
    /// the rest is too large.
    pub fn trimmed(&self) -> Result<Self, ShapeError> {
        let used = |of: fn(usize, usize) -> usize| {
            let covered = self
                .share
                .iter()
                .enumerate()
                .filter(|&(_, &value)| value > 0);
            let mut ends = (usize::MAX, 0);
            for at in covered.map(|(i, _)| of(i, self.width_px)) {
                ends = (ends.0.min(at), ends.1.max(at + 1));
            }
            ends
        };
        if !self.share.iter().any(|&value| value > 127) {
            return Err(ShapeError::Empty);
        }
        let ((x0, x1), (y0, y1)) = (used(|i, w| i % w), used(|i, w| i / w));
        let (width_px, height_px) = (x1 - x0 + 2, y1 - y0 + 2);
        check_size(width_px, height_px)?;
        let mut share = vec![0; width_px * height_px];
        for y in y0..y1 {
            let row = &self.share[y * self.width_px..][x0..x1];
            share[(y - y0 + 1) * width_px + 1..][..x1 - x0].copy_from_slice(row);
        }
        Ok(Self {
            width_px,
            height_px,
            mm_per_px: self.mm_per_px,
            share,
        })
    }

    /// The silhouette proper: the pixels that more than half of the parts cover.
    pub fn majority(&self) -> Bitmap {
        Bitmap::from_gray(&self.share, self.width_px, self.height_px)
    }

    /// Mean column and row, every pixel weighted by its share, the first column and row being 0.
    pub fn centroid(&self) -> (f64, f64) {
        let (mut weight, mut sum) = (0_u64, (0_u64, 0_u64));
        for (i, &share) in self.share.iter().enumerate() {
            let share = u64::from(share);
            weight += share;
            sum.0 += share * (i % self.width_px) as u64;
            sum.1 += share * (i / self.width_px) as u64;
        }
        let weight = weight.max(1) as f64;
        (sum.0 as f64 / weight, sum.1 as f64 / weight)
    }

    /// The share at a place between pixel centres, by bilinear interpolation, 0 to 255; no part covers what lies outside.
    pub fn share_at(&self, x: f64, y: f64) -> f64 {
        let (left, top) = (x.floor(), y.floor());
        let at = |dx: i32, dy: i32| {
            let (x, y) = (
                (left as i32).saturating_add(dx),
                (top as i32).saturating_add(dy),
            );
            let inside =
                x >= 0 && y >= 0 && (x as usize) < self.width_px && (y as usize) < self.height_px;
            if inside {
                f64::from(self.share[y as usize * self.width_px + x as usize])
            } else {
                0.0
            }
        };
        let mix = |a: f64, b: f64, t: f64| a + (b - a) * t;
        let upper = mix(at(0, 0), at(1, 0), x - left);
        let lower = mix(at(0, 1), at(1, 1), x - left);
        mix(upper, lower, y - top)
    }

    /// The same silhouette with pixels of another size: the mean of the interpolated share over each new pixel.
    /// An error if nothing is left of it or it becomes too large.
    pub fn resampled(&self, mm_per_px: f64) -> Result<Self, ShapeError> {
        let ratio = mm_per_px / self.mm_per_px;
        if (ratio - 1.0).abs() < 1e-9 {
            return Ok(self.clone());
        }
        let side = |px: usize| (px as f64 / ratio).ceil() as usize + 2;
        let (width_px, height_px) = (side(self.width_px), side(self.height_px));
        check_size(width_px, height_px)?;
        let samples = (2.0 * ratio).ceil().clamp(1.0, 64.0) as usize;
        let source = |at: usize, sample: usize, to: usize, from: usize| {
            let offset = (sample as f64 + 0.5) / samples as f64 - 0.5;
            (at as f64 + offset - (to - 1) as f64 / 2.0) * ratio + (from - 1) as f64 / 2.0
        };
        let mean = |x: usize, y: usize| {
            let mut sum = 0.0;
            for (i, j) in (0..samples * samples).map(|k| (k % samples, k / samples)) {
                let u = source(x, i, width_px, self.width_px);
                sum += self.share_at(u, source(y, j, height_px, self.height_px));
            }
            (sum / (samples * samples) as f64).round() as u8
        };
        let pixels = (0..width_px * height_px).map(|i| mean(i % width_px, i / width_px));
        let whole = Self {
            width_px,
            height_px,
            mm_per_px,
            share: pixels.collect(),
        };
        whole.trimmed()
    }

    /// Number of pixels of the majority.
    pub fn area_px(&self) -> u64 {
        self.majority().count()
    }

    /// Area of the majority.
    pub fn area_mm2(&self) -> f64 {
        self.area_px() as f64 * self.mm_per_px * self.mm_per_px
    }

    /// Areas of the majority's bores: background (4-connected) that it encloses, in the order of their first pixels.
    pub fn bores_mm2(&self) -> Vec<f64> {
        let trimmed = self.trimmed().map(|silhouette| silhouette.majority());
        let Ok(majority) = trimmed else {
            return Vec::new();
        };
        // The border is empty, so the first patch is the outside.
        let mut outside = Bitmap::default();
        let outside = Bitmap::complement(&majority, &mut outside);
        let sizes = Patches::default().sizes(outside, Joined::Four);
        let mm2 = |px: &u64| *px as f64 * self.mm_per_px * self.mm_per_px;
        sizes[1..].iter().map(mm2).collect()
    }

    /// Columns and rows of the upright box around the majority, in mm.
    pub fn extent_mm(&self) -> (f64, f64) {
        self.majority()
            .to_region()
            .map_or((0.0, 0.0), |(region, _)| {
                let side = |low: u32, high: u32| f64::from(high - low) * self.mm_per_px;
                (
                    side(region.x_min, region.x_max),
                    side(region.y_min, region.y_max),
                )
            })
    }
}

fn check_size(width_px: usize, height_px: usize) -> Result<(), ShapeError> {
    if width_px > MAX_SIDE_PX || height_px > MAX_SIDE_PX {
        return Err(ShapeError::TooLarge {
            width_px: width_px as u64,
            height_px: height_px as u64,
        });
    }
    Ok(())
}

#[cfg(test)]
mod tests {
    use super::super::bitmap::tests::{bitmap, sample};
    use super::*;

    #[test]
    fn a_mask_is_its_own_majority() {
        let taught = Silhouette::from_mask(&sample(), 0.5).unwrap();
        assert_eq!((taught.width_px, taught.height_px), (20, 12));
        assert_eq!(taught.area_mm2(), 18.0);
        assert_eq!(taught.extent_mm(), (9.0, 5.0));
        // Published for SAMPLE in scikit-image's test_regionprops.py, moved by the border.
        let (x, y) = taught.centroid();
        assert!((x - 1.0 - 9.444_444_444_444_445).abs() < 1e-12);
        assert!((y - 1.0 - 5.666_666_666_666_667).abs() < 1e-12);
        assert_eq!(taught.bores_mm2(), [0.25]);
        let empty = Silhouette::from_mask(&Bitmap::new(5, 5), 0.5);
        assert!(matches!(empty, Err(ShapeError::Empty)));
    }

    #[test]
    fn another_scale_keeps_size_and_area() {
        let mut disc = Bitmap::new(101, 101);
        for (x, y) in (0..101 * 101).map(|i| (i % 101_usize, i / 101)) {
            if (x as i32 - 50).pow(2) + (y as i32 - 50).pow(2) <= 45 * 45 {
                disc.insert(x, y);
            }
        }
        let taught = Silhouette::from_mask(&disc, 0.25).unwrap();
        assert_eq!(taught.resampled(0.25).unwrap(), taught);
        for mm_per_px in [0.1, 0.17, 0.3, 0.5, 1.0] {
            let other = taught.resampled(mm_per_px).unwrap();
            assert!(
                (other.area_mm2() / taught.area_mm2() - 1.0).abs() < 0.03,
                "{mm_per_px}"
            );
            // The disc's outermost columns are few pixels high and may be lost between others.
            let change = other.extent_mm().0 - taught.extent_mm().0;
            assert!(
                change.abs() <= 2.0 * mm_per_px + 1.0,
                "{change} at {mm_per_px}"
            );
        }
        assert!(matches!(taught.resampled(100.0), Err(ShapeError::Empty)));
        assert!(matches!(
            taught.resampled(0.001),
            Err(ShapeError::TooLarge { .. })
        ));
    }

    #[test]
    fn shares_are_interpolated_and_end_at_the_border() {
        let taught = Silhouette::from_mask(&bitmap(&["##", "##"]), 1.0).unwrap();
        assert_eq!(taught.share_at(1.0, 1.0), 255.0);
        assert_eq!(taught.share_at(0.5, 1.0), 127.5);
        assert_eq!(taught.share_at(0.5, 0.5), 63.75);
        assert_eq!(taught.share_at(-3.0, 1.0), 0.0);
        assert_eq!(taught.share_at(f64::MAX, f64::MIN), 0.0);
    }
}
