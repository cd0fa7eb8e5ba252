//! Skeletons by thinning: Z. Guo and R. W. Hall, "Parallel thinning with two-subiteration algorithms", Communications of
//! the ACM 32 (1989), in the form of L. Lam, S.-W. Lee and C. Y. Suen, "Thinning methodologies", IEEE PAMI 14 (1992).

use super::Bitmap;

/// Part of the figure, and known to have a neighbour that is not.
const FIGURE: u8 = 1;
const LISTED: u8 = 2;

/// Thins pictures; its buffers are reused.
#[derive(Clone, Debug)]
pub(super) struct Skeleton {
    stride: usize,
    /// With a border of one pixel on all sides.
    pixels: Vec<u8>,
    /// Figure pixels that touch the outside: only they can go.
    border: Vec<usize>,
    gone: Vec<usize>,
    /// For each arrangement of the eight neighbours whether the pixel goes, in either half of a round.
    goes: [[bool; 256]; 2],
}

impl Default for Skeleton {
    fn default() -> Self {
        let goes = |second: bool| std::array::from_fn(|code| goes(code as u8, second));
        Self {
            stride: 0,
            pixels: Vec::new(),
            border: Vec::new(),
            gone: Vec::new(),
            goes: [goes(false), goes(true)],
        }
    }
}

/// Whether a pixel goes whose neighbours, from the right one on against the clock, are the bits of `code` from the lowest.
fn goes(code: u8, second: bool) -> bool {
    // As in the paper, x(1) is the right one and x(9) is x(1) again.
    let x = |i: u32| code >> ((i - 1) % 8) & 1 != 0;
    let count = |of: &dyn Fn(u32) -> bool| (1..=4).filter(|&i| of(i)).count();
    let pieces = count(&|i| !x(2 * i - 1) && (x(2 * i) || x(2 * i + 1)));
    let pairs = count(&|i| x(2 * i - 1) || x(2 * i)).min(count(&|i| x(2 * i) || x(2 * i + 1)));
    let side = if second {
        (x(6) || x(7) || !x(4)) && x(5)
    } else {
        (x(2) || x(3) || !x(8)) && x(1)
    };
    pieces == 1 && (2..=3).contains(&pairs) && !side
}

impl Skeleton {
    pub(super) fn reserve(&mut self, width_px: usize, height_px: usize) {
        let pixels = (width_px + 2) * (height_px + 2);
        self.pixels
            .reserve(pixels.saturating_sub(self.pixels.len()));
        // The border of a part is a few times as long as its box is high.
        for list in [&mut self.border, &mut self.gone] {
            list.reserve((8 * (width_px + height_px)).saturating_sub(list.len()));
        }
    }

    /// How many branches of the skeleton of `set` are longer than `above_px`.
    ///
    /// A branch is the path from an end (a pixel with one neighbour) to the first pixel where the way forks, or to the other
    /// end if it forks nowhere; such a path counts once. A step is 1 px long, or the square root of 2 across a corner.
    pub(super) fn branches(&mut self, set: &Bitmap, above_px: f64) -> u32 {
        self.thin(set);
        let mut long = 0;
        for at in (0..self.pixels.len()).filter(|&at| self.pixels[at] != 0) {
            if self.neighbours(at).count() == 1 {
                let (end, length) = self.walk(at);
                let counted_from_the_other_end = end < at && self.neighbours(end).count() == 1;
                long += u32::from(length > above_px && !counted_from_the_other_end);
            }
        }
        long
    }

    /// The skeleton of `set` as a set.
    pub(super) fn of(&mut self, set: &Bitmap) -> Bitmap {
        self.thin(set);
        let mut skeleton = Bitmap::new(set.width_px(), set.height_px());
        for (at, _) in self
            .pixels
            .iter()
            .enumerate()
            .filter(|&(_, &pixel)| pixel != 0)
        {
            skeleton.insert(at % self.stride - 1, at / self.stride - 1);
        }
        skeleton
    }

    /// Thins `set`; what is left are the pixels that are not 0.
    fn thin(&mut self, set: &Bitmap) {
        self.fill(set);
        while self.half_round(0) + self.half_round(1) > 0 {}
        self.pixels.iter_mut().for_each(|pixel| *pixel &= FIGURE);
    }

    fn fill(&mut self, set: &Bitmap) {
        self.stride = set.width_px() + 2;
        self.pixels.clear();
        self.pixels.resize(self.stride * (set.height_px() + 2), 0);
        for y in 0..set.height_px() {
            for (x0, x1) in set.runs(y) {
                let row = (y + 1) * self.stride + 1;
                self.pixels[row + x0..row + x1].fill(FIGURE);
            }
        }
        self.border.clear();
        for at in self.stride..self.pixels.len().saturating_sub(self.stride) {
            if self.pixels[at] == FIGURE && self.code(at) != 255 {
                self.pixels[at] |= LISTED;
                self.border.push(at);
            }
        }
    }

    /// Takes away all that goes in this half of a round, at once; returns how many.
    fn half_round(&mut self, half: usize) -> usize {
        let mut border = std::mem::take(&mut self.border);
        self.gone.clear();
        border.retain(|&at| {
            let goes = self.goes[half][usize::from(self.code(at))];
            if goes {
                self.gone.push(at);
            }
            !goes
        });
        for i in 0..self.gone.len() {
            self.pixels[self.gone[i]] = 0;
        }
        for i in 0..self.gone.len() {
            for at in around(self.gone[i], self.stride) {
                if self.pixels[at] == FIGURE {
                    self.pixels[at] |= LISTED;
                    border.push(at);
                }
            }
        }
        self.border = border;
        self.gone.len()
    }

    fn code(&self, at: usize) -> u8 {
        let bits = around(at, self.stride).into_iter().enumerate();
        bits.fold(0, |code, (i, at)| code | (self.pixels[at] & FIGURE) << i)
    }

    fn neighbours(&self, at: usize) -> impl Iterator<Item = usize> {
        around(at, self.stride)
            .into_iter()
            .filter(|&at| self.pixels[at] != 0)
    }

    /// Where the way from an end leads, and how long it is.
    fn walk(&self, start: usize) -> (usize, f64) {
        let (mut last, mut here, mut length) = (start, start, 0.0);
        // No path is longer than there are pixels.
        for _ in 0..self.pixels.len() {
            let Some(next) = self.only_way(last, here) else {
                break;
            };
            let beside = next.abs_diff(here) == 1 || next.abs_diff(here) == self.stride;
            length += if beside {
                1.0
            } else {
                std::f64::consts::SQRT_2
            };
            (last, here) = (here, next);
        }
        (here, length)
    }

    /// The next pixel after `here`, coming from `last`; none at a fork or an end.
    ///
    /// Of two ways that touch one another side by side, one is the next pixel and the other the one after it.
    fn only_way(&self, last: usize, here: usize) -> Option<usize> {
        let beside = |a: usize, b: usize| a.abs_diff(b) == 1 || a.abs_diff(b) == self.stride;
        let touches_last = |at: usize| at == last || (last != here && beside(at, last));
        let mut ways = self.neighbours(here).filter(|&at| !touches_last(at));
        let first = ways.next()?;
        let Some(second) = ways.next() else {
            return Some(first);
        };
        if ways.next().is_some() || !beside(first, second) {
            return None;
        }
        Some(if beside(first, here) { first } else { second })
    }
}

/// The eight neighbours, from the right one on against the clock.
fn around(at: usize, stride: usize) -> [usize; 8] {
    [
        at + 1,
        at + 1 - stride,
        at - stride,
        at - stride - 1,
        at - 1,
        at + stride - 1,
        at + stride,
        at + stride + 1,
    ]
}

#[cfg(test)]
mod tests {
    use super::super::bitmap::tests::{any_bitmap, bitmap};
    use super::super::patches::{Joined, Patches};
    use super::*;
    use proptest::prelude::*;

    fn plus(arm: usize, half: usize) -> Bitmap {
        let side = 2 * arm + 1;
        let mut set = Bitmap::new(side, side);
        for y in 0..side {
            for x in 0..side {
                if x.abs_diff(arm) <= half || y.abs_diff(arm) <= half {
                    set.insert(x, y);
                }
            }
        }
        set
    }

    #[test]
    fn a_cross_has_four_branches() {
        let mut skeleton = Skeleton::default();
        assert_eq!(skeleton.branches(&plus(40, 3), 20.0), 4);
        assert_eq!(skeleton.branches(&plus(40, 3), 60.0), 0);
    }

    #[test]
    fn a_line_is_one_branch_and_a_ring_has_none() {
        let mut skeleton = Skeleton::default();
        let line = bitmap(&["..........", ".########.", ".........."]);
        assert_eq!(skeleton.branches(&line, 6.9), 1);
        assert_eq!(skeleton.branches(&line, 7.0), 0);
        let ring = bitmap(&["#####", "#...#", "#...#", "#####"]);
        assert_eq!(skeleton.branches(&ring, 0.0), 0);
        let stairs = bitmap(&["##....", ".##...", "..##..", "...##.", "....##"]);
        assert_eq!(skeleton.branches(&stairs, 3.0), 1);
        assert_eq!(skeleton.branches(&bitmap(&["#"]), 0.0), 0);
        assert_eq!(skeleton.branches(&Bitmap::new(0, 0), 0.0), 0);
    }

    #[test]
    fn a_whisker_forks_the_line() {
        let mut skeleton = Skeleton::default();
        let mut bar = Bitmap::new(120, 60);
        (40..56).for_each(|y| bar.insert_run(y, 5, 115));
        assert_eq!(skeleton.branches(&bar, 20.0), 1);
        (10..40).for_each(|y| bar.insert_run(y, 60, 62));
        assert_eq!(skeleton.branches(&bar, 20.0), 3);
    }

    /// The definition: every pixel is asked in every half of a round.
    fn thinned_plainly(set: &Bitmap) -> Bitmap {
        let mut set = set.clone();
        loop {
            let before = set.clone();
            for second in [false, true] {
                let old = set.clone();
                for (x, y) in old.pixels() {
                    let (u, v) = (x as i32, y as i32);
                    let steps = [
                        (1, 0),
                        (1, -1),
                        (0, -1),
                        (-1, -1),
                        (-1, 0),
                        (-1, 1),
                        (0, 1),
                        (1, 1),
                    ];
                    let bit = |i: usize| u8::from(old.has(u + steps[i].0, v + steps[i].1)) << i;
                    if goes((0..8).map(bit).sum(), second) {
                        set.remove(x, y);
                    }
                }
            }
            if set == before {
                return set;
            }
        }
    }

    proptest! {
        #[test]
        fn equals_asking_every_pixel(set in any_bitmap(24)) {
            prop_assert_eq!(Skeleton::default().of(&set), thinned_plainly(&set));
        }

        #[test]
        fn what_hangs_together_stays_together(set in any_bitmap(24)) {
            let skeleton = Skeleton::default().of(&set);
            let mut patches = Patches::default();
            prop_assert_eq!(patches.count(&skeleton, Joined::Eight), patches.count(&set, Joined::Eight));
        }
    }
}
