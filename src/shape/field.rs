//! The silhouette's signed distance, finer than a pixel: negative inside, positive outside, 0 on the edge, where the
//! interpolated share is half.

use super::{Bitmap, DistanceTransform, Silhouette};

/// The gray value at which half of the parts cover a place.
const MAJORITY: f64 = 127.5;

/// Signed distances at pixel centres, with a margin around the silhouette's picture.
#[derive(Clone, Debug)]
pub(super) struct Field {
    width: usize,
    height: usize,
    margin: f32,
    /// Between four neighbouring pixel centres: the value at the upper left one, how it changes towards x and y, and by
    /// how much that towards x changes towards y. Row by row, one column and row fewer than pixels.
    cells: Vec<[f32; 4]>,
    edge_px: f64,
}

/// Points that are looked up at once.
pub(super) const LANES: usize = 8;

/// Looked-up distances and how they change towards x and y.
#[derive(Clone, Copy, Debug, Default)]
pub(super) struct Samples {
    pub(super) distance: [f32; LANES],
    pub(super) slope_x: [f32; LANES],
    pub(super) slope_y: [f32; LANES],
}

/// Within this of the edge distances are to the edge itself.
const NEAR_PX: f64 = 6.0;

impl Field {
    pub(super) fn new(silhouette: &Silhouette) -> Self {
        let longer = silhouette.width_px.max(silhouette.height_px);
        let margin = (longer / 8).max(16);
        let grid = Grid::new(silhouette, margin);
        let (width, height) = (grid.width - 1, grid.height - 1);
        let cell = |i: usize| {
            let at =
                |dx: usize, dy: usize| grid.values[(i / width + dy) * grid.width + i % width + dx];
            let [a, b, c, d] = [at(0, 0), at(1, 0), at(0, 1), at(1, 1)];
            [a, b - a, c - a, a - b - c + d]
        };
        Self {
            width,
            height,
            margin: margin as f32,
            cells: (0..width * height).map(cell).collect(),
            edge_px: grid.edge_px,
        }
    }

    /// How long the edge is, bores included.
    pub(super) fn edge_px(&self) -> f64 {
        self.edge_px
    }

    /// The distances at places in the silhouette's picture. Beyond the margin they are those of the nearest place within.
    #[inline(always)]
    pub(super) fn sample(&self, x: [f32; LANES], y: [f32; LANES]) -> Samples {
        // 2^23 is so large that f32 has no fractions there: adding it rounds, and leaves the whole number in the low bits.
        const WHOLE: f32 = 8_388_608.0;
        let mut samples = Samples::default();
        let (high_x, high_y) = (self.width as f32 - 0.5, self.height as f32 - 0.5);
        let width = self.width as u32;
        let [mut fx, mut fy] = [[0.0_f32; LANES]; 2];
        let mut index = [0_u32; LANES];
        for i in 0..LANES {
            let x = (x[i] + self.margin).max(0.5).min(high_x);
            let y = (y[i] + self.margin).max(0.5).min(high_y);
            let (left, top) = (x - 0.5 + WHOLE, y - 0.5 + WHOLE);
            let whole = |at: f32| at.to_bits() & 0x7f_ffff;
            index[i] = whole(top) * width + whole(left);
            (fx[i], fy[i]) = (x - (left - WHOLE), y - (top - WHOLE));
        }
        for i in 0..LANES {
            let [value, dx, dy, dxy] = self.cells[index[i] as usize];
            let slope_y = dy + dxy * fx[i];
            samples.slope_x[i] = dx + dxy * fy[i];
            samples.slope_y[i] = slope_y;
            samples.distance[i] = value + dx * fx[i] + slope_y * fy[i];
        }
        samples
    }
}

/// The distances themselves.
struct Grid {
    width: usize,
    height: usize,
    margin: f64,
    values: Vec<f32>,
    edge_px: f64,
}

impl Grid {
    fn new(silhouette: &Silhouette, margin: usize) -> Self {
        let (width, height) = (
            silhouette.width_px + 2 * margin,
            silhouette.height_px + 2 * margin,
        );
        let signed = fine_signed(silhouette, margin);
        // Every pixel's centre lies between four fine pixels.
        let value = |x: usize, y: usize| {
            let at = |dx: usize, dy: usize| signed[(y * FINE + dy) * width * FINE + x * FINE + dx];
            (at(0, 0) + at(1, 0) + at(0, 1) + at(1, 1)) / (4 * FINE) as f32
        };
        let mut grid = Self {
            width,
            height,
            margin: margin as f64,
            values: (0..width * height)
                .map(|i| value(i % width, i / width))
                .collect(),
            edge_px: 0.0,
        };
        grid.sharpen(silhouette);
        grid
    }

    /// Replaces distances near the edge by those to the edge's pieces.
    fn sharpen(&mut self, silhouette: &Silhouette) {
        let mut nearest = vec![f64::INFINITY; self.values.len()];
        let (columns, rows) = (silhouette.width_px as i32, silhouette.height_px as i32);
        for (column, row) in
            (-1..rows).flat_map(|row| (-1..columns).map(move |column| (column, row)))
        {
            for [a, b] in pieces(silhouette, f64::from(column), f64::from(row))
                .into_iter()
                .flatten()
            {
                self.edge_px += (b.0 - a.0).hypot(b.1 - a.1);
                self.offer(a, b, &mut nearest);
            }
        }
        for (i, &distance) in nearest.iter().enumerate().filter(|&(_, &d)| d <= NEAR_PX) {
            let (x, y) = (
                (i % self.width) as f64 - self.margin,
                (i / self.width) as f64 - self.margin,
            );
            let inside = silhouette.share_at(x, y) >= MAJORITY;
            self.values[i] = if inside { -distance } else { distance } as f32;
        }
    }

    /// Takes the distance to the piece from `a` to `b` into account where it is near.
    fn offer(&self, a: (f64, f64), b: (f64, f64), nearest: &mut [f64]) {
        let range = |a: f64, b: f64, size: usize| {
            let low = (a.min(b) - NEAR_PX + self.margin).ceil().max(0.0) as usize;
            let high = (a.max(b) + NEAR_PX + self.margin).floor() as usize;
            low..=high.min(size - 1)
        };
        for y in range(a.1, b.1, self.height) {
            for x in range(a.0, b.0, self.width) {
                let at = (x as f64 - self.margin, y as f64 - self.margin);
                let here = &mut nearest[y * self.width + x];
                *here = here.min(to_piece(at, a, b));
            }
        }
    }
}

type Piece = [(f64, f64); 2];

/// Where the edge runs through the cell whose upper left corner is this pixel centre, as straight pieces: W. Lorensen and
/// H. Cline, "Marching cubes", SIGGRAPH 1987, in two dimensions. In the ambiguous case the two covered corners are apart.
fn pieces(silhouette: &Silhouette, x: f64, y: f64) -> [Option<Piece>; 2] {
    // Clockwise from the upper left one, so that corner i is joined to corner i + 1.
    let corners = [(0.0, 0.0), (1.0, 0.0), (1.0, 1.0), (0.0, 1.0)];
    let shares = corners.map(|(dx, dy)| silhouette.share_at(x + dx, y + dy) - MAJORITY);
    let crossing = |i: usize| {
        let (from, to) = (shares[i], shares[(i + 1) % 4]);
        let part = from / (from - to);
        let (a, b) = (corners[i], corners[(i + 1) % 4]);
        (x + a.0 + (b.0 - a.0) * part, y + a.1 + (b.1 - a.1) * part)
    };
    let mut found = [None; 2];
    let mut next = 0;
    // The edge enters where covered turns to not covered; the piece leaves at the crossing before that.
    for i in 0..4 {
        if shares[i] >= 0.0 && shares[(i + 1) % 4] < 0.0 {
            let back = (1..4).map(|k| (i + 4 - k) % 4);
            let other = back
                .into_iter()
                .find(|&j| shares[j] < 0.0 && shares[(j + 1) % 4] >= 0.0);
            found[next] = other.map(|j| [crossing(i), crossing(j)]);
            next += 1;
        }
    }
    found
}

fn to_piece(at: (f64, f64), a: (f64, f64), b: (f64, f64)) -> f64 {
    let (along, from) = ((b.0 - a.0, b.1 - a.1), (at.0 - a.0, at.1 - a.1));
    let square = along.0 * along.0 + along.1 * along.1;
    let part = if square > 0.0 {
        (from.0 * along.0 + from.1 * along.1) / square
    } else {
        0.0
    };
    let part = part.clamp(0.0, 1.0);
    (from.0 - part * along.0).hypot(from.1 - part * along.1)
}

/// Fine pixels along the side of a pixel.
const FINE: usize = 2;

/// Signed distances in fine pixels at fine pixel centres.
fn fine_signed(silhouette: &Silhouette, margin: usize) -> Vec<f32> {
    let side = |px: usize| (px + 2 * margin) * FINE;
    let mut set = Bitmap::new(side(silhouette.width_px), side(silhouette.height_px));
    let place = |at: usize| (at as f64 + 0.5) / FINE as f64 - 0.5 - margin as f64;
    for y in (margin - 1) * FINE..(margin + silhouette.height_px + 1) * FINE {
        for x in (margin - 1) * FINE..(margin + silhouette.width_px + 1) * FINE {
            if silhouette.share_at(place(x), place(y)) >= MAJORITY {
                set.insert(x, y);
            }
        }
    }
    let mut transform = DistanceTransform::default();
    // The edge runs between the pixels on its two sides.
    let distance = |&squared: &u32| f64::from(squared).sqrt() as f32 - 0.5;
    let outside: Vec<f32> = transform.to_foreground(&set).iter().map(distance).collect();
    let inside = transform.to_background(&set).iter().map(distance);
    let pairs = inside.zip(outside);
    pairs
        .map(|(inside, outside)| if inside > 0.0 { -inside } else { outside })
        .collect()
}

#[cfg(test)]
mod tests {
    use super::super::drawn::{self, Outline};
    use super::*;

    fn sample(field: &Field, x: f64, y: f64) -> [f64; 3] {
        let samples = field.sample([x as f32; LANES], [y as f32; LANES]);
        [samples.distance[7], samples.slope_x[7], samples.slope_y[7]].map(f64::from)
    }

    #[test]
    fn a_disc_has_the_distances_of_a_circle() {
        let (silhouette, centre) = drawn::silhouette(&Outline::disc(30.0), 1.0);
        let field = Field::new(&silhouette);
        for i in 0..200 {
            let (sin, cos) = (f64::from(i) * 0.7).sin_cos();
            let radius = 22.0 + f64::from(i % 17);
            let (x, y) = (centre.0 + radius * cos, centre.1 + radius * sin);
            let [distance, slope_x, slope_y] = sample(&field, x, y);
            let error = distance - (radius - 30.0);
            let turned = (slope_x - cos).hypot(slope_y - sin);
            if (25.0..=35.0).contains(&radius) {
                assert!(
                    error.abs() < 0.12 && turned < 0.15,
                    "{error} {turned} at {radius}"
                );
            }
            assert!(
                error.abs() < 0.4 && turned < 0.4,
                "{error} {turned} at {radius}"
            );
        }
    }

    #[test]
    fn every_place_has_a_distance() {
        let (silhouette, centre) = drawn::silhouette(&Outline::disc(9.0), 1.0);
        let field = Field::new(&silhouette);
        for at in [
            -1e30,
            -1e9,
            -16.0,
            -15.5,
            0.0,
            12.5,
            38.0,
            39.0,
            1e9,
            1e30,
            f64::NAN,
        ] {
            assert!(sample(&field, at, 0.0)[0].is_finite());
            assert!(sample(&field, 0.0, at)[0].is_finite());
        }
        assert!(sample(&field, centre.0, centre.1)[0] < -8.0);
    }
}
