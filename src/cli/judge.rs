//! `judge`: verdicts on single pictures, and the gauge by itself on two silhouettes.

use std::io::{Cursor, Write};
use std::path::{Path, PathBuf};

use anyhow::{Context, ensure};
use image::GrayImage;
use serde_json::{Value, json};

use super::Outcome;
use super::files::write_whole;
use super::station::Station;
use crate::belt::View;
use crate::frames::Frame;
use crate::inspect::Look;
use crate::settings::Settings;
use crate::shape::{Bitmap, gauge_masks, read_gray};

/// Largest side of a picture that is judged.
const MOST_PX: u32 = 8192;

/// Judges single pictures, or gauges one silhouette against another
#[derive(Debug, clap::Args)]
pub(super) struct Args {
    /// Pictures of parts at the settings' scale: PNG, JPEG or PGM
    #[arg(required_unless_present = "fixed_pose")]
    pictures: Vec<PathBuf>,
    /// The settings file
    #[arg(long, value_name = "FILE", required_unless_present = "fixed_pose")]
    settings: Option<PathBuf>,
    /// Draw each part with its marks into this folder
    #[arg(long, value_name = "DIR", conflicts_with = "fixed_pose")]
    marked: Option<PathBuf>,
    /// Gauge --part against --shape as they lie, all that is brighter than 127 of each, with nothing ignored
    #[arg(long, requires_all = ["shape", "part"], conflicts_with_all = ["pictures", "settings"])]
    fixed_pose: bool,
    /// With --fixed-pose: the silhouette to gauge against, an 8-bit gray PNG
    #[arg(long, value_name = "T.png", requires = "fixed_pose")]
    shape: Option<PathBuf>,
    /// With --fixed-pose: the silhouette to gauge, of the same size
    #[arg(long, value_name = "P.png", requires = "fixed_pose")]
    part: Option<PathBuf>,
    /// Print one JSON object instead of a table
    #[arg(long)]
    json: bool,
}

impl Args {
    pub(super) fn run(self, out: &mut dyn Write) -> anyhow::Result<Outcome> {
        match (&self.shape, &self.part, &self.settings) {
            (Some(shape), Some(part), _) => gauge(shape, part, self.json, out)?,
            (_, _, Some(settings)) => self.judge(settings, out)?,
            // clap asks for one of the two.
            _ => {}
        }
        Ok(Outcome::Done)
    }

    fn judge(&self, settings: &Path, out: &mut dyn Write) -> anyhow::Result<()> {
        let mut station = Station::open(settings)?;
        let pictures: Vec<(&PathBuf, GrayImage)> = self
            .pictures
            .iter()
            .map(|file| Ok((file, open(file)?)))
            .collect::<anyhow::Result<_>>()?;
        let mut all = Vec::new();
        for (file, picture) in pictures {
            station.look_at(picture.width(), picture.height());
            let frame = Frame {
                width_px: picture.width(),
                height_px: picture.height(),
                pixels: picture.into_raw(),
                belt_mm: Some(0.0),
                ..Frame::default()
            };
            let mut look = Look::default();
            station.inspector().inspect(&frame, &mut look);
            if let Some(folder) = &self.marked {
                mark(folder, file, &station, &frame, &look)?;
            }
            all.push((file, look));
        }
        let settings = station.settings();
        if self.json {
            let pictures = all.iter().map(|(file, look)| {
                let parts: Vec<Value> = look
                    .views(0.0)
                    .map(|view| in_json(&view, settings))
                    .collect();
                json!({"picture": file, "parts": parts, "crumbs": look.specks})
            });
            writeln!(out, "{}", json!({"pictures": pictures.collect::<Vec<_>>()}))?;
            return Ok(());
        }
        for (file, look) in &all {
            table(file, look, settings, out)?;
        }
        Ok(())
    }
}

/// A gray picture of a bounded size, whatever its format.
fn open(file: &Path) -> anyhow::Result<GrayImage> {
    let mut limits = image::Limits::default();
    limits.max_image_width = Some(MOST_PX);
    limits.max_image_height = Some(MOST_PX);
    let read = || {
        let mut reader = image::ImageReader::open(file)?.with_guessed_format()?;
        reader.limits(limits);
        anyhow::Ok(reader.decode()?.into_luma8())
    };
    let picture = read().with_context(|| {
        format!(
            "{}: expected a PNG, JPEG or PGM picture of at most {MOST_PX} px a side",
            file.display()
        )
    })?;
    let (width, height) = picture.dimensions();
    ensure!(
        width >= 16 && height >= 16,
        "{}: {width} x {height} px; expected at least 16 x 16",
        file.display()
    );
    Ok(picture)
}

fn table(file: &Path, look: &Look, settings: &Settings, out: &mut dyn Write) -> anyhow::Result<()> {
    writeln!(
        out,
        "{}: {} parts, {} crumbs",
        file.display(),
        look.spots.len(),
        look.specks
    )?;
    for (k, view) in look.views(0.0).enumerate() {
        let (x_mm, y_mm) = middle(&view);
        write!(out, "  {:>3}  at {x_mm:6.1}, {y_mm:6.1} mm  ", k + 1)?;
        match view.judged {
            None => writeln!(out, "not gauged: the picture's edge cuts it")?,
            Some(judged) => {
                let verdict = if judged.reasons.is_empty() {
                    "keep"
                } else {
                    "reject"
                };
                let [missing, excess] =
                    [judged.missing.px, judged.excess.px].map(|px| settings.scale().mm(px));
                let shape = &settings.shapes[judged.shape];
                writeln!(
                    out,
                    "{verdict:<6} {:<20} {}: missing {missing:.2} of {:.2} mm, excess {excess:.2} of {:.2} mm",
                    judged.reasons, shape.name, shape.missing_mm, shape.excess_mm
                )?;
            }
        }
    }
    Ok(())
}

/// Middle of the part's box from the picture's upstream and top edge.
fn middle(view: &View) -> (f64, f64) {
    (-view.along_mm, view.across_mm)
}

fn in_json(view: &View, settings: &Settings) -> Value {
    let (x_mm, y_mm) = middle(view);
    let judged = view.judged.map(|judged| {
        json!({
            "shape": settings.shapes[judged.shape].name,
            "angle_deg": judged.pose.angle_deg,
            "flipped": judged.pose.flipped,
            "fit": judged.fit,
            "missing_mm": settings.scale().mm(judged.missing.px),
            "excess_mm": settings.scale().mm(judged.excess.px),
            "verdict": if judged.reasons.is_empty() { "keep" } else { "reject" },
            "reasons": judged.reasons.to_string(),
        })
    });
    json!({
        "from_upstream_mm": x_mm,
        "across_mm": y_mm,
        "area_mm2": view.area_mm2,
        "cut_by_edge": view.cut.any(),
        "judged": judged,
    })
}

fn mark(
    folder: &Path,
    file: &Path,
    station: &Station,
    frame: &Frame,
    look: &Look,
) -> anyhow::Result<()> {
    std::fs::create_dir_all(folder).with_context(|| format!("cannot make {}", folder.display()))?;
    let stem = file.file_stem().unwrap_or_default().to_string_lossy();
    let mut artist = station.artist();
    for (k, view) in look.views(0.0).enumerate() {
        let mut png = Cursor::new(Vec::new());
        artist
            .draw_view(frame, &view)
            .write_to(&mut png, image::ImageFormat::Png)?;
        write_whole(
            &folder.join(format!("{stem}-{:03}.png", k + 1)),
            png.get_ref(),
        )?;
    }
    Ok(())
}

/// All the foreground of both pictures, in the same frame.
fn gauge(shape: &Path, part: &Path, as_json: bool, out: &mut dyn Write) -> anyhow::Result<()> {
    let read =
        |file: &Path| -> anyhow::Result<Bitmap> { Ok(read_gray(file, MOST_PX)?.foreground()) };
    let (taught, seen) = (read(shape)?, read(part)?);
    let size = |set: &Bitmap| (set.width_px(), set.height_px());
    let (expected, came) = (size(&taught), size(&seen));
    ensure!(
        expected == came,
        "{}: {} x {} px; expected {} x {} px as in {}",
        part.display(),
        came.0,
        came.1,
        expected.0,
        expected.1,
        shape.display()
    );
    let (missing, excess) = gauge_masks(&taught, &seen);
    if as_json {
        let object = json!({
            "missing_px": missing.px,
            "missing_at": missing.at,
            "excess_px": excess.px,
            "excess_at": excess.at,
        });
        writeln!(out, "{object}")?;
    } else {
        writeln!(
            out,
            "missing {:.4} px, excess {:.4} px",
            missing.px, excess.px
        )?;
    }
    Ok(())
}
