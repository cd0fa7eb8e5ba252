//! The same recording as it would look if light or lens had shifted a little.

use crate::frames::Frame;

/// A small change of all pictures.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Shift {
    /// Gray values times this.
    Light(f64),
    /// Sizes times this, about the picture's middle.
    Size(f64),
    /// Blurred by a binomial filter of 5 x 5 px, whose standard deviation is 1 px.
    Blur,
}

impl Shift {
    /// Light and size up and down by `percent`, and a blur.
    pub fn all(percent: f64) -> [Self; 5] {
        let share = percent / 100.0;
        [
            Self::Light(1.0 + share),
            Self::Light(1.0 - share),
            Self::Blur,
            Self::Size(1.0 + share),
            Self::Size(1.0 - share),
        ]
    }

    /// What it is called in lists.
    pub fn name(self) -> &'static str {
        match self {
            Self::Light(by) if by >= 1.0 => "brighter",
            Self::Light(_) => "dimmer",
            Self::Blur => "blurred",
            Self::Size(by) if by >= 1.0 => "larger",
            Self::Size(_) => "smaller",
        }
    }

    /// What it is called in a journal: unlike the name it tells by how much.
    pub fn key(self) -> String {
        match self {
            Self::Light(by) => format!("light {by}"),
            Self::Size(by) => format!("size {by}"),
            Self::Blur => "blur".to_owned(),
        }
    }

    /// Changes `frame`; `before` is a buffer.
    pub fn apply(self, frame: &mut Frame, before: &mut Vec<u8>) {
        match self {
            Self::Light(by) => {
                let table: [u8; 256] = std::array::from_fn(|gray| (gray as f64 * by).round() as u8);
                frame
                    .pixels
                    .iter_mut()
                    .for_each(|gray| *gray = table[usize::from(*gray)]);
            }
            Self::Blur => blur(frame, before),
            Self::Size(by) => resize(frame, before, by),
        }
    }
}

/// 1 4 6 4 1 along the rows, then down the columns; the picture's edge is repeated beyond it.
fn blur(frame: &mut Frame, before: &mut Vec<u8>) {
    let (width, height) = (frame.width_px as usize, frame.height_px as usize);
    let five = |at: &dyn Fn(isize) -> u8| {
        let sum = |k: isize| u32::from(at(-k)) + u32::from(at(k));
        ((6 * u32::from(at(0)) + 4 * sum(1) + sum(2) + 8) / 16) as u8
    };
    let inside = |at: usize, by: isize, size: usize| at.saturating_add_signed(by).min(size - 1);
    before.clone_from(&frame.pixels);
    for (y, row) in before.chunks_exact(width.max(1)).enumerate() {
        for x in 0..width {
            frame.pixels[y * width + x] = five(&|by| row[inside(x, by, width)]);
        }
    }
    before.clone_from(&frame.pixels);
    for y in 0..height {
        for x in 0..width {
            let at = |by| before[inside(y, by, height) * width + x];
            frame.pixels[y * width + x] = five(&at);
        }
    }
}

/// Bilinear; the picture's edge is repeated beyond it.
fn resize(frame: &mut Frame, before: &mut Vec<u8>, by: f64) {
    before.clone_from(&frame.pixels);
    let (width, height) = (frame.width_px as usize, frame.height_px as usize);
    // For each new column or row: the old one before it, and how far it is from there.
    let places = |size: usize| -> Vec<(usize, usize, f32)> {
        let middle = (size as f64 - 1.0) / 2.0;
        let place = |k: usize| {
            let at = (middle + (k as f64 - middle) / by).clamp(0.0, size as f64 - 1.0);
            let first = at.floor() as usize;
            (first, (first + 1).min(size - 1), (at - at.floor()) as f32)
        };
        (0..size).map(place).collect()
    };
    let (columns, rows) = (places(width), places(height));
    for (y, &(top, bottom, down)) in rows.iter().enumerate() {
        let (above, below) = (
            &before[top * width..][..width],
            &before[bottom * width..][..width],
        );
        let out = &mut frame.pixels[y * width..][..width];
        for (pixel, &(left, right, across)) in out.iter_mut().zip(&columns) {
            let mix = |a: f32, b: f32, share: f32| a + (b - a) * share;
            let along = |row: &[u8]| mix(f32::from(row[left]), f32::from(row[right]), across);
            *pixel = (mix(along(above), along(below), down) + 0.5) as u8;
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn frame(gray: impl Fn(usize, usize) -> u8) -> Frame {
        let pixels = (0..40 * 60).map(|k| gray(k % 60, k / 60)).collect();
        Frame {
            width_px: 60,
            height_px: 40,
            pixels,
            ..Frame::default()
        }
    }

    fn shifted(shift: Shift, gray: impl Fn(usize, usize) -> u8) -> Frame {
        let mut frame = frame(gray);
        shift.apply(&mut frame, &mut Vec::new());
        frame
    }

    #[test]
    fn light_and_blur_keep_what_is_even() {
        assert_eq!(shifted(Shift::Light(1.1), |_, _| 100), frame(|_, _| 110));
        assert_eq!(shifted(Shift::Light(2.0), |_, _| 200), frame(|_, _| 255));
        assert_eq!(shifted(Shift::Blur, |_, _| 77), frame(|_, _| 77));
        assert_eq!(shifted(Shift::Size(0.9), |_, _| 77), frame(|_, _| 77));
        assert_eq!(
            shifted(Shift::Size(1.0), |x, y| (x * y) as u8),
            frame(|x, y| (x * y) as u8)
        );
    }

    #[test]
    fn one_bright_pixel_spreads_by_the_binomial_weights() {
        let blurred = shifted(Shift::Blur, |x, y| if (x, y) == (30, 20) { 255 } else { 0 });
        let at = |x: usize, y: usize| f64::from(blurred.pixels[y * 60 + x]);
        assert!((at(30, 20) - 255.0 * 36.0 / 256.0).abs() <= 1.0);
        assert!((at(31, 20) - 255.0 * 24.0 / 256.0).abs() <= 1.0);
        assert!((at(32, 22) - 255.0 / 256.0).abs() <= 1.0);
    }

    #[test]
    fn a_larger_picture_of_a_disc_has_a_larger_disc() {
        let disc = |x: usize, y: usize| {
            let apart = (x as f64 - 29.5).hypot(y as f64 - 19.5);
            if apart < 10.0 { 200 } else { 0 }
        };
        let area = |frame: &Frame| frame.pixels.iter().filter(|&&gray| gray > 100).count() as f64;
        let grown = area(&shifted(Shift::Size(1.1), disc)) / area(&frame(disc));
        assert!((grown - 1.21).abs() < 0.04, "{grown}");
    }
}
