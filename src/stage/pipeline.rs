//! All steps of the stage, one after the other.

use super::fill::Fill;
use super::histogram::Histogram;
use super::kernels::Level;
use super::plan::{Plan, Threshold};
use super::regions::Regions;
use super::runs::RunRows;
use super::scene::Scene;
use super::threshold::{self, Hysteresis};
use super::tophat::TopHat;
use crate::frames::Gray;
use crate::laps::{Step, Watch};

/// The stage with its buffers. They have room for the worst picture of the planned size: [`Stage::run`] allocates nothing.
pub struct Stage {
    pub(super) plan: Plan,
    pub(super) level: Level,
    pub(super) top_hat: TopHat,
    /// The top-hat's values, where the threshold needs all of them before it can decide (Otsu).
    values: Vec<u8>,
    histogram: Histogram,
    /// One row of foreground.
    pub(super) bits: Vec<u64>,
    /// One row of certain foreground (hysteresis).
    pub(super) sure: Vec<u64>,
    pub(super) hysteresis: Hysteresis,
    pub(super) raw: RunRows,
    pub(super) filled: RunRows,
    pub(super) fill: Fill,
    pub(super) regions: Regions,
    pub(super) scene: Scene,
}

impl Stage {
    /// Makes every buffer for `plan`.
    ///
    /// # Panics
    /// If the picture has 2^31 pixels or more.
    pub fn new(plan: &Plan, level: Level) -> Self {
        let (width, height) = (plan.width_px, plan.height_px);
        let pixels = width.saturating_mul(height);
        assert!(
            pixels < 1 << 31,
            "a picture of {width} x {height} px is too large"
        );
        let otsu = matches!(plan.threshold, Threshold::Otsu { .. });
        let regions = Regions::new(plan.speck_below_px, width, height);
        Self {
            plan: plan.clone(),
            level,
            top_hat: TopHat::new(plan, level),
            values: vec![0; if otsu { pixels } else { 0 }],
            histogram: Histogram::new(),
            bits: vec![0; width.div_ceil(64)],
            sure: vec![0; width.div_ceil(64)],
            hysteresis: Hysteresis::new(plan),
            raw: RunRows::new(width, height),
            filled: RunRows::new(width, height),
            fill: Fill::new(plan.fill_below_px, width, height),
            scene: regions.scene(width, height),
            regions,
        }
    }

    /// The level of the kernels in use.
    pub fn level(&self) -> Level {
        self.level
    }

    /// Runs all steps on `picture`.
    ///
    /// # Panics
    /// If the picture has not the planned size.
    pub fn run(&mut self, picture: Gray<'_>) -> &Scene {
        self.run_watched(picture, &mut ())
    }

    /// The same, with `watch` told of the end of each step.
    ///
    /// # Panics
    /// As [`Stage::run`] does.
    pub fn run_watched(&mut self, picture: Gray<'_>, watch: &mut impl Watch) -> &Scene {
        assert_eq!(
            (picture.width_px, picture.height_px),
            (self.plan.width_px, self.plan.height_px),
            "the picture must have the planned size"
        );
        self.raw.clear();
        self.scene.level = match self.plan.threshold {
            Threshold::Fixed { level } => self.above(picture, level, watch),
            Threshold::Otsu { floor } => self.above_otsu(picture, floor, watch),
            Threshold::Hysteresis { low, high } => self.above_two(picture, [low, high], watch),
        };
        self.fill.run(&self.raw, &mut self.filled);
        watch.lap(Step::Fill);
        self.regions.run(&self.filled, &mut self.scene);
        watch.lap(Step::Regions);
        &self.scene
    }

    fn above(&mut self, picture: Gray<'_>, level: u8, watch: &mut impl Watch) -> u8 {
        let Self {
            top_hat, bits, raw, ..
        } = self;
        let kernels = self.level;
        top_hat.run(picture, |band| {
            watch.lap(Step::TopHat);
            band.each(|_, upper, lower| {
                kernels.mark_difference(upper, lower, level, bits);
                raw.push_row(bits);
            });
            watch.lap(Step::Threshold);
        });
        level
    }

    fn above_otsu(&mut self, picture: Gray<'_>, floor: u8, watch: &mut impl Watch) -> u8 {
        let Self {
            top_hat,
            bits,
            raw,
            values,
            histogram,
            ..
        } = self;
        let kernels = self.level;
        let width = self.plan.width_px;
        top_hat.run(picture, |band| {
            watch.lap(Step::TopHat);
            band.each(|y, upper, lower| {
                let row = &mut values[y * width..][..width];
                kernels.subtract(upper, lower, row);
                histogram.add(row);
            });
            watch.lap(Step::Threshold);
        });
        let level = threshold::otsu_level(&histogram.take()).max(floor);
        for row in values.chunks_exact(width.max(1)) {
            kernels.mark(row, level, bits);
            raw.push_row(bits);
        }
        watch.lap(Step::Threshold);
        level
    }

    fn above_two(&mut self, picture: Gray<'_>, [low, high]: [u8; 2], watch: &mut impl Watch) -> u8 {
        let Self {
            top_hat,
            bits,
            sure,
            raw,
            hysteresis,
            ..
        } = self;
        let kernels = self.level;
        hysteresis.restart();
        top_hat.run(picture, |band| {
            watch.lap(Step::TopHat);
            band.each(|_, upper, lower| {
                kernels.mark_difference(upper, lower, low, bits);
                kernels.mark_difference(upper, lower, high, sure);
                hysteresis.push_row(bits, sure);
            });
            watch.lap(Step::Threshold);
        });
        hysteresis.keep_sure(raw);
        watch.lap(Step::Threshold);
        low
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::stage::again::{Again, OtsuLevels};
    use crate::stage::plain::{self, Grid};
    use crate::stage::plan::{Element, Polarity};
    use proptest::prelude::*;

    fn element() -> impl Strategy<Value = Element> {
        prop_oneof![
            (1..80usize, 1..80usize).prop_map(|(width_px, height_px)| Element::Rectangle {
                width_px,
                height_px
            }),
            (0..20usize).prop_map(|r| Element::Octagon {
                diameter_px: 2 * r + 1
            }),
        ]
    }

    fn threshold() -> impl Strategy<Value = Threshold> {
        prop_oneof![
            any::<u8>().prop_map(|level| Threshold::Fixed { level }),
            (0..120u8).prop_map(|floor| Threshold::Otsu { floor }),
            (any::<u8>(), any::<u8>()).prop_map(|(a, b)| Threshold::Hysteresis {
                low: a.min(b),
                high: a.max(b)
            }),
        ]
    }

    fn plan() -> impl Strategy<Value = Plan> {
        let size = (1..140usize, 1..40usize);
        let polarity = prop_oneof![Just(Polarity::Bright), Just(Polarity::Dark)];
        (size, polarity, element(), threshold(), 0..20u64, 0..4u64).prop_map(
            |(
                (width_px, height_px),
                polarity,
                element,
                threshold,
                fill_below_px,
                speck_below_px,
            )| Plan {
                width_px,
                height_px,
                polarity,
                element,
                threshold,
                fill_below_px,
                speck_below_px,
            },
        )
    }

    /// Smooth enough for holes and parts, noisy enough for specks.
    fn picture(plan: &Plan, noise: &[u8]) -> Grid<u8> {
        Grid::new(plan.width_px, plan.height_px, |x, y| {
            let blob = if (x / 9 + y / 7) % 3 == 0 { 90 } else { 0 };
            let n = noise[(y * plan.width_px + x) % noise.len()];
            blob + x as u8 / 4 + n / if n > 250 { 2 } else { 8 }
        })
    }

    proptest! {
        #![proptest_config(ProptestConfig::with_cases(96))]

        #[test]
        fn every_step_follows_its_definition_at_every_level(
            plan in plan(),
            noise in proptest::collection::vec(any::<u8>(), 1..3000),
        ) {
            let grid = picture(&plan, &noise);
            let gray = Gray {
                pixels: &grid.cells,
                width_px: grid.width,
                height_px: grid.height,
                stride_px: grid.width,
            };
            let hat = plain::top_hat(&grid, plan.polarity, plan.element);
            let filled = plain::foreground(&grid, &plan);
            let scene = Stage::new(&plan, Level::SCALAR).run(gray).clone();
            for level in Level::available() {
                let mut stage = Stage::new(&plan, level);
                let steps = stage.steps(gray);
                prop_assert_eq!(&steps.top_hat, &hat.cells);
                let as_set: Vec<bool> = steps.filled.iter().map(|&v| v == 255).collect();
                prop_assert_eq!(&as_set, &filled.cells);
                prop_assert_eq!(stage.run(gray), &scene, "{}", level.name());
                let threshold = plan.threshold.at(OtsuLevels::default().of(&steps.top_hat));
                let mut again = Again::new(&plan, level);
                let (fill, speck) = (plan.fill_below_px, plan.speck_below_px);
                again.run(&steps.top_hat, Threshold::Fixed { level: 0 }, 0, 1);
                let scene_again = again.run(&steps.top_hat, threshold, fill, speck);
                prop_assert_eq!(scene_again, &scene, "{} again", level.name());
            }
        }
    }

    #[test]
    fn an_empty_picture_has_no_regions() {
        for (width_px, height_px) in [(0, 0), (0, 5), (5, 0)] {
            for element in [
                Element::Rectangle {
                    width_px: 3,
                    height_px: 3,
                },
                Element::Octagon { diameter_px: 9 },
            ] {
                let plan = Plan {
                    width_px,
                    height_px,
                    polarity: Polarity::Bright,
                    element,
                    threshold: Threshold::Otsu { floor: 0 },
                    fill_below_px: 1,
                    speck_below_px: 1,
                };
                let empty = Gray {
                    pixels: &[],
                    width_px,
                    height_px,
                    stride_px: width_px,
                };
                assert_eq!(Stage::new(&plan, Level::SCALAR).run(empty).regions, []);
            }
        }
    }

    #[test]
    #[should_panic(expected = "the picture must have the planned size")]
    fn a_picture_of_another_size_is_refused() {
        let plan = Plan {
            width_px: 4,
            height_px: 4,
            polarity: Polarity::Bright,
            element: Element::Rectangle {
                width_px: 3,
                height_px: 3,
            },
            threshold: Threshold::Fixed { level: 1 },
            fill_below_px: 0,
            speck_below_px: 0,
        };
        let wide = Gray {
            pixels: &[0; 20],
            width_px: 5,
            height_px: 4,
            stride_px: 5,
        };
        Stage::new(&plan, Level::SCALAR).run(wide);
    }
}
