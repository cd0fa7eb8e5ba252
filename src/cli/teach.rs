//! `teach`: the outline of a good part, from a recording of good parts or from a drawn mask.

use std::io::Write;
use std::path::{Path, PathBuf};

use anyhow::{Context, ensure};
use serde_json::json;

use super::Outcome;
use super::propose::{Proposals, Pupil, Sure};
use super::station::frame_size;
use crate::frames::{Frame, FrameSource};
use crate::recording::{Label, Recording};
use crate::settings::{self, Loaded, Settings};
use crate::shape::{
    Figures, LeftOut, Lesson, Silhouette, Spread, Taught, Teacher, Verdict, read_gray,
};
use crate::stage::{Level, Plan, Region, Run, Stage};
use crate::stats::Share;

/// Parts that are learned from at most; more hardly change the outline.
const MOST_PARTS: usize = 400;
/// Views nearer than this share of the part pitch show the same part.
const SAME_PART: f64 = 0.25;
/// Largest side of a drawn mask.
const MOST_PX: u32 = 4096;

/// Learns the outline of a good part
///
/// From a recording of good parts: every part is aligned to the rest, each pixel belongs to the outline when most parts
/// cover it. With labels.csv in the recording only parts labelled `keep` are used. Then it says how far good parts spread,
/// so that the limits can be set above that.
#[derive(Debug, clap::Args)]
pub(super) struct Args {
    /// The recording: a folder with frames.csv
    #[arg(required_unless_present = "mask", conflicts_with = "mask")]
    recording: Option<PathBuf>,
    /// A drawn mask instead: an 8-bit gray PNG at the settings' scale, the part brighter than 127
    #[arg(long, value_name = "FILE.png")]
    mask: Option<PathBuf>,
    /// The settings file; the taught shape that it names need not exist yet
    #[arg(long, value_name = "FILE")]
    settings: PathBuf,
    /// Where the shape goes; a PNG of the same name is put beside it
    #[arg(long, value_name = "FILE.toml")]
    out: PathBuf,
    /// A short name [default: the name of the file]
    #[arg(long)]
    name: Option<String>,
    /// Replace a shape that is already there
    #[arg(long)]
    replace: bool,
    /// Limits are proposed that this share of all good parts stays below
    #[arg(long, value_name = "PERCENT", default_value = "99.9")]
    coverage: Share,
    /// and with this confidence
    #[arg(long, value_name = "PERCENT", default_value = "95")]
    confidence: Share,
    /// Print one JSON object instead of a table
    #[arg(long)]
    json: bool,
}

impl Args {
    pub(super) fn run(self, out: &mut dyn Write) -> anyhow::Result<Outcome> {
        let loaded = settings::load(&self.settings)?;
        let settings = &loaded.settings;
        ensure!(
            self.replace || !self.out.exists(),
            "{} is already there: choose another name, or add --replace",
            self.out.display()
        );
        let (lesson, notes) = match (&self.recording, &self.mask) {
            (Some(folder), _) => (
                Some(learn(folder, settings)?),
                format!("taught from {}", plain_name(folder)),
            ),
            (None, mask) => (
                None,
                format!(
                    "drawn mask {}",
                    mask.as_deref().map(plain_name).unwrap_or_default()
                ),
            ),
        };
        let silhouette = match (&lesson, &self.mask) {
            (Some(lesson), _) => lesson.silhouette.clone(),
            (None, Some(mask)) => {
                let picture = read_gray(mask, MOST_PX)?;
                Silhouette::from_mask(&picture.foreground(), settings.camera.mm_per_px)
                    .with_context(|| format!("{}", mask.display()))?
            }
            // clap asks for one of the two.
            (None, None) => return Ok(Outcome::BadInput),
        };
        let used = lesson.as_ref().map_or(0, |lesson| used(lesson).count());
        let taught = Taught {
            name: self.name(),
            silhouette,
            parts: used as u32,
            notes,
        };
        taught.write(&self.out)?;
        let figures = Figures::of(&taught.silhouette);
        let proposals = self.proposals(&loaded, &taught.silhouette, &figures)?;
        if self.json {
            let mut json = in_json(&figures, lesson.as_ref());
            if let Some(proposals) = &proposals {
                json["proposals"] = proposals.in_json();
            }
            writeln!(out, "{json}")?;
        } else {
            writeln!(out, "{}", self.out.display())?;
            describe(&figures, out)?;
            if let Some(lesson) = &lesson {
                spread(lesson, out)?;
            }
            if let Some(proposals) = &proposals {
                proposals.print(out)?;
            }
        }
        Ok(Outcome::Done)
    }

    /// What the recording says about limits and sizes; nothing comes of a drawn mask.
    fn proposals(
        &self,
        loaded: &Loaded,
        silhouette: &Silhouette,
        figures: &Figures,
    ) -> anyhow::Result<Option<Proposals>> {
        let Some(folder) = &self.recording else {
            return Ok(None);
        };
        let recording = Recording::open(folder, Some(frame_size(&loaded.settings)))?;
        let pupil = Pupil {
            silhouette,
            figures,
            out: &self.out,
        };
        let sure = Sure {
            coverage: self.coverage,
            confidence: self.confidence,
        };
        Proposals::from(loaded, &recording, &pupil, sure).map(Some)
    }

    fn name(&self) -> String {
        let stem = self.out.file_stem().unwrap_or_default().to_string_lossy();
        self.name.clone().unwrap_or_else(|| stem.into_owned())
    }
}

/// Without the folders: they mean nothing on another PC.
fn plain_name(file: &Path) -> String {
    file.file_name()
        .unwrap_or_default()
        .to_string_lossy()
        .into_owned()
}

/// One whole view of a part, and how far it is from the middle of the picture.
struct Sight {
    along_mm: f64,
    across_mm: f64,
    off_middle_mm: f64,
    region: Region,
    runs: Vec<Run>,
}

fn learn(folder: &Path, settings: &Settings) -> anyhow::Result<Lesson> {
    let recording = Recording::open(folder, Some(frame_size(settings)))?;
    let labels = recording.labels()?;
    let sights = sights(&recording, settings)?;
    let mut teacher = Teacher::new(settings.camera.mm_per_px);
    let near_mm = settings.belt.part_pitch_mm * SAME_PART;
    for sight in sights
        .iter()
        .filter(|sight| is_good(sight, labels.as_deref(), near_mm))
    {
        teacher.add(&sight.region, &sight.runs);
    }
    ensure!(
        teacher.count() > 0,
        "{}: no whole part{} was found; look at the settings of [picture], and at the recording",
        folder.display(),
        if labels.is_some() {
            " that is labelled keep"
        } else {
            ""
        }
    );
    Ok(teacher.finish()?)
}

/// Whole parts, each in the view in which it is nearest to the middle of the picture.
fn sights(recording: &Recording, settings: &Settings) -> anyhow::Result<Vec<Sight>> {
    let geometry = settings.geometry();
    let mut stage = Stage::new(&Plan::of(settings), Level::choose()?);
    let near_mm = settings.belt.part_pitch_mm * SAME_PART;
    let middle_mm = settings.region_length_mm() / 2.0;
    let (mut playback, mut frame) = (recording.play(), Frame::default());
    let mut sights: Vec<Sight> = Vec::new();
    while playback.next_into(&mut frame)? && sights.len() < MOST_PARTS {
        let speed_mm_s = settings.belt.speed_mm_s;
        let belt_mm = frame
            .belt_mm
            .unwrap_or(frame.captured_us.as_seconds() * speed_mm_s);
        let scene = stage.run(frame.gray().window(geometry.window));
        for region in scene
            .regions
            .iter()
            .filter(|region| is_whole(region, settings))
        {
            let behind_mm = geometry.behind_upstream_mm(region.centroid_x + 0.5);
            let sight = Sight {
                along_mm: belt_mm - behind_mm,
                across_mm: geometry.below_top_mm(region.centroid_y + 0.5),
                off_middle_mm: (behind_mm - middle_mm).abs(),
                region: region.clone(),
                runs: scene.runs[region.runs.clone()].to_vec(),
            };
            let same = |other: &&mut Sight| {
                let (along, across) = (
                    other.along_mm - sight.along_mm,
                    other.across_mm - sight.across_mm,
                );
                along.hypot(across) < near_mm
            };
            match sights.iter_mut().rev().find(same) {
                Some(known) if known.off_middle_mm <= sight.off_middle_mm => {}
                Some(known) => *known = sight,
                None => sights.push(sight),
            }
        }
    }
    Ok(sights)
}

fn is_whole(region: &Region, settings: &Settings) -> bool {
    let window = settings.region_px();
    let inside = |low: u32, high: u32, size: usize| low > 0 && (high as usize) < size;
    inside(region.x_min, region.x_max, window.width_px)
        && inside(region.y_min, region.y_max, window.height_px)
}

/// Without labels every part counts as good; with them only what lies where a `keep` is.
fn is_good(sight: &Sight, labels: Option<&[Label]>, near_mm: f64) -> bool {
    let Some(labels) = labels else { return true };
    let apart =
        |label: &&Label| (label.along_mm - sight.along_mm).hypot(label.across_mm - sight.across_mm);
    let nearest = labels.iter().min_by(|a, b| apart(a).total_cmp(&apart(b)));
    nearest.is_some_and(|label| label.verdict == Verdict::Keep && apart(&label) < near_mm)
}

fn used(lesson: &Lesson) -> impl Iterator<Item = &crate::shape::Pupil> {
    lesson.parts.iter().filter(|part| part.left_out.is_none())
}

fn describe(figures: &Figures, out: &mut dyn Write) -> anyhow::Result<()> {
    let bores: Vec<_> = figures
        .bores_mm2
        .iter()
        .map(|area| format!("{area:.1} mm2"))
        .collect();
    writeln!(
        out,
        "  size            {:.1} x {:.1} mm, {:.1} mm2",
        figures.width_mm, figures.height_mm, figures.area_mm2
    )?;
    writeln!(
        out,
        "  widest inside   {:.1} mm: picture.element_mm must be larger",
        figures.widest_mm
    )?;
    match bores.as_slice() {
        [] => writeln!(out, "  bores           none")?,
        some => writeln!(
            out,
            "  bores           {}: picture.fill_below_mm2 must be smaller",
            some.join(", ")
        )?,
    }
    let turns = match figures.turns {
        0 => "the same at every angle".to_owned(),
        1 => "no turn brings it back onto itself".to_owned(),
        n => format!("the same after each 1/{n} turn"),
    };
    let faces = if figures.mirror {
        "face up and face down look the same"
    } else {
        "face down can be told"
    };
    writeln!(out, "  symmetry        {turns}; {faces}")?;
    Ok(())
}

fn spread(lesson: &Lesson, out: &mut dyn Write) -> anyhow::Result<()> {
    let left_out = |why: LeftOut| {
        lesson
            .parts
            .iter()
            .filter(|part| part.left_out == Some(why))
            .count()
    };
    writeln!(
        out,
        "  good parts      {} used, {} left out because they fit badly, {} because they lie face down",
        used(lesson).count(),
        left_out(LeftOut::FitsBadly),
        left_out(LeftOut::FaceDown)
    )?;
    let line = |name: &str, spread: Spread| {
        format!(
            "  {name:<15} median {:.2} mm, worst {:.2} mm: set {name}_mm above that",
            spread.median, spread.worst
        )
    };
    writeln!(out, "{}", line("missing", lesson.missing_mm))?;
    writeln!(out, "{}", line("excess", lesson.excess_mm))?;
    Ok(())
}

fn in_json(figures: &Figures, lesson: Option<&Lesson>) -> serde_json::Value {
    let spread = |spread: Spread| json!({"median": spread.median, "worst": spread.worst});
    let parts = lesson.map(|lesson| {
        json!({
            "came": lesson.parts.len(),
            "used": used(lesson).count(),
            "missing_mm": spread(lesson.missing_mm),
            "excess_mm": spread(lesson.excess_mm),
        })
    });
    json!({"figures": figures, "good_parts": parts})
}
