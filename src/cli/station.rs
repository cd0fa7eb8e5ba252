//! What most commands begin with: settings and the shapes they name, checked together.

use std::path::Path;

use anyhow::Context;

use crate::inspect::Inspector;
use crate::recording::{Recording, RecordingError, SizePx};
use crate::replay::Artist;
use crate::settings::{
    self, ElementKind, Loaded, PartSize, Problem, Problems, Settings, SettingsError,
};
use crate::shape::{Figures, Measurer, Silhouette, Taught};
use crate::stage::Level;

/// A station as its settings describe it.
pub(super) struct Station {
    pub(super) loaded: Loaded,
    pub(super) taught: Vec<Silhouette>,
    level: Level,
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
    let mut silhouettes = Vec::new();
    let mut problems = Vec::new();
    for shape in 0..loaded.settings.shapes.len() {
        match one_shape(loaded, shape) {
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
fn one_shape(loaded: &Loaded, shape: usize) -> Result<(Silhouette, Vec<Problem>), Problem> {
    let wrong = |error: anyhow::Error| {
        let expected = "expected a taught shape, made by `beltwright teach`";
        loaded.problem(
            &format!("shape[{shape}].file"),
            format!("{expected}; {error:#}"),
        )
    };
    let read = || {
        let stored = Taught::read(&loaded.shape_path(shape))?.silhouette;
        let silhouette = stored.resampled(loaded.settings.camera.mm_per_px)?;
        let size = size_of(&silhouette, loaded.settings.picture.element)?;
        anyhow::Ok((silhouette, size))
    };
    let (silhouette, size) = read().map_err(wrong)?;
    Ok((silhouette, loaded.part_problems(shape, &size)))
}

fn size_of(silhouette: &Silhouette, element: ElementKind) -> anyhow::Result<PartSize> {
    let figures = Figures::of(silhouette);
    let (region, runs) = silhouette
        .majority()
        .to_region()
        .context("the shape is empty")?;
    let (longest_px, narrowest_px) = Measurer::default().feret(&region, &runs);
    Ok(PartSize {
        longest_mm: longest_px * silhouette.mm_per_px,
        narrowest_mm: narrowest_px * silhouette.mm_per_px,
        inside_mm: match element {
            ElementKind::Square => figures.widest_mm,
            ElementKind::Octagon => figures.widest_disc_mm,
        },
        area_mm2: figures.area_mm2,
        smallest_hole_mm2: figures.bores_mm2.iter().copied().min_by(f64::total_cmp),
    })
}
