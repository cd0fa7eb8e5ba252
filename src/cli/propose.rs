//! What `teach` proposes: limits from the spread of good parts, sizes and threshold from the pictures, a reason for each.

use std::io::{Cursor, Write};
use std::path::{Path, PathBuf};

use serde_json::json;

use super::files::write_whole;
use super::sorting::{progress, sort};
use super::station::Station;
use crate::belt::Part;
use crate::frames::Frame;
use crate::recording::{Label, Recording};
use crate::replay::{LABEL_GATE, Outcome, Placed, score};
use crate::settings::{ElementKind, Loaded, Settings};
use crate::shape::{Figures, Reason, Silhouette, Verdict};
use crate::stage::{Level, Plan, Threshold};
use crate::stats::Share;
use crate::tuning::{GrayLevels, Holes, Proposed, limit};

/// Frames that are looked at for the threshold and for holes, spread over the recording.
const FRAMES: usize = 60;
/// Room of the element around the part's widest inside.
const ELEMENT_ROOM: f64 = 1.2;
/// Holes twice as large as any that was seen are closed.
const HOLE_ROOM: f64 = 2.0;

/// What is proposed, by key, and what speaks against it.
pub(super) struct Proposals {
    lines: Vec<(String, Proposed)>,
    warnings: Vec<String>,
}

/// How sure the limits shall be.
#[derive(Clone, Copy, Debug)]
pub(super) struct Sure {
    pub(super) coverage: Share,
    pub(super) confidence: Share,
}

/// The taught shape with what is known of it.
pub(super) struct Pupil<'a> {
    pub(super) silhouette: &'a Silhouette,
    pub(super) figures: &'a Figures,
    /// Where it was written.
    pub(super) out: &'a Path,
}

impl Proposals {
    /// Replays the recording with the shape that it taught.
    pub(super) fn from(
        loaded: &Loaded,
        recording: &Recording,
        pupil: &Pupil<'_>,
        sure: Sure,
    ) -> anyhow::Result<Self> {
        let mut proposals = Self {
            lines: Vec::new(),
            warnings: Vec::new(),
        };
        proposals.pictures(&loaded.settings, recording, pupil.figures)?;
        proposals.limits(loaded, recording, pupil, sure)?;
        Ok(proposals)
    }

    fn add(&mut self, key: &str, value: f64, why: String) {
        self.lines.push((key.to_owned(), Proposed { value, why }));
    }

    /// Element, threshold and hole size.
    fn pictures(
        &mut self,
        settings: &Settings,
        recording: &Recording,
        figures: &Figures,
    ) -> anyhow::Result<()> {
        let (inside_mm, what) = match settings.picture.element {
            ElementKind::Square => (figures.widest_mm, "square"),
            ElementKind::Octagon => (figures.widest_disc_mm, "disc"),
        };
        let element_mm = (inside_mm * ELEMENT_ROOM).ceil();
        let why = format!(
            "the widest {what} inside the shape is {inside_mm:.1} mm; a fifth more, rounded up"
        );
        self.add("picture.element_mm", element_mm, why);

        let level = Level::choose()?;
        let mut tried = settings.clone();
        tried.picture.element_mm = element_mm;
        let (plan, window) = (Plan::of(&tried), tried.region_px());
        let scale = tried.scale();
        let mut levels = GrayLevels::new(&plan, level);
        let sizes_mm2: Vec<f64> = (-4..16).map(|k| 2f64.powf(f64::from(k) / 2.0)).collect();
        let sizes_px = sizes_mm2.iter().map(|mm2| scale.px2(*mm2) as u64).collect();
        let mut holes = Holes::new(&plan, level, sizes_px);
        let least_px = (scale.px2(figures.area_mm2) * 0.5) as u64;
        let step = recording.len().div_ceil(FRAMES).max(1);
        let mut frame = Frame::default();
        let bores = figures.bores_mm2.len() as u32;
        for k in (0..recording.len()).step_by(step) {
            recording.read_into(k, &mut frame)?;
            let hat = levels.add(frame.gray().window(window));
            holes.add(hat, &plan, plan.threshold, bores, least_px);
        }
        let key = match plan.threshold {
            Threshold::Otsu { .. } => "picture.threshold.floor",
            Threshold::Fixed { .. } => "picture.threshold.level",
            Threshold::Hysteresis { .. } => "picture.threshold.low",
        };
        if let Some(threshold) = levels.threshold() {
            self.add(key, threshold.value, threshold.why);
        }
        self.fill(&holes, &sizes_mm2, scale.px2(1.0), figures);
        Ok(())
    }

    fn fill(&mut self, holes: &Holes, sizes_mm2: &[f64], px_per_mm2: f64, figures: &Figures) {
        let Some((size_px, parts)) = holes.smallest() else {
            let largest = sizes_mm2.last().copied().unwrap_or_default();
            self.warnings.push(format!(
                "parts have holes of their own even when all up to {largest:.0} mm2 are closed"
            ));
            return;
        };
        let seen_mm2 = size_px as f64 / px_per_mm2;
        let mut fill_mm2 = seen_mm2 * HOLE_ROOM;
        let mut why = format!(
            "closing holes up to {seen_mm2:.1} mm2 leaves 99 % of {parts} views with the shape's own; twice that"
        );
        if let Some(bore_mm2) = figures.bores_mm2.iter().copied().min_by(f64::total_cmp) {
            if seen_mm2 >= bore_mm2 {
                self.warnings.push(format!("holes by glare ({seen_mm2:.1} mm2) are as large as the smallest bore ({bore_mm2:.1} mm2)"));
            }
            fill_mm2 = fill_mm2.min(bore_mm2 / 2.0);
            why = format!("{why}, at most half of the smallest bore ({bore_mm2:.1} mm2)");
        }
        self.add(
            "picture.fill_below_mm2",
            (fill_mm2 * 10.0).round() / 10.0,
            why,
        );
    }

    /// Tolerances, and whether good and bad parts overlap.
    fn limits(
        &mut self,
        loaded: &Loaded,
        recording: &Recording,
        pupil: &Pupil<'_>,
        sure: Sure,
    ) -> anyhow::Result<()> {
        let mut station = station(loaded, pupil)?;
        let labels = recording.labels()?;
        let bar = progress(recording.len(), "frames");
        let outcome = sort(&station, recording, &bar)?;
        bar.finish_and_clear();
        let settings = station.settings();
        let sides = Sides::of(&outcome, labels.as_deref(), settings);
        let scale = settings.scale();
        let figures = |of: fn(&Part) -> Option<f64>| -> Vec<f64> {
            sides
                .good
                .iter()
                .filter_map(of)
                .map(|px| scale.mm(px))
                .collect()
        };
        let missing = figures(|part| Some(part.judged?.missing.px));
        let excess = figures(|part| Some(part.judged?.excess.px));
        let both = [("missing_mm", missing), ("excess_mm", excess)];
        let mut limits_mm = [0.0; 2];
        for ((key, figures), limit_mm) in both.into_iter().zip(&mut limits_mm) {
            let Some(proposed) = limit(&figures, sure.coverage, sure.confidence) else {
                self.warnings
                    .push(format!("{key}: two good parts are too few for a limit"));
                return Ok(());
            };
            // To a twentieth of a millimetre upwards, and no finer than a pixel.
            let mm = ((proposed.value * 20.0 - 1e-9).ceil() / 20.0).max(settings.camera.mm_per_px);
            *limit_mm = mm;
            self.add(&format!("shape.{key}"), mm, proposed.why);
        }
        let shape = &mut station.loaded.settings.shapes[0];
        [shape.missing_mm, shape.excess_mm] = limits_mm;
        self.overlap(&station, recording, &sides, pupil.out)
    }

    /// With the proposed limits: does any bad part look like a good one?
    fn overlap(
        &mut self,
        station: &Station,
        recording: &Recording,
        sides: &Sides,
        out: &Path,
    ) -> anyhow::Result<()> {
        let used = |part: &&Part| share(part, station.settings());
        let nearest = |a: &&Part, b: &&Part| used(a).total_cmp(&used(b));
        let (Some(good), Some(bad)) = (
            sides.good.iter().max_by(nearest),
            sides.bad.iter().min_by(nearest),
        ) else {
            return Ok(());
        };
        let passing = sides.bad.iter().filter(|part| used(part) <= 1.0).count();
        if passing == 0 && used(&good) < used(&bad) {
            return Ok(());
        }
        let files = [("good", good), ("bad", bad)].map(|(name, part)| (picture(out, name), part));
        for (file, part) in &files {
            draw(station, recording, part, file)?;
        }
        self.warnings.push(format!(
            "good and bad overlap: {passing} of {} bad parts stay within the proposed limits; the worst good part (at {:.1} mm) uses \
             {:.0} % of them, the mildest bad one (at {:.1} mm) {:.0} %: see {} and {}",
            sides.bad.len(),
            good.along_mm,
            100.0 * used(&good),
            bad.along_mm,
            100.0 * used(&bad),
            files[0].0.display(),
            files[1].0.display()
        ));
        Ok(())
    }

    pub(super) fn print(&self, out: &mut dyn Write) -> anyhow::Result<()> {
        for (key, proposed) in &self.lines {
            writeln!(
                out,
                "  propose         {key} = {}: {}",
                proposed.value, proposed.why
            )?;
        }
        for warning in &self.warnings {
            writeln!(out, "  warning         {warning}")?;
        }
        Ok(())
    }

    pub(super) fn in_json(&self) -> serde_json::Value {
        let line = |(key, proposed): &(String, Proposed)| json!({"key": key, "value": proposed.value, "why": proposed.why});
        json!({
            "proposed": self.lines.iter().map(line).collect::<Vec<_>>(),
            "warnings": self.warnings,
        })
    }
}

/// The settings with the taught shape as the only one.
fn station(loaded: &Loaded, pupil: &Pupil<'_>) -> anyhow::Result<Station> {
    let mut loaded = loaded.clone();
    let same = |shape: &crate::settings::Shape| shape.file.file_name() == pupil.out.file_name();
    let shapes = &mut loaded.settings.shapes;
    let own = shapes.iter().position(same).unwrap_or(0);
    *shapes = vec![shapes[own].clone()];
    Ok(Station {
        loaded,
        taught: vec![pupil.silhouette.clone()],
        level: Level::choose()?,
    })
}

/// Parts whose figures say something, by their labels.
struct Sides {
    good: Vec<Part>,
    bad: Vec<Part>,
}

impl Sides {
    fn of(outcome: &Outcome, labels: Option<&[Label]>, settings: &Settings) -> Self {
        let silent = [
            Reason::Touching,
            Reason::Partial,
            Reason::Unknown,
            Reason::Flipped,
        ];
        let speaks = |part: &Part| !silent.iter().any(|&reason| part.reasons.has(reason));
        let parts = || outcome.parts.iter().map(|(part, _)| part);
        let Some(labels) = labels else {
            return Self {
                good: parts().filter(|part| speaks(part)).copied().collect(),
                bad: Vec::new(),
            };
        };
        let placed: Vec<Placed> = parts().map(Placed::from).collect();
        let score = score(
            labels,
            &placed,
            &[],
            settings.belt.part_pitch_mm * LABEL_GATE,
        );
        let side = |wanted: Verdict| -> Vec<Part> {
            let pairs = score
                .matches
                .iter()
                .filter_map(|found| found.label.zip(found.part));
            let of = pairs.filter(|(label, _)| labels[*label].verdict == wanted);
            of.map(|(_, part)| outcome.parts[part].0)
                .filter(|part| speaks(part))
                .collect()
        };
        Self {
            good: side(Verdict::Keep),
            bad: side(Verdict::Reject),
        }
    }
}

/// The larger share that a part uses of its two limits.
fn share(part: &Part, settings: &Settings) -> f64 {
    let (shape, scale) = (&settings.shapes[0], settings.scale());
    part.judged.map_or(f64::INFINITY, |judged| {
        let missing = scale.mm(judged.missing.px) / shape.missing_mm;
        missing.max(scale.mm(judged.excess.px) / shape.excess_mm)
    })
}

fn picture(out: &Path, name: &str) -> PathBuf {
    let stem = out.file_stem().unwrap_or_default().to_string_lossy();
    out.with_file_name(format!("{stem}-nearest-{name}.png"))
}

fn draw(station: &Station, recording: &Recording, part: &Part, file: &Path) -> anyhow::Result<()> {
    let Some(k) = recording.frame_at(part.spoken_us) else {
        return Ok(());
    };
    let mut frame = Frame::default();
    recording.read_into(k, &mut frame)?;
    let mut png = Cursor::new(Vec::new());
    let image = station.artist().draw_part(&frame, part);
    image.write_to(&mut png, image::ImageFormat::Png)?;
    write_whole(file, png.get_ref())
}
