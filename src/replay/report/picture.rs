//! Pictures inside the page: drawn from the recording once more, kept small, written as data URIs.

use std::io::Cursor;

use base64::prelude::{BASE64_STANDARD, Engine};
use image::codecs::jpeg::JpegEncoder;
use image::codecs::png::{CompressionType, FilterType, PngEncoder};
use image::imageops::{self, FilterType as Resize};
use image::{DynamicImage, GrayImage, RgbImage};

use crate::belt::Part;
use crate::frames::Frame;
use crate::recording::{Recording, RecordingError};
use crate::replay::Artist;

/// Wider pictures are made smaller.
const WIDEST_PX: u32 = 640;
const JPEG_QUALITY: u8 = 82;

/// A picture as the page holds it.
#[derive(Clone, Debug, PartialEq)]
pub struct Picture {
    /// The whole picture as a link.
    pub uri: String,
    /// Columns.
    pub width_px: u32,
    /// Rows.
    pub height_px: u32,
}

impl Picture {
    /// A drawing or a photograph.
    pub fn of_colour(image: RgbImage) -> Self {
        let small = shrunk(DynamicImage::ImageRgb8(image));
        Self::encoded("image/jpeg", &small, |bytes| {
            small.write_with_encoder(JpegEncoder::new_with_quality(bytes, JPEG_QUALITY))
        })
    }

    /// A gray picture; one of black and white keeps its sharp edges.
    pub fn of_gray(image: GrayImage) -> Self {
        let sharp = image.pixels().all(|pixel| matches!(pixel.0[0], 0 | 255));
        let small = shrunk(DynamicImage::ImageLuma8(image));
        if sharp {
            Self::encoded("image/png", &small, |bytes| {
                let (speed, filter) = (CompressionType::Best, FilterType::NoFilter);
                small.write_with_encoder(PngEncoder::new_with_quality(bytes, speed, filter))
            })
        } else {
            Self::encoded("image/jpeg", &small, |bytes| {
                small.write_with_encoder(JpegEncoder::new_with_quality(bytes, JPEG_QUALITY))
            })
        }
    }

    fn encoded(
        kind: &str,
        image: &DynamicImage,
        write: impl FnOnce(&mut Cursor<Vec<u8>>) -> image::ImageResult<()>,
    ) -> Self {
        let mut bytes = Cursor::new(Vec::new());
        write(&mut bytes).expect("a small picture can be written to memory");
        Self {
            uri: format!(
                "data:{kind};base64,{}",
                BASE64_STANDARD.encode(bytes.get_ref())
            ),
            width_px: image.width(),
            height_px: image.height(),
        }
    }
}

fn shrunk(image: DynamicImage) -> DynamicImage {
    let (width, height) = (image.width(), image.height());
    let longest = width.max(height);
    if longest <= WIDEST_PX {
        return image;
    }
    let share = f64::from(WIDEST_PX) / f64::from(longest);
    let [width, height] = [width, height].map(|px| ((f64::from(px) * share).round() as u32).max(1));
    match image {
        DynamicImage::ImageRgb8(rgb) => imageops::resize(&rgb, width, height, Resize::Triangle).into(),
        other => imageops::resize(&other.to_luma8(), width, height, Resize::Triangle).into(),
    }
}

/// Reads frames again for the parts that are shown.
pub struct Album<'a> {
    recording: &'a Recording,
    artist: Artist<'a>,
    frame: Frame,
}

impl<'a> Album<'a> {
    /// Pictures from `recording`, drawn by `artist`.
    pub fn new(recording: &'a Recording, artist: Artist<'a>) -> Self {
        Self {
            recording,
            artist,
            frame: Frame::default(),
        }
    }

    /// The part with outline, bite and burr; `None` when its frame is not part of the recording.
    ///
    /// # Errors
    /// Those of reading the frame.
    pub fn part(&mut self, part: &Part) -> Result<Option<Picture>, RecordingError> {
        let there = self.turn_to(part)?;
        Ok(there.then(|| Picture::of_colour(self.artist.draw_part(&self.frame, part))))
    }

    /// What each step made of the part, with the step's name.
    ///
    /// # Errors
    /// Those of reading the frame.
    pub fn steps(&mut self, part: &Part) -> Result<Vec<(&'static str, Picture)>, RecordingError> {
        if !self.turn_to(part)? {
            return Ok(Vec::new());
        }
        let steps = self.artist.steps(&self.frame, part);
        Ok(steps
            .into_iter()
            .map(|(name, image)| (name, Picture::of_gray(image)))
            .collect())
    }

    fn turn_to(&mut self, part: &Part) -> Result<bool, RecordingError> {
        let Some(k) = self.recording.frame_at(part.spoken_us) else {
            return Ok(false);
        };
        if self.frame.captured_us != part.spoken_us || self.frame.pixels.is_empty() {
            self.recording.read_into(k, &mut self.frame)?;
        }
        Ok(true)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use image::{Luma, Rgb};

    #[test]
    fn pictures_are_shrunk_and_can_be_read_back() {
        let wide = Picture::of_colour(RgbImage::from_pixel(1280, 100, Rgb([200, 30, 30])));
        assert_eq!((wide.width_px, wide.height_px), (640, 50));
        let mask = GrayImage::from_fn(40, 30, |x, _| Luma([if x < 20 { 0 } else { 255 }]));
        let sharp = Picture::of_gray(mask.clone());
        let bytes = sharp.uri.strip_prefix("data:image/png;base64,").unwrap();
        let bytes = BASE64_STANDARD.decode(bytes).unwrap();
        assert_eq!(image::load_from_memory(&bytes).unwrap().to_luma8(), mask);
    }
}
