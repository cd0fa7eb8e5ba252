//! The largest value of a distance over a set that is given by a distance, to a stated accuracy.
//!
//! Both change by at most 1 mm per mm, so a square can be dropped as soon as its middle shows that nothing in it can
//! be larger than what is known (branch and bound with a Lipschitz constant; Piyavskii 1972, Shubert 1972).

use std::cmp::Ordering;
use std::collections::BinaryHeap;

use super::plane::Point;

/// An upright square.
#[derive(Clone, Copy, Debug)]
pub(super) struct Square {
    pub centre: Point,
    pub half_mm: f64,
}

impl Square {
    /// Reaches `half_mm` from the origin to every side.
    pub(super) fn around(half_mm: f64) -> Self {
        Self {
            centre: Point::ORIGIN,
            half_mm,
        }
    }

    fn corner_mm(&self) -> f64 {
        self.half_mm * std::f64::consts::SQRT_2
    }

    fn quarters(&self) -> [Self; 4] {
        let half_mm = self.half_mm / 2.0;
        [(-1.0, -1.0), (1.0, -1.0), (-1.0, 1.0), (1.0, 1.0)].map(|(x, y)| Self {
            centre: self.centre + Point::new(x, y) * half_mm,
            half_mm,
        })
    }
}

/// A square with the most that can be in it.
struct Open {
    at_most: f64,
    square: Square,
}

impl PartialEq for Open {
    fn eq(&self, other: &Self) -> bool {
        self.cmp(other) == Ordering::Equal
    }
}
impl Eq for Open {}
impl PartialOrd for Open {
    fn partial_cmp(&self, other: &Self) -> Option<Ordering> {
        Some(self.cmp(other))
    }
}
impl Ord for Open {
    fn cmp(&self, other: &Self) -> Ordering {
        self.at_most.total_cmp(&other.at_most)
    }
}

/// How much too small what [`highest`] finds may be.
pub(super) const TOLERANCE_MM: f64 = 0.005;

/// The largest `height` within `all` where `member` is negative, too small by at most [`TOLERANCE_MM`]; `at_least`
/// where nothing is larger. Both functions must change by at most 1 mm per mm. The more `at_least` is, the less is
/// looked at.
pub(super) fn highest(
    all: Square,
    at_least: f64,
    height: impl Fn(Point) -> f64,
    member: impl Fn(Point) -> f64,
) -> f64 {
    let mut best = at_least;
    let mut open = BinaryHeap::from([Open {
        at_most: f64::INFINITY,
        square: all,
    }]);
    while let Some(Open { at_most, square }) = open.pop() {
        if at_most <= best + TOLERANCE_MM {
            break;
        }
        for square in square.quarters() {
            let here = height(square.centre);
            let at_most = here + square.corner_mm();
            if at_most <= best + TOLERANCE_MM {
                continue;
            }
            let outside_mm = member(square.centre);
            if outside_mm < 0.0 {
                best = here.max(best);
            }
            // A sliver thinner than the tolerance holds nothing that counts.
            let worth = outside_mm < square.corner_mm() && square.half_mm > TOLERANCE_MM / 4.0;
            if worth {
                open.push(Open { at_most, square });
            }
        }
    }
    best
}

/// Area within `all` where `member` is negative, from squares of at least 0.03 mm: right to a few per cent for what is
/// wider than a pixel. `member` must change by at most 1 mm per mm.
pub(super) fn area_mm2(all: Square, member: &impl Fn(Point) -> f64) -> f64 {
    const SMALLEST_MM: f64 = 0.03;
    let outside_mm = member(all.centre);
    if outside_mm > all.corner_mm() {
        0.0
    } else if outside_mm < -all.corner_mm() || all.half_mm < SMALLEST_MM {
        let whole_mm2 = 4.0 * all.half_mm * all.half_mm;
        if outside_mm < 0.0 { whole_mm2 } else { 0.0 }
    } else {
        all.quarters()
            .into_iter()
            .map(|square| area_mm2(square, member))
            .sum()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Elementary: of the disc of radius 2 about (5, 0), the farthest point from the origin is 7 away.
    #[test]
    fn the_farthest_point_of_a_disc() {
        let disc = |p: Point| (p - Point::new(5.0, 0.0)).length() - 2.0;
        let found = highest(Square::around(10.0), 0.0, Point::length, disc);
        assert!((6.995..=7.0).contains(&found), "{found}");
    }

    #[test]
    fn an_empty_set_has_nothing() {
        let nowhere = |_: Point| 1e9;
        assert_eq!(
            highest(Square::around(10.0), 0.0, Point::length, nowhere),
            0.0
        );
    }

    /// Elementary: pi r^2.
    #[test]
    fn the_area_of_a_disc() {
        let disc = |p: Point| (p - Point::new(5.0, 0.3)).length() - 2.0;
        let found = area_mm2(Square::around(10.0), &disc);
        assert!(
            (found / (4.0 * std::f64::consts::PI) - 1.0).abs() < 0.01,
            "{found}"
        );
    }
}
