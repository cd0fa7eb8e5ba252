//! What most commands begin with: settings and the shapes they name, checked together.

use std::path::Path;

use crate::inspect::Inspector;
use crate::recording::{Recording, RecordingError, SizePx};
use crate::replay::Artist;
use crate::settings::{self, Loaded, Settings};
use crate::shape::Silhouette;
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
        let taught = crate::shape::taught(&loaded)?;
        Ok(Self {
            loaded,
            taught,
            level: Level::choose()?,
        })
    }

    pub(super) fn settings(&self) -> &Settings {
        &self.loaded.settings
    }

    pub(super) fn inspector(&self) -> Inspector {
        Inspector::new(self.settings(), &self.taught, self.level)
    }

    pub(super) fn artist(&self) -> Artist<'_> {
        Artist::new(self.settings(), &self.taught, self.level)
    }

    /// A recording whose frames have the size that the settings state.
    pub(super) fn recording(&self, folder: &Path) -> Result<Recording, RecordingError> {
        let camera = &self.settings().camera;
        let size = SizePx {
            width_px: camera.width_px,
            height_px: camera.height_px,
        };
        Recording::open(folder, Some(size))
    }
}
