//! Settings that do not go together with the taught shapes.

use crate::stage::{Element, Plan};

use super::measure::{Measurer, Measures};
use super::{Common, Limits, Model};

/// One setting that contradicts a taught shape.
#[derive(Clone, Debug, PartialEq)]
pub struct Finding {
    /// Index of the shape.
    pub shape: usize,
    /// The key in the settings file: of `[picture]`, `[judge]` or the shape's own `[[shape]]`.
    pub key: &'static str,
    /// What is set, what the shape is, and what was expected, in mm.
    pub problem: String,
}

/// Checks the settings against every shape; `shapes` and all sizes are at the picture's scale of `mm_per_px`.
///
/// Takes some milliseconds per shape.
pub fn findings(
    plan: &Plan,
    common: &Common,
    shapes: &[(Model, Limits)],
    mm_per_px: f64,
) -> Vec<Finding> {
    let mut found = Vec::new();
    for (shape, (model, limits)) in shapes.iter().enumerate() {
        let mut check = Check {
            shape,
            model,
            limits,
            mm_per_px,
            found: &mut found,
        };
        check.element(&plan.element);
        check.picture(plan);
        check.band(common);
        check.sizes();
    }
    found
}

struct Check<'a> {
    shape: usize,
    model: &'a Model,
    limits: &'a Limits,
    mm_per_px: f64,
    found: &'a mut Vec<Finding>,
}

impl Check<'_> {
    fn report(&mut self, key: &'static str, problem: String) {
        self.found.push(Finding {
            shape: self.shape,
            key,
            problem,
        });
    }

    fn mm(&self, px: f64) -> f64 {
        px * self.mm_per_px
    }

    fn mm2(&self, px: f64) -> f64 {
        px * self.mm_per_px * self.mm_per_px
    }

    /// The top-hat removes what its element fits into.
    fn element(&mut self, element: &Element) {
        let (set, widest, what) = match *element {
            Element::Rectangle {
                width_px,
                height_px,
            } => {
                let square = self.model.widest_square_px() as f64;
                (width_px.min(height_px) as f64, square, "square")
            }
            Element::Octagon { diameter_px } => {
                let disc = self.model.widest_disc_px();
                (diameter_px as f64, disc, "disc")
            }
        };
        if set <= widest {
            let (set, widest) = (self.mm(set), self.mm(widest));
            self.report(
                "element_mm",
                format!(
                    "{set:.2} mm, but a {what} of {widest:.2} mm fits into the shape, so that the top-hat would remove \
                     the part itself; expected more than {widest:.2} mm"
                ),
            );
        }
    }

    fn picture(&mut self, plan: &Plan) {
        let area_px = self.model.area_px as f64;
        if plan.speck_below_px as f64 > area_px {
            let (set, area) = (self.mm2(plan.speck_below_px as f64), self.mm2(area_px));
            self.report(
                "speck_below_mm2",
                format!("{set:.2} mm2, but the shape itself has {area:.2} mm2 and would be dropped as a crumb"),
            );
        }
        let set = self.mm2(plan.fill_below_px as f64);
        let mut bores = self.model.silhouette().bores_mm2();
        bores.sort_by(f64::total_cmp);
        if let Some(&bore) = bores.first().filter(|&&bore| bore <= set) {
            self.report(
                "fill_below_mm2",
                format!(
                    "{set:.2} mm2, but the shape has a bore of {bore:.2} mm2, which would be closed"
                ),
            );
        }
        // It need not fit in at every angle, but it must at one.
        let narrow = self.measures().map_or(0.0, |taught| taught.width_px);
        if narrow > plan.height_px as f64 || narrow > plan.width_px as f64 {
            let (width, height) = (
                self.mm(plan.width_px as f64),
                self.mm(plan.height_px as f64),
            );
            let narrow = self.mm(narrow);
            self.report(
                "region_mm",
                format!(
                    "{width:.2} x {height:.2} mm, but the shape is at least {narrow:.2} mm wide at every angle and would \
                     never be seen whole"
                ),
            );
        }
    }

    fn band(&mut self, common: &Common) {
        let (deepest, missing) = (self.model.depth_px, self.limits.missing_px);
        if missing >= deepest {
            let (missing, deepest) = (self.mm(missing), self.mm(deepest));
            self.report(
                "missing_mm",
                format!("{missing:.2} mm, but no point of the shape is deeper than {deepest:.2} mm: no bite would ever count"),
            );
        }
        // A half round bite or burr just over the limit must not be ignored.
        for (key, limit) in [
            ("missing_mm", missing),
            ("excess_mm", self.limits.excess_px),
        ] {
            let half_round = 0.5 * std::f64::consts::PI * limit * limit;
            if limit > 0.0 && common.flaw_below_px > half_round {
                let (set, area, limit) = (
                    self.mm2(common.flaw_below_px),
                    self.mm2(half_round),
                    self.mm(limit),
                );
                self.report(
                    "flaw_below_mm2",
                    format!(
                        "{set:.2} mm2, but a half round flaw at the {key} limit of {limit:.2} mm has only {area:.2} mm2 \
                         and would be ignored"
                    ),
                );
            }
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
                    format!("{low} to {high}{unit}, but the taught shape itself has {value}{unit}"),
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
    use crate::stage::{Polarity, Threshold};

    fn good() -> (Plan, Common, Limits) {
        let plan = Plan {
            width_px: 640,
            height_px: 480,
            polarity: Polarity::Dark,
            element: Element::Rectangle {
                width_px: 61,
                height_px: 61,
            },
            threshold: Threshold::Fixed { level: 40 },
            fill_below_px: 200,
            speck_below_px: 400,
        };
        let common = Common {
            flaw_below_px: 8.0,
            fit_at_least: 0.7,
        };
        let limits = Limits {
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
        (plan, common, limits)
    }

    fn keys(change: impl Fn(&mut Plan, &mut Common, &mut Limits)) -> Vec<&'static str> {
        let (mut plan, mut common, mut limits) = good();
        change(&mut plan, &mut common, &mut limits);
        let model = Model::new(silhouette(&Outline::gasket(60.0), 0.25).0);
        let found = findings(&plan, &common, &[(model, limits)], 0.25);
        found
            .iter()
            .for_each(|finding| println!("{}: {}", finding.key, finding.problem));
        found.iter().map(|finding| finding.key).collect()
    }

    #[test]
    fn good_settings_have_no_findings() {
        assert!(keys(|_, _, _| ()).is_empty());
    }

    #[test]
    fn each_contradiction_is_found() {
        let square = |side| Element::Rectangle {
            width_px: 90,
            height_px: side,
        };
        assert_eq!(keys(|plan, _, _| plan.element = square(20)), ["element_mm"]);
        assert_eq!(
            keys(|plan, _, _| plan.element = Element::Octagon { diameter_px: 21 }),
            ["element_mm"]
        );
        assert_eq!(
            keys(|plan, _, _| plan.fill_below_px = 5000),
            ["fill_below_mm2"]
        );
        assert_eq!(
            keys(|plan, _, _| plan.speck_below_px = 50_000),
            ["speck_below_mm2"]
        );
        assert_eq!(keys(|plan, _, _| plan.height_px = 100), ["region_mm"]);
        assert_eq!(
            keys(|_, common, _| common.flaw_below_px = 60.0),
            ["flaw_below_mm2"; 2]
        );
        assert_eq!(
            keys(|_, _, limits| limits.missing_px = 30.0),
            ["missing_mm"]
        );
        assert_eq!(
            keys(|_, _, limits| limits.area_px = Some([0.0, 900.0])),
            ["area_mm2"]
        );
        assert_eq!(
            keys(|_, _, limits| limits.length_px = Some([0.0, 90.0])),
            ["length_mm"]
        );
        assert_eq!(
            keys(|_, _, limits| limits.width_px = Some([0.0, 90.0])),
            ["width_mm"]
        );
        assert_eq!(keys(|_, _, limits| limits.holes = Some([0, 0])), ["holes"]);
        assert_eq!(
            keys(|_, _, limits| limits.boundary_px = Some([0.0, 9.0])),
            ["boundary_mm"]
        );
        assert_eq!(
            keys(|_, _, limits| limits.branches = Some([5, 9])),
            ["branches"]
        );
    }
}
