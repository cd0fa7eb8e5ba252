//! `draw`: a recording from a seed, labelled from the drawn geometry.

use std::path::{Path, PathBuf};

use anyhow::Context;
use serde::Serialize;

use super::Outcome;
use crate::frames::drawn::{Drawing, DrawnBelt, Scene, Truth, mask, truths};
use crate::frames::{Frame, FrameSource};
use crate::recording::{Label, LabelWriter, Writer};
use crate::settings::{self, Belt, Camera, Settings};
use crate::shape::Verdict;
use crate::units::Micros;

/// Draw a recording with labels that follow from the drawn geometry, never from a verdict of this program.
#[derive(Clone, Debug, clap::Args)]
#[command(group(clap::ArgGroup::new("what").args(["out", "mask"]).required(true).multiple(true)))]
pub(super) struct Args {
    /// What lies on the belt: oat-stars or gaskets.
    scene: Scene,
    /// Settings that name the camera, the belt and the limits.
    #[arg(long, value_name = "FILE.toml")]
    settings: PathBuf,
    /// How many parts.
    #[arg(long, default_value_t = 30, value_parser = clap::value_parser!(u64).range(1..=1 << 40))]
    parts: u64,
    /// The same seed and settings give the same recording.
    #[arg(long, default_value_t = 1, value_parser = clap::value_parser!(u64).range(0..=1 << 62))]
    seed: u64,
    /// When the first frame is captured, in microseconds.
    #[arg(long, value_name = "US", default_value_t = 0, value_parser = clap::value_parser!(i64).range(0..=1 << 52))]
    first_us: i64,
    /// A new folder for the recording.
    #[arg(long, value_name = "FOLDER")]
    out: Option<PathBuf>,
    /// A new PNG file for the nominal shape, to be taught from.
    #[arg(long, value_name = "FILE.png")]
    mask: Option<PathBuf>,
}

impl Args {
    /// Writes what was asked for: `frames.csv` with its pictures, `labels.csv`, `truth.csv` and `recording.toml` into the
    /// new folder, the nominal shape into the new picture.
    pub(super) fn run(&self) -> anyhow::Result<Outcome> {
        let loaded = settings::load(&self.settings)?;
        draw(self, &loaded.settings)?;
        Ok(Outcome::Done)
    }
}

fn draw(args: &Args, settings: &Settings) -> anyhow::Result<()> {
    let drawing = Drawing {
        scene: args.scene,
        parts: args.parts,
        seed: args.seed,
        first_us: Micros(args.first_us),
    };
    // Everything that can be refused is, before anything is written.
    let belt = DrawnBelt::new(&drawing, settings)?;
    if let Some(file) = &args.mask {
        anyhow::ensure!(
            !file.try_exists()?,
            "{}: there is a file already; name a new one",
            file.display()
        );
    }
    if let Some(folder) = &args.out {
        let notes = notes(&drawing, settings)?;
        let mut recording = Writer::create(folder)?;
        recording.write_notes(&notes)?;
        write_truths(&drawing, settings, folder)?;
        write_frames(belt, &mut recording)?;
    }
    if let Some(file) = &args.mask {
        write_mask(args.scene, settings, file)?;
    }
    Ok(())
}

fn write_mask(scene: Scene, settings: &Settings, file: &Path) -> anyhow::Result<()> {
    let mask = mask(scene, settings.camera.mm_per_px);
    let picture = image::GrayImage::from_raw(mask.width_px, mask.height_px, mask.pixels)
        .context("a mask has as many pixels as its size says")?;
    let mut bytes = std::io::Cursor::new(Vec::new());
    picture.write_to(&mut bytes, image::ImageFormat::Png)?;
    std::fs::File::create_new(file)
        .and_then(|mut made| std::io::Write::write_all(&mut made, bytes.get_ref()))
        .with_context(|| format!("{}: cannot write it", file.display()))
}

fn write_frames(mut belt: DrawnBelt, recording: &mut Writer) -> anyhow::Result<()> {
    let mut frame = Frame::default();
    while belt.next_into(&mut frame)? {
        recording.write(&frame)?;
    }
    Ok(())
}

const TRUTH_HEADER: [&str; 12] = [
    "part",
    "thing",
    "along_mm",
    "across_mm",
    "angle_deg",
    "flipped",
    "kind",
    "scale",
    "missing_mm",
    "excess_mm",
    "verdict",
    "reasons",
];

/// `truth.csv` has a row for every part, `labels.csv` one for everything the camera sees as one thing.
fn write_truths(drawing: &Drawing, settings: &Settings, folder: &Path) -> anyhow::Result<()> {
    let file = folder.join("truth.csv");
    let mut table = csv::Writer::from_path(&file)
        .with_context(|| format!("{}: cannot create it", file.display()))?;
    table.write_record(TRUTH_HEADER)?;
    let mut labels = LabelWriter::create(folder)?;
    let mut thing: Vec<Truth> = Vec::new();
    for truth in truths(drawing, settings)? {
        table.write_record(row(&truth))?;
        if thing
            .first()
            .is_some_and(|first| first.thing != truth.thing)
        {
            labels.write(&label(&thing))?;
            thing.clear();
        }
        thing.push(truth);
    }
    labels.write(&label(&thing))?;
    table.flush()?;
    Ok(labels.finish()?)
}

fn row(truth: &Truth) -> [String; 12] {
    [
        truth.part.to_string(),
        truth.thing.to_string(),
        format!("{:.3}", truth.along_mm),
        format!("{:.3}", truth.across_mm),
        format!("{:.2}", truth.angle_deg),
        truth.flipped.to_string(),
        truth.kind.name().to_owned(),
        format!("{:.5}", truth.scale),
        format!("{:.3}", truth.missing_mm),
        format!("{:.3}", truth.excess_mm),
        verdict(truth).to_string(),
        truth.against.to_string(),
    ]
}

fn verdict(truth: &Truth) -> Verdict {
    if truth.against.any() {
        Verdict::Reject
    } else {
        Verdict::Keep
    }
}

/// The label of one thing: parts that touch are one, in their middle.
fn label(thing: &[Truth]) -> Label {
    let mean = |of: fn(&Truth) -> f64| thing.iter().map(of).sum::<f64>() / thing.len() as f64;
    let rejected = thing.iter().any(|truth| truth.against.any());
    let notes = thing
        .iter()
        .map(|truth| format!("part {}: {}", truth.part, truth.kind.name()));
    Label {
        along_mm: mean(|truth| truth.along_mm),
        across_mm: mean(|truth| truth.across_mm),
        verdict: if rejected {
            Verdict::Reject
        } else {
            Verdict::Keep
        },
        note: notes.collect::<Vec<_>>().join("; "),
    }
}

/// `recording.toml`: how this was drawn, and the limits by which the labels were decided.
#[derive(Serialize)]
struct Notes<'a> {
    scene: &'a str,
    parts: u64,
    seed: u64,
    first_us: i64,
    limits: Limits,
    camera: &'a Camera,
    belt: &'a Belt,
}

#[derive(Serialize)]
struct Limits {
    missing_mm: f64,
    excess_mm: f64,
}

const NOTES_HEAD: &str = "\
# A drawing, not a camera's recording. `beltwright draw` made it from the scene, the number of parts, a seed and the
# settings below, and makes it again from them. labels.csv and truth.csv follow from the drawn geometry alone. A label
# stands for what the camera sees as one thing: two parts that touch have one label, in their middle, and a row each in
# truth.csv. `missing_mm` there is how deep a bite goes, `excess_mm` how far a burr sticks out, both against the shape
# as it should be.
";

fn notes(drawing: &Drawing, settings: &Settings) -> anyhow::Result<String> {
    let shape = settings
        .shapes
        .first()
        .context("the settings have no shape")?;
    let notes = Notes {
        scene: drawing.scene.name(),
        parts: drawing.parts,
        seed: drawing.seed,
        first_us: drawing.first_us.0,
        limits: Limits {
            missing_mm: shape.missing_mm,
            excess_mm: shape.excess_mm,
        },
        camera: &settings.camera,
        belt: &settings.belt,
    };
    Ok(format!("{NOTES_HEAD}\n{}", toml::to_string(&notes)?))
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::recording::Recording;

    fn settings() -> Settings {
        toml::from_str(
            r#"
            camera = { width_px = 160, height_px = 120, mm_per_px = 1.0, frames_per_s = 8.0, exposure_ms = 0.4, latency_ms = 100.0 }
            belt = { speed_mm_s = 400.0, speed_tolerance_percent = 1.0, travel = "right", part_pitch_mm = 50.0 }
            picture = { parts = "dark", element_mm = 40.0, threshold = { method = "fixed", level = 30 }, fill_below_mm2 = 20.0, speck_below_mm2 = 40.0 }
            judge = { flaw_below_mm2 = 1.0, fit_at_least = 0.6 }
            shape = [{ name = "gasket", file = "gasket.toml", missing_mm = 1.5, excess_mm = 1.5 }]
            outlet = [{ name = "flap", coil = 0, distance_mm = 300.0, margin_mm = 5.0, open_delay_ms = 1.0, close_delay_ms = 1.0, max_on_ms = 500.0 }]
            reject = { outlet = "flap" }
            line = { unit = 1, baud = 19200, answer_within_ms = 50.0 }
            "#,
        )
        .unwrap()
    }

    fn args(folder: &Path) -> Args {
        Args {
            scene: Scene::Gaskets,
            settings: PathBuf::new(),
            parts: 30,
            seed: 9,
            first_us: 5_000_000,
            out: Some(folder.join("drawn")),
            mask: Some(folder.join("mask.png")),
        }
    }

    #[test]
    fn a_drawing_is_a_recording_with_labels_that_follow_from_the_truth() {
        let folder = tempfile::tempdir().unwrap();
        let args = args(folder.path());
        draw(&args, &settings()).unwrap();
        let out = args.out.unwrap();
        let recording = Recording::open(&out, None).unwrap();
        assert_eq!(recording.span_us().0, Micros(5_000_000));
        let notes = recording.notes().unwrap().unwrap();
        assert_eq!(notes["scene"].as_str(), Some("gaskets"));
        assert_eq!(notes["camera"]["mm_per_px"].as_float(), Some(1.0));

        let labels = recording.labels().unwrap().unwrap();
        let mut table = csv::Reader::from_path(out.join("truth.csv")).unwrap();
        assert_eq!(table.headers().unwrap(), TRUTH_HEADER.as_slice());
        let rows: Vec<_> = table.records().map(Result::unwrap).collect();
        // Two of the thirty touch and have one label.
        assert_eq!((rows.len(), labels.len()), (30, 29));
        for row in &rows {
            let label = &labels[row[1].parse::<usize>().unwrap()];
            assert_eq!(label.verdict.to_string(), row[10]);
            assert_eq!(row[10] == *"reject", !row[11].is_empty());
            let off_mm = (row[2].parse::<f64>().unwrap() - label.along_mm).abs();
            assert!(off_mm < if row[6] == *"touching" { 25.0 } else { 1e-9 });
        }
        let mask = image::open(folder.path().join("mask.png")).unwrap();
        assert_eq!(mask.color(), image::ColorType::L8);
    }

    #[test]
    fn the_same_seed_gives_the_same_files() {
        let folders = [tempfile::tempdir().unwrap(), tempfile::tempdir().unwrap()];
        for folder in &folders {
            draw(&args(folder.path()), &settings()).unwrap();
        }
        let names = |folder: &Path| {
            let mut names: Vec<_> = std::fs::read_dir(folder)
                .unwrap()
                .map(|entry| entry.unwrap().file_name())
                .collect();
            names.sort();
            names
        };
        let drawn = folders.each_ref().map(|folder| folder.path().join("drawn"));
        assert_eq!(names(&drawn[0]), names(&drawn[1]));
        for name in names(&drawn[0]) {
            let bytes = drawn
                .each_ref()
                .map(|folder| std::fs::read(folder.join(&name)).unwrap());
            assert!(bytes[0] == bytes[1], "{name:?}");
        }
    }

    #[test]
    fn nothing_is_overwritten_or_half_written() {
        let folder = tempfile::tempdir().unwrap();
        let mut args = args(folder.path());
        args.parts = 0;
        assert!(
            draw(&args, &settings())
                .unwrap_err()
                .to_string()
                .starts_with("0 parts")
        );
        assert_eq!(std::fs::read_dir(folder.path()).unwrap().count(), 0);

        args.parts = 2;
        std::fs::write(folder.path().join("mask.png"), "mine").unwrap();
        assert!(draw(&args, &settings()).is_err());
        assert!(!folder.path().join("drawn").exists());
        args.mask = None;
        draw(&args, &settings()).unwrap();
        args.mask = Some(folder.path().join("another.png"));
        let again = draw(&args, &settings()).unwrap_err();
        assert!(again.to_string().contains("not empty"), "{again}");
        assert!(!folder.path().join("another.png").exists());
    }

    #[test]
    fn something_must_be_asked_for() {
        use clap::Parser;
        #[derive(Debug, Parser)]
        struct Line {
            #[command(flatten)]
            draw: Args,
        }
        let parse = |words: &str| Line::try_parse_from(format!("x {words}").split(' '));
        assert!(parse("gaskets --settings s.toml").is_err());
        assert!(parse("buttons --settings s.toml --out o").is_err());
        assert!(parse("gaskets --settings s.toml --out o --first-us -1").is_err());
        let line = parse("oat-stars --settings s.toml --mask m.png").unwrap();
        assert_eq!((line.draw.scene, line.draw.parts), (Scene::OatStars, 30));
    }
}
