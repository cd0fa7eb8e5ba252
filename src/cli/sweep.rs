//! `sweep`: many settings on one labelled recording.

use std::io::Write;
use std::path::{Path, PathBuf};
use std::str::FromStr;

use anyhow::{Context, ensure};
use sha2::{Digest, Sha256};
use toml_edit::DocumentMut;

use super::Outcome as Ending;
use super::files::write_whole;
use super::interrupt::stop_flag;
use super::sorting::{processors, progress};
use super::station::{Shelf, Station, frame_size};
use crate::recording::{Label, Recording, SizePx};
use crate::replay::report::SourceFile;
use crate::settings;
use crate::tuning::{
    Axis, Bench, Choice, Costs, Journal, Point, Shift, Stand, Standing, SweepError, SweepPage,
    candidates, grid_size, move_shapes, points, points_csv, ranked, run, set, sorts, standings,
    stretches, value_at,
};

/// Tries many settings on a labelled recording
///
/// Each step of the picture work is done once for all settings that share it, so limits can be tried by the hundred. What
/// is found is checked like any settings file; points that contradict themselves are listed. With --journal a sweep can be
/// stopped and taken up again by the same command. Large sweeps: run --part 1/4 to --part 4/4 on four machines, each
/// with a journal of its own, then the same command with --join and the four journals.
#[derive(Debug, clap::Args)]
pub(super) struct Args {
    /// The recording: a folder with frames.csv and labels.csv
    recording: PathBuf,
    /// The settings file that is varied
    #[arg(long, value_name = "FILE")]
    settings: PathBuf,
    /// A key and its values: KEY=LO..HI:STEP, or KEY=A,B,C; more than one key makes a grid
    #[arg(long, value_name = "KEY=VALUES", required = true)]
    vary: Vec<Axis>,
    /// Try only this many points of the grid, drawn from --seed
    #[arg(long, value_name = "N", value_parser = clap::value_parser!(u32).range(1..=100_000))]
    random: Option<u32>,
    /// The same seed draws the same points
    #[arg(long, value_name = "K", default_value_t = 1, requires = "random")]
    seed: u64,
    /// Refuse grids that are larger than this
    #[arg(long, value_name = "N", default_value_t = 5000)]
    most: u32,
    /// Judge the best ones also on the recording brightened, dimmed, enlarged and shrunk by this much, and blurred
    #[arg(long, value_name = "PERCENT", value_parser = clap::value_parser!(u8).range(1..=50))]
    shift: Option<u8>,
    /// Try every setting to the end, also when it is all but certain (99.9 %) that more than a fifth of the parts goes wrong
    #[arg(long)]
    to_the_end: bool,
    /// A missed bad part costs as much as this many false alarms
    #[arg(long, value_name = "N", default_value_t = 100, value_parser = clap::value_parser!(u32).range(1..))]
    miss_costs: u32,
    /// Note what is finished in this file, and go on from it
    #[arg(long, value_name = "FILE")]
    journal: Option<PathBuf>,
    /// Do only part I of N
    #[arg(
        long,
        value_name = "I/N",
        requires = "journal",
        conflicts_with = "join"
    )]
    part: Option<Share>,
    /// Use the journals of all parts
    #[arg(long, value_name = "JOURNALS", num_args = 1..)]
    join: Vec<PathBuf>,
    /// Write a table of all points
    #[arg(long, value_name = "FILE.csv", conflicts_with = "part")]
    csv: Option<PathBuf>,
    /// Write what was found with its curves
    #[arg(long, value_name = "FILE.html", conflicts_with = "part")]
    report: Option<PathBuf>,
    /// Write the settings with the chosen values; comments stay
    #[arg(long, value_name = "OUT.toml", conflicts_with = "part")]
    write: Option<PathBuf>,
    /// Worker threads [default: one for each processor]
    #[arg(long, value_name = "N", value_parser = clap::value_parser!(u16).range(1..=256))]
    workers: Option<u16>,
}

/// One of several equal parts.
#[derive(Clone, Copy, Debug)]
struct Share {
    part: usize,
    of: usize,
}

impl FromStr for Share {
    type Err = &'static str;

    fn from_str(text: &str) -> Result<Self, Self::Err> {
        let numbers = text.split_once('/');
        let numbers = numbers.and_then(|(part, of)| Some((part.parse().ok()?, of.parse().ok()?)));
        let share = numbers.map(|(part, of)| Self { part, of });
        share
            .filter(|share| (1..=share.of).contains(&share.part))
            .ok_or("expected I/N, such as 2/4")
    }
}

impl Args {
    pub(super) fn run(self, out: &mut dyn Write) -> anyhow::Result<Ending> {
        let station = Station::open(&self.settings)?;
        let recording = station.recording(&self.recording)?;
        let labels = self.labels(&recording)?;
        let text = std::fs::read_to_string(&self.settings)?;
        let points = self.points(&text, recording.size())?;
        let mut journal = self.open_journal(&station)?;
        let bench = Bench {
            recording: &recording,
            labels: &labels,
            level: station.level,
            workers: self.workers.map_or_else(processors, usize::from),
            gives_up: !self.to_the_end,
            stop: stop_flag()?,
        };
        let ran = self.run_points(&bench, &points, &mut journal);
        if let Err(SweepError::Stopped) = ran {
            anyhow::bail!(match &self.journal {
                Some(file) => format!(
                    "stopped by hand; {} holds what is finished: the same command goes on from there",
                    file.display()
                ),
                None => "stopped by hand; nothing was kept (--journal FILE keeps what is finished)"
                    .to_owned(),
            });
        }
        let standings = ran?;
        if let Some(Share { part, of }) = self.part {
            writeln!(
                out,
                "part {part} of {of} is finished; join the journals of all parts with --join"
            )?;
            return Ok(Ending::Done);
        }
        self.tell(&text, &points, &standings, &labels, out)
    }

    fn costs(&self) -> Costs {
        Costs {
            miss: f64::from(self.miss_costs),
        }
    }

    fn shifts(&self) -> Vec<Shift> {
        self.shift
            .map_or_else(Vec::new, |percent| Shift::all(f64::from(percent)).to_vec())
    }

    fn labels(&self, recording: &Recording) -> anyhow::Result<Vec<Label>> {
        let folder = self.recording.display();
        let labels = recording.labels()?;
        let labels = labels
            .with_context(|| format!("{folder}: no labels.csv to judge by; `mark` proposes one"))?;
        ensure!(
            !labels.is_empty(),
            "{folder}: labels.csv has no labels to judge by"
        );
        Ok(labels)
    }

    /// The settings as they are, then every point of the grid.
    fn points(&self, text: &str, size: SizePx) -> anyhow::Result<Vec<Point>> {
        let choice = match self.random {
            Some(count) => Choice::Random {
                count: count as usize,
                seed: self.seed,
            },
            None => Choice::All,
        };
        let grid = grid_size(&self.vary);
        ensure!(
            self.random.is_some() || grid <= u128::from(self.most),
            "the grid has {grid} points, more than {}: use larger steps, --random N, or a larger --most",
            self.most
        );
        let document: DocumentMut = text.parse()?;
        for axis in &self.vary {
            // A key without any place is a mistake in the command, not a bad point.
            set(&mut document.clone(), &axis.key, &axis.values[0])?;
        }
        let mut shelf = Shelf::default();
        let present = self.vary.iter().map(|axis| value_at(&document, &axis.key));
        let mut all = vec![Point {
            place: None,
            values: present.collect(),
            stand: self.stand(text, size, &mut shelf),
        }];
        for place in points(&self.vary, choice) {
            let values: Vec<String> = place
                .iter()
                .zip(&self.vary)
                .map(|(&k, axis)| axis.values[k].clone())
                .collect();
            let stand = match self.edited(&document, &values) {
                Ok(edited) => self.stand(&edited.to_string(), size, &mut shelf),
                Err(error) => Err(error.to_string()),
            };
            all.push(Point {
                place: Some(place),
                values,
                stand,
            });
        }
        Ok(all)
    }

    fn edited(&self, document: &DocumentMut, values: &[String]) -> anyhow::Result<DocumentMut> {
        let mut edited = document.clone();
        for (axis, value) in self.vary.iter().zip(values) {
            set(&mut edited, &axis.key, value)?;
        }
        Ok(edited)
    }

    /// Everything that the loader asks of a settings file, or what it has against it in one line.
    fn stand(&self, text: &str, size: SizePx, shelf: &mut Shelf) -> Result<Stand, String> {
        let one_line = |error: settings::SettingsError| match error {
            settings::SettingsError::Bad(problems) => {
                let line =
                    |problem: &settings::Problem| format!("{}: {}", problem.key, problem.message);
                problems.0.iter().map(line).collect::<Vec<_>>().join("; ")
            }
            other => other.to_string(),
        };
        let loaded = settings::parse(&self.settings, text).map_err(one_line)?;
        let taught = shelf.taught(&loaded).map_err(one_line)?;
        let wanted = frame_size(&loaded.settings);
        if wanted != size {
            return Err(format!(
                "camera.width_px, camera.height_px: {wanted}; the frames are {size} px"
            ));
        }
        let stand = Stand {
            settings: loaded.settings,
            taught,
        };
        sorts(&stand).map_err(|error| error.to_string())?;
        Ok(stand)
    }

    fn open_journal(&self, station: &Station) -> anyhow::Result<Journal> {
        let name = self.name(station)?;
        let mut journal = match &self.journal {
            Some(file) => Journal::open(file, &name)?,
            None => Journal::default(),
        };
        for file in &self.join {
            journal.join(file, &name)?;
        }
        Ok(journal)
    }

    /// Stands for everything that decides what comes out of a run.
    fn name(&self, station: &Station) -> anyhow::Result<String> {
        let shapes =
            (0..station.settings().shapes.len()).map(|shape| station.loaded.shape_path(shape));
        let tables = ["frames.csv", "labels.csv"].map(|name| self.recording.join(name));
        let mut digest = Sha256::new();
        digest.update(env!("CARGO_PKG_VERSION"));
        for file in tables
            .into_iter()
            .chain([self.settings.clone()])
            .chain(shapes)
        {
            let source = SourceFile::read(&file)
                .with_context(|| format!("cannot read {}", file.display()))?;
            digest.update(source.sha256);
        }
        digest.update(format!(
            "{:?} {:?} {} {}",
            self.vary, self.random, self.seed, self.to_the_end
        ));
        Ok(digest
            .finalize()
            .iter()
            .map(|byte| format!("{byte:02x}"))
            .collect())
    }

    /// Runs what is not in the journal yet.
    fn run_points(
        &self,
        bench: &Bench<'_>,
        points: &[Point],
        journal: &mut Journal,
    ) -> Result<Vec<Standing>, SweepError> {
        let mine = |k: &usize| match self.part {
            // Stretches of points that stand together, so that each part shares as much as it can.
            Some(Share { part, of }) => k * of / points.len() == part - 1,
            None => true,
        };
        let wanted: Vec<usize> = (0..points.len())
            .filter(mine)
            .filter(|&k| points[k].stand.is_ok())
            .collect();
        let frames = bench.recording.len();
        let bar = progress(frames * wanted.len(), "frames of all settings");
        let known = wanted
            .iter()
            .filter(|&&k| journal.find(k, None).is_some())
            .count();
        bar.inc((frames * known) as u64);
        bar.reset_eta();
        run(bench, points, &wanted, None, journal, |done| bar.inc(done))?;
        bar.finish_and_clear();
        let shifts = self.shifts();
        let standings =
            |journal: &Journal| standings(points, &self.vary, journal, &shifts, self.costs());
        let first = standings(journal);
        if self.part.is_some() || shifts.is_empty() {
            return Ok(first);
        }
        let best = candidates(&first, self.costs());
        let bar = progress(
            frames * best.len() * shifts.len(),
            "frames of the best settings, light and scale shifted",
        );
        for &shift in &shifts {
            run(bench, points, &best, Some(shift), journal, |done| {
                bar.inc(done)
            })?;
        }
        bar.finish_and_clear();
        Ok(standings(journal))
    }

    fn tell(
        &self,
        text: &str,
        points: &[Point],
        standings: &[Standing],
        labels: &[Label],
        out: &mut dyn Write,
    ) -> anyhow::Result<Ending> {
        let costs = self.costs();
        let order = ranked(standings, costs);
        let Some(&chosen) = order.first() else {
            let why = points.iter().find_map(|point| point.stand.as_ref().err());
            let why = why.map_or(
                "every one gets too many parts wrong; --to-the-end tries them all the same",
                String::as_str,
            );
            anyhow::bail!("no setting is worth a table: {why}");
        };
        let page = SweepPage {
            recording: self.recording.display().to_string(),
            settings: self.settings.display().to_string(),
            axes: &self.vary,
            points,
            standings,
            chosen,
            stretches: stretches(points, &self.vary, standings, chosen, costs),
            costs,
            labels: labels.len(),
        };
        if let Some(file) = &self.csv {
            write_whole(file, &points_csv(&page)?)?;
        }
        if let Some(file) = &self.report {
            write_whole(file, page.html().as_bytes())?;
        }
        if let Some(file) = &self.write {
            write_whole(
                file,
                self.chosen_text(text, &points[chosen.point], file)?
                    .as_bytes(),
            )?;
        }
        write!(out, "{}", page.text())?;
        if let Some(file) = &self.write {
            writeln!(out, "  {:<15} {}", "written", file.display())?;
        }
        Ok(Ending::Done)
    }

    /// The settings with the chosen values, as they stand in `file`.
    fn chosen_text(&self, text: &str, point: &Point, file: &Path) -> anyhow::Result<String> {
        let mut document: DocumentMut = text.parse()?;
        if point.place.is_some() {
            document = self.edited(&document, &point.values)?;
        }
        let folder = |file: &Path| file.parent().unwrap_or(Path::new("")).to_owned();
        let (from, to) = (folder(&self.settings), folder(file));
        if from != to {
            move_shapes(&mut document, &from, &to);
        }
        Ok(document.to_string())
    }
}
