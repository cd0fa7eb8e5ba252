//! Points on a region's edge: half way between each pixel of the region and each of its four neighbours that is not.

use crate::stage::{Region, Run};

/// More points than this do not make a pose better.
pub(super) const MOST_POINTS: usize = 2048;

/// Collects the edge points of `runs`, bores included, measured from the region's upper left pixel (x right, y down).
/// Of more than [`MOST_POINTS`] every n-th is taken.
pub(super) fn collect(region: &Region, runs: &[Run], points: &mut Vec<[f32; 2]>) {
    let mut count = 0;
    for_each_crack(runs, |_, _, length| count += length);
    // An odd step, since a row of a plain shape has two points, left and right.
    let step = (count / MOST_POINTS) | 1;
    let step = if count / step > MOST_POINTS {
        step + 2
    } else {
        step
    };
    points.clear();
    points.reserve(MOST_POINTS);
    let mut next = 0;
    for_each_crack(runs, |x, y, length| {
        while next < length {
            let x = x as f64 / 2.0 - f64::from(region.x_min) + next as f64;
            let y = y as f64 / 2.0 - f64::from(region.y_min);
            points.push([x as f32, y as f32]);
            next += step;
        }
        next -= length;
    });
}

/// Calls `crack(x, y, length)` for every stretch of points in a row: doubled coordinates of the first, and how many.
fn for_each_crack(runs: &[Run], mut crack: impl FnMut(i64, i64, usize)) {
    let empty = &runs[..0];
    let mut above = empty;
    let mut rest = runs;
    while let Some(first) = rest.first() {
        let y = first.y;
        let (row, after) = rest.split_at(rest.partition_point(|run| run.y == y));
        if above.first().is_some_and(|run| run.y + 1 != y) {
            between(above, empty, 2 * i64::from(above[0].y) + 1, &mut crack);
            above = empty;
        }
        between(above, row, 2 * i64::from(y) - 1, &mut crack);
        for run in row {
            crack(2 * i64::from(run.x0) - 1, 2 * i64::from(y), 1);
            crack(2 * i64::from(run.x1) - 1, 2 * i64::from(y), 1);
        }
        (above, rest) = (row, after);
    }
    if let Some(last) = above.first() {
        between(above, empty, 2 * i64::from(last.y) + 1, &mut crack);
    }
}

/// The columns that are covered in exactly one of two rows.
fn between(above: &[Run], below: &[Run], y: i64, crack: &mut impl FnMut(i64, i64, usize)) {
    let end = |row: &[Run], i: usize| {
        row.get(i / 2).map_or(
            u32::MAX,
            |run| if i.is_multiple_of(2) { run.x0 } else { run.x1 },
        )
    };
    let (mut i, mut j) = (0, 0);
    let mut from = None;
    while i < 2 * above.len() || j < 2 * below.len() {
        let (a, b) = (end(above, i), end(below, j));
        let at = a.min(b);
        if a <= b {
            i += 1;
        } else {
            j += 1;
        }
        from = match from {
            None => Some(at),
            Some(from) => {
                if at > from {
                    crack(2 * i64::from(from), y, (at - from) as usize);
                }
                None
            }
        };
    }
}

#[cfg(test)]
mod tests {
    use super::super::Bitmap;
    use super::super::bitmap::tests::any_bitmap;
    use super::*;
    use proptest::prelude::*;

    fn by_asking_every_pixel(set: &Bitmap, region: &Region) -> Vec<[i32; 2]> {
        let mut points = Vec::new();
        for (x, y) in set.pixels().map(|(x, y)| (x as i32, y as i32)) {
            for (dx, dy) in [(1, 0), (-1, 0), (0, 1), (0, -1)] {
                if !set.has(x + dx, y + dy) {
                    let (x, y) = (x - region.x_min as i32, y - region.y_min as i32);
                    points.push([2 * x + dx, 2 * y + dy]);
                }
            }
        }
        points.sort_unstable();
        points
    }

    proptest! {
        #[test]
        fn equals_asking_every_pixel(set in any_bitmap(25)) {
            prop_assume!(set.count() > 0);
            let (region, runs) = set.to_region().unwrap();
            let mut points = Vec::new();
            collect(&region, &runs, &mut points);
            let mut doubled: Vec<_> = points.iter().map(|p| p.map(|at| (2.0 * at) as i32)).collect();
            doubled.sort_unstable();
            prop_assert_eq!(doubled, by_asking_every_pixel(&set, &region));
        }
    }

    #[test]
    fn a_very_long_edge_is_thinned_out_evenly() {
        let mut comb = Bitmap::new(2000, 60);
        for x in (0..2000).step_by(2) {
            (0..60).for_each(|y| comb.insert(x, y));
        }
        let (region, runs) = comb.to_region().unwrap();
        let mut points = Vec::new();
        collect(&region, &runs, &mut points);
        assert!(
            (1800..=MOST_POINTS).contains(&points.len()),
            "{}",
            points.len()
        );
        let left = points.iter().filter(|p| p[0] < 999.0).count();
        assert!(left.abs_diff(points.len() / 2) < 50);
    }
}
