//! Drawn parts for tests: polygons with flaws, at any pose, sampled at pixel centres.

use std::f64::consts::TAU;

use super::{Bitmap, Pose, Silhouette};

/// Polygons in px, each with (0, 0) inside, joined by the even-odd rule.
#[derive(Clone, Debug)]
pub(crate) struct Outline {
    rings: Vec<Vec<(f64, f64)>>,
    /// For each the smallest and largest distance of its edge from (0, 0).
    radii: Vec<[f64; 2]>,
    reach: f64,
}

/// A flaw in the outline's own coordinates.
#[derive(Clone, Copy, Debug)]
pub(crate) enum Flaw {
    /// A disc that is cut out.
    Bite { x: f64, y: f64, radius: f64 },
    /// A disc that is added.
    Burr { x: f64, y: f64, radius: f64 },
    /// Everything farther than `at` in this direction is cut off.
    Broken { angle: f64, at: f64 },
}

impl Outline {
    fn new(rings: Vec<Vec<(f64, f64)>>) -> Self {
        let radii: Vec<[f64; 2]> = rings.iter().map(|ring| radii(ring)).collect();
        let reach = radii.iter().map(|radii| radii[1]).fold(0.0, f64::max);
        Self {
            rings,
            radii,
            reach,
        }
    }

    fn round(x: f64, y: f64, radius: f64) -> Vec<(f64, f64)> {
        let corner = |i| TAU * f64::from(i) / 90.0;
        let corners = (0..90).map(corner);
        corners
            .map(|a: f64| (x + radius * a.cos(), y + radius * a.sin()))
            .collect()
    }

    pub(crate) fn disc(radius: f64) -> Self {
        Self::new(vec![Self::round(0.0, 0.0, radius)])
    }

    pub(crate) fn polygon(corners: &[(f64, f64)]) -> Self {
        Self::new(vec![corners.to_vec()])
    }

    /// Five points; the inner corners lie at half the radius.
    pub(crate) fn star(radius: f64) -> Self {
        let corner = |i: u32| {
            let (sin, cos) = (TAU * f64::from(i) / 10.0).sin_cos();
            let radius = if i.is_multiple_of(2) {
                radius
            } else {
                0.5 * radius
            };
            (radius * cos, radius * sin)
        };
        Self::new(vec![(0..10).map(corner).collect()])
    }

    /// A ring with a tab that sits beside its middle line, so that it has a face.
    pub(crate) fn gasket(radius: f64) -> Self {
        // The tab's sides lie at these heights and leave the ring at these angles.
        let (low, high) = (0.05_f64, 0.40_f64);
        let on_ring = |y: f64| ((1.0 - y * y).sqrt(), y);
        let tab = [on_ring(low), (1.25, low), (1.25, high), on_ring(high)];
        let angle = |&(x, y): &(f64, f64)| f64::atan2(y, x);
        let mut outer = Self::round(0.0, 0.0, radius);
        outer.retain(|corner| !(low.asin()..=high.asin()).contains(&angle(corner)));
        let at = outer
            .iter()
            .position(|corner| angle(corner) > high.asin())
            .unwrap_or(0);
        outer.splice(at..at, tab.map(|(x, y)| (x * radius, y * radius)));
        Self::new(vec![outer, Self::round(0.0, 0.0, 0.55 * radius)])
    }

    /// The same with every corner moved by `off` along x and y.
    pub(crate) fn uneven(&self, mut off: impl FnMut() -> f64) -> Self {
        let mut moved = |&(x, y): &(f64, f64)| (x + off(), y + off());
        let rings = self.rings.iter();
        Self::new(
            rings
                .map(|ring| ring.iter().map(&mut moved).collect())
                .collect(),
        )
    }

    pub(crate) fn has(&self, x: f64, y: f64) -> bool {
        let radius = x.hypot(y);
        let within = |(ring, &[low, high]): (&Vec<(f64, f64)>, &[f64; 2])| {
            radius < low || (radius <= high && encloses(ring, x, y))
        };
        let rings = self.rings.iter().zip(&self.radii);
        rings.filter(|&ring| within(ring)).count() % 2 == 1
    }

    fn has_with(&self, x: f64, y: f64, flaws: &[Flaw]) -> bool {
        let within = |u: f64, v: f64, radius: f64| (x - u).hypot(y - v) <= radius;
        flaws.iter().fold(self.has(x, y), |has, &flaw| match flaw {
            Flaw::Bite { x, y, radius } => has && !within(x, y, radius),
            Flaw::Burr { x, y, radius } => has || within(x, y, radius),
            Flaw::Broken { angle, at } => has && x * angle.cos() + y * angle.sin() <= at,
        })
    }

    /// The outline with its (0, 0) at the pose, in a picture of this size.
    pub(crate) fn draw(&self, pose: Pose, flaws: &[Flaw], size: (usize, usize)) -> Bitmap {
        let mut picture = Bitmap::new(size.0, size.1);
        self.add_to(&mut picture, pose, flaws);
        picture
    }

    pub(crate) fn add_to(&self, picture: &mut Bitmap, pose: Pose, flaws: &[Flaw]) {
        let (sin, cos) = pose.angle_deg.to_radians().sin_cos();
        for y in 0..picture.height_px() {
            for x in 0..picture.width_px() {
                let (dx, dy) = (x as f64 - pose.x_px, y as f64 - pose.y_px);
                // Beyond the farthest corner there are at most burrs.
                if dx.hypot(dy) > 1.3 * self.reach {
                    continue;
                }
                let (u, v) = (cos * dx + sin * dy, cos * dy - sin * dx);
                if self.has_with(if pose.flipped { -u } else { u }, v, flaws) {
                    picture.insert(x, y);
                }
            }
        }
    }
}

fn radii(ring: &[(f64, f64)]) -> [f64; 2] {
    let next = ring.iter().cycle().skip(1);
    let nearest = ring.iter().zip(next).map(|(a, b)| {
        let along = (b.0 - a.0, b.1 - a.1);
        let square = (along.0 * along.0 + along.1 * along.1).max(1e-12);
        let part = (-(a.0 * along.0 + a.1 * along.1) / square).clamp(0.0, 1.0);
        (a.0 + part * along.0).hypot(a.1 + part * along.1)
    });
    let farthest = ring.iter().map(|&(x, y)| x.hypot(y));
    [
        nearest.fold(f64::INFINITY, f64::min),
        farthest.fold(0.0, f64::max),
    ]
}

fn encloses(ring: &[(f64, f64)], x: f64, y: f64) -> bool {
    let next = ring.iter().cycle().skip(1);
    let crossed = ring.iter().zip(next).filter(|&(a, b)| {
        (a.1 > y) != (b.1 > y) && x < a.0 + (y - a.1) / (b.1 - a.1) * (b.0 - a.0)
    });
    crossed.count() % 2 == 1
}

/// The outline as it would be taught from very many parts, and where its (0, 0) lies in it.
pub(crate) fn silhouette(outline: &Outline, mm_per_px: f64) -> (Silhouette, (f64, f64)) {
    let half = outline.reach.ceil() as usize + 3;
    let side = 2 * half + 1;
    let share = |i: usize| {
        let (x, y) = (
            (i % side) as f64 - half as f64,
            (i / side) as f64 - half as f64,
        );
        let offset = |k: i32| (f64::from(k) + 0.5) / 8.0 - 0.5;
        let covered = (0..64).filter(|k| outline.has(x + offset(k % 8), y + offset(k / 8)));
        (covered.count() as f64 / 64.0 * 255.0).round() as u8
    };
    let whole = Silhouette {
        width_px: side,
        height_px: side,
        mm_per_px,
        share: (0..side * side).map(share).collect(),
    };
    (whole, (half as f64, half as f64))
}
