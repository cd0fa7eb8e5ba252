//! The silhouette drawn at a pose: which pixel centres it covers.

use super::{Bitmap, Pose, Silhouette};

/// Sine and cosine, exact for quarter turns.
pub(super) fn sin_cos_deg(angle_deg: f64) -> (f64, f64) {
    match angle_deg {
        0.0 | 360.0 => (0.0, 1.0),
        90.0 => (1.0, 0.0),
        180.0 => (0.0, -1.0),
        270.0 => (-1.0, 0.0),
        other => other.to_radians().sin_cos(),
    }
}

/// Places in the silhouette are whole numbers of 2^-32 px.
const ONE: f64 = 4_294_967_296.0;

/// A pose made ready: from pixels of the picture to places in the silhouette, in whole numbers, so that what is covered
/// does not depend on how the sums are done.
#[derive(Clone, Copy, Debug)]
pub(super) struct Placement {
    u: [i64; 3],
    v: [i64; 3],
}

impl Placement {
    /// `centroid` is the silhouette's, (column, row).
    pub(super) fn new(pose: Pose, centroid: (f64, f64)) -> Self {
        let (sin, cos) = sin_cos_deg(pose.angle_deg);
        let side = if pose.flipped { -1.0 } else { 1.0 };
        let (cos_u, sin_u) = (side * cos, side * sin);
        let (x, y) = (pose.x_px, pose.y_px);
        let whole = |row: [f64; 3]| row.map(|value| (value * ONE).round() as i64);
        Self {
            u: whole([cos_u, sin_u, centroid.0 - cos_u * x - sin_u * y]),
            v: whole([-sin, cos, centroid.1 + sin * x - cos * y]),
        }
    }

    /// Where in the silhouette the centre of the picture's pixel (x, y) lies.
    fn inverse(&self, x: i64, y: i64) -> (i64, i64) {
        let at = |row: &[i64; 3]| row[0] * x + row[1] * y + row[2];
        (at(&self.u), at(&self.v))
    }
}

/// Whether the share at a place, interpolated bilinearly (to 2^-16 px) and rounded to a whole gray value, is more than
/// 127. No part covers what lies outside the silhouette's picture.
fn covers(silhouette: &Silhouette, u: i64, v: i64) -> bool {
    let (left, top) = (u >> 32, v >> 32);
    let at = |dx: i64, dy: i64| {
        let (x, y) = ((left + dx) as usize, (top + dy) as usize);
        if x < silhouette.width_px && y < silhouette.height_px {
            u64::from(silhouette.share[y * silhouette.width_px + x])
        } else {
            0
        }
    };
    let part = |at: i64| (at as u32 >> 16) as u64;
    let mix = |a: u64, b: u64, part: u64| a * (65_536 - part) + b * part;
    let upper = mix(at(0, 0), at(1, 0), part(u));
    let lower = mix(at(0, 1), at(1, 1), part(u));
    2 * mix(upper, lower, part(v)) >= 255 << 32
}

/// The cells between four neighbouring pixel centres: whether the interpolated share is on one side of the majority in
/// all of a cell, and how far away the next cell is that is not.
///
/// A cell whose corners are all covered by the majority is covered everywhere, since interpolation stays between the
/// corners. So blocks of pixels that are far enough from cells of another kind can be filled at once.
#[derive(Clone, Debug)]
pub(super) struct Cells {
    columns: usize,
    rows: usize,
    /// Chebyshev distance in cells to the nearest cell of another kind: positive inside, negative outside, 0 on the edge.
    reach: Vec<i8>,
}

/// Farther is not looked.
const FAR: i16 = 100;

impl Cells {
    pub(super) fn new(silhouette: &Silhouette) -> Self {
        let mask = silhouette.majority();
        let (columns, rows) = (silhouette.width_px + 1, silhouette.height_px + 1);
        let kind = |column: usize, row: usize| {
            let (x, y) = (column as i32 - 1, row as i32 - 1);
            let corners = [(0, 0), (1, 0), (0, 1), (1, 1)].map(|(dx, dy)| mask.has(x + dx, y + dy));
            match corners.iter().filter(|&&corner| corner).count() {
                0 => -1,
                4 => 1,
                _ => 0,
            }
        };
        let kinds: Vec<i16> = (0..columns * rows)
            .map(|i| kind(i % columns, i / columns))
            .collect();
        let reach = |of: i16| chebyshev(&kinds, columns, rows, of);
        let (inside, outside) = (reach(1), reach(-1));
        let reach = inside
            .iter()
            .zip(&outside)
            .map(|(inside, outside)| (inside - outside) as i8);
        Self {
            columns,
            rows,
            reach: reach.collect(),
        }
    }

    fn reach_at(&self, u: i64, v: i64) -> i8 {
        // Negative ones become very large.
        let (column, row) = (((u >> 32) + 1) as usize, ((v >> 32) + 1) as usize);
        if column < self.columns && row < self.rows {
            self.reach[row * self.columns + column]
        } else {
            self.reach_from_outside(u >> 32, v >> 32)
        }
    }

    /// Everything around the picture is outside; how far the picture is.
    fn reach_from_outside(&self, column: i64, row: i64) -> i8 {
        let off = |at: i64, cells: usize| (-1 - at).max(at + 2 - cells as i64).max(0);
        -off(column, self.columns).max(off(row, self.rows)).min(100) as i8
    }
}

/// For cells of kind `of` the Chebyshev distance to the nearest cell of another kind, 0 for others.
fn chebyshev(kinds: &[i16], columns: usize, rows: usize, of: i16) -> Vec<i16> {
    let mut reach: Vec<i16> = kinds
        .iter()
        .map(|&kind| if kind == of { FAR } else { 0 })
        .collect();
    let order: Vec<usize> = (0..columns * rows).collect();
    let mut sweep = |i: usize, neighbours: [(isize, isize); 4]| {
        let (column, row) = ((i % columns) as isize, (i / columns) as isize);
        for (dx, dy) in neighbours {
            let (x, y) = (column + dx, row + dy);
            if x >= 0 && y >= 0 && x < columns as isize && y < rows as isize {
                let near = reach[y as usize * columns + x as usize] + 1;
                reach[i] = reach[i].min(near);
            }
        }
    };
    for &i in &order {
        sweep(i, [(-1, -1), (0, -1), (1, -1), (-1, 0)]);
    }
    for &i in order.iter().rev() {
        sweep(i, [(1, 1), (0, 1), (-1, 1), (1, 0)]);
    }
    reach
}

/// Pixels along the side of a block.
const BLOCK: usize = 4;

/// Puts every pixel that `silhouette` covers at `placement` into `to`, whose pixel (0, 0) is the picture's pixel `origin`.
/// What lies outside `to` is left out.
pub(super) fn draw(
    silhouette: &Silhouette,
    cells: &Cells,
    placement: &Placement,
    origin: (i32, i32),
    to: &mut Bitmap,
) {
    // From a block's first pixel to its middle.
    let half = |row: &[i64; 3]| (row[0] + row[1]) * (BLOCK as i64 - 1) / 2;
    let (half_u, half_v) = (half(&placement.u), half(&placement.v));
    for top in (0..to.height_px()).step_by(BLOCK) {
        for left in (0..to.width_px()).step_by(BLOCK) {
            let (x, y) = (
                i64::from(origin.0) + left as i64,
                i64::from(origin.1) + top as i64,
            );
            let (u, v) = placement.inverse(x, y);
            // A block's pixels lie within 2.2 px of its middle, whatever the angle: in at most the third cell from there.
            match cells.reach_at(u + half_u, v + half_v) {
                4.. => (0..BLOCK).for_each(|row| to.insert_few(left, top + row, 0b1111)),
                ..=-4 => {}
                _ => draw_block(silhouette, cells, placement, (u, v), (left, top), to),
            }
        }
    }
}

fn draw_block(
    silhouette: &Silhouette,
    cells: &Cells,
    placement: &Placement,
    start: (i64, i64),
    (left, top): (usize, usize),
    to: &mut Bitmap,
) {
    for row in 0..BLOCK {
        let mut bits = 0;
        for column in 0..BLOCK {
            let along = |slopes: &[i64; 3]| slopes[0] * column as i64 + slopes[1] * row as i64;
            let (u, v) = (start.0 + along(&placement.u), start.1 + along(&placement.v));
            let reach = cells.reach_at(u, v);
            let inside = reach > 0 || (reach == 0 && covers(silhouette, u, v));
            bits |= u64::from(inside) << column;
        }
        to.insert_few(left, top + row, bits);
    }
}

#[cfg(test)]
mod tests {
    use super::super::bitmap::tests::sample;
    use super::*;
    use proptest::prelude::*;

    fn defined(
        silhouette: &Silhouette,
        placement: &Placement,
        origin: (i32, i32),
        size: usize,
    ) -> Bitmap {
        let mut drawn = Bitmap::new(size, size);
        for (x, y) in (0..size * size).map(|i| (i % size, i / size)) {
            let (u, v) = placement.inverse(origin.0 as i64 + x as i64, origin.1 as i64 + y as i64);
            if covers(silhouette, u, v) {
                drawn.insert(x, y);
            }
        }
        drawn
    }

    proptest! {
        #[test]
        fn equals_asking_every_pixel(
            share in prop::collection::vec(prop::num::u8::ANY, 9 * 7),
            soft in prop::bool::ANY,
            (x_px, y_px) in (-10.0..50.0, -10.0..50.0),
            angle_deg in prop_oneof![0.0..360.0, (0..8).prop_map(|eighth| f64::from(eighth) * 45.0)],
            flipped in prop::bool::ANY,
        ) {
            // Large blocks of one value each, so that there is something to pass over; or noise.
            let (block, side) = if soft { (1, (9, 7)) } else { (5, (45, 35)) };
            let of = |i: usize| share[i / side.0 / block * 9 + i % side.0 / block];
            let silhouette = Silhouette {
                width_px: side.0,
                height_px: side.1,
                mm_per_px: 1.0,
                share: (0..side.0 * side.1).map(of).collect(),
            };
            let pose = Pose { x_px, y_px, angle_deg, flipped };
            let placement = Placement::new(pose, (side.0 as f64 / 2.0, side.1 as f64 / 3.0));
            let mut drawn = Bitmap::new(44, 44);
            draw(&silhouette, &Cells::new(&silhouette), &placement, (-3, 2), &mut drawn);
            prop_assert_eq!(drawn, defined(&silhouette, &placement, (-3, 2), 44));
        }

        #[test]
        fn whole_shifts_give_the_majority_itself(x in -20..20_i32, y in -20..20_i32, share in prop::collection::vec(prop::num::u8::ANY, 64)) {
            let silhouette = Silhouette { width_px: 8, height_px: 8, mm_per_px: 1.0, share };
            let centroid = silhouette.centroid();
            let pose = Pose {
                x_px: centroid.0 + f64::from(x),
                y_px: centroid.1 + f64::from(y),
                ..Pose::default()
            };
            let mut drawn = Bitmap::new(8, 8);
            draw(&silhouette, &Cells::new(&silhouette), &Placement::new(pose, centroid), (x, y), &mut drawn);
            prop_assert_eq!(drawn, silhouette.majority());
        }
    }

    proptest! {
        #[test]
        fn whole_numbers_interpolate_like_fractions(share in prop::collection::vec(prop::num::u8::ANY, 25), x in -2.0..6.0, y in -2.0..6.0) {
            let silhouette = Silhouette { width_px: 5, height_px: 5, mm_per_px: 1.0, share };
            let exact = silhouette.share_at(x, y);
            prop_assume!((exact - 127.5_f64).abs() > 0.02);
            let covered = covers(&silhouette, (x * ONE) as i64, (y * ONE) as i64);
            prop_assert_eq!(covered, exact > 127.5);
        }
    }

    #[test]
    fn turns_go_from_x_to_y_after_the_mirror() {
        let silhouette = Silhouette::from_mask(&sample(), 1.0).unwrap();
        let pose = Pose {
            x_px: 50.0,
            y_px: 40.0,
            angle_deg: 90.0,
            flipped: false,
        };
        let centroid = silhouette.centroid();
        let offset = |pose: Pose| {
            let (u, v) = Placement::new(pose, centroid).inverse(50, 43);
            (u as f64 / ONE - centroid.0, v as f64 / ONE - centroid.1)
        };
        let near = |a: (f64, f64), b: (f64, f64)| (a.0 - b.0).hypot(a.1 - b.1) < 1e-8;
        // A place to the right of the centroid comes to lie below it; mirrored, above it.
        assert!(near(offset(pose), (3.0, 0.0)));
        assert!(near(
            offset(Pose {
                flipped: true,
                ..pose
            }),
            (-3.0, 0.0)
        ));
    }
}
