//! `check`: everything that is wrong with a settings file, or what it amounts to.

use std::io::{self, Write};
use std::path::PathBuf;

use serde::Serialize;
use serde_json::json;

use crate::settings::{self, Loaded, Outlet, Problems, SWITCH_BYTES, Settings, SettingsError};
use crate::units::Window;

use super::Outcome;
use super::station::taught;

/// Checks a settings file and shows what it amounts to
#[derive(Debug, clap::Args)]
pub(super) struct Args {
    /// The settings file
    #[arg(long, value_name = "FILE", required_unless_present = "schema")]
    settings: Option<PathBuf>,
    /// Print one JSON object instead of a table
    #[arg(long)]
    json: bool,
    /// Print the JSON Schema of settings files, for editors
    #[arg(long, conflicts_with_all = ["settings", "json"])]
    schema: bool,
}

impl Args {
    pub(super) fn run(self, out: &mut dyn Write) -> anyhow::Result<Outcome> {
        let Some(file) = self.settings else {
            out.write_all(settings::schema_text().as_bytes())?;
            return Ok(Outcome::Done);
        };
        let checked = settings::load(&file).and_then(|loaded| taught(&loaded).map(|_| loaded));
        match checked {
            Ok(loaded) => show(&loaded, self.json, out),
            Err(SettingsError::Bad(problems)) if self.json => complain(&problems, out),
            Err(error) => Err(error.into()),
        }
    }
}

fn show(loaded: &Loaded, as_json: bool, out: &mut dyn Write) -> anyhow::Result<Outcome> {
    let summary = Summary::of(&loaded.settings);
    if as_json {
        let mut object = serde_json::to_value(&summary)?;
        object["ok"] = true.into();
        writeln!(out, "{object:#}")?;
    } else {
        writeln!(out, "{}: no problems", loaded.file().display())?;
        summary.table(out)?;
    }
    Ok(Outcome::Done)
}

fn complain(problems: &Problems, out: &mut dyn Write) -> anyhow::Result<Outcome> {
    writeln!(out, "{:#}", json!({ "ok": false, "problems": problems }))?;
    Ok(Outcome::BadInput)
}

/// What settings amount to.
#[derive(Debug, Serialize)]
struct Summary {
    picture: SizeMm,
    mm_per_px: f64,
    blur_mm: f64,
    blur_px: f64,
    region: Window,
    element_px: usize,
    fill_below_px: u64,
    speck_below_px: u64,
    flaw_below_px: f64,
    shapes: Vec<ShapeRow>,
    frame_interval_ms: f64,
    frame_step_mm: f64,
    view_mm: f64,
    decision_mm: f64,
    outlets: Vec<OutletRow>,
    character_us: f64,
    switch_us: i64,
    t1_5_us: i64,
    t3_5_us: i64,
}

#[derive(Debug, Serialize)]
struct SizeMm {
    width_mm: f64,
    height_mm: f64,
}

#[derive(Debug, Serialize)]
struct ShapeRow {
    name: String,
    missing_px: f64,
    excess_px: f64,
}

#[derive(Debug, Serialize)]
struct OutletRow {
    name: String,
    open_lead_ms: f64,
    close_lead_ms: f64,
    distance_mm: f64,
    needed_mm: f64,
    slack_mm: f64,
    slack_ms: f64,
}

impl Summary {
    fn of(settings: &Settings) -> Self {
        let (scale, line) = (settings.scale(), &settings.line);
        let shape = |shape: &settings::Shape| ShapeRow {
            name: shape.name.clone(),
            missing_px: scale.px(shape.missing_mm),
            excess_px: scale.px(shape.excess_mm),
        };
        Self {
            picture: SizeMm {
                width_mm: scale.mm(f64::from(settings.camera.width_px)),
                height_mm: scale.mm(f64::from(settings.camera.height_px)),
            },
            mm_per_px: scale.mm_per_px,
            blur_mm: settings.blur_mm(),
            blur_px: scale.px(settings.blur_mm()),
            region: settings.region_px(),
            element_px: settings.element_px(),
            fill_below_px: settings.fill_below_px(),
            speck_below_px: settings.speck_below_px(),
            flaw_below_px: settings.flaw_below_px(),
            shapes: settings.shapes.iter().map(shape).collect(),
            frame_interval_ms: settings.frame_interval_us().as_ms(),
            frame_step_mm: settings.frame_step_mm(),
            view_mm: settings.view_mm(),
            decision_mm: settings.decision_mm(),
            outlets: settings
                .outlets
                .iter()
                .map(|outlet| OutletRow::of(settings, outlet))
                .collect(),
            character_us: line.character_us(),
            switch_us: line.wire_us(SWITCH_BYTES).0,
            t1_5_us: line.t1_5_us().0,
            t3_5_us: line.t3_5_us().0,
        }
    }

    fn table(&self, out: &mut dyn Write) -> io::Result<()> {
        let mut rows = self.picture_rows();
        rows.extend(self.belt_rows());
        for outlet in &self.outlets {
            rows.extend(outlet.rows());
        }
        rows.extend(self.line_rows());
        let wide = rows
            .iter()
            .map(|(name, _)| name.chars().count())
            .max()
            .unwrap_or(0);
        for (name, value) in &rows {
            writeln!(out, "  {name:<wide$}  {value}")?;
        }
        Ok(())
    }

    fn picture_rows(&self) -> Vec<Row> {
        let region = self.region;
        let mut rows = vec![
            row(
                "picture",
                format!(
                    "{:.1} x {:.1} mm at {} mm/px",
                    self.picture.width_mm, self.picture.height_mm, self.mm_per_px
                ),
            ),
            row(
                "motion blur",
                format!("{:.2} mm = {:.2} px", self.blur_mm, self.blur_px),
            ),
            row(
                "region",
                format!(
                    "{} x {} px from column {}, row {}",
                    region.width_px, region.height_px, region.left_px, region.top_px
                ),
            ),
            row("element", format!("{} px", self.element_px)),
            row(
                "fill",
                format!("holes of at most {} px", self.fill_below_px),
            ),
            row("specks", format!("below {} px", self.speck_below_px)),
            row(
                "flaws",
                format!("below {:.1} px do not count", self.flaw_below_px),
            ),
        ];
        for shape in &self.shapes {
            rows.push((
                format!("shape {}", shape.name.escape_debug()),
                format!(
                    "missing {:.2} px, excess {:.2} px",
                    shape.missing_px, shape.excess_px
                ),
            ));
        }
        rows
    }

    fn belt_rows(&self) -> [Row; 3] {
        [
            row(
                "frames",
                format!(
                    "every {:.1} ms = {:.1} mm of belt",
                    self.frame_interval_ms, self.frame_step_mm
                ),
            ),
            row(
                "view",
                format!("{:.1} mm from the upstream edge", self.view_mm),
            ),
            row(
                "decision",
                format!("{:.1} mm past the upstream edge", self.decision_mm),
            ),
        ]
    }

    fn line_rows(&self) -> [Row; 3] {
        [
            row("character", format!("{:.1} us", self.character_us)),
            row(
                "message",
                format!("{} us for {SWITCH_BYTES} bytes", self.switch_us),
            ),
            row(
                "silence",
                format!("t1.5 {} us, t3.5 {} us", self.t1_5_us, self.t3_5_us),
            ),
        ]
    }
}

impl OutletRow {
    fn of(settings: &Settings, outlet: &Outlet) -> Self {
        let reach = settings.reach(outlet);
        Self {
            name: outlet.name.clone(),
            open_lead_ms: settings.open_lead_us(outlet).as_ms(),
            close_lead_ms: settings.close_lead_us(outlet).as_ms(),
            distance_mm: outlet.distance_mm,
            needed_mm: reach.needed_mm,
            slack_mm: reach.slack_mm,
            slack_ms: reach.slack_ms,
        }
    }

    fn rows(&self) -> [Row; 2] {
        let reach = format!(
            "at {:.1} mm; needs at least {:.1} mm, so {:.1} mm = {:.1} ms to spare",
            self.distance_mm, self.needed_mm, self.slack_mm, self.slack_ms
        );
        let leads = format!(
            "signals leave {:.1} ms before open, {:.1} ms before shut",
            self.open_lead_ms, self.close_lead_ms
        );
        [
            (format!("outlet {}", self.name.escape_debug()), reach),
            row("", leads),
        ]
    }
}

type Row = (String, String);

fn row(name: &str, value: String) -> Row {
    (name.to_owned(), value)
}
