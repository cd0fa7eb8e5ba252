//! Cloudy patterns that repeat after a while: belt texture and the grain of a surface.

use super::dice::{Dice, Stream};

/// Cells to a side, a power of two.
const SIDE: usize = 512;

/// A pattern of values about 0, mostly within -1 to 1.
#[derive(Clone, Debug)]
pub(super) struct Pattern {
    cells: Vec<f32>,
    cells_per_mm: f64,
}

impl Pattern {
    /// Value noise (Perlin's lattice with values instead of slopes) of several octaves, the finest `finest_mm` wide;
    /// each coarser octave is `gain` times as strong as the next finer one.
    pub(super) fn new(seed: u64, index: u64, finest_mm: f64, gain: f32) -> Self {
        let mut dice = Dice::new(seed, Stream::Pattern(index));
        let mut cells = vec![0.0; SIDE * SIDE];
        let (mut strength, mut power) = (1.0, 0.0);
        for octave in 1..=6 {
            add_octave(&mut cells, SIDE >> octave, strength, &mut dice);
            power += strength * strength;
            strength *= gain;
        }
        let level = 1.5 / power.sqrt();
        cells.iter_mut().for_each(|cell| *cell *= level);
        // The finest octave has a knot every two cells.
        let cells_per_mm = 2.0 / finest_mm;
        Self {
            cells,
            cells_per_mm,
        }
    }

    /// The value at a point, linear between cells.
    pub(super) fn at(&self, x_mm: f64, y_mm: f64) -> f32 {
        let (x, y) = (x_mm * self.cells_per_mm, y_mm * self.cells_per_mm);
        let (left, top) = (x.floor(), y.floor());
        let (right_share, below_share) = ((x - left) as f32, (y - top) as f32);
        let wrap = |at: i64| (at & (SIDE as i64 - 1)) as usize;
        let columns = [wrap(left as i64), wrap(left as i64 + 1)];
        let rows =
            [wrap(top as i64), wrap(top as i64 + 1)].map(|row| &self.cells[row * SIDE..][..SIDE]);
        let [above, below] = rows.map(|row| mix(row[columns[0]], row[columns[1]], right_share));
        mix(above, below, below_share)
    }
}

/// Adds random values at `knots` by `knots` places, smoothly joined.
fn add_octave(cells: &mut [f32], knots: usize, strength: f32, dice: &mut Dice) {
    let values: Vec<f32> = (0..knots * knots)
        .map(|_| dice.between(-1.0, 1.0) as f32 * strength)
        .collect();
    let step = SIDE / knots;
    let smooth = |at: usize| {
        let share = (at % step) as f32 / step as f32;
        share * share * (3.0 - 2.0 * share)
    };
    for (at, cell) in cells.iter_mut().enumerate() {
        let (x, y) = (at % SIDE, at / SIDE);
        let (left, right) = (x / step, (x / step + 1) % knots);
        let row = |y: usize| {
            mix(
                values[y * knots + left],
                values[y * knots + right],
                smooth(x),
            )
        };
        *cell += mix(row(y / step), row((y / step + 1) % knots), smooth(y));
    }
}

/// From `a` to `b`.
pub(super) fn mix(a: f32, b: f32, share: f32) -> f32 {
    a + (b - a) * share
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_pattern_is_smooth_balanced_and_repeats() {
        let pattern = Pattern::new(5, 0, 0.5, 1.2);
        let period_mm = SIDE as f64 / pattern.cells_per_mm;
        let mut sum = 0.0;
        for step in 0..5000 {
            let (x, y) = (f64::from(step) * 0.37 - 300.0, f64::from(step % 71) * 0.53);
            let here = pattern.at(x, y);
            sum += here;
            assert!(here.abs() < 4.0);
            assert!((pattern.at(x + period_mm, y - period_mm) - here).abs() < 1e-3);
            assert!((pattern.at(x + 1e-3, y) - here).abs() < 0.05);
        }
        assert!((sum / 5000.0).abs() < 0.3, "{sum}");
    }
}
