//! The nominal shape as a picture, ready to be taught.

use super::job::Scene;
use super::plane::Point;

/// A shape as a gray picture: 255 times the share of the pixel that it covers.
#[derive(Clone, Debug, PartialEq)]
pub struct Mask {
    /// Pixels per row.
    pub width_px: u32,
    /// Rows.
    pub height_px: u32,
    /// Row by row.
    pub pixels: Vec<u8>,
}

/// The nominal shape of a scene at angle 0, its centroid in the middle of the picture, with a border of at least two
/// pixels. `mm_per_px` must be positive.
pub fn mask(scene: Scene, mm_per_px: f64) -> Mask {
    const SAMPLES: u32 = 8;
    let nominal = scene.nominal();
    let half_px = (nominal.radius_mm / mm_per_px).ceil() + 2.0;
    let side_px = 2 * half_px as u32;
    let at_mm = |px: u32, sample: u32| {
        let inside = (f64::from(sample) + 0.5) / f64::from(SAMPLES);
        (f64::from(px) + inside - half_px) * mm_per_px
    };
    let covered = |x, y| {
        let samples = (0..SAMPLES * SAMPLES).map(|at| (at % SAMPLES, at / SAMPLES));
        samples
            .filter(|&(dx, dy)| {
                nominal
                    .outline
                    .signed_mm(Point::new(at_mm(x, dx), at_mm(y, dy)))
                    < 0.0
            })
            .count()
    };
    let share = |count: usize| (count as f64 / f64::from(SAMPLES * SAMPLES) * 255.0).round() as u8;
    Mask {
        width_px: side_px,
        height_px: side_px,
        pixels: (0..side_px)
            .flat_map(|y| (0..side_px).map(move |x| (x, y)))
            .map(|(x, y)| share(covered(x, y)))
            .collect(),
    }
}
