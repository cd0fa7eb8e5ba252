//! Frames as PNG (ISO/IEC 15948): the header is looked at before anything is made for the picture.

use std::fs::File;
use std::io::{BufReader, BufWriter, Read, Seek, Write};
use std::path::Path;

use image::codecs::png::{CompressionType, FilterType, PngDecoder, PngEncoder};
use image::{ColorType, ExtendedColorType, ImageDecoder, ImageEncoder};

use super::table::open_plain;
use super::{PictureProblem, RecordingError, SizePx};

/// What the decoder may take for itself beside the picture: rows, tables, text chunks.
const DECODER_BYTES: u64 = 4 << 20;

/// The size of an 8-bit gray PNG, from its first bytes.
///
/// # Errors
/// Anything but 8-bit gray, larger than is read, or not `expected`.
pub(super) fn check(file: &Path, expected: Option<SizePx>) -> Result<SizePx, RecordingError> {
    check_header(&mut open_plain(file)?, file, expected)
}

/// Decodes the PNG into `pixels`, which gets exactly width times height values.
pub(super) fn read(
    file: &Path,
    expected: SizePx,
    pixels: &mut Vec<u8>,
) -> Result<(), RecordingError> {
    let mut opened = open_plain(file)?;
    check_header(&mut opened, file, Some(expected))?;
    opened
        .rewind()
        .map_err(RecordingError::io(file, "read it"))?;
    decode(opened, expected, pixels).map_err(|problem| wrong(file, problem))
}

/// Writes an 8-bit gray PNG, compressed lightly: a camera's noise does not shrink for more effort.
pub(super) fn write(file: &Path, size: SizePx, pixels: &[u8]) -> Result<(), RecordingError> {
    let failed = || RecordingError::io(file, "write it");
    let mut out = BufWriter::new(File::create(file).map_err(failed())?);
    PngEncoder::new_with_quality(&mut out, CompressionType::Fast, FilterType::Adaptive)
        .write_image(pixels, size.width_px, size.height_px, ExtendedColorType::L8)
        .map_err(|error| match error {
            image::ImageError::IoError(source) => failed()(source),
            other => wrong(file, PictureProblem::Damaged(other)),
        })?;
    out.flush().map_err(failed())
}

fn decode(file: File, size: SizePx, pixels: &mut Vec<u8>) -> Result<(), PictureProblem> {
    let mut limits = image::Limits::default();
    limits.max_alloc = Some(DECODER_BYTES);
    let decoder =
        PngDecoder::with_limits(BufReader::new(file), limits).map_err(PictureProblem::Damaged)?;
    if decoder.color_type() != ColorType::L8 {
        return Err(kind("8-bit gray with transparency"));
    }
    if decoder.is_apng().map_err(PictureProblem::Damaged)? {
        return Err(kind("an animation"));
    }
    pixels.resize(size.pixels(), 0);
    decoder.read_image(pixels).map_err(PictureProblem::Damaged)
}

fn check_header(
    opened: &mut File,
    file: &Path,
    expected: Option<SizePx>,
) -> Result<SizePx, RecordingError> {
    let mut bytes = Vec::with_capacity(HEADER_LEN);
    opened
        .take(HEADER_LEN as u64)
        .read_to_end(&mut bytes)
        .map_err(RecordingError::io(file, "read it"))?;
    size_of(&bytes)
        .and_then(|came| match expected {
            Some(expected) if came != expected => Err(PictureProblem::Size { came, expected }),
            _ => Ok(came),
        })
        .map_err(|problem| wrong(file, problem))
}

/// Signature, then the IHDR chunk up to its colour type.
const HEADER_LEN: usize = 26;
const BEGINNING: [u8; 16] = *b"\x89PNG\r\n\x1a\n\0\0\0\x0dIHDR";

fn size_of(header: &[u8]) -> Result<SizePx, PictureProblem> {
    let Some(&[w0, w1, w2, w3, h0, h1, h2, h3, depth, colour]) = header
        .strip_prefix(&BEGINNING)
        .and_then(|rest| rest.first_chunk())
    else {
        return Err(PictureProblem::NotPng);
    };
    if (depth, colour) != (8, 0) {
        return Err(kind(&format!("{depth}-bit {}", colour_name(colour))));
    }
    let came = SizePx {
        width_px: u32::from_be_bytes([w0, w1, w2, w3]),
        height_px: u32::from_be_bytes([h0, h1, h2, h3]),
    };
    if came.is_taken() {
        Ok(came)
    } else {
        Err(PictureProblem::TooLarge { came })
    }
}

fn colour_name(colour: u8) -> &'static str {
    match colour {
        0 => "gray",
        2 => "RGB",
        3 => "palette",
        4 => "gray with alpha",
        6 => "RGB with alpha",
        _ => "of an unknown colour type",
    }
}

fn kind(came: &str) -> PictureProblem {
    PictureProblem::Kind {
        came: came.to_owned(),
    }
}

fn wrong(file: &Path, problem: PictureProblem) -> RecordingError {
    RecordingError::Picture {
        file: file.to_owned(),
        problem,
    }
}
