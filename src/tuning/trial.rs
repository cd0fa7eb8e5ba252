//! Many settings on one recording, in one pass over its frames.

use std::ops::Range;
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};
use std::thread;

use serde::{Deserialize, Serialize};

use super::layers::{Recipe, Stand, Surveyed, Surveyor};
use super::shift::Shift;
use crate::belt::Stretch;
use crate::frames::Frame;
use crate::inspect::{Look, Rules};
use crate::recording::{Label, Recording, RecordingError};
use crate::reject::PlanError;
use crate::replay::{LABEL_GATE, Placed, score};
use crate::settings::Policy;
use crate::shape::{Reason, Verdict};
use crate::sorter::{Event, Sorter};
use crate::stage::Level;
use crate::stats::{Count, Share};
use crate::units::Micros;

/// Frames that are looked at before their parts are merged. What is given up must not depend on the number of workers.
const BLOCK: usize = 16;
/// A setting is given up when more than this share of the parts goes wrong,
const HOPELESS: f64 = 0.2;
/// and that is as sure as this.
const HOPELESS_SURE: Share = Share::P999;

/// What the verdicts of one setting are worth.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Tried {
    /// Labelled `reject`.
    pub bad: usize,
    /// Labelled `keep`.
    pub good: usize,
    /// Bad parts that would pass.
    pub misses: usize,
    /// Good parts that would be rejected.
    pub false_rejects: usize,
    /// Good parts that were not seen at all.
    pub not_found: usize,
    /// Rejected parts that have no label: shots at nothing.
    pub stray: usize,
    /// By which share all limits could move without another verdict on a part that is right now, in percent; at most 100.
    pub room_percent: f64,
    /// After how many labels it was given up, if it was; the counts are those up to there.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub given_up_after: Option<usize>,
}

impl Tried {
    /// Whether it was tried to the end.
    pub fn is_whole(&self) -> bool {
        self.given_up_after.is_none()
    }

    /// Shots and losses that are not misses.
    pub fn false_alarms(&self) -> usize {
        self.false_rejects + self.not_found + self.stray
    }
}

/// What a pass needs to know besides the settings.
pub struct Bench<'a> {
    /// The frames.
    pub recording: &'a Recording,
    /// What they should come to.
    pub labels: &'a [Label],
    /// Kernels to use.
    pub level: Level,
    /// Threads.
    pub workers: usize,
    /// Whether settings are given up once it is all but certain that more than a fifth of the parts goes wrong.
    pub gives_up: bool,
    /// Ends a pass early.
    pub stop: &'static AtomicBool,
}

/// A setting's sorter with what it has decided so far.
struct Trial {
    survey: usize,
    rules: Rules,
    sorter: Sorter,
    latency_us: Micros,
    gate_mm: f64,
    decision_mm: f64,
    look: Look,
    parts: Vec<Placed>,
    severity: Vec<f64>,
    unseen: Policy,
    rejected: Vec<Stretch>,
    given_up: Option<Tried>,
}

impl Trial {
    fn new(stand: &Stand, survey: usize) -> Result<Self, PlanError> {
        let settings = &stand.settings;
        Ok(Self {
            survey,
            rules: Rules::of(settings),
            sorter: Sorter::of(settings)?,
            latency_us: settings.latency_us(),
            gate_mm: settings.belt.part_pitch_mm * LABEL_GATE,
            decision_mm: settings.decision_mm() + settings.belt.part_pitch_mm,
            look: Look::default(),
            parts: Vec::new(),
            severity: Vec::new(),
            unseen: settings.belt.unseen,
            rejected: Vec::new(),
            given_up: None,
        })
    }

    /// As a replay does: first what is due before the frame takes effect, then the frame.
    fn take(&mut self, surveyed: &Surveyed) {
        let (sights, specks) = &surveyed.surveys[self.survey];
        self.look.captured_us = surveyed.captured_us;
        self.look.belt_mm = surveyed.belt_mm;
        self.look.specks = *specks;
        self.look.spots.clear();
        self.look
            .spots
            .extend(sights.iter().map(|sight| self.rules.spot(sight)));
        self.happen(surveyed.captured_us + self.latency_us);
        self.sorter.take(&self.look);
    }

    fn happen(&mut self, until: Micros) {
        while let Some(event) = self.sorter.poll(until) {
            let part = match event {
                Event::Part(part, _) => part,
                Event::Unseen(piece, _) => {
                    self.throw_away(piece);
                    continue;
                }
                _ => continue,
            };
            let hopeless = part.reasons.has(Reason::Touching) || part.reasons.has(Reason::Partial);
            let severity = part
                .judged
                .filter(|_| !hopeless)
                .map(|judged| judged.severity);
            self.parts.push(Placed::from(&part));
            self.severity.push(severity.unwrap_or(f64::INFINITY));
        }
    }

    /// Belt that nobody saw, where the settings reject it. Pieces that follow each other are one stretch.
    fn throw_away(&mut self, piece: Stretch) {
        match self.rejected.last_mut() {
            _ if self.unseen != Policy::Reject => {}
            Some(last) if last.to_mm == piece.from_mm => last.to_mm = piece.to_mm,
            _ => self.rejected.push(piece),
        }
    }

    fn finish(mut self, labels: &[Label]) -> Tried {
        if let Some(given_up) = self.given_up {
            return given_up;
        }
        self.sorter.end_of_belt();
        self.happen(Micros::MAX);
        self.tally(labels)
    }

    /// Gives up if what was decided so far leaves no hope. Labels count once all parts near them are decided.
    fn consider(&mut self, now: Micros, labels: &[Label]) {
        let until_mm = self.sorter.motion().position_mm(now) - self.decision_mm;
        let known = labels.iter().filter(|label| label.along_mm < until_mm);
        let known: Vec<Label> = known.cloned().collect();
        let mut tried = self.tally(&known);
        // Parts beyond the last label that counts have none yet.
        tried.stray = 0;
        let wrong = tried.misses + tried.false_rejects + tried.not_found;
        let wrong = Count::new(wrong as u64, known.len() as u64);
        if !known.is_empty() && wrong.at_least(HOPELESS_SURE) > HOPELESS {
            tried.given_up_after = Some(known.len());
            tried.room_percent = 0.0;
            self.given_up = Some(tried);
        }
    }

    fn tally(&self, labels: &[Label]) -> Tried {
        let score = score(labels, &self.parts, &self.rejected, self.gate_mm);
        let bad = labels
            .iter()
            .filter(|label| label.verdict == Verdict::Reject)
            .count();
        let stray = score.unlabelled.iter().filter_map(|found| found.part);
        let room = |(label, part): (usize, usize)| {
            let (wanted, got) = (labels[label].verdict, self.parts[part].verdict);
            (wanted == got).then(|| (self.severity[part] - 1.0).abs())
        };
        let pairs = score
            .matches
            .iter()
            .filter_map(|found| found.label.zip(found.part));
        let least = pairs.filter_map(room).fold(1.0, f64::min);
        Tried {
            bad,
            good: labels.len() - bad,
            misses: score.misses.len(),
            false_rejects: score.false_rejects.len(),
            not_found: score.not_found.len(),
            stray: stray
                .filter(|&part| self.parts[part].verdict == Verdict::Reject)
                .count(),
            room_percent: (least * 1e4).round() / 100.0,
            given_up_after: None,
        }
    }
}

/// Runs the recording through all of `stands` at once, changed by `shift`; `done` is told how many frames are done. `None`
/// when it was stopped.
///
/// # Errors
/// Those of the recording.
///
/// # Panics
/// When a stand's settings have more outlets than a sorter takes; [`sorts`] tells.
pub fn try_all(
    bench: &Bench<'_>,
    stands: &[&Stand],
    shift: Option<Shift>,
    mut done: impl FnMut(usize),
) -> Result<Option<Vec<Tried>>, RecordingError> {
    let recipe = Arc::new(Recipe::of(stands.iter().copied()));
    let trial = |(k, stand): (usize, &&Stand)| Trial::new(stand, recipe.survey_of(k));
    let trials: Result<Vec<Trial>, _> = stands.iter().enumerate().map(trial).collect();
    let mut trials = trials.expect("the settings were asked whether they can be sorted by");
    let surveyor = |_| Surveyor::new(recipe.clone(), bench.level);
    let mut surveyors: Vec<_> = (0..bench.workers).map(surveyor).collect();
    let frames = bench.recording.len();
    for start in (0..frames).step_by(BLOCK) {
        if bench.stop.load(Ordering::Relaxed) {
            return Ok(None);
        }
        let block = start..(start + BLOCK).min(frames);
        let mut wanted = vec![false; recipe.surveys()];
        for trial in trials.iter().filter(|trial| trial.given_up.is_none()) {
            wanted[trial.survey] = true;
        }
        let surveyed = survey(
            bench.recording,
            &mut surveyors,
            block.clone(),
            shift,
            &wanted,
        )?;
        merge(&mut trials, &surveyed, bench);
        done(block.len());
    }
    Ok(Some(finish(trials, bench)))
}

/// Whether a sorter takes these settings.
///
/// # Errors
/// It has too many outlets.
pub fn sorts(stand: &Stand) -> Result<(), PlanError> {
    Trial::new(stand, 0).map(|_| ())
}

/// The frames of a block, each on the next free thread.
fn survey(
    recording: &Recording,
    surveyors: &mut [Surveyor],
    block: Range<usize>,
    shift: Option<Shift>,
    wanted: &[bool],
) -> Result<Vec<Surveyed>, RecordingError> {
    let workers = surveyors.len();
    let mut all = vec![Surveyed::default(); block.len()];
    let lanes = thread::scope(|scope| {
        let spawn = |(w, surveyor): (usize, _)| {
            let mine = (block.start + w..block.end).step_by(workers);
            scope.spawn(move || lane(recording, surveyor, mine, shift, wanted))
        };
        let handles: Vec<_> = surveyors.iter_mut().enumerate().map(spawn).collect();
        let joined = handles
            .into_iter()
            .map(|handle| handle.join().expect("a worker does not panic"));
        joined.collect::<Result<Vec<_>, _>>()
    })?;
    for (w, lane) in lanes.into_iter().enumerate() {
        for (k, surveyed) in lane.into_iter().enumerate() {
            all[w + k * workers] = surveyed;
        }
    }
    Ok(all)
}

fn lane(
    recording: &Recording,
    surveyor: &mut Surveyor,
    frames: impl Iterator<Item = usize>,
    shift: Option<Shift>,
    wanted: &[bool],
) -> Result<Vec<Surveyed>, RecordingError> {
    if !wanted.contains(&true) {
        return Ok(frames.map(|_| Surveyed::default()).collect());
    }
    let (mut frame, mut buffer) = (Frame::default(), Vec::new());
    let look = |k| {
        recording.read_into(k, &mut frame)?;
        if let Some(shift) = shift {
            shift.apply(&mut frame, &mut buffer);
        }
        Ok(surveyor.survey(&frame, wanted))
    };
    frames.map(look).collect()
}

/// Each setting by itself takes the frames of a block.
fn merge(trials: &mut [Trial], surveyed: &[Surveyed], bench: &Bench<'_>) {
    let share = trials.len().div_ceil(bench.workers).max(1);
    let now = surveyed
        .last()
        .map_or(Micros::ZERO, |frame| frame.captured_us);
    thread::scope(|scope| {
        for trials in trials.chunks_mut(share) {
            scope.spawn(move || {
                for trial in trials.iter_mut().filter(|trial| trial.given_up.is_none()) {
                    surveyed.iter().for_each(|frame| trial.take(frame));
                    if bench.gives_up {
                        trial.consider(now, bench.labels);
                    }
                }
            });
        }
    });
}

fn finish(trials: Vec<Trial>, bench: &Bench<'_>) -> Vec<Tried> {
    let share = trials.len().div_ceil(bench.workers).max(1);
    let mut lots: Vec<Vec<Trial>> = Vec::new();
    let mut rest = trials.into_iter().peekable();
    while rest.peek().is_some() {
        lots.push(rest.by_ref().take(share).collect());
    }
    thread::scope(|scope| {
        let spawn = |lot: Vec<Trial>| {
            let finish = move || {
                lot.into_iter()
                    .map(|trial| trial.finish(bench.labels))
                    .collect::<Vec<_>>()
            };
            scope.spawn(finish)
        };
        let handles: Vec<_> = lots.into_iter().map(spawn).collect();
        let joined = handles
            .into_iter()
            .flat_map(|handle| handle.join().expect("a worker does not panic"));
        joined.collect()
    })
}
