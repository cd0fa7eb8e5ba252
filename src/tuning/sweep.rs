//! Runs the points of a sweep and ranks what came of them.

use super::journal::{Finished, Journal, JournalError};
use super::layers::{Recipe, Stand};
use super::shift::Shift;
use super::trial::{Bench, Tried, try_all};
use super::vary::Axis;
use crate::recording::RecordingError;

use thiserror::Error;

/// Surveys of a pass at most: finished settings are noted pass by pass.
const PASS_SURVEYS: usize = 32;
/// Memory of a pass for top-hats, and for decided parts.
const HATS_BYTES: usize = 80 << 20;
const PARTS_BYTES: usize = 64 << 20;
/// Settings that are judged on the changed recording as well.
const CANDIDATES: usize = 16;

/// One point of a sweep.
#[derive(Clone, Debug)]
pub struct Point {
    /// Its place on each axis; `None` for the settings as they are.
    pub place: Option<Vec<usize>>,
    /// The value of each key, as typed.
    pub values: Vec<String>,
    /// What can be run, or why not.
    pub stand: Result<Stand, String>,
}

/// Why a sweep ended early.
#[derive(Debug, Error)]
pub enum SweepError {
    /// The recording.
    #[error(transparent)]
    Recording(#[from] RecordingError),
    /// The journal.
    #[error(transparent)]
    Journal(#[from] JournalError),
    /// Somebody stopped it.
    #[error("stopped")]
    Stopped,
}

/// Runs those of `wanted` that the journal does not have yet; `done` is told of every frame and how many settings saw it.
///
/// # Errors
/// What ended it early; what was finished is in the journal.
pub fn run(
    bench: &Bench<'_>,
    points: &[Point],
    wanted: &[usize],
    shift: Option<Shift>,
    journal: &mut Journal,
    mut done: impl FnMut(u64),
) -> Result<(), SweepError> {
    let key = shift.map(Shift::key);
    let stand = |point: usize| points[point].stand.as_ref().ok();
    let todo = wanted
        .iter()
        .copied()
        .filter(|&point| journal.find(point, key.as_deref()).is_none());
    let todo: Vec<(usize, &Stand)> = todo
        .filter_map(|point| Some((point, stand(point)?)))
        .collect();
    for pass in passes(&todo, bench) {
        let stands: Vec<&Stand> = pass.iter().map(|(_, stand)| *stand).collect();
        let settings = stands.len() as u64;
        let tried = try_all(bench, &stands, shift, |frames| {
            done(frames as u64 * settings)
        })?;
        let tried = tried.ok_or(SweepError::Stopped)?;
        let finished = pass.iter().zip(tried).map(|((point, _), tried)| Finished {
            point: *point,
            shift: key.clone(),
            tried,
        });
        journal.add(finished.collect())?;
    }
    Ok(())
}

/// Points that share steps stand together; a pass holds as many as memory and patience allow.
fn passes<'a>(todo: &[(usize, &'a Stand)], bench: &Bench<'_>) -> Vec<Vec<(usize, &'a Stand)>> {
    let recipe = Recipe::of(todo.iter().map(|(_, stand)| *stand));
    let mut order: Vec<usize> = (0..todo.len()).collect();
    order.sort_by_key(|&k| recipe.steps(k));
    let size = bench.recording.size();
    let pixels = size.width_px as usize * size.height_px as usize;
    let most_hats = (HATS_BYTES / (6 * pixels * bench.workers)).max(1);
    let most_settings = (PARTS_BYTES / (80 * bench.labels.len().max(1))).max(1);
    let mut passes: Vec<Vec<(usize, &Stand)>> = Vec::new();
    let (mut hats, mut surveys) = (Vec::new(), Vec::new());
    for k in order {
        let [hat, _, _, survey] = recipe.steps(k);
        if hats.last() != Some(&hat) {
            hats.push(hat);
        }
        if !surveys.contains(&survey) {
            surveys.push(survey);
        }
        let full = |pass: &Vec<(usize, &Stand)>| {
            hats.len() > most_hats || surveys.len() > PASS_SURVEYS || pass.len() == most_settings
        };
        if passes.last().is_none_or(full) {
            (hats, surveys) = (vec![hat], vec![survey]);
            passes.push(Vec::new());
        }
        passes.last_mut().expect("one was begun").push(todo[k]);
    }
    passes
}

/// A point with all that is known of it.
#[derive(Clone, Debug, PartialEq)]
pub struct Standing {
    /// Which point.
    pub point: usize,
    /// On the recording as it is.
    pub tried: Tried,
    /// On the changed ones, where it was judged there.
    pub shifted: Vec<(&'static str, Tried)>,
    /// Along every axis this many steps both ways cost no more.
    pub plateau: usize,
    /// The same added up over the axes.
    pub plateau_sum: usize,
    /// Whether no other setting has both fewer misses and no more false alarms, or the other way round.
    pub on_front: bool,
}

/// How points are weighed against each other.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Costs {
    /// A miss costs as much as this many false alarms.
    pub miss: f64,
}

impl Costs {
    /// What a result costs, in false alarms; infinite if it was given up.
    pub fn of(self, tried: &Tried) -> f64 {
        if !tried.is_whole() {
            return f64::INFINITY;
        }
        self.miss * tried.misses as f64 + tried.false_alarms() as f64
    }
}

impl Standing {
    /// The worst that a changed recording makes of it.
    pub fn worst(&self, costs: Costs) -> f64 {
        let shifted = self.shifted.iter().map(|(_, tried)| costs.of(tried));
        shifted.fold(costs.of(&self.tried), f64::max)
    }

    fn sum(&self, costs: Costs) -> f64 {
        self.shifted.iter().map(|(_, tried)| costs.of(tried)).sum()
    }
}

/// Everything that is known of the points, in their order.
pub fn standings(
    points: &[Point],
    axes: &[Axis],
    journal: &Journal,
    shifts: &[Shift],
    costs: Costs,
) -> Vec<Standing> {
    let tried: Vec<Option<Tried>> = (0..points.len())
        .map(|point| {
            journal
                .find(point, None)
                .copied()
                .filter(|_| points[point].stand.is_ok())
        })
        .collect();
    let whole: Vec<Option<Tried>> = tried
        .iter()
        .map(|tried| tried.filter(Tried::is_whole))
        .collect();
    let plateaus = plateaus(points, axes, &whole, costs);
    let front = front(&whole);
    let standing = |point: usize| {
        let shifted = shifts.iter();
        let shifted = shifted
            .filter_map(|shift| Some((shift.name(), *journal.find(point, Some(&shift.key()))?)));
        Some(Standing {
            point,
            tried: tried[point]?,
            shifted: shifted.collect(),
            plateau: plateaus[point].0,
            plateau_sum: plateaus[point].1,
            on_front: front[point],
        })
    };
    (0..points.len()).filter_map(standing).collect()
}

/// Those that were tried to the end, the best first: least cost, then the one that stays best on the changed recordings, then the widest plateau.
pub fn ranked(standings: &[Standing], costs: Costs) -> Vec<&Standing> {
    let whole = standings
        .iter()
        .filter(|standing| standing.tried.is_whole());
    let mut order: Vec<&Standing> = whole.collect();
    order.sort_by(|a, b| {
        let judged = |s: &Standing| s.shifted.is_empty();
        costs
            .of(&a.tried)
            .total_cmp(&costs.of(&b.tried))
            .then(judged(a).cmp(&judged(b)))
            .then(a.worst(costs).total_cmp(&b.worst(costs)))
            .then(a.sum(costs).total_cmp(&b.sum(costs)))
            .then((b.plateau, b.plateau_sum).cmp(&(a.plateau, a.plateau_sum)))
            .then(b.tried.room_percent.total_cmp(&a.tried.room_percent))
            .then(a.point.cmp(&b.point))
    });
    order
}

/// The points that deserve to be judged on changed recordings.
pub fn candidates(standings: &[Standing], costs: Costs) -> Vec<usize> {
    let best = ranked(standings, costs).into_iter().take(CANDIDATES);
    best.map(|standing| standing.point).collect()
}

/// For each point whether nothing is better in one way and as good in the other (Pareto).
fn front(tried: &[Option<Tried>]) -> Vec<bool> {
    let counts = |tried: &Tried| (tried.misses, tried.false_alarms());
    let mut all: Vec<(usize, usize)> = tried.iter().flatten().map(counts).collect();
    all.sort_unstable();
    let mut front = Vec::new();
    let mut least = usize::MAX;
    for (misses, alarms) in all {
        if alarms < least {
            least = alarms;
            front.push((misses, alarms));
        }
    }
    let on = |tried: &Option<Tried>| {
        tried.is_some_and(|tried| front.binary_search(&counts(&tried)).is_ok())
    };
    tried.iter().map(on).collect()
}

/// For each point the steps that can be made both ways along every axis, least and sum, without costing more.
fn plateaus(
    points: &[Point],
    axes: &[Axis],
    tried: &[Option<Tried>],
    costs: Costs,
) -> Vec<(usize, usize)> {
    let place_of = |k: usize| points[k].place.as_deref();
    let known: std::collections::HashMap<&[usize], f64> = (0..points.len())
        .filter_map(|k| Some((place_of(k)?, costs.of(&tried[k]?))))
        .collect();
    let steps = |place: &[usize], axis: usize, cost: f64, up: bool| {
        let mut at = place.to_vec();
        let mut steps = 0;
        loop {
            match (up, at[axis]) {
                (true, here) => at[axis] = here + 1,
                (false, 0) => return steps,
                (false, here) => at[axis] = here - 1,
            }
            if known.get(at.as_slice()).is_none_or(|&other| other > cost) {
                return steps;
            }
            steps += 1;
        }
    };
    let plateau = |k: usize| {
        let (Some(place), Some(tried)) = (place_of(k), &tried[k]) else {
            return (0, 0);
        };
        let cost = costs.of(tried);
        let wide = (0..axes.len()).filter(|&axis| axes[axis].values.len() > 1);
        let both: Vec<usize> = wide
            .map(|axis| steps(place, axis, cost, true).min(steps(place, axis, cost, false)))
            .collect();
        (both.iter().copied().min().unwrap_or(0), both.iter().sum())
    };
    (0..points.len()).map(plateau).collect()
}

/// From which value to which the chosen point could be moved along each axis without costing more.
pub fn stretches(
    points: &[Point],
    axes: &[Axis],
    standings: &[Standing],
    chosen: &Standing,
    costs: Costs,
) -> Vec<(String, String)> {
    let Some(place) = &points[chosen.point].place else {
        return Vec::new();
    };
    let cost = costs.of(&chosen.tried);
    let as_good = |axis: usize, value: usize| {
        let mut at = place.clone();
        at[axis] = value;
        let same = |s: &&Standing| points[s.point].place.as_ref() == Some(&at);
        standings
            .iter()
            .find(same)
            .is_some_and(|s| s.tried.is_whole() && costs.of(&s.tried) <= cost)
    };
    let stretch = |axis: usize| {
        let here = place[axis];
        let low = (0..here)
            .rev()
            .take_while(|&value| as_good(axis, value))
            .last()
            .unwrap_or(here);
        let count = axes[axis].values.len();
        let high = (here + 1..count)
            .take_while(|&value| as_good(axis, value))
            .last()
            .unwrap_or(here);
        (
            axes[axis].values[low].clone(),
            axes[axis].values[high].clone(),
        )
    };
    (0..axes.len()).map(stretch).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    const COSTS: Costs = Costs { miss: 10.0 };

    fn tried(misses: usize, false_rejects: usize) -> Tried {
        Tried {
            bad: 50,
            good: 100,
            misses,
            false_rejects,
            not_found: 0,
            stray: 0,
            room_percent: 1.0,
            given_up_after: None,
        }
    }

    fn grid(width: usize, results: &[(usize, usize)]) -> (Vec<Point>, Vec<Axis>, Journal) {
        let point = |k: usize| Point {
            place: Some(vec![k / width, k % width]),
            values: vec![],
            stand: Ok(Stand {
                settings: crate::settings::parse(
                    std::path::Path::new("x.toml"),
                    include_str!("../../config/oat-stars.toml"),
                )
                .unwrap()
                .settings,
                taught: vec![],
            }),
        };
        let axis = |key: &str, count: usize| Axis {
            key: key.to_owned(),
            values: (0..count).map(|k| k.to_string()).collect(),
        };
        let mut journal = Journal::default();
        let runs = results
            .iter()
            .enumerate()
            .map(|(point, &(misses, alarms))| Finished {
                point,
                shift: None,
                tried: tried(misses, alarms),
            });
        journal.add(runs.collect()).unwrap();
        let axes = vec![axis("a", results.len() / width), axis("b", width)];
        ((0..results.len()).map(point).collect(), axes, journal)
    }

    #[test]
    fn the_middle_of_the_plateau_is_chosen() {
        let x = (1, 0);
        let o = (0, 0);
        let rows = [
            [x, x, x, x, x],
            [x, o, o, o, x],
            [x, o, o, o, x],
            [x, o, o, o, x],
            [x, x, x, x, o],
        ];
        let (points, axes, journal) = grid(5, &rows.concat());
        let all = standings(&points, &axes, &journal, &[], COSTS);
        let best = ranked(&all, COSTS)[0];
        assert_eq!(points[best.point].place, Some(vec![2, 2]));
        assert_eq!((best.plateau, best.plateau_sum), (1, 2));
        let text = |low: &str, high: &str| (low.to_owned(), high.to_owned());
        assert_eq!(
            stretches(&points, &axes, &all, best, COSTS),
            [text("1", "3"), text("1", "3")]
        );
    }

    #[test]
    fn the_front_holds_what_nothing_beats() {
        let (points, axes, journal) = grid(3, &[(0, 9), (1, 4), (2, 4), (3, 0), (0, 12), (1, 4)]);
        let all = standings(&points, &axes, &journal, &[], COSTS);
        let on: Vec<_> = all.iter().filter(|s| s.on_front).map(|s| s.point).collect();
        assert_eq!(on, [0, 1, 3, 5]);
    }

    #[test]
    fn of_equal_ones_the_one_that_stays_best_is_chosen() {
        let (points, axes, mut journal) = grid(2, &[(0, 1), (0, 1)]);
        let shifts = Shift::all(3.0);
        for (point, misses) in [(0, 2), (1, 1)] {
            let run = |shift: &Shift| Finished {
                point,
                shift: Some(shift.key()),
                tried: tried(misses, 0),
            };
            journal.add(shifts.iter().map(run).collect()).unwrap();
        }
        let all = standings(&points, &axes, &journal, &shifts, COSTS);
        assert_eq!(ranked(&all, COSTS)[0].point, 1);
        assert_eq!(ranked(&all, COSTS)[0].worst(COSTS), 10.0);
    }
}
