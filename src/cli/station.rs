//! What most commands begin with: settings and the shapes they name, checked together.

use std::collections::HashMap;
use std::path::{Path, PathBuf};
use std::sync::Arc;

use anyhow::Context;

use crate::inspect::{Inspector, limits};
use crate::recording::{Recording, RecordingError, SizePx};
use crate::replay::Artist;
use crate::settings::{
    self, ElementKind, Loaded, PartSize, Problem, Problems, Settings, SettingsError,
};
use crate::shape::{Figures, Finding, Measurer, Model, Silhouette, Taught, findings};
use crate::stage::Level;

/// A station as its settings describe it.
pub(super) struct Station {
    pub(super) loaded: Loaded,
    pub(super) taught: Vec<Silhouette>,
    pub(super) level: Level,
}

impl Station {
    /// Reads settings and shapes, and reports everything that is wrong with either.
    pub(super) fn open(file: &Path) -> anyhow::Result<Self> {
        let loaded = settings::load(file)?;
        let taught = taught(&loaded)?;
        let level = Level::choose()?;
        Ok(Self {
            loaded,
            taught,
            level,
        })
    }

    pub(super) fn settings(&self) -> &Settings {
        &self.loaded.settings
    }

    /// Looks at pictures of this size from now on; all of them, if it is not the camera's.
    pub(super) fn look_at(&mut self, width_px: u32, height_px: u32) {
        let settings = &mut self.loaded.settings;
        if (settings.camera.width_px, settings.camera.height_px) != (width_px, height_px) {
            settings.camera.width_px = width_px;
            settings.camera.height_px = height_px;
            settings.picture.region_mm = None;
        }
    }

    /// The kernels in use.
    pub(super) fn level(&self) -> Level {
        self.level
    }

    pub(super) fn inspector(&self) -> Inspector {
        Inspector::new(self.settings(), &self.taught, self.level)
    }

    pub(super) fn artist(&self) -> Artist<'_> {
        Artist::new(self.settings(), &self.taught, self.level)
    }

    /// A recording whose frames have the size that the settings state.
    pub(super) fn recording(&self, folder: &Path) -> Result<Recording, RecordingError> {
        Recording::open(folder, Some(frame_size(self.settings())))
    }
}

/// The size that frames must have.
pub(super) fn frame_size(settings: &Settings) -> SizePx {
    SizePx {
        width_px: settings.camera.width_px,
        height_px: settings.camera.height_px,
    }
}

/// The shapes that the settings name, at the picture's scale.
pub(super) fn taught(loaded: &Loaded) -> Result<Vec<Silhouette>, SettingsError> {
    let taught = Shelf::default().taught(loaded)?;
    Ok(taught.iter().map(|shape| (**shape).clone()).collect())
}

/// Taught shapes that were read, each at the scales that were asked for. Equal ones are the same `Arc`.
#[derive(Default)]
pub(super) struct Shelf {
    known: HashMap<(PathBuf, u64), Shelved>,
}

/// A shape with what the settings are checked against.
#[derive(Clone)]
struct Shelved {
    silhouette: Arc<Silhouette>,
    model: Arc<Model>,
    sizes: Sizes,
}

/// The widest inside by a square, and by a disc.
#[derive(Clone, Copy)]
struct Sizes {
    size: PartSize,
    widest_disc_mm: f64,
}

impl Shelf {
    /// The shapes that the settings name, at the picture's scale.
    pub(super) fn taught(
        &mut self,
        loaded: &Loaded,
    ) -> Result<Vec<Arc<Silhouette>>, SettingsError> {
        let mut silhouettes = Vec::new();
        let mut problems = Vec::new();
        for shape in 0..loaded.settings.shapes.len() {
            match self.one_shape(loaded, shape) {
                Ok((silhouette, found)) => {
                    silhouettes.push(silhouette);
                    problems.extend(found);
                }
                Err(problem) => problems.push(problem),
            }
        }
        if !problems.is_empty() {
            return Err(SettingsError::Bad(Problems::sorted(problems)));
        }
        Ok(silhouettes)
    }

    /// One shape with everything that the settings get wrong about its size.
    fn one_shape(
        &mut self,
        loaded: &Loaded,
        shape: usize,
    ) -> Result<(Arc<Silhouette>, Vec<Problem>), Problem> {
        let settings = &loaded.settings;
        let read = self.read(loaded.shape_path(shape), settings.camera.mm_per_px);
        let Shelved {
            silhouette,
            model,
            sizes,
        } = read.map_err(|error| {
            let expected = "expected a taught shape, made by `beltwright teach`";
            loaded.problem(
                &format!("shape[{shape}].file"),
                format!("{expected}; {error:#}"),
            )
        })?;
        let mut size = sizes.size;
        if settings.picture.element == ElementKind::Octagon {
            size.inside_mm = sizes.widest_disc_mm;
        }
        let mut problems = loaded.part_problems(shape, &size);
        let limits = limits(settings, &settings.shapes[shape]);
        let found = findings(&model, &limits, silhouette.mm_per_px);
        let problem = |finding: Finding| {
            loaded.problem(&format!("shape[{shape}].{}", finding.key), finding.problem)
        };
        problems.extend(found.into_iter().map(problem));
        Ok((silhouette, problems))
    }

    fn read(&mut self, file: PathBuf, mm_per_px: f64) -> anyhow::Result<Shelved> {
        let key = (file, mm_per_px.to_bits());
        if let Some(known) = self.known.get(&key) {
            return Ok(known.clone());
        }
        let silhouette = Taught::read(&key.0)?.silhouette.resampled(mm_per_px)?;
        let read = Shelved {
            sizes: size_of(&silhouette)?,
            model: Arc::new(Model::new(silhouette.clone())),
            silhouette: Arc::new(silhouette),
        };
        self.known.insert(key, read.clone());
        Ok(read)
    }
}

fn size_of(silhouette: &Silhouette) -> anyhow::Result<Sizes> {
    let figures = Figures::of(silhouette);
    let (region, runs) = silhouette
        .majority()
        .to_region()
        .context("the shape is empty")?;
    let (longest_px, narrowest_px) = Measurer::default().feret(&region, &runs);
    Ok(Sizes {
        size: PartSize {
            longest_mm: longest_px * silhouette.mm_per_px,
            narrowest_mm: narrowest_px * silhouette.mm_per_px,
            inside_mm: figures.widest_mm,
            area_mm2: figures.area_mm2,
            smallest_hole_mm2: figures.bores_mm2.iter().copied().min_by(f64::total_cmp),
        },
        widest_disc_mm: figures.widest_disc_mm,
    })
}
