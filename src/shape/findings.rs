//! Limits that contradict the taught shape they belong to. What follows from its size alone is checked in
//! [`settings`](crate::settings).

use super::measure::{Measurer, Measures};
use super::{Limits, Model};

/// One limit that contradicts its taught shape.
#[derive(Clone, Debug, PartialEq)]
pub struct Finding {
    /// The key in the shape's `[[shape]]`.
    pub key: &'static str,
    /// What the shape is, and what was expected.
    pub problem: String,
}

/// Checks limits against their shape; both are at the picture's scale of `mm_per_px`. Takes some milliseconds.
pub fn findings(model: &Model, limits: &Limits, mm_per_px: f64) -> Vec<Finding> {
    let mut check = Check {
        model,
        limits,
        mm_per_px,
        found: Vec::new(),
    };
    check.band();
    check.sizes();
    check.found
}

struct Check<'a> {
    model: &'a Model,
    limits: &'a Limits,
    mm_per_px: f64,
    found: Vec<Finding>,
}

impl Check<'_> {
    fn report(&mut self, key: &'static str, problem: String) {
        self.found.push(Finding { key, problem });
    }

    fn mm(&self, px: f64) -> f64 {
        px * self.mm_per_px
    }

    fn mm2(&self, px: f64) -> f64 {
        px * self.mm_per_px * self.mm_per_px
    }

    /// A limit that no bite can exceed.
    fn band(&mut self) {
        let (deepest, missing) = (self.model.depth_px, self.limits.missing_px);
        if missing >= deepest {
            let deepest = self.mm(deepest);
            self.report(
                "missing_mm",
                format!("expected less than {deepest:.2} mm: no point of the shape is deeper, so no bite would ever count"),
            );
        }
    }

    /// The taught shape must meet its own further limits.
    fn sizes(&mut self) {
        let limits = self.limits;
        let Some(taught) = self.measures() else {
            return;
        };
        let mm2 = |range: [f64; 2]| range.map(|px| self.mm2(px));
        let mm = |range: [f64; 2]| range.map(|px| self.mm(px));
        let whole = |range: [u32; 2]| range.map(f64::from);
        let asked = [
            (
                "area_mm2",
                limits.area_px.map(mm2),
                self.mm2(taught.area_px as f64),
                " mm2",
            ),
            (
                "length_mm",
                limits.length_px.map(mm),
                self.mm(taught.length_px),
                " mm",
            ),
            (
                "width_mm",
                limits.width_px.map(mm),
                self.mm(taught.width_px),
                " mm",
            ),
            (
                "holes",
                limits.holes.map(whole),
                f64::from(taught.holes),
                "",
            ),
            (
                "boundary_mm",
                limits.boundary_px.map(mm),
                self.mm(taught.boundary_px as f64),
                " mm",
            ),
            (
                "branches",
                limits.branches.map(whole),
                f64::from(taught.branches),
                "",
            ),
        ];
        for (key, range, value, unit) in asked {
            let Some([low, high]) = range else { continue };
            if !(low <= value && value <= high) {
                let value = (value * 100.0).round() / 100.0;
                self.report(
                    key,
                    format!("expected a range around {value}{unit}, which is what the taught shape itself has"),
                );
            }
        }
    }

    fn measures(&self) -> Option<Measures> {
        let (region, runs) = self.model.silhouette().majority().to_region()?;
        Some(Measurer::default().all(&region, &runs, self.limits.branch_above_px))
    }
}

#[cfg(test)]
mod tests {
    use super::super::drawn::{Outline, silhouette};
    use super::*;

    fn keys(change: impl Fn(&mut Limits)) -> Vec<&'static str> {
        let mut limits = Limits {
            missing_px: 6.0,
            excess_px: 6.0,
            reject_flipped: true,
            area_px: Some([7000.0, 10_000.0]),
            length_px: Some([130.0, 145.0]),
            width_px: Some([115.0, 125.0]),
            holes: Some([1, 1]),
            boundary_px: Some([400.0, 900.0]),
            branches: Some([0, 3]),
            branch_above_px: 12.0,
        };
        change(&mut limits);
        let model = Model::new(silhouette(&Outline::gasket(60.0), 0.25).0);
        let found = findings(&model, &limits, 0.25);
        found.iter().map(|finding| finding.key).collect()
    }

    #[test]
    fn each_contradiction_is_found_and_good_limits_have_none() {
        assert!(keys(|_| ()).is_empty());
        assert_eq!(keys(|limits| limits.missing_px = 30.0), ["missing_mm"]);
        assert_eq!(
            keys(|limits| limits.area_px = Some([0.0, 900.0])),
            ["area_mm2"]
        );
        assert_eq!(
            keys(|limits| limits.length_px = Some([0.0, 90.0])),
            ["length_mm"]
        );
        assert_eq!(
            keys(|limits| limits.width_px = Some([0.0, 90.0])),
            ["width_mm"]
        );
        assert_eq!(keys(|limits| limits.holes = Some([0, 0])), ["holes"]);
        assert_eq!(
            keys(|limits| limits.boundary_px = Some([0.0, 9.0])),
            ["boundary_mm"]
        );
        assert_eq!(keys(|limits| limits.branches = Some([5, 9])), ["branches"]);
    }
}
