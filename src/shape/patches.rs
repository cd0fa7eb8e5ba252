//! Patches: connected components, found by joining runs of neighbouring rows (disjoint sets with path
//! halving, R. E. Tarjan and J. van Leeuwen, "Worst-case analysis of set union algorithms", JACM 31, 1984).

use super::Bitmap;

/// Which pixels hang together.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Joined {
    /// By their sides.
    Four,
    /// By their sides and corners.
    Eight,
}

/// The buffers for it.
#[derive(Clone, Debug, Default)]
pub(super) struct Patches {
    runs: Vec<Node>,
}

#[derive(Clone, Copy, Debug)]
struct Node {
    y: usize,
    x0: usize,
    x1: usize,
    parent: usize,
    /// Pixels of the whole patch; right in its root only.
    size: u64,
}

impl Patches {
    /// Makes room for sets of this many rows with eight runs each.
    pub(super) fn reserve(&mut self, height_px: usize) {
        self.runs
            .reserve((8 * height_px).saturating_sub(self.runs.len()));
    }

    /// How many patches there are.
    pub(super) fn count(&mut self, set: &Bitmap, joined: Joined) -> usize {
        self.label(set, joined);
        (0..self.runs.len())
            .filter(|&i| self.runs[i].parent == i)
            .count()
    }

    /// How many pixels each patch has, in the order of their first pixels.
    pub(super) fn sizes(&mut self, set: &Bitmap, joined: Joined) -> Vec<u64> {
        self.label(set, joined);
        let roots = (0..self.runs.len()).filter(|&i| self.runs[i].parent == i);
        roots.map(|i| self.runs[i].size).collect()
    }

    /// Takes every 8-connected patch of fewer than `below` pixels out of `set`.
    pub(super) fn drop_small(&mut self, set: &mut Bitmap, below: f64) {
        // One pixel is the smallest patch there is.
        if below <= 1.0 {
            return;
        }
        self.label(set, Joined::Eight);
        for i in 0..self.runs.len() {
            let Node { y, x0, x1, .. } = self.runs[i];
            let root = self.root(i);
            if (self.runs[root].size as f64) < below {
                (x0..x1).for_each(|x| set.remove(x, y));
            }
        }
    }

    fn label(&mut self, set: &Bitmap, joined: Joined) {
        // How many columns two runs of neighbouring rows must share; 0 lets corners touch.
        let shared = if joined == Joined::Four { 1 } else { 0 };
        self.runs.clear();
        let mut above = 0..0;
        for y in 0..set.height_px() {
            let start = self.runs.len();
            for (x0, x1) in set.runs(y) {
                let parent = self.runs.len();
                let size = (x1 - x0) as u64;
                self.runs.push(Node {
                    y,
                    x0,
                    x1,
                    parent,
                    size,
                });
                // Runs above that end before this one starts cannot touch later ones either.
                while above.start < above.end && self.runs[above.start].x1 < x0 + shared {
                    above.start += 1;
                }
                let mut i = above.start;
                while i < above.end && self.runs[i].x0 + shared <= x1 {
                    self.join(i, parent);
                    i += 1;
                }
            }
            above = start..self.runs.len();
        }
    }

    fn join(&mut self, a: usize, b: usize) {
        let (a, b) = (self.root(a), self.root(b));
        if a != b {
            let (low, high) = (a.min(b), a.max(b));
            self.runs[high].parent = low;
            self.runs[low].size += self.runs[high].size;
        }
    }

    fn root(&mut self, mut i: usize) -> usize {
        while self.runs[i].parent != i {
            let parent = self.runs[i].parent;
            self.runs[i].parent = self.runs[parent].parent;
            i = parent;
        }
        i
    }
}

#[cfg(test)]
mod tests {
    use super::super::bitmap::tests::{any_bitmap, bitmap};
    use super::*;
    use proptest::prelude::*;

    /// The patch around (x, y), by flooding.
    fn patch(set: &Bitmap, start: (usize, usize)) -> Vec<(usize, usize)> {
        let mut found = vec![start];
        let mut next = 0;
        while next < found.len() {
            let (x, y) = (found[next].0 as i32, found[next].1 as i32);
            next += 1;
            for (x, y) in (0..9).map(|i| (x + i % 3 - 1, y + i / 3 - 1)) {
                if set.has(x, y) && !found.contains(&(x as usize, y as usize)) {
                    found.push((x as usize, y as usize));
                }
            }
        }
        found
    }

    /// Published in the docstring of scipy.ndimage.label.
    #[test]
    fn the_published_example_has_four_or_two() {
        let set = bitmap(&["..##..", "...#..", "##..#.", "...#.."]);
        let mut patches = Patches::default();
        assert_eq!(patches.count(&set, Joined::Four), 4);
        assert_eq!(patches.count(&set, Joined::Eight), 2);
    }

    proptest! {
        #[test]
        fn equals_flooding(set in any_bitmap(20), below in 0.0..9.0) {
            let mut kept = set.clone();
            Patches::default().drop_small(&mut kept, below);
            for (x, y) in set.pixels() {
                let large = patch(&set, (x, y)).len() as f64 >= below;
                prop_assert_eq!(kept.has(x as i32, y as i32), large);
            }
            prop_assert_eq!(kept.count_common(&set), kept.count());
        }
    }
}
