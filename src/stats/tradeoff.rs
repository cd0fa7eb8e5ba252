//! What a limit costs: misses against false rejects, for every limit that makes a difference.
//!
//! The curve is the receiver operating characteristic seen from the other side, and its area the chance that a bad part
//! stands out more than a good one (J. A. Hanley and B. J. McNeil, Radiology 143 (1982) 29-36).

/// Counts at one limit: everything above it is rejected.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Point {
    /// The limit; negative infinity rejects everything.
    pub limit: f64,
    /// Bad parts that would pass.
    pub misses: usize,
    /// Good parts that would be rejected.
    pub false_rejects: usize,
}

/// The curve. Its first point rejects everything, its last nothing.
#[derive(Clone, Debug, PartialEq)]
pub struct Tradeoff {
    /// A point for each limit that makes a difference, rising.
    pub points: Vec<Point>,
    /// How many good parts there are.
    pub good: usize,
    /// How many bad parts there are.
    pub bad: usize,
}

impl Tradeoff {
    /// The curve for one figure of good and of bad parts; the larger the figure, the worse the part.
    pub fn of(good: &[f64], bad: &[f64]) -> Self {
        let tagged = |figures: &[f64], is_bad: bool| -> Vec<(f64, bool)> {
            figures.iter().map(|&figure| (figure, is_bad)).collect()
        };
        let mut all = tagged(good, false);
        all.extend(tagged(bad, true));
        all.sort_by(|a, b| a.0.total_cmp(&b.0));
        let mut point = Point {
            limit: f64::NEG_INFINITY,
            misses: 0,
            false_rejects: good.len(),
        };
        let mut points = vec![point];
        for same in all.chunk_by(|a, b| a.0 == b.0) {
            let bad = same.iter().filter(|(_, is_bad)| *is_bad).count();
            point.limit = same[0].0;
            point.misses += bad;
            point.false_rejects -= same.len() - bad;
            points.push(point);
        }
        Self {
            points,
            good: good.len(),
            bad: bad.len(),
        }
    }

    /// The area under caught bad parts over false rejects, both as shares: 1 is a clean separation, 0.5 a coin. `None`
    /// without good or without bad parts. By the trapezoid rule, which counts a tie as half (Mann and Whitney's U).
    pub fn area(&self) -> Option<f64> {
        if self.good == 0 || self.bad == 0 {
            return None;
        }
        let twice = |pair: &[Point]| {
            let across = pair[0].false_rejects - pair[1].false_rejects;
            let caught = 2 * self.bad - pair[0].misses - pair[1].misses;
            across as f64 * caught as f64
        };
        let sum: f64 = self.points.windows(2).map(twice).sum();
        Some(sum / (2.0 * self.good as f64 * self.bad as f64))
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    /// The example in the documentation of scikit-learn's `roc_auc_score`: scores 0.1, 0.4, 0.35, 0.8 of classes 0, 0, 1, 1.
    #[test]
    fn the_documented_example() {
        let curve = Tradeoff::of(&[0.1, 0.4], &[0.35, 0.8]);
        assert_eq!(curve.area(), Some(0.75));
        let counts: Vec<_> = curve
            .points
            .iter()
            .map(|point| (point.misses, point.false_rejects))
            .collect();
        assert_eq!(counts, [(0, 2), (0, 1), (1, 1), (1, 0), (2, 0)]);
    }

    #[test]
    fn parts_without_a_figure_are_never_kept_by_a_finite_limit() {
        let curve = Tradeoff::of(&[0.2], &[f64::INFINITY, f64::INFINITY]);
        let at = |limit: f64| {
            curve
                .points
                .iter()
                .find(|point| point.limit == limit)
                .unwrap()
        };
        assert_eq!((at(0.2).misses, at(0.2).false_rejects), (0, 0));
        assert_eq!(at(f64::INFINITY).misses, 2);
        assert_eq!(curve.area(), Some(1.0));
    }

    #[test]
    fn one_kind_alone_has_no_area() {
        assert_eq!(Tradeoff::of(&[0.2], &[]).area(), None);
        assert_eq!(Tradeoff::of(&[], &[]).area(), None);
    }

    proptest! {
        #[test]
        fn the_area_is_the_share_of_pairs_in_order(
            good in prop::collection::vec(0_i8..20, 1..30),
            bad in prop::collection::vec(0_i8..20, 1..30),
        ) {
            let [good, bad] = [good, bad].map(|list| list.into_iter().map(f64::from).collect::<Vec<_>>());
            let pairs = good.iter().flat_map(|g| bad.iter().map(move |b| (g, b)));
            let wins: f64 = pairs.map(|(g, b)| if b > g { 1.0 } else if b == g { 0.5 } else { 0.0 }).sum();
            let wanted = wins / (good.len() * bad.len()) as f64;
            prop_assert!((Tradeoff::of(&good, &bad).area().unwrap() - wanted).abs() < 1e-12);
        }
    }
}
