//! The picture work for many settings at once, each step done once for all settings that share it.
//!
//! ```text
//! frame ──> top-hat ──────────> regions ─────────────────> figures ─────────────> verdicts
//!           window, polarity,   threshold, fill, specks    shapes, flaw size,     limits, fit
//!           element                                        scale, travel          (per setting)
//! ```
//!
//! A step that comes out the same in a frame (Otsu's level above two floors) is done once there as well.

use std::sync::Arc;

use crate::frames::Frame;
use crate::inspect::{Sight, judge};
use crate::settings::{Geometry, Settings};
use crate::shape::{Asked, Judge, Limits, Silhouette};
use crate::stage::{Again, Level, OtsuLevels, Plan, TopHat};
use crate::units::{Micros, Window};

/// Settings that can be run, with their taught shapes. Equal shapes are the same `Arc`.
#[derive(Clone, Debug)]
pub struct Stand {
    /// The settings.
    pub settings: Settings,
    /// A silhouette for each of their shapes.
    pub taught: Vec<Arc<Silhouette>>,
}

/// What decides a top-hat. The rest of the plan is not looked at.
#[derive(Clone, Debug)]
struct Hat {
    window: Window,
    plan: Plan,
}

impl Hat {
    fn same(&self, other: &Self) -> bool {
        self.window == other.window
            && self.plan.polarity == other.plan.polarity
            && self.plan.element == other.plan.element
    }
}

/// What decides the regions of a top-hat.
#[derive(Clone, Debug)]
struct Split {
    hat: usize,
    plan: Plan,
}

impl Split {
    fn same(&self, other: &Self) -> bool {
        self.hat == other.hat && self.plan == other.plan
    }
}

/// What decides the figures of a region.
#[derive(Clone)]
struct Gauge {
    taught: Vec<Arc<Silhouette>>,
    flaw_below_px: f64,
    branch_above_px: Vec<f64>,
    asked: Vec<Asked>,
    judge: Judge,
}

impl Gauge {
    fn same(&self, stand: &Stand, limits: &[Limits]) -> bool {
        let shapes = self.taught.iter().zip(&stand.taught);
        self.taught.len() == stand.taught.len()
            && shapes.into_iter().all(|(a, b)| Arc::ptr_eq(a, b))
            && self.flaw_below_px == stand.settings.flaw_below_px()
            && limits
                .iter()
                .map(|limits| limits.branch_above_px)
                .eq(self.branch_above_px.iter().copied())
    }
}

/// Figures of all regions: what one or more settings make their verdicts of.
#[derive(Clone, Debug, PartialEq)]
struct Survey {
    split: usize,
    gauge: usize,
    geometry: Geometry,
}

/// What has to be done to a frame.
#[derive(Clone, Default)]
pub struct Recipe {
    hats: Vec<Hat>,
    splits: Vec<Split>,
    gauges: Vec<Gauge>,
    surveys: Vec<Survey>,
    /// For each setting its survey.
    of_setting: Vec<usize>,
}

/// The steps of one setting, as places in a recipe; settings that stand next to each other in this order share most.
pub type Steps = [usize; 4];

impl Recipe {
    /// The steps that these settings need, each once.
    pub fn of<'a>(stands: impl IntoIterator<Item = &'a Stand>) -> Self {
        let mut recipe = Self::default();
        stands.into_iter().for_each(|stand| recipe.add(stand));
        recipe
    }

    fn add(&mut self, stand: &Stand) {
        let settings = &stand.settings;
        let plan = Plan::of(settings);
        let hat = Hat {
            window: settings.region_px(),
            plan: plan.clone(),
        };
        let hat = place(&mut self.hats, hat, Hat::same);
        let split = place(&mut self.splits, Split { hat, plan }, Split::same);
        let gauge = self.gauge(stand);
        let survey = Survey {
            split,
            gauge,
            geometry: settings.geometry(),
        };
        let survey = place(&mut self.surveys, survey, Survey::eq);
        self.of_setting.push(survey);
    }

    fn gauge(&mut self, stand: &Stand) -> usize {
        let settings = &stand.settings;
        let limits = settings
            .shapes
            .iter()
            .map(|shape| crate::inspect::limits(settings, shape));
        let limits: Vec<Limits> = limits.collect();
        let asked = limits.iter().map(Asked::by);
        let known = self
            .gauges
            .iter()
            .position(|gauge| gauge.same(stand, &limits));
        if let Some(known) = known {
            let gauge = &mut self.gauges[known];
            for (all, more) in gauge.asked.iter_mut().zip(asked) {
                *all = all.or(more);
            }
            return known;
        }
        let taught: Vec<Silhouette> = stand
            .taught
            .iter()
            .map(|taught| (**taught).clone())
            .collect();
        self.gauges.push(Gauge {
            taught: stand.taught.clone(),
            flaw_below_px: settings.flaw_below_px(),
            branch_above_px: limits.iter().map(|limits| limits.branch_above_px).collect(),
            asked: asked.collect(),
            judge: judge(settings, &taught),
        });
        self.gauges.len() - 1
    }

    /// The steps of setting `k`: top-hat, regions, shapes, figures.
    pub fn steps(&self, k: usize) -> Steps {
        let survey = &self.surveys[self.of_setting[k]];
        let hat = self.splits[survey.split].hat;
        [hat, survey.split, survey.gauge, self.of_setting[k]]
    }

    /// Which of a frame's surveys setting `k` is judged by.
    pub fn survey_of(&self, k: usize) -> usize {
        self.of_setting[k]
    }

    /// How many surveys a frame has.
    pub fn surveys(&self) -> usize {
        self.surveys.len()
    }
}

fn place<T>(list: &mut Vec<T>, item: T, same: impl Fn(&T, &T) -> bool) -> usize {
    let known = list.iter().position(|other| same(other, &item));
    known.unwrap_or_else(|| {
        list.push(item);
        list.len() - 1
    })
}

/// One frame as all settings of a recipe see it.
#[derive(Clone, Debug, Default)]
pub struct Surveyed {
    /// When it was captured.
    pub captured_us: Micros,
    /// The belt reading that came with it.
    pub belt_mm: Option<f64>,
    /// Regions with their figures, and the number of specks, for each survey.
    pub surveys: Vec<(Vec<Sight>, u32)>,
}

/// Does what a recipe asks for, with its own buffers.
pub struct Surveyor {
    recipe: Arc<Recipe>,
    hats: Vec<TopHat>,
    /// One for each size of window.
    again: Vec<Again>,
    again_of_hat: Vec<usize>,
    hat: Vec<u8>,
    otsu: OtsuLevels,
    judges: Vec<Judge>,
}

impl Surveyor {
    /// Makes every buffer.
    pub fn new(recipe: Arc<Recipe>, level: Level) -> Self {
        let mut sizes: Vec<(usize, usize)> = Vec::new();
        let mut again = Vec::new();
        let mut again_of_hat = Vec::new();
        for Hat { plan, .. } in &recipe.hats {
            let size = (plan.width_px, plan.height_px);
            let k = place(&mut sizes, size, |a, b| a == b);
            if k == again.len() {
                again.push(Again::new(plan, level));
            }
            again_of_hat.push(k);
        }
        Self {
            hats: recipe
                .hats
                .iter()
                .map(|hat| TopHat::new(&hat.plan, level))
                .collect(),
            again,
            again_of_hat,
            hat: Vec::new(),
            otsu: OtsuLevels::default(),
            judges: recipe
                .gauges
                .iter()
                .map(|gauge| gauge.judge.clone())
                .collect(),
            recipe,
        }
    }

    /// Looks at a frame of the size that the settings state, for those surveys that are wanted.
    pub fn survey(&mut self, frame: &Frame, wanted: &[bool]) -> Surveyed {
        let recipe = self.recipe.clone();
        let mut surveyed = Surveyed {
            captured_us: frame.captured_us,
            belt_mm: frame.belt_mm,
            surveys: vec![(Vec::new(), 0); recipe.surveys.len()],
        };
        for (k, Hat { window, plan }) in recipe.hats.iter().enumerate() {
            let of_hat = |survey: &Survey| recipe.splits[survey.split].hat == k;
            if !recipe
                .surveys
                .iter()
                .zip(wanted)
                .any(|(survey, &wanted)| wanted && of_hat(survey))
            {
                continue;
            }
            self.hat.resize(plan.width_px * plan.height_px, 0);
            self.hats[k].picture(frame.gray().window(*window), &mut self.hat);
            let otsu = self.otsu.of(&self.hat);
            self.split_all(&recipe, (k, otsu), wanted, &mut surveyed.surveys);
        }
        surveyed
    }

    /// All regions of one top-hat with their figures. Surveys whose splits come out the same stand together.
    fn split_all(
        &mut self,
        recipe: &Recipe,
        (hat, otsu): (usize, u8),
        wanted: &[bool],
        out: &mut [(Vec<Sight>, u32)],
    ) {
        let mut together: Vec<(Plan, Vec<usize>)> = Vec::new();
        for (s, survey) in recipe.surveys.iter().enumerate() {
            let split = &recipe.splits[survey.split];
            if split.hat != hat || !wanted[s] {
                continue;
            }
            let plan = Plan {
                threshold: split.plan.threshold.at(otsu),
                ..split.plan.clone()
            };
            match together.iter_mut().find(|(known, _)| *known == plan) {
                Some((_, surveys)) => surveys.push(s),
                None => together.push((plan, vec![s])),
            }
        }
        for (plan, surveys) in together {
            let again = &mut self.again[self.again_of_hat[hat]];
            let (fill, speck) = (plan.fill_below_px, plan.speck_below_px);
            let scene = again.run(&self.hat, plan.threshold, fill, speck);
            for (k, &s) in surveys.iter().enumerate() {
                let of = &recipe.surveys[s];
                let same = |&&t: &&usize| {
                    let other = &recipe.surveys[t];
                    other.gauge == of.gauge && other.geometry == of.geometry
                };
                if let Some(&known) = surveys[..k].iter().find(same) {
                    out[s] = out[known].clone();
                    continue;
                }
                let (judge, asked) = (&mut self.judges[of.gauge], &recipe.gauges[of.gauge].asked);
                let sights = scene.regions.iter().map(|region| {
                    let runs = &scene.runs[region.runs.clone()];
                    Sight::of(&of.geometry, region, || {
                        judge.gauge_all(asked, region, runs)
                    })
                });
                out[s] = (sights.collect(), scene.specks);
            }
        }
    }
}
