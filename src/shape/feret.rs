//! How long and how wide a region is: its Feret diameters (L. R. Feret, "La grosseur des grains", 1931).

use crate::stage::{Region, Run};

/// Longest and narrowest extent of a region, in px.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Feret {
    /// The largest distance between two points of the outline.
    pub(super) length_px: f64,
    /// The smallest distance between two parallel lines with the outline between them.
    pub(super) width_px: f64,
}

/// Measures with buffers that are reused.
///
/// The outline is the convex hull of the middles of the sides of all pixels, so that a square of n times n pixels is n wide
/// along the rows and columns, and the middles lie as often outside a slanted edge as inside.
#[derive(Clone, Debug, Default)]
pub(super) struct Hull {
    /// First and last middle of each half row, in half pixels.
    rows: Vec<[i64; 2]>,
    corners: Vec<[i64; 2]>,
}

impl Hull {
    pub(super) fn reserve(&mut self, height_px: usize) {
        let rows = 2 * height_px + 1;
        self.rows.reserve(rows.saturating_sub(self.rows.len()));
        self.corners
            .reserve(2 * rows.saturating_sub(self.corners.len()));
    }

    /// `runs` are the region's.
    pub(super) fn feret(&mut self, region: &Region, runs: &[Run]) -> Feret {
        self.collect(region, runs);
        self.wrap();
        Feret {
            length_px: (self.farthest_squared() as f64).sqrt() / 2.0,
            width_px: self.narrowest() / 2.0,
        }
    }

    fn collect(&mut self, region: &Region, runs: &[Run]) {
        let count = 2 * (region.y_max - region.y_min) as usize + 1;
        self.rows.clear();
        self.rows.resize(count, [i64::MAX, i64::MIN]);
        for run in runs {
            let row = 2 * (run.y - region.y_min) as usize;
            let (first, last) = (2 * i64::from(run.x0), 2 * i64::from(run.x1) - 2);
            for (row, first, last) in [
                (row, first, last),
                (row + 1, first - 1, last + 1),
                (row + 2, first, last),
            ] {
                let ends = &mut self.rows[row];
                *ends = [ends[0].min(first), ends[1].max(last)];
            }
        }
    }

    /// The hull's corners in order around it: A. M. Andrew, "Another efficient algorithm for convex hulls in two
    /// dimensions", Information Processing Letters 9 (1979), down the left ends and up the right ones.
    fn wrap(&mut self) {
        self.corners.clear();
        let filled =
            |(y, ends): (usize, &[i64; 2])| (ends[0] <= ends[1]).then_some((y as i64, *ends));
        for (y, ends) in self.rows.iter().enumerate().filter_map(filled) {
            push(&mut self.corners, 0, [ends[0], y]);
        }
        let turn = self.corners.len() - 1;
        for (y, ends) in self.rows.iter().enumerate().rev().filter_map(filled) {
            push(&mut self.corners, turn, [ends[1], y]);
        }
        if self.corners.len() > 1 && self.corners.first() == self.corners.last() {
            self.corners.pop();
        }
    }

    /// All pairs: the hull of a set of pixels has few corners.
    fn farthest_squared(&self) -> i64 {
        let pairs = self.corners.iter().enumerate();
        let squared = pairs.flat_map(|(i, a)| {
            let others = self.corners[i..].iter();
            others.map(|b| (a[0] - b[0]).pow(2) + (a[1] - b[1]).pow(2))
        });
        squared.max().unwrap_or(0)
    }

    /// One of the two lines lies along a side of the hull.
    fn narrowest(&self) -> f64 {
        let next = self.corners.iter().cycle().skip(1);
        let sides = self.corners.iter().zip(next).filter(|(a, b)| a != b);
        let widths = sides.map(|(&a, &b)| {
            let across = self.corners.iter().map(|&c| cross(a, b, c).abs()).max();
            let length = (((b[0] - a[0]).pow(2) + (b[1] - a[1]).pow(2)) as f64).sqrt();
            across.unwrap_or(0) as f64 / length
        });
        let narrowest = widths.fold(f64::INFINITY, f64::min);
        if narrowest.is_finite() {
            narrowest
        } else {
            0.0
        }
    }
}

/// Adds a corner, dropping those behind `keep` that it makes a dent or a straight line.
fn push(corners: &mut Vec<[i64; 2]>, keep: usize, corner: [i64; 2]) {
    while corners.len() > keep + 1
        && cross(
            corners[corners.len() - 2],
            corners[corners.len() - 1],
            corner,
        ) >= 0
    {
        corners.pop();
    }
    if corners.last() != Some(&corner) {
        corners.push(corner);
    }
}

fn cross(a: [i64; 2], b: [i64; 2], c: [i64; 2]) -> i64 {
    (b[0] - a[0]) * (c[1] - a[1]) - (b[1] - a[1]) * (c[0] - a[0])
}

#[cfg(test)]
mod tests {
    use super::super::Bitmap;
    use super::super::bitmap::tests::{any_bitmap, bitmap};
    use super::*;
    use proptest::prelude::*;

    fn feret(set: &Bitmap) -> Feret {
        let (region, runs) = set.to_region().unwrap();
        Hull::default().feret(&region, &runs)
    }

    fn middles(set: &Bitmap) -> Vec<(f64, f64)> {
        let sides = [(-0.5, 0.0), (0.5, 0.0), (0.0, -0.5), (0.0, 0.5)];
        let of = |(x, y): (usize, usize)| sides.map(|(dx, dy)| (x as f64 + dx, y as f64 + dy));
        set.pixels().flat_map(of).collect()
    }

    proptest! {
        #[test]
        fn equals_trying_all_pairs_and_directions(set in any_bitmap(12)) {
            prop_assume!(set.count() > 0);
            let (found, points) = (feret(&set), middles(&set));
            let distances = points.iter().flat_map(|a| points.iter().map(move |b| (a.0 - b.0).hypot(a.1 - b.1)));
            prop_assert!((found.length_px - distances.fold(0.0, f64::max)).abs() < 1e-9);
            let width = |degrees: f64| {
                let (sin, cos) = degrees.to_radians().sin_cos();
                let along = points.iter().map(|p| p.0 * cos + p.1 * sin);
                let ends = along.fold((f64::MAX, f64::MIN), |e, at| (e.0.min(at), e.1.max(at)));
                ends.1 - ends.0
            };
            let tried = (0..1800).map(|i| width(f64::from(i) * 0.1)).fold(f64::MAX, f64::min);
            prop_assert!(found.width_px <= tried + 1e-9, "{} {tried}", found.width_px);
            prop_assert!(found.width_px > tried - 0.03, "{} {tried}", found.width_px);
        }
    }

    #[test]
    fn sizes_worked_out_by_hand() {
        let bar = feret(&bitmap(&["########", "########"]));
        assert_eq!(bar.width_px, 2.0);
        // From one pixel's left side to the other row's right side.
        assert_eq!(bar.length_px, 65_f64.sqrt());
        let pixel = feret(&bitmap(&["#"]));
        assert_eq!(pixel.length_px, 1.0);
        assert!((pixel.width_px - 0.5_f64.sqrt()).abs() < 1e-12);
    }

    /// Digital discs x^2 + y^2 <= r^2 are 2r + 1 px long along the rows.
    #[test]
    fn a_disc_is_as_long_as_wide() {
        for r in [10_i32, 25, 100] {
            let side = 2 * r as usize + 1;
            let mut disc = Bitmap::new(side, side);
            for (x, y) in (0..side * side).map(|i| (i % side, i / side)) {
                if (x as i32 - r).pow(2) + (y as i32 - r).pow(2) <= r * r {
                    disc.insert(x, y);
                }
            }
            let found = feret(&disc);
            assert_eq!(found.length_px, f64::from(2 * r + 1));
            assert!(found.width_px > f64::from(2 * r) - 0.5 && found.width_px <= found.length_px);
        }
    }
}
