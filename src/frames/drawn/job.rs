//! What is to be drawn, checked once against the settings.

use std::str::FromStr;
use std::sync::Arc;

use crate::settings::{FaceDown, Policy, Settings, Tone, Travel};
use crate::units::Micros;

use super::body::LONGEST_BURR_MM;
use super::nominal::{self, Nominal};

/// What lies on the belt.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Scene {
    /// Bright five-pointed star biscuits on a dark belt, 38 mm from tip to tip.
    OatStars,
    /// Dark rubber gaskets on a pale belt: a ring of 35 mm with an off-centre bore and a tab, not its own mirror image.
    Gaskets,
}

impl Scene {
    /// All scenes.
    pub const ALL: [Self; 2] = [Self::OatStars, Self::Gaskets];

    /// The word for it on the command line.
    pub fn name(self) -> &'static str {
        match self {
            Self::OatStars => "oat-stars",
            Self::Gaskets => "gaskets",
        }
    }

    fn tone(self) -> Tone {
        match self {
            Self::OatStars => Tone::Bright,
            Self::Gaskets => Tone::Dark,
        }
    }

    pub(super) fn nominal(self) -> Nominal {
        match self {
            Self::OatStars => nominal::star(),
            Self::Gaskets => nominal::gasket(),
        }
    }
}

fn word(tone: Tone) -> &'static str {
    match tone {
        Tone::Bright => "bright",
        Tone::Dark => "dark",
    }
}

impl FromStr for Scene {
    type Err = DrawnError;

    fn from_str(name: &str) -> Result<Self, DrawnError> {
        Self::ALL
            .into_iter()
            .find(|scene| scene.name() == name)
            .ok_or_else(|| DrawnError::Scene(name.to_owned()))
    }
}

/// What is to be drawn.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Drawing {
    /// What lies on the belt.
    pub scene: Scene,
    /// How many parts.
    pub parts: u64,
    /// The same seed and settings give the same frames.
    pub seed: u64,
    /// When the first frame is captured.
    pub first_us: Micros,
}

/// Why a scene cannot be drawn with these settings.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum DrawnError {
    /// No such scene.
    #[error("there is no scene \"{0}\"; there are oat-stars and gaskets")]
    Scene(String),
    /// Bright parts for a setting of dark ones, or the other way round.
    #[error("picture.parts is not {}, but {} are; draw with the settings of that scene", word(scene.tone()), scene.name())]
    Tone {
        /// The scene.
        scene: Scene,
    },
    /// Not even one row of parts fits under the camera.
    #[error("the camera sees {came_mm:.1} mm {what} the belt, and {} need at least {needed_mm:.1} mm", scene.name())]
    TooNarrow {
        /// The scene.
        scene: Scene,
        /// Which way.
        what: &'static str,
        /// What it sees.
        came_mm: f64,
        /// What a row takes.
        needed_mm: f64,
    },
    /// A limit that no flaw of this shape can exceed.
    #[error("shape.{key} is {came_mm} mm, and {} can only be drawn with limits of at most {most_mm:.1} mm", scene.name())]
    Limit {
        /// The scene.
        scene: Scene,
        /// The limit's key.
        key: &'static str,
        /// What the settings say.
        came_mm: f64,
        /// The largest limit that can be drawn on both sides of.
        most_mm: f64,
    },
    /// A setting without which there is nothing to draw.
    #[error("the settings have no {0}; check them first")]
    Missing(&'static str),
    /// Nothing asked for.
    #[error("0 parts were asked for; at least 1 is needed")]
    NoParts,
}

/// How far a clear flaw is over its limit at least, and a small one within it.
pub(super) const CLEAR_MM: f64 = 0.6;
/// Free belt around every part that is not meant to touch anything.
pub(super) const APART_MM: f64 = 2.5;

/// The drawing with everything it needs from the settings.
#[derive(Clone, Debug)]
pub(super) struct Job {
    pub drawing: Drawing,
    pub nominal: Arc<Nominal>,
    pub missing_mm: f64,
    pub excess_mm: f64,
    pub reject_flipped: bool,
    pub reject_partial: bool,
    pub travel: Travel,
    pub pitch_mm: f64,
    /// How far is looked along and across the belt.
    pub view_mm: [f64; 2],
    /// The rows in which parts travel.
    pub lanes: Vec<Lane>,
    pub speck_mm2: f64,
    pub flaw_mm2: f64,
    pub glare_mm2: f64,
}

/// A row of parts, from the picture's top edge.
#[derive(Clone, Copy, Debug)]
pub(super) struct Lane {
    pub top_mm: f64,
    pub bottom_mm: f64,
}

impl Job {
    /// Everything needed from `settings`; limits are those of its first shape.
    pub(super) fn new(drawing: &Drawing, settings: &Settings) -> Result<Self, DrawnError> {
        let shape = settings
            .shapes
            .first()
            .ok_or(DrawnError::Missing("shape"))?;
        let scene = drawing.scene;
        let nominal = Arc::new(scene.nominal());
        if drawing.parts == 0 {
            return Err(DrawnError::NoParts);
        }
        if settings.picture.parts != scene.tone() {
            return Err(DrawnError::Tone { scene });
        }
        let job = Self {
            drawing: *drawing,
            missing_mm: shape.missing_mm,
            excess_mm: shape.excess_mm,
            reject_flipped: shape.face_down == FaceDown::Reject,
            reject_partial: settings.judge.partial != Policy::Keep,
            travel: settings.belt.travel,
            pitch_mm: settings.belt.part_pitch_mm,
            view_mm: [settings.camera.width_px, settings.camera.height_px]
                .map(|px| f64::from(px) * settings.camera.mm_per_px),
            lanes: lanes(settings, &nominal, shape.excess_mm),
            speck_mm2: settings.picture.speck_below_mm2,
            flaw_mm2: settings.judge.flaw_below_mm2,
            glare_mm2: settings.picture.fill_below_mm2,
            nominal,
        };
        job.check_view()?;
        job.check_limits()?;
        Ok(job)
    }

    /// At least one row of parts must fit into the view.
    fn check_view(&self) -> Result<(), DrawnError> {
        let needed_mm = lane_mm(&self.nominal, self.excess_mm);
        let [along_mm, across_mm] = self.view_mm;
        let narrow = |what, came_mm| DrawnError::TooNarrow {
            scene: self.drawing.scene,
            what,
            came_mm,
            needed_mm,
        };
        if along_mm < needed_mm {
            return Err(narrow("along", along_mm));
        }
        if self.lanes.is_empty() {
            return Err(narrow("across", across_mm));
        }
        Ok(())
    }

    /// There must be flaws on both sides of each limit.
    fn check_limits(&self) -> Result<(), DrawnError> {
        let deepest_mm = self.nominal.deepest_mm / 2.0 - CLEAR_MM;
        let longest_mm = LONGEST_BURR_MM / 2.0 - CLEAR_MM;
        let limits = [
            ("missing_mm", self.missing_mm, deepest_mm),
            ("excess_mm", self.excess_mm, longest_mm),
        ];
        for (key, came_mm, most_mm) in limits {
            if came_mm > most_mm {
                return Err(DrawnError::Limit {
                    scene: self.drawing.scene,
                    key,
                    came_mm,
                    most_mm,
                });
            }
        }
        Ok(())
    }
}

/// The farthest a burr over `limit_mm` is drawn.
pub(super) fn farthest_mm(limit_mm: f64) -> f64 {
    (limit_mm * 3.0).clamp(limit_mm + CLEAR_MM, limit_mm + 4.0)
}

fn lane_mm(nominal: &Nominal, excess_mm: f64) -> f64 {
    2.0 * (nominal.radius_mm + APART_MM) + farthest_mm(excess_mm)
}

/// One or two rows of equal height within the part of the picture that is looked at.
fn lanes(settings: &Settings, nominal: &Nominal, excess_mm: f64) -> Vec<Lane> {
    let all_mm = f64::from(settings.camera.height_px) * settings.camera.mm_per_px;
    let (top_mm, height_mm) = match settings.picture.region_mm {
        Some(region) => (region.top, region.height),
        None => (0.0, all_mm),
    };
    let count = (height_mm / lane_mm(nominal, excess_mm)).floor().min(2.0);
    let each_mm = height_mm / count;
    (0..count as u32)
        .map(|lane| Lane {
            top_mm: top_mm + each_mm * f64::from(lane),
            bottom_mm: top_mm + each_mm * f64::from(lane + 1),
        })
        .collect()
}
