//! What is measured of a region before any limit is asked, and the verdict that follows from it.
//!
//! The two are apart so that limits can be tried by the hundred on figures that were taken once.

use crate::stage::{Region, Run};

use super::measure::Measurer;
use super::severity::Against;
use super::{Common, Depth, Judged, Limits, Pose, Reason};

/// Which of the further figures some limit asks for.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Asked {
    feret: bool,
    holes: bool,
    boundary: bool,
    branches: bool,
}

impl Asked {
    /// What these limits ask for.
    pub fn by(limits: &Limits) -> Self {
        Self {
            feret: limits.length_px.is_some() || limits.width_px.is_some(),
            holes: limits.holes.is_some(),
            boundary: limits.boundary_px.is_some(),
            branches: limits.branches.is_some(),
        }
    }

    /// What either asks for.
    #[must_use]
    pub fn or(self, other: Self) -> Self {
        Self {
            feret: self.feret || other.feret,
            holes: self.holes || other.holes,
            boundary: self.boundary || other.boundary,
            branches: self.branches || other.branches,
        }
    }

    /// Takes them; `runs` are the region's own.
    pub(super) fn take(
        self,
        measurer: &mut Measurer,
        region: &Region,
        runs: &[Run],
        branch_above_px: f64,
    ) -> Sizes {
        let feret = self.feret.then(|| measurer.feret(region, runs));
        Sizes {
            area_px: region.area_px as f64,
            length_px: feret.map(|(length, _)| length),
            width_px: feret.map(|(_, width)| width),
            holes: self.holes.then(|| measurer.holes(region, runs)),
            boundary_px: self
                .boundary
                .then(|| measurer.boundary(region, runs) as f64),
            branches: self
                .branches
                .then(|| measurer.branches(region, runs, branch_above_px)),
        }
    }
}

/// The further figures; `None` for those that nobody asked for.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct Sizes {
    pub(super) area_px: f64,
    pub(super) length_px: Option<f64>,
    pub(super) width_px: Option<f64>,
    pub(super) holes: Option<u32>,
    pub(super) boundary_px: Option<f64>,
    pub(super) branches: Option<u32>,
}

/// A region held against the taught shape that fits it best.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Gauged {
    /// Index of the best-fitting shape.
    pub shape: usize,
    /// Where that shape lies.
    pub pose: Pose,
    /// Overlap over union with it.
    pub fit: f64,
    /// How much of the shape the region covers.
    pub covered: f64,
    /// Whether the region holds half a part more than the shape.
    pub twice: bool,
    /// The box around the shape as it lies on the region: left, top, right, bottom in the picture's pixels, the last two
    /// exclusive. Part of it may lie outside the picture.
    pub taught_px: [i32; 4],
    /// The deepest bite.
    pub missing: Depth,
    /// The farthest burr.
    pub excess: Depth,
    /// The further figures.
    pub sizes: Sizes,
}

impl Gauged {
    /// Whether it is one part of that shape, so that its figures say something about a part.
    pub(super) fn is_one(&self, common: &Common) -> bool {
        self.against_kind(common).is_none()
    }

    fn against_kind(&self, common: &Common) -> Option<Reason> {
        if self.twice && self.covered >= common.fit_at_least {
            Some(Reason::Touching)
        } else if self.fit < common.fit_at_least {
            Some(Reason::Unknown)
        } else {
            None
        }
    }

    /// The verdict; `limits` are those of `self.shape`.
    ///
    /// A region that holds most of the shape and half a part more is `touching`; one that fits none well enough is
    /// `unknown`. In both cases the other figures say nothing about a part, so there are no further reasons.
    pub fn verdict(&self, limits: &Limits, common: &Common) -> Judged {
        let mut against = Against::default();
        match self.against_kind(common) {
            Some(reason) => against.say(reason),
            None => {
                if limits.reject_flipped && self.pose.flipped {
                    against.say(Reason::Flipped);
                }
                against.at_most(Reason::Missing, self.missing.px, limits.missing_px);
                against.at_most(Reason::Excess, self.excess.px, limits.excess_px);
                against.sizes(&self.sizes, limits);
            }
        }
        Judged {
            shape: self.shape,
            pose: self.pose,
            fit: self.fit,
            missing: self.missing,
            excess: self.excess,
            reasons: against.reasons,
            severity: against.severity,
        }
    }
}
