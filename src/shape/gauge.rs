//! How far a region is from the taught silhouette: hit-or-miss (J. Serra, "Image Analysis and Mathematical Morphology",
//! 1982) with a tolerance band.
//!
//! With T the silhouette and A the region, `missing` is the largest distance from a pixel of T without A to the nearest
//! pixel that is not in T, and `excess` the largest distance from a pixel of A without T to the nearest pixel of T, both
//! exact and Euclidean between pixel centres. T eroded by a disc of radius a fits in A, and everything farther than b from
//! T fits in the background, exactly when `missing <= a` and `excess <= b`; at a = b = 0 that is the hit-or-miss transform.

use super::distance::{ColumnDistances, NEVER, NOWHERE, To};
use super::patches::Patches;
use super::{Bitmap, Depth};

/// Both figures with nothing ignored: `(missing, excess)` of region `a` against silhouette `t`, pixel on pixel. Nothing
/// of either lies outside the pictures, which must have the same size. Excess is infinite if `t` is empty and `a` is not.
pub fn gauge_masks(t: &Bitmap, a: &Bitmap) -> (Depth, Depth) {
    Gauge::default().both(t, a, 0.0)
}

/// The gauge with its buffers.
#[derive(Clone, Debug, Default)]
pub(super) struct Gauge {
    distances: ColumnDistances,
    flaws: Bitmap,
    patches: Patches,
}

impl Gauge {
    /// Makes room for pictures of up to this size.
    pub(super) fn reserve(&mut self, width_px: usize, height_px: usize) {
        let pixels = width_px * height_px;
        let missing = pixels.saturating_sub(self.distances.values.len());
        self.distances.values.reserve(missing);
        self.flaws.reserve(width_px, height_px);
        self.patches.reserve(height_px);
    }

    /// `(missing, excess)`; patches of fewer than `flaw_below_px` pixels are ignored.
    pub(super) fn both(&mut self, t: &Bitmap, a: &Bitmap, flaw_below_px: f64) -> (Depth, Depth) {
        let missing = self.deepest(t, t, a, To::Background, flaw_below_px);
        let excess = self.deepest(t, a, t, To::Foreground, flaw_below_px);
        (missing, excess)
    }

    /// The pixels of `of` without `without` in patches of at least `flaw_below_px`.
    pub(super) fn flaws(&mut self, of: &Bitmap, without: &Bitmap, flaw_below_px: f64) -> &Bitmap {
        self.flaws.become_difference(of, without);
        self.patches.drop_small(&mut self.flaws, flaw_below_px);
        &self.flaws
    }

    fn deepest(
        &mut self,
        t: &Bitmap,
        of: &Bitmap,
        without: &Bitmap,
        to: To,
        flaw_below_px: f64,
    ) -> Depth {
        let count = self.flaws(of, without, flaw_below_px).count();
        if count == 0 {
            return Depth::default();
        }
        self.distances.measure(t, to);
        let (squared, at) = farthest(&self.distances, &self.flaws, count);
        Depth {
            px: if squared == NOWHERE {
                f64::INFINITY
            } else {
                f64::from(squared).sqrt()
            },
            at: Some((at.0 as i32, at.1 as i32)),
        }
    }
}

/// The largest squared distance over `set`, and the first pixel in reading order that has it.
///
/// The exact distance is only looked up where it may be the largest. It is at most the distance within the column, and
/// at most one more than that of the pixel to the left.
fn farthest(distances: &ColumnDistances, set: &Bitmap, count: u64) -> (u32, (usize, usize)) {
    // A few pixels spread over the set first, so that most others are ruled out without a look-up.
    let stride = (count / 64 + 1) as usize;
    let spread = set.pixels().step_by(stride);
    let mut largest = spread
        .map(|(x, y)| distances.squared(x, y))
        .max()
        .unwrap_or(0);
    let mut found = None;
    for y in 0..set.height_px() {
        for (x0, x1) in set.runs(y) {
            let mut bound = NOWHERE;
            for x in x0..x1 {
                bound = bound.saturating_add(1).min(distances.within_column(x, y));
                let bound_squared = bound.saturating_mul(bound);
                let hopeless =
                    bound_squared < largest || (bound_squared == largest && found.is_some());
                if hopeless {
                    continue;
                }
                let squared = distances.squared(x, y);
                if squared > largest || (squared == largest && found.is_none()) {
                    (largest, found) = (squared, Some((x, y)));
                }
                if squared != NOWHERE {
                    bound = f64::from(squared).sqrt().ceil() as u32;
                }
            }
        }
    }
    (largest, found.unwrap_or_default())
}

impl ColumnDistances {
    fn within_column(&self, x: usize, y: usize) -> u32 {
        match self.values[y * self.width_px + x] {
            NEVER => NOWHERE,
            distance => u32::from(distance),
        }
    }

    /// The exact squared distance of one pixel to the nearest target, looking only as far as that is.
    fn squared(&self, x: usize, y: usize) -> u32 {
        let row = &self.values[y * self.width_px..][..self.width_px];
        let mut nearest = NOWHERE;
        for aside in 0..=self.width_px {
            let aside_squared = (aside * aside) as u32;
            if aside_squared >= nearest {
                break;
            }
            for column in [x.checked_sub(aside), x.checked_add(aside)] {
                let distance = column.and_then(|column| row.get(column).copied());
                let distance = match (distance, self.to) {
                    (None, To::Background) => 0,
                    (None, To::Foreground) | (Some(NEVER), _) => continue,
                    (Some(distance), _) => u32::from(distance),
                };
                nearest = nearest.min(aside_squared + distance * distance);
            }
        }
        nearest
    }
}

#[cfg(test)]
mod tests {
    use super::super::DistanceTransform;
    use super::super::bitmap::tests::{any_bitmap, bitmap};
    use super::*;
    use proptest::prelude::*;

    /// The definition, word by word.
    fn defined(t: &Bitmap, a: &Bitmap) -> (Depth, Depth) {
        let mut transform = DistanceTransform::default();
        let largest = |of: &Bitmap, without: &Bitmap, squared: &[u32]| {
            let mut depth = Depth::default();
            for (x, y) in of
                .pixels()
                .filter(|&(x, y)| !without.has(x as i32, y as i32))
            {
                let px = f64::from(squared[y * t.width_px() + x]).sqrt();
                if px > depth.px {
                    depth = Depth {
                        px,
                        at: Some((x as i32, y as i32)),
                    };
                }
            }
            depth
        };
        let missing = largest(t, a, transform.to_background(t));
        let excess = largest(a, t, transform.to_foreground(t));
        (missing, excess)
    }

    fn two_bitmaps() -> impl Strategy<Value = (Bitmap, Bitmap)> {
        (1..40_usize, 1..40_usize, 0.02..0.98, 0.02..0.98).prop_flat_map(|(w, h, p, q)| {
            let mask = move |share: f64| {
                prop::collection::vec(prop::bool::weighted(share), w * h).prop_map(move |bits| {
                    let gray: Vec<u8> = bits.into_iter().map(|bit| u8::from(bit) * 255).collect();
                    Bitmap::from_gray(&gray, w, h)
                })
            };
            (mask(p), mask(q))
        })
    }

    proptest! {
        #[test]
        fn both_figures_equal_their_definition((t, a) in two_bitmaps()) {
            prop_assume!(t.count() > 0);
            prop_assert_eq!(gauge_masks(&t, &a), defined(&t, &a));
        }

        #[test]
        fn a_shape_against_itself_has_no_flaw(t in any_bitmap(30)) {
            prop_assert_eq!(gauge_masks(&t, &t), (Depth::default(), Depth::default()));
        }

        #[test]
        fn large_flaws_equal_their_definition(cut in 1..60_i32, reach in 1..60_i32) {
            let (mut t, mut a) = (Bitmap::new(130, 90), Bitmap::new(130, 90));
            for (x, y) in (0..130 * 90).map(|i| (i % 130_i32, i / 130)) {
                let square = |x: i32, y: i32| x * x + y * y;
                let round = square(x - 50, y - 45) <= 40 * 40;
                if round {
                    t.insert(x as usize, y as usize);
                }
                if (round && square(x - 10, y - 45) > cut * cut) || square(x - 95, y - 30) <= reach * reach {
                    a.insert(x as usize, y as usize);
                }
            }
            prop_assert_eq!(gauge_masks(&t, &a), defined(&t, &a));
        }
    }

    #[test]
    fn figures_worked_out_by_hand() {
        let t = bitmap(&["........", ".#####..", ".#####..", ".#####..", "........"]);
        let a = bitmap(&["........", ".#####..", ".##.####", ".#####..", "........"]);
        let (missing, excess) = gauge_masks(&t, &a);
        assert_eq!((missing.px, missing.at), (2.0, Some((3, 2))));
        assert_eq!((excess.px, excess.at), (2.0, Some((7, 2))));
    }

    #[test]
    fn patches_below_the_limit_do_not_count() {
        let t = bitmap(&["######", "######", "######", "######"]);
        let a = bitmap(&["######", "#.##..", "####..", "######"]);
        let mut gauge = Gauge::default();
        assert_eq!(gauge.both(&t, &a, 4.0).0.at, Some((4, 1)));
        assert_eq!(gauge.both(&t, &a, 4.5).0, Depth::default());
        assert_eq!(gauge.both(&t, &a, 1.0).0.at, Some((1, 1)));
    }

    #[test]
    fn nothing_taught_is_infinitely_far() {
        let (nothing, a) = (Bitmap::new(3, 3), bitmap(&["...", ".#.", "..."]));
        assert_eq!(gauge_masks(&nothing, &a).1.px, f64::INFINITY);
        assert_eq!(gauge_masks(&nothing, &nothing).1, Depth::default());
        assert_eq!(gauge_masks(&a, &nothing).0.px, 1.0);
    }
}
