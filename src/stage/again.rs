//! The steps after the top-hat, once more: for settings that are tried by the hundred on a top-hat that was made once.

use super::histogram::Histogram;
use super::kernels::Level;
use super::pipeline::Stage;
use super::plan::{Plan, Threshold};
use super::scene::Scene;
use super::threshold::otsu_level;

/// Otsu's levels of finished top-hats, whatever the floor.
pub struct OtsuLevels(Histogram);

impl Default for OtsuLevels {
    fn default() -> Self {
        Self(Histogram::new())
    }
}

impl OtsuLevels {
    /// The level of `hat`.
    pub fn of(&mut self, hat: &[u8]) -> u8 {
        self.0.add(hat);
        otsu_level(&self.0.take())
    }
}

impl Threshold {
    /// The same threshold for a picture whose level after Otsu is known.
    #[must_use]
    pub fn at(self, otsu: u8) -> Self {
        match self {
            Self::Otsu { floor } => Self::Fixed {
                level: otsu.max(floor),
            },
            other => other,
        }
    }
}

/// Threshold, fill and regions for pictures of one size, with their buffers.
pub struct Again {
    stage: Stage,
}

impl Again {
    /// Makes the buffers for pictures of the size of `plan`; everything else in it comes anew with every call.
    ///
    /// # Panics
    /// As [`Stage::new`] does.
    pub fn new(plan: &Plan, level: Level) -> Self {
        let plan = Plan {
            threshold: Threshold::Hysteresis { low: 0, high: 0 },
            speck_below_px: 1,
            ..plan.clone()
        };
        Self {
            stage: Stage::new(&plan, level),
        }
    }

    /// What a stage makes of a picture whose top-hat is `hat`; `threshold` as [`Threshold::at`] gives it.
    pub fn run(
        &mut self,
        hat: &[u8],
        threshold: Threshold,
        fill_below_px: u64,
        speck_below_px: u64,
    ) -> &Scene {
        let Stage {
            plan,
            level: kernels,
            bits,
            sure,
            hysteresis,
            raw,
            filled,
            fill,
            regions,
            scene,
            ..
        } = &mut self.stage;
        let rows = hat.chunks_exact(plan.width_px.max(1));
        raw.clear();
        match threshold {
            Threshold::Fixed { level } | Threshold::Otsu { floor: level } => {
                for row in rows {
                    kernels.mark(row, level, bits);
                    raw.push_row(bits);
                }
                scene.level = level;
            }
            Threshold::Hysteresis { low, high } => {
                hysteresis.restart();
                for row in rows {
                    kernels.mark(row, low, bits);
                    kernels.mark(row, high, sure);
                    hysteresis.push_row(bits, sure);
                }
                hysteresis.keep_sure(raw);
                scene.level = low;
            }
        }
        fill.set_limit(fill_below_px);
        fill.run(raw, filled);
        regions.set_speck(speck_below_px);
        regions.run(filled, scene);
        scene
    }
}
