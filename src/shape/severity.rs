//! Everything against a part, and how near it is to its limits.

use super::gauged::Sizes;
use super::{Limits, Reason, Reasons};

/// Reasons and severity as they add up.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub(super) struct Against {
    pub(super) reasons: Reasons,
    pub(super) severity: f64,
}

impl Against {
    /// A reason without a figure.
    pub(super) fn say(&mut self, reason: Reason) {
        self.reasons = self.reasons.with(reason);
        self.severity = f64::INFINITY;
    }

    /// A figure that may be as large as `limit`.
    pub(super) fn at_most(&mut self, reason: Reason, figure: f64, limit: f64) {
        let used = if figure == 0.0 { 0.0 } else { figure / limit };
        self.add(reason, figure <= limit, used);
    }

    /// A figure that may be `low` to `high`; the middle uses nothing of the limit up.
    fn between(&mut self, figure: f64, [low, high]: [f64; 2]) {
        let (middle, half) = ((low + high) / 2.0, (high - low) / 2.0);
        let off = (figure - middle).abs();
        let used = if off == 0.0 { 0.0 } else { off / half };
        self.add(Reason::Size, low <= figure && figure <= high, used);
    }

    fn add(&mut self, reason: Reason, good: bool, used: f64) {
        if !good {
            self.reasons = self.reasons.with(reason);
        }
        // The quotient may be rounded to the wrong side of 1.
        let used = if good {
            used.min(1.0)
        } else {
            used.max(1.0_f64.next_up())
        };
        self.severity = self.severity.max(used);
    }

    /// The further limits, those that are set; a figure that was not taken is none against the part.
    pub(super) fn sizes(&mut self, sizes: &Sizes, limits: &Limits) {
        let whole = |range: [u32; 2]| range.map(f64::from);
        let held = [
            (Some(sizes.area_px), limits.area_px),
            (sizes.length_px, limits.length_px),
            (sizes.width_px, limits.width_px),
            (sizes.holes.map(f64::from), limits.holes.map(whole)),
            (sizes.boundary_px, limits.boundary_px),
            (sizes.branches.map(f64::from), limits.branches.map(whole)),
        ];
        for (figure, range) in held {
            if let (Some(figure), Some(range)) = (figure, range) {
                self.between(figure, range);
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::super::bitmap::tests::bitmap;
    use super::super::gauged::Asked;
    use super::super::measure::Measurer;
    use super::*;

    #[test]
    fn both_ends_belong_to_the_good_ones() {
        for (figure, good, severity) in [
            (2.0, true, 1.0),
            (3.0, true, 0.0),
            (4.0, true, 1.0),
            (4.5, false, 1.5),
        ] {
            let mut against = Against::default();
            against.between(figure, [2.0, 4.0]);
            assert_eq!(
                (against.reasons.is_empty(), against.severity),
                (good, severity)
            );
        }
        let mut against = Against::default();
        against.at_most(Reason::Missing, 3.0, 4.0);
        against.between(5.0, [5.0, 5.0]);
        assert_eq!((against.reasons.is_empty(), against.severity), (true, 0.75));
        against.at_most(Reason::Excess, 0.0, 0.0);
        assert_eq!(against.severity, 0.75);
        against.at_most(Reason::Excess, 1.0, 0.0);
        assert_eq!(
            (against.reasons.to_string().as_str(), against.severity),
            ("excess", f64::INFINITY)
        );
    }

    #[test]
    fn severity_is_above_one_exactly_when_there_is_a_reason() {
        for i in 1..2000 {
            let limit = f64::from(i) * 0.1;
            for figure in [limit.next_down(), limit, limit.next_up()] {
                let mut against = Against::default();
                against.at_most(Reason::Missing, figure, limit);
                assert_eq!(against.severity > 1.0, against.reasons.has(Reason::Missing));
                let mut against = Against::default();
                against.between(figure, [0.03, limit.max(0.03)]);
                assert_eq!(against.severity > 1.0, against.reasons.has(Reason::Size));
            }
        }
    }

    #[test]
    fn every_further_limit_is_asked() {
        let (region, runs) = bitmap(&["########", "#..##..#", "########"])
            .to_region()
            .unwrap();
        let mut limits = Limits {
            missing_px: 0.0,
            excess_px: 0.0,
            reject_flipped: true,
            area_px: Some([20.0, 20.0]),
            length_px: Some([8.0, 8.6]),
            width_px: Some([3.0, 3.0]),
            holes: Some([2, 2]),
            boundary_px: Some([20.0, 20.0]),
            branches: Some([0, 0]),
            branch_above_px: 3.0,
        };
        let reasons = |limits: &Limits| {
            let mut against = Against::default();
            let sizes = Asked::by(limits).take(&mut Measurer::default(), &region, &runs, 3.0);
            against.sizes(&sizes, limits);
            against.reasons.to_string()
        };
        assert_eq!(reasons(&limits), "");
        let spoil: [fn(&mut Limits); 6] = [
            |l| l.area_px = Some([21.0, 30.0]),
            |l| l.length_px = Some([0.0, 7.9]),
            |l| l.width_px = Some([3.1, 4.0]),
            |l| l.holes = Some([0, 1]),
            |l| l.boundary_px = Some([0.0, 19.0]),
            |l| l.branches = Some([1, 3]),
        ];
        for spoil in spoil {
            let good = limits.clone();
            spoil(&mut limits);
            assert_eq!(reasons(&limits), "size", "{limits:?}");
            limits = good;
        }
    }
}
