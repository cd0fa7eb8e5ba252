//! Exact squared Euclidean distances between pixel centres: P. Felzenszwalb and D. Huttenlocher, "Distance transforms of
//! sampled functions", Theory of Computing 8 (2012): distances down each column, then the lower envelope of one parabola
//! per column along each row. All numbers are integers, so the result is exact.

use super::Bitmap;

/// The squared distance where there is nothing to be distant from.
pub const NOWHERE: u32 = u32::MAX;

/// The distance within a column that holds nothing to be distant from.
pub(super) const NEVER: u16 = u16::MAX;

/// What distances are measured to.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub(super) enum To {
    /// Pixels of the set.
    Foreground,
    /// Pixels that are not in the set, among them all outside the rectangle.
    #[default]
    Background,
}

/// How far each pixel is from the nearest target in its own column.
#[derive(Clone, Debug, Default)]
pub(super) struct ColumnDistances {
    pub(super) width_px: usize,
    pub(super) to: To,
    /// Row by row; [`NEVER`] where the column has no target. At most 65 534 rows are possible.
    pub(super) values: Vec<u16>,
}

impl ColumnDistances {
    pub(super) fn measure(&mut self, set: &Bitmap, to: To) {
        let (width, height) = (set.width_px(), set.height_px());
        (self.width_px, self.to) = (width, to);
        self.values.clear();
        self.values.resize(width * height, 0);
        // The row before the first one is outside: background, but never foreground.
        let outside = if to == To::Background { 0 } else { NEVER };
        for y in 0..height {
            let (above, row) = self.values.split_at_mut(y * width);
            let above = y.checked_sub(1).map(|y| &above[y * width..]);
            for_each_gap(set, y, to, |x0, x1| match above {
                Some(above) => grow(&mut row[x0..x1], &above[x0..x1]),
                None => row[x0..x1].fill(outside.saturating_add(1)),
            });
        }
        for y in (0..height).rev() {
            let (row, below) = self.values.split_at_mut((y + 1) * width);
            let row = &mut row[y * width..];
            for_each_gap(set, y, to, |x0, x1| match below.get(x0..x1) {
                Some(below) => shrink(&mut row[x0..x1], below),
                None if to == To::Background => row[x0..x1].fill(1),
                None => {}
            });
        }
    }
}

fn grow(row: &mut [u16], above: &[u16]) {
    for (here, above) in row.iter_mut().zip(above) {
        *here = above.saturating_add(1);
    }
}

fn shrink(row: &mut [u16], below: &[u16]) {
    for (here, below) in row.iter_mut().zip(below) {
        *here = (*here).min(below.saturating_add(1));
    }
}

/// The stretches of row `y` without a target.
fn for_each_gap(set: &Bitmap, y: usize, to: To, mut gap: impl FnMut(usize, usize)) {
    let mut end = 0;
    for (x0, x1) in set.runs(y) {
        match to {
            To::Background => gap(x0, x1),
            To::Foreground if end < x0 => gap(end, x0),
            To::Foreground => {}
        }
        end = x1;
    }
    if to == To::Foreground && end < set.width_px() {
        gap(end, set.width_px());
    }
}

/// The transform with its buffers; a picture no larger than an earlier one needs no new memory.
#[derive(Clone, Debug, Default)]
pub struct DistanceTransform {
    columns: ColumnDistances,
    squared: Vec<u32>,
    parabolas: Vec<Parabola>,
}

impl DistanceTransform {
    /// For every pixel, row by row: how far the nearest pixel that is not in `set` is, squared. Pixels outside the
    /// rectangle are not in the set, so every pixel has one. 0 for pixels that are not in the set.
    pub fn to_background(&mut self, set: &Bitmap) -> &[u32] {
        self.transform(set, To::Background)
    }

    /// For every pixel, row by row: how far the nearest pixel of `set` is, squared; 0 for pixels of the set,
    /// [`NOWHERE`] everywhere if the set is empty.
    pub fn to_foreground(&mut self, set: &Bitmap) -> &[u32] {
        self.transform(set, To::Foreground)
    }

    fn transform(&mut self, set: &Bitmap, to: To) -> &[u32] {
        self.columns.measure(set, to);
        let width = set.width_px();
        self.squared.clear();
        self.squared.resize(self.columns.values.len(), NOWHERE);
        if width > 0 {
            let rows = self.columns.values.chunks_exact(width);
            for (row, squared) in rows.zip(self.squared.chunks_exact_mut(width)) {
                build_envelope(&mut self.parabolas, row, to);
                read_envelope(&self.parabolas, squared);
            }
        }
        &self.squared
    }
}

/// `(x - at)^2 + height`, lowest of all from column `from` on until the next one takes over.
#[derive(Clone, Copy, Debug)]
struct Parabola {
    at: i64,
    height: i64,
    from: i64,
}

fn build_envelope(parabolas: &mut Vec<Parabola>, row: &[u16], to: To) {
    parabolas.clear();
    if to == To::Background {
        push(parabolas, -1, 0);
    }
    for (x, &distance) in row.iter().enumerate().filter(|&(_, &d)| d != NEVER) {
        push(
            parabolas,
            x as i64,
            i64::from(distance) * i64::from(distance),
        );
    }
    if to == To::Background {
        push(parabolas, row.len() as i64, 0);
    }
}

fn push(parabolas: &mut Vec<Parabola>, at: i64, height: i64) {
    let mut from = i64::MIN;
    while let Some(last) = parabolas.last() {
        // The new one is lower than the last from the column after their crossing on.
        let rise = (height + at * at) - (last.height + last.at * last.at);
        from = rise.div_euclid(2 * (at - last.at)) + 1;
        if from > last.from {
            break;
        }
        parabolas.pop();
        from = i64::MIN;
    }
    parabolas.push(Parabola { at, height, from });
}

fn read_envelope(parabolas: &[Parabola], squared: &mut [u32]) {
    if parabolas.is_empty() {
        return;
    }
    let mut lowest = 0;
    for (x, value) in squared.iter_mut().enumerate() {
        let x = x as i64;
        while parabolas.get(lowest + 1).is_some_and(|next| next.from <= x) {
            lowest += 1;
        }
        let Parabola { at, height, .. } = parabolas[lowest];
        *value = ((x - at) * (x - at) + height).min(i64::from(NOWHERE)) as u32;
    }
}

#[cfg(test)]
mod tests {
    use super::super::bitmap::tests::{any_bitmap, bitmap};
    use super::*;
    use proptest::prelude::*;

    /// The example of the docstring of scipy.ndimage.distance_transform_edt, squared. There the outside counts for
    /// nothing, so the picture is continued by one column and row where its edge is foreground.
    #[test]
    fn the_published_example() {
        let set = bitmap(&[".####", "..###", ".####", ".###.", ".##.."]);
        let published = [
            [0, 1, 2, 5, 9],
            [0, 0, 1, 4, 4],
            [0, 1, 2, 2, 1],
            [0, 1, 2, 1, 0],
            [0, 1, 1, 0, 0],
        ];
        let mut complement = Bitmap::new(5, 5);
        for (x, y) in (0..25).map(|i| (i % 5, i / 5)) {
            if !set.has(x, y) {
                complement.insert(x as usize, y as usize);
            }
        }
        let squared = DistanceTransform::default()
            .to_foreground(&complement)
            .to_vec();
        assert_eq!(squared, published.concat());
    }

    fn by_trying_all(set: &Bitmap, target: bool) -> Vec<u32> {
        let (w, h) = (set.width_px() as i32, set.height_px() as i32);
        let all = || (-1..=h).flat_map(move |y| (-1..=w).map(move |x| (x, y)));
        let targets: Vec<_> = all().filter(|&(x, y)| set.has(x, y) == target).collect();
        let nearest = |x: i32, y: i32| {
            let squares = targets
                .iter()
                .map(|&(u, v)| ((u - x).pow(2) + (v - y).pow(2)) as u32);
            squares.min().unwrap_or(NOWHERE)
        };
        (0..w * h).map(|i| nearest(i % w, i / w)).collect()
    }

    proptest! {
        #[test]
        fn equals_trying_all_pairs(set in any_bitmap(14), other in any_bitmap(14)) {
            let mut transform = DistanceTransform::default();
            for set in [set, other] {
                prop_assert_eq!(transform.to_background(&set), by_trying_all(&set, false));
                prop_assert_eq!(transform.to_foreground(&set), by_trying_all(&set, true));
            }
        }
    }

    #[test]
    fn extremes() {
        let mut transform = DistanceTransform::default();
        assert!(transform.to_foreground(&Bitmap::new(0, 0)).is_empty());
        assert_eq!(transform.to_foreground(&Bitmap::new(2, 1)), [NOWHERE; 2]);
        let mut line = Bitmap::new(9000, 1);
        line.insert(0, 0);
        assert_eq!(transform.to_foreground(&line)[8999], 8999 * 8999);
    }
}
