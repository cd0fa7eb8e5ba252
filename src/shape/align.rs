//! Moves a pose until the region's edge lies on the silhouette's: A. W. Fitzgibbon, "Robust registration of 2D and 3D
//! point sets", Image and Vision Computing 21 (2003), that is, damped Gauss-Newton steps on a distance field instead of
//! pairs of points, with weights that forget what lies far off. Those are Geman and McClure's (1987) while the pose is
//! coarse, and Beaton and Tukey's biweight (1974) at the end, under which a bite or a burr weighs nothing.

use super::field::{Field, LANES, Samples};
use super::{Model, Pose};

/// How much a point at a distance from the silhouette's edge weighs; `scale_px` is where it begins to be forgotten.
#[derive(Clone, Copy, Debug)]
pub(super) enum Kernel {
    GemanMcClure { scale_px: f64 },
    Biweight { scale_px: f64 },
}

/// A pose in the coordinates of the edge points.
#[derive(Clone, Copy, Debug, Default)]
pub(super) struct Place {
    pub(super) x: f64,
    pub(super) y: f64,
    /// Radians.
    pub(super) angle: f64,
    pub(super) flipped: bool,
}

impl Place {
    /// The pose in the picture, for points measured from `origin`.
    pub(super) fn pose(&self, origin: (f64, f64)) -> Pose {
        Pose {
            x_px: self.x + origin.0,
            y_px: self.y + origin.1,
            angle_deg: self.angle.to_degrees(),
            flipped: self.flipped,
        }
    }
}

/// A place made ready for many points.
#[derive(Clone, Copy)]
struct Lookup<'a> {
    field: &'a Field,
    middle: [f32; 2],
    sin: f32,
    cos: f32,
    side: f32,
    centroid: [f32; 2],
}

impl<'a> Lookup<'a> {
    fn new(model: &'a Model, place: &Place) -> Self {
        let (sin, cos) = place.angle.sin_cos();
        Self {
            field: &model.field,
            middle: [place.x as f32, place.y as f32],
            sin: sin as f32,
            cos: cos as f32,
            side: if place.flipped { -1.0 } else { 1.0 },
            centroid: [model.centroid.0 as f32, model.centroid.1 as f32],
        }
    }

    /// What lies at up to [`LANES`] points; the last one again where there are fewer.
    #[inline(always)]
    fn at(&self, points: &[[f32; 2]]) -> Batch {
        let mut batch = Batch::default();
        let [mut x, mut y] = [[0.0; LANES]; 2];
        for i in 0..LANES {
            let point = points[i.min(points.len() - 1)];
            (batch.u[i], batch.v[i]) = (point[0] - self.middle[0], point[1] - self.middle[1]);
        }
        for i in 0..LANES {
            let (dx, dy) = (batch.u[i], batch.v[i]);
            batch.u[i] = self.cos * dx + self.sin * dy;
            batch.v[i] = self.cos * dy - self.sin * dx;
            x[i] = self.centroid[0] + self.side * batch.u[i];
            y[i] = self.centroid[1] + batch.v[i];
        }
        batch.samples = self.field.sample(x, y);
        batch
    }
}

/// Points from the silhouette's centroid, turned back by the angle (not yet mirrored back), and what lies there.
#[derive(Clone, Copy, Default)]
struct Batch {
    u: [f32; LANES],
    v: [f32; LANES],
    samples: Samples,
}

/// Mean of the points' squared distances relative to that of `scale_px`, each counted as 1 at most: 0 if all points lie
/// on the edge, 1 if all are far off.
pub(super) fn cost(model: &Model, points: &[[f32; 2]], place: &Place, scale_px: f64) -> f64 {
    let lookup = Lookup::new(model, place);
    let per_square = (1.0 / (scale_px * scale_px)) as f32;
    let mut sums = [0.0_f32; LANES];
    for some in points.chunks(LANES) {
        let distances = lookup.at(some).samples.distance;
        for i in 0..LANES {
            let counts = if i < some.len() { 1.0 } else { 0.0 };
            sums[i] += counts * (distances[i] * distances[i] * per_square).min(1.0);
        }
    }
    sums.into_iter().map(f64::from).sum::<f64>() / points.len().max(1) as f64
}

/// One step; returns how far it moved the farthest point of the silhouette, at most.
pub(super) fn step(model: &Model, points: &[[f32; 2]], place: &mut Place, kernel: Kernel) -> f64 {
    let radius = model.radius_px.max(1.0);
    let lookup = Lookup::new(model, place);
    let normal = match kernel {
        Kernel::GemanMcClure { scale_px } => {
            let per_square = (1.0 / (scale_px * scale_px)) as f32;
            Normal::sum(&lookup, points, radius, |distance| {
                let lower = 1.0 + distance * distance * per_square;
                1.0 / (lower * lower)
            })
        }
        Kernel::Biweight { scale_px } => {
            let per_square = (1.0 / (scale_px * scale_px)) as f32;
            Normal::sum(&lookup, points, radius, |distance| {
                let rest = (1.0 - distance * distance * per_square).max(0.0);
                rest * rest
            })
        }
    };
    let [du, dv, turn] = normal.solve(model.symmetry().turns == 0);
    // No farther than the field can be trusted to be straight.
    let length = du.hypot(dv).max(turn.abs());
    let shorten = (0.25 * radius / length.max(1e-12)).min(1.0);
    let (du, dv, turn) = (du * shorten, dv * shorten, turn * shorten);
    let (sin, cos) = place.angle.sin_cos();
    place.x += cos * du - sin * dv;
    place.y += sin * du + cos * dv;
    place.angle += turn / radius;
    du.hypot(dv) + turn.abs()
}

/// The normal equations of the weighted distances: for a shift in the turned-back frame, and a turn in px at the radius.
#[derive(Default)]
struct Normal {
    /// Of the symmetric matrix: 00, 01, 02, 11, 12, 22.
    matrix: [f64; 6],
    right: [f64; 3],
}

impl Normal {
    fn sum(lookup: &Lookup, points: &[[f32; 2]], radius: f64, weight: impl Fn(f32) -> f32) -> Self {
        let mut total = Self::default();
        let per_radius = (1.0 / radius) as f32;
        // Short sums in f32, the total in f64: fast, and nothing is lost.
        for many in points.chunks(16 * LANES) {
            let mut sums = [[0.0_f32; LANES]; 9];
            for some in many.chunks(LANES) {
                let Batch { u, v, samples } = lookup.at(some);
                for i in 0..LANES {
                    let distance = samples.distance[i];
                    let weight = if i < some.len() {
                        weight(distance)
                    } else {
                        0.0
                    };
                    let (gu, gv) = (lookup.side * samples.slope_x[i], samples.slope_y[i]);
                    // Shifting the silhouette by +u moves the point by -u in its frame; turning it, along (v, -u).
                    let turn = (gu * v[i] - gv * u[i]) * per_radius;
                    let (wu, wv, wt) = (weight * gu, weight * gv, weight * turn);
                    sums[0][i] += wu * gu;
                    sums[1][i] += wu * gv;
                    sums[2][i] -= wu * turn;
                    sums[3][i] += wv * gv;
                    sums[4][i] -= wv * turn;
                    sums[5][i] += wt * turn;
                    sums[6][i] += wu * distance;
                    sums[7][i] += wv * distance;
                    sums[8][i] -= wt * distance;
                }
            }
            let sums = sums.map(|lanes| f64::from(lanes.into_iter().sum::<f32>()));
            total
                .matrix
                .iter_mut()
                .zip(&sums[..6])
                .for_each(|(total, sum)| *total += sum);
            total
                .right
                .iter_mut()
                .zip(&sums[6..])
                .for_each(|(total, sum)| *total += sum);
        }
        total
    }

    /// Solves by Cholesky's method, with slight damping so that there always is a solution.
    fn solve(&self, no_turn: bool) -> [f64; 3] {
        let [m00, m01, m02, m11, m12, m22] = self.matrix;
        let damping = 1e-4 * (m00 + m11 + m22) + 1e-9;
        let stiff = if no_turn { 1e12 } else { 0.0 };
        let l00 = (m00 + damping).sqrt();
        let (l10, l20) = (m01 / l00, m02 / l00);
        let l11 = (m11 + damping - l10 * l10).sqrt();
        let l21 = (m12 - l20 * l10) / l11;
        let l22 = (m22 + damping + stiff - l20 * l20 - l21 * l21).sqrt();
        let z0 = self.right[0] / l00;
        let z1 = (self.right[1] - l10 * z0) / l11;
        let z2 = (self.right[2] - l20 * z0 - l21 * z1) / l22;
        let x2 = z2 / l22;
        let x1 = (z1 - l21 * x2) / l11;
        let x0 = (z0 - l10 * x1 - l20 * x2) / l00;
        [x0, x1, x2]
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_equations_are_solved() {
        let normal = Normal {
            matrix: [4.0, 1.0, 0.5, 3.0, -1.0, 2.0],
            right: [4.0 + 2.0 + 1.5, 1.0 + 6.0 - 3.0, 0.5 - 2.0 + 6.0],
        };
        let solved = normal.solve(false);
        for (value, expected) in solved.into_iter().zip([1.0, 2.0, 3.0]) {
            assert!((value - expected).abs() < 5e-3, "{solved:?}");
        }
        assert!(normal.solve(true)[2].abs() < 1e-6);
        assert_eq!(Normal::default().solve(false), [0.0; 3]);
    }
}
