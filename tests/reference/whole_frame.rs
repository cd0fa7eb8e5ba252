//! The whole frame for the oracle: stage, pose and gauge, with one taught shape.

use beltwright::frames::Gray;
use beltwright::shape::{Bitmap, Common, Judge, Judged, Limits, Silhouette};
use beltwright::stage::{Region, Stage};

/// Patches below this do not count; the same in `speed.py`.
const FLAW_BELOW_PX: f64 = 4.0;

/// Stage and judge with their buffers.
pub struct WholeFrame {
    stage: Stage,
    judge: Judge,
    found: Vec<(Region, Judged)>,
}

impl WholeFrame {
    /// `taught` is a mask of `width` pixels a row: not 0 is covered.
    pub fn new(stage: Stage, taught: &[u8], width: usize) -> anyhow::Result<Self> {
        let mut mask = Bitmap::new(width, taught.len() / width.max(1));
        for (i, _) in taught.iter().enumerate().filter(|&(_, &value)| value > 0) {
            mask.insert(i % width, i / width);
        }
        let limits = Limits {
            missing_px: 6.0,
            excess_px: 6.0,
            reject_flipped: false,
            area_px: None,
            length_px: None,
            width_px: None,
            holes: None,
            boundary_px: None,
            branches: None,
            branch_above_px: 0.0,
        };
        let common = Common {
            flaw_below_px: FLAW_BELOW_PX,
            fit_at_least: 0.6,
        };
        Ok(Self {
            stage,
            judge: Judge::new(vec![(Silhouette::from_mask(&mask, 1.0)?, limits)], common),
            found: Vec::new(),
        })
    }

    /// Every region with its verdict.
    pub fn run(&mut self, picture: Gray<'_>) -> &[(Region, Judged)] {
        let scene = self.stage.run(picture);
        self.found.clear();
        for region in &scene.regions {
            let runs = &scene.runs[region.runs.clone()];
            let judged = self.judge.judge(region, runs);
            self.found.push((region.clone(), judged));
        }
        &self.found
    }
}
