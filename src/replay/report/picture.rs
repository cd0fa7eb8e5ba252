//! Pictures inside the page: kept small, written as data URIs.

use std::io::Cursor;

use base64::prelude::{BASE64_STANDARD, Engine};
use image::codecs::jpeg::JpegEncoder;
use image::codecs::png::{CompressionType, FilterType, PngEncoder};
use image::imageops::{self, FilterType as Resize};
use image::{GrayImage, Luma};
use maud::{Markup, html};

use crate::frames::Gray;

/// Wider pictures are made smaller.
const WIDEST_PX: u32 = 640;
const JPEG_QUALITY: u8 = 85;

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
    /// A gray picture; one of black and white keeps its sharp edges.
    pub fn of_gray(image: GrayImage) -> Self {
        let sharp = image.pixels().all(|pixel| matches!(pixel.0[0], 0 | 255));
        let small = shrunk(image);
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
        image: &GrayImage,
        write: impl FnOnce(&mut Cursor<Vec<u8>>) -> image::ImageResult<()>,
    ) -> Self {
        let mut bytes = Cursor::new(Vec::new());
        write(&mut bytes).expect("a small picture can be written to memory");
        let text = BASE64_STANDARD.encode(bytes.get_ref());
        Self {
            uri: format!("data:{kind};base64,{text}"),
            width_px: image.width(),
            height_px: image.height(),
        }
    }
}

fn shrunk(image: GrayImage) -> GrayImage {
    let (width, height) = image.dimensions();
    let longest = width.max(height);
    if longest <= WIDEST_PX {
        return image;
    }
    let share = f64::from(WIDEST_PX) / f64::from(longest);
    let [width, height] = [width, height].map(|px| ((f64::from(px) * share).round() as u32).max(1));
    imageops::resize(&image, width, height, Resize::Triangle)
}

/// A picture of the page.
pub fn image(picture: &Picture, alt: &str) -> Markup {
    html! { img src=(picture.uri) width=(picture.width_px) height=(picture.height_px) alt=(alt); }
}

/// A piece of a region of interest.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Crop {
    /// First column.
    pub left_px: usize,
    /// First row.
    pub top_px: usize,
    /// Columns.
    pub width_px: usize,
    /// Rows.
    pub height_px: usize,
}

impl Crop {
    /// A box (left, top, right, bottom) and `around_px` on each side, as far as the picture goes.
    pub fn around(box_px: [usize; 4], around_px: usize, picture: Gray<'_>) -> Self {
        let [left, top, right, bottom] = box_px;
        let (left_px, top_px) = (
            left.saturating_sub(around_px),
            top.saturating_sub(around_px),
        );
        Self {
            left_px,
            top_px,
            width_px: (right + around_px).min(picture.width_px) - left_px,
            height_px: (bottom + around_px).min(picture.height_px) - top_px,
        }
    }

    /// The piece.
    pub fn cut(self, picture: Gray<'_>) -> GrayImage {
        GrayImage::from_fn(self.width_px as u32, self.height_px as u32, |x, y| {
            let row = picture.row(self.top_px + y as usize);
            Luma([row[self.left_px + x as usize]])
        })
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn pictures_are_shrunk_and_can_be_read_back() {
        let wide = Picture::of_gray(GrayImage::from_pixel(1280, 100, Luma([90])));
        assert_eq!((wide.width_px, wide.height_px), (640, 50));
        let mask = GrayImage::from_fn(40, 30, |x, _| Luma([if x < 20 { 0 } else { 255 }]));
        let sharp = Picture::of_gray(mask.clone());
        let bytes = sharp.uri.strip_prefix("data:image/png;base64,").unwrap();
        let bytes = BASE64_STANDARD.decode(bytes).unwrap();
        assert_eq!(image::load_from_memory(&bytes).unwrap().to_luma8(), mask);
    }

    #[test]
    fn a_crop_stays_inside_the_picture() {
        let pixels = vec![0; 50 * 20];
        let picture = Gray {
            pixels: &pixels,
            width_px: 50,
            height_px: 20,
            stride_px: 50,
        };
        let crop = Crop::around([2, 3, 45, 20], 10, picture);
        assert_eq!(
            (crop.left_px, crop.top_px, crop.width_px, crop.height_px),
            (0, 0, 50, 20)
        );
        assert_eq!(crop.cut(picture).dimensions(), (50, 20));
    }
}
