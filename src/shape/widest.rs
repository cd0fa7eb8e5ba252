//! The largest square and disc that fit into a silhouette: a top-hat whose element fits into the part removes the part.

use super::{Bitmap, Model, Pose};

impl Model {
    /// Side of the largest square of pixels that fits into the silhouette, turned to the angle at which it is largest.
    pub fn widest_square_px(&self) -> usize {
        let coarse: Vec<f64> = (0..30).map(|i| 3.0 * f64::from(i)).collect();
        let (_, angle) = self.widest_of(&coarse);
        let fine: Vec<f64> = (-5..=5).map(|i| angle + 0.5 * f64::from(i)).collect();
        self.widest_of(&fine).0
    }

    /// Diameter of the largest disc that fits into the silhouette, between the pixel centres around it.
    pub fn widest_disc_px(&self) -> f64 {
        2.0 * self.depth_px
    }

    fn widest_of(&self, angles_deg: &[f64]) -> (usize, f64) {
        let reach = self.radius_px.ceil() as usize + 2;
        let side = 2 * reach + 1;
        let mut turned = Bitmap::default();
        let mut widest = (0, 0.0);
        for &angle_deg in angles_deg {
            let pose = Pose {
                x_px: reach as f64,
                y_px: reach as f64,
                angle_deg,
                flipped: false,
            };
            turned.reset(side, side);
            self.draw(pose, (0, 0), &mut turned);
            let square = largest_square(&turned);
            if square > widest.0 {
                widest = (square, angle_deg);
            }
        }
        widest
    }
}

/// Side of the largest upright square of pixels of `set`: each pixel is the lower right corner of one that is a pixel
/// larger than the smallest of those at its left, upper and upper left neighbour.
fn largest_square(set: &Bitmap) -> usize {
    let mut above = vec![0_usize; set.width_px() + 1];
    let mut row = above.clone();
    let mut largest = 0;
    for y in 0..set.height_px() {
        row.fill(0);
        for (x0, x1) in set.runs(y) {
            for x in x0..x1 {
                row[x + 1] = row[x].min(above[x]).min(above[x + 1]) + 1;
                largest = largest.max(row[x + 1]);
            }
        }
        std::mem::swap(&mut above, &mut row);
    }
    largest
}

#[cfg(test)]
mod tests {
    use super::super::bitmap::tests::any_bitmap;
    use super::super::drawn::{Outline, silhouette};
    use super::*;
    use proptest::prelude::*;

    proptest! {
        #[test]
        fn the_largest_square_is_found(set in any_bitmap(16)) {
            let fits = |side: i32| {
                let full = |x: i32, y: i32| (0..side * side).all(|i| set.has(x + i % side, y + i / side));
                (0..16).any(|y| (0..16).any(|x| full(x, y)))
            };
            let largest = (1..17).take_while(|&side| fits(side)).count();
            prop_assert_eq!(largest_square(&set), largest);
        }
    }

    #[test]
    fn the_square_is_looked_for_at_every_angle() {
        let widest = |outline: &Outline| Model::new(silhouette(outline, 1.0).0).widest_square_px();
        let square = |angle: f64| {
            let corner = |i: i32| {
                let (sin, cos) = (angle + f64::from(2 * i + 1) * 45.0).to_radians().sin_cos();
                (50.0 * cos, 50.0 * sin)
            };
            Outline::polygon(&[corner(0), corner(1), corner(2), corner(3)])
        };
        // The diagonal is 100 px.
        for angle in [0.0, 10.7, 31.0, 44.0] {
            assert!(widest(&square(angle)).abs_diff(71) <= 1, "{angle}");
        }
        let disc = Model::new(silhouette(&Outline::disc(40.0), 1.0).0);
        assert!(disc.widest_square_px().abs_diff(57) <= 1);
        assert!((disc.widest_disc_px() - 81.0).abs() <= 1.0);
        // Between the bore and the rim of a ring of 27 px only.
        assert!(widest(&Outline::gasket(60.0)) <= 30);
    }
}
