//! Taught shapes on disk: `NAME.toml` with `NAME.png` beside it.
//!
//! The picture is an 8-bit gray PNG of the share of good parts, the TOML file says how large a pixel is and where the shape
//! came from. Its table `figures` is there for people, and to notice when the two files do not belong together.

use std::fs::{self, File};
use std::io::{BufReader, BufWriter, Read, Write};
use std::path::{Component, Path, PathBuf};

use image::codecs::png::{PngDecoder, PngEncoder};
use image::{ExtendedColorType, ImageDecoder, ImageEncoder, Limits};
use serde::{Deserialize, Serialize};

use super::{Bitmap, MAX_SIDE_PX, Model, ShapeError, Silhouette};

/// A taught shape as it is stored.
#[derive(Clone, Debug, PartialEq)]
pub struct Taught {
    /// A short name: 1 to 40 characters.
    pub name: String,
    /// The shape itself.
    pub silhouette: Silhouette,
    /// From how many parts it was taught; 0 if it was drawn.
    pub parts: u32,
    /// Anything worth remembering.
    pub notes: String,
}

/// The TOML file.
#[derive(Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
struct Note {
    name: String,
    picture: String,
    mm_per_px: f64,
    parts: u32,
    #[serde(default)]
    notes: String,
    figures: Figures,
}

/// What follows from the picture.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Figures {
    /// Columns of the upright box around the silhouette.
    pub width_mm: f64,
    /// Rows of the same.
    pub height_mm: f64,
    /// Area without bores.
    pub area_mm2: f64,
    /// Side of the largest square that fits in at any angle: a square element must be larger.
    pub widest_mm: f64,
    /// Diameter of the largest disc that fits in: an octagon element must be larger.
    pub widest_disc_mm: f64,
    /// Area of each bore.
    pub bores_mm2: Vec<f64>,
    /// How many equal turns bring it back onto itself; 0 if every turn does.
    pub turns: u32,
    /// Whether face up and face down look the same.
    pub mirror: bool,
}

impl Figures {
    /// Derives them; takes some milliseconds.
    pub fn of(silhouette: &Silhouette) -> Self {
        let model = Model::new(silhouette.clone());
        let rounded = |value: f64| (value * 1e4).round() / 1e4;
        let (width_mm, height_mm) = silhouette.extent_mm();
        let mm = |px: f64| rounded(px * silhouette.mm_per_px);
        Self {
            width_mm: rounded(width_mm),
            height_mm: rounded(height_mm),
            area_mm2: rounded(silhouette.area_mm2()),
            widest_mm: mm(model.widest_square_px() as f64),
            widest_disc_mm: mm(model.widest_disc_px()),
            bores_mm2: silhouette.bores_mm2().into_iter().map(rounded).collect(),
            turns: model.symmetry().turns,
            mirror: model.symmetry().mirror,
        }
    }
}

/// TOML files larger than this are not read.
const LONGEST_NOTE: u64 = 64 * 1024;

impl Taught {
    /// Reads `file`, the TOML file, and the picture beside it.
    pub fn read(file: &Path) -> Result<Self, ShapeError> {
        let wrong = |problem: String| ShapeError::Note {
            path: file.to_owned(),
            problem,
        };
        let (note, picture) = read_note(file)?;
        check_name(&note.name).map_err(wrong)?;
        if !(0.001..=10.0).contains(&note.mm_per_px) {
            return Err(wrong(format!(
                "mm_per_px is {}; expected 0.001 to 10",
                note.mm_per_px
            )));
        }
        let gray = read_gray(&picture, MAX_SIDE_PX as u32)?;
        let silhouette = Silhouette {
            width_px: gray.width_px,
            height_px: gray.height_px,
            mm_per_px: note.mm_per_px,
            share: gray.values,
        };
        let silhouette = silhouette
            .trimmed()
            .map_err(|error| wrong(error.to_string()))?;
        check_figures(&silhouette, &note.figures).map_err(wrong)?;
        Ok(Self {
            name: note.name,
            silhouette,
            parts: note.parts,
            notes: note.notes,
        })
    }

    /// What a stored shape consists of: `file`, and the picture that it names.
    pub fn files(file: &Path) -> Result<[PathBuf; 2], ShapeError> {
        let (_, picture) = read_note(file)?;
        Ok([file.to_owned(), picture])
    }

    /// Writes `file`, the TOML file, and a PNG of the same name beside it. Both are written under other names first and
    /// renamed when complete.
    pub fn write(&self, file: &Path) -> Result<(), ShapeError> {
        let wrong = |problem: String| ShapeError::Note {
            path: file.to_owned(),
            problem,
        };
        check_name(&self.name).map_err(wrong)?;
        let picture = file.with_extension("png");
        let plain = picture.file_name().and_then(|name| name.to_str());
        let Some(picture_name) = plain.filter(|_| file.extension().is_some_and(|e| e == "toml"))
        else {
            return Err(wrong("expected the name of a .toml file".to_owned()));
        };
        let silhouette = self.silhouette.trimmed()?;
        let note = Note {
            name: self.name.clone(),
            picture: picture_name.to_owned(),
            mm_per_px: silhouette.mm_per_px,
            parts: self.parts,
            notes: self.notes.clone(),
            figures: Figures::of(&silhouette),
        };
        let text = toml::to_string(&note).map_err(|error| wrong(error.to_string()))?;
        let text = format!(
            "# A taught shape. The picture holds the share of good parts that cover each pixel.\n{text}"
        );
        let png = encode(&silhouette).map_err(ShapeError::file(&picture))?;
        let new_picture = write_new(&picture, &png)?;
        let new_note = write_new(file, text.as_bytes())?;
        fs::rename(&new_picture, &picture).map_err(ShapeError::file(&picture))?;
        fs::rename(&new_note, file).map_err(ShapeError::file(file))
    }
}

/// The TOML file and where its picture lies.
fn read_note(file: &Path) -> Result<(Note, PathBuf), ShapeError> {
    let wrong = |problem: String| ShapeError::Note {
        path: file.to_owned(),
        problem,
    };
    let text = read_text(file)?;
    let note: Note =
        toml::from_str(&text).map_err(|error| wrong(error.to_string().trim_end().to_owned()))?;
    let picture = beside(file, &note.picture).ok_or_else(|| {
        wrong(format!(
            "picture is {:?}; expected the plain name of a PNG file in the same folder",
            note.picture
        ))
    })?;
    Ok((note, picture))
}

fn check_name(name: &str) -> Result<(), String> {
    let length = name.chars().count();
    if !(1..=40).contains(&length) || name.chars().any(char::is_control) {
        return Err(format!(
            "name is {name:?}; expected 1 to 40 characters on one line"
        ));
    }
    Ok(())
}

/// Stored and derived sizes may differ by a rounding, not by another picture.
fn check_figures(silhouette: &Silhouette, figures: &Figures) -> Result<(), String> {
    let (width_mm, height_mm) = silhouette.extent_mm();
    let pairs = [
        ("width_mm", figures.width_mm, width_mm),
        ("height_mm", figures.height_mm, height_mm),
        ("area_mm2", figures.area_mm2, silhouette.area_mm2()),
    ];
    for (key, stored, derived) in pairs {
        let near = (stored - derived).abs() <= 0.01 * derived;
        if !near {
            return Err(format!(
                "figures.{key} is {stored}, but the picture gives {derived:.4}: teach the shape again, or put back the \
                 picture and mm_per_px that belong to it"
            ));
        }
    }
    Ok(())
}

/// The file of that plain name in the same folder.
fn beside(file: &Path, name: &str) -> Option<PathBuf> {
    let path = Path::new(name);
    let mut components = path.components();
    let plain = matches!(
        (components.next(), components.next()),
        (Some(Component::Normal(_)), None)
    );
    let plain =
        plain && !name.contains(['/', '\\', '\0']) && path.extension().is_some_and(|e| e == "png");
    plain.then(|| file.with_file_name(name))
}

fn read_text(path: &Path) -> Result<String, ShapeError> {
    let mut text = String::new();
    let file = File::open(path).map_err(ShapeError::file(path))?;
    let mut some = file.take(LONGEST_NOTE + 1);
    some.read_to_string(&mut text)
        .map_err(ShapeError::file(path))?;
    if text.len() as u64 > LONGEST_NOTE {
        return Err(ShapeError::Note {
            path: path.to_owned(),
            problem: format!("longer than {LONGEST_NOTE} bytes; expected a taught shape"),
        });
    }
    Ok(text)
}

/// A gray picture, row by row.
#[derive(Clone, Debug, PartialEq)]
pub struct GrayPicture {
    /// Columns.
    pub width_px: usize,
    /// Rows.
    pub height_px: usize,
    /// `width_px * height_px` values.
    pub values: Vec<u8>,
}

impl GrayPicture {
    /// All pixels brighter than 127.
    pub fn foreground(&self) -> Bitmap {
        Bitmap::from_gray(&self.values, self.width_px, self.height_px)
    }
}

/// Reads an 8-bit gray PNG of at most `max_side_px` columns and rows.
pub fn read_gray(path: &Path, max_side_px: u32) -> Result<GrayPicture, ShapeError> {
    let wrong = |came: String| ShapeError::Picture {
        path: path.to_owned(),
        came,
    };
    let file = File::open(path).map_err(ShapeError::file(path))?;
    let mut limits = Limits::default();
    limits.max_image_width = Some(max_side_px);
    limits.max_image_height = Some(max_side_px);
    let decoder = PngDecoder::with_limits(BufReader::new(file), limits);
    let decoder = decoder.map_err(|error| wrong(error.to_string()))?;
    let (width, height) = decoder.dimensions();
    if width > max_side_px || height > max_side_px {
        return Err(wrong(format!(
            "{width} x {height} px, more than {max_side_px} x {max_side_px} px"
        )));
    }
    let kind = decoder.original_color_type();
    if kind != ExtendedColorType::L8 {
        return Err(wrong(format!("pixels of kind {kind:?}")));
    }
    let mut values = vec![0; width as usize * height as usize];
    decoder
        .read_image(&mut values)
        .map_err(|error| wrong(error.to_string()))?;
    Ok(GrayPicture {
        width_px: width as usize,
        height_px: height as usize,
        values,
    })
}

fn encode(silhouette: &Silhouette) -> std::io::Result<Vec<u8>> {
    let mut png = Vec::new();
    let (width, height) = (silhouette.width_px as u32, silhouette.height_px as u32);
    let encoder = PngEncoder::new(&mut png);
    let written = encoder.write_image(&silhouette.share, width, height, ExtendedColorType::L8);
    written.map_err(std::io::Error::other)?;
    Ok(png)
}

/// Writes under a name of its own in the same folder, to be renamed.
fn write_new(path: &Path, bytes: &[u8]) -> Result<PathBuf, ShapeError> {
    let mut name = path.file_name().unwrap_or_default().to_owned();
    name.push(".new");
    let new = path.with_file_name(name);
    let mut file = BufWriter::new(File::create(&new).map_err(ShapeError::file(&new))?);
    let written = file.write_all(bytes).and_then(|()| file.flush());
    let written = written.and_then(|()| file.get_ref().sync_all());
    if let Err(source) = written {
        // What is left of it is of no use; that it cannot be removed either changes nothing.
        let _ = fs::remove_file(&new);
        return Err(ShapeError::File { path: new, source });
    }
    Ok(new)
}

#[cfg(test)]
mod tests {
    use super::super::drawn::{Outline, silhouette};
    use super::*;

    fn gasket() -> Taught {
        Taught {
            name: "gasket".to_owned(),
            silhouette: silhouette(&Outline::gasket(40.0), 0.25)
                .0
                .trimmed()
                .unwrap(),
            parts: 12,
            notes: "two \"kinds\" of rubber\nsecond line".to_owned(),
        }
    }

    fn folder() -> (tempfile::TempDir, PathBuf) {
        let folder = tempfile::tempdir().unwrap();
        let file = folder.path().join("gasket.toml");
        (folder, file)
    }

    #[test]
    fn what_is_written_is_read_again() {
        let (folder, file) = folder();
        gasket().write(&file).unwrap();
        gasket().write(&file).unwrap();
        assert_eq!(Taught::read(&file).unwrap(), gasket());
        let mut names: Vec<_> = fs::read_dir(folder.path())
            .unwrap()
            .map(|e| e.unwrap().file_name())
            .collect();
        names.sort();
        assert_eq!(names, ["gasket.png", "gasket.toml"]);
        let figures = Figures::of(&gasket().silhouette);
        assert_eq!(
            (figures.turns, figures.mirror, figures.bores_mm2.len()),
            (1, false, 1)
        );
        let bore = std::f64::consts::PI * (0.55_f64 * 40.0 * 0.25).powi(2);
        assert!((figures.bores_mm2[0] / bore - 1.0).abs() < 0.02);
    }

    /// Writes the shape, spoils its TOML text and returns the message.
    fn spoiled(from: &str, to: &str) -> String {
        let (_folder, file) = folder();
        gasket().write(&file).unwrap();
        let text = fs::read_to_string(&file).unwrap();
        assert!(text.contains(from), "{text}");
        fs::write(&file, text.replace(from, to)).unwrap();
        Taught::read(&file).unwrap_err().to_string()
    }

    #[test]
    fn bad_notes_are_refused_with_the_reason() {
        let cases = [
            ("mm_per_px = 0.25", "mm_per_px = nan", "mm_per_px is NaN"),
            ("mm_per_px = 0.25", "mm_per_px = 0.5", "figures.width_mm is"),
            ("mm_per_px = 0.25", "mm_per_px = \"x\"", "expected f64"),
            ("parts = 12", "parts = -1", "expected u32"),
            (
                "parts = 12",
                "parts = 12\ncolour = 1",
                "unknown field `colour`",
            ),
            (
                "name = \"gasket\"",
                "name = \"\"",
                "expected 1 to 40 characters",
            ),
            (
                "\"gasket.png\"",
                "\"../gasket.png\"",
                "expected the plain name",
            ),
            (
                "\"gasket.png\"",
                "\"/etc/gasket.png\"",
                "expected the plain name",
            ),
            (
                "\"gasket.png\"",
                "\"a/gasket.png\"",
                "expected the plain name",
            ),
            (
                "\"gasket.png\"",
                "'..\\gasket.png'",
                "expected the plain name",
            ),
            (
                "\"gasket.png\"",
                "\"gasket.toml\"",
                "expected the plain name",
            ),
            ("\"gasket.png\"", "\"other.png\"", "other.png: "),
        ];
        for (from, to, expected) in cases {
            let message = spoiled(from, to);
            assert!(message.contains(expected), "{to}: {message}");
        }
    }

    /// Replaces the picture and returns the message.
    fn with_picture(bytes: &[u8]) -> String {
        let (_folder, file) = folder();
        gasket().write(&file).unwrap();
        fs::write(file.with_extension("png"), bytes).unwrap();
        Taught::read(&file).unwrap_err().to_string()
    }

    #[test]
    fn bad_pictures_are_refused_with_the_reason() {
        let png = |bytes: &[u8], width, height, kind| {
            let mut png = Vec::new();
            PngEncoder::new(&mut png)
                .write_image(bytes, width, height, kind)
                .unwrap();
            png
        };
        let good = encode(&gasket().silhouette).unwrap();
        let mut huge = good.clone();
        // Width and height of the header, with its checksum no longer right.
        huge[16..24].copy_from_slice(&[0, 1, 0, 0, 0, 1, 0, 0]);
        let cases = [
            (b"no picture".to_vec(), "expected an 8-bit gray PNG"),
            (
                good[..good.len() / 2].to_vec(),
                "expected an 8-bit gray PNG",
            ),
            (huge, "expected an 8-bit gray PNG"),
            (
                png(&[0; 12], 2, 2, ExtendedColorType::Rgb8),
                "pixels of kind Rgb8",
            ),
            (
                png(&[0; 8], 2, 2, ExtendedColorType::L16),
                "pixels of kind L16",
            ),
            (
                png(&[0; 4], 2, 2, ExtendedColorType::L8),
                "no pixel that most parts cover",
            ),
            (
                png(&[255; 4], 2, 2, ExtendedColorType::L8),
                "figures.width_mm is",
            ),
            (
                png(&vec![0; 5000], 5000, 1, ExtendedColorType::L8),
                "expected an 8-bit gray PNG",
            ),
        ];
        for (bytes, expected) in cases {
            let message = with_picture(&bytes);
            assert!(message.contains(expected), "{message}");
        }
    }

    #[test]
    fn nothing_is_left_where_nothing_could_be_written() {
        let (folder, _) = folder();
        let missing = folder.path().join("nowhere").join("gasket.toml");
        assert!(matches!(
            gasket().write(&missing),
            Err(ShapeError::File { .. })
        ));
        assert!(matches!(
            gasket().write(&folder.path().join("gasket")),
            Err(ShapeError::Note { .. })
        ));
        assert_eq!(fs::read_dir(folder.path()).unwrap().count(), 0);
    }
}
