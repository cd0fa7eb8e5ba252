//! One drawn part in its own coordinates: the nominal shape, a little larger or smaller, with bites and burrs.

use std::sync::Arc;

use super::nominal::Nominal;
use super::plane::Point;
use super::search::{Square, area_mm2, highest};

/// A plain figure that is cut away from a part or added to it.
#[derive(Clone, Copy, Debug)]
pub(super) enum Form {
    /// A disc.
    Disc { centre: Point, radius_mm: f64 },
    /// A line, as thick as a pen of this radius.
    Stroke {
        from: Point,
        to: Point,
        radius_mm: f64,
    },
    /// Everything beyond a straight line. `outward` has unit length.
    Beyond { at: Point, outward: Point },
    /// An endless wedge around the line from `apex` along `axis`, grown by a pen of this radius.
    Wedge {
        apex: Point,
        axis: Point,
        half_rad: f64,
        radius_mm: f64,
    },
}

impl Form {
    /// Distance to its outline, negative inside.
    pub(super) fn signed_mm(&self, point: Point) -> f64 {
        match *self {
            Self::Disc { centre, radius_mm } => (point - centre).length() - radius_mm,
            Self::Stroke {
                from,
                to,
                radius_mm,
            } => {
                let (away, whole) = (point - from, to - from);
                let share = (away.dot(whole) / whole.dot(whole)).clamp(0.0, 1.0);
                (away - whole * share).length() - radius_mm
            }
            Self::Beyond { at, outward } => -(point - at).dot(outward),
            Self::Wedge {
                apex,
                axis,
                half_rad,
                radius_mm,
            } => {
                let away = point - apex;
                // Mirrored to one side of the axis, then measured to that side's edge.
                let away = Point::new(away.dot(axis), axis.cross(away).abs());
                let edge = Point::towards(half_rad);
                let behind = away.dot(edge) < 0.0;
                (if behind {
                    away.length()
                } else {
                    edge.cross(away)
                }) - radius_mm
            }
        }
    }
}

/// How a part differs from its nominal shape: `(nominal * scale - cuts) + burrs`.
#[derive(Clone, Debug)]
pub(super) struct Body {
    pub nominal: Arc<Nominal>,
    /// Natural variation of size.
    pub scale: f64,
    pub cuts: Vec<Form>,
    pub burrs: Vec<Form>,
}

/// No drawn burr reaches farther than this beyond the nominal shape.
pub(super) const LONGEST_BURR_MM: f64 = 12.0;

impl Body {
    /// Negative inside the drawn part. It changes by at most 1 mm per mm, has the right sign everywhere, and is the
    /// distance to the outline except around the corners that cuts and burrs make.
    pub(super) fn signed_mm(&self, point: Point) -> f64 {
        let whole_mm = self.scale * self.nominal.outline.signed_mm(point * (1.0 / self.scale));
        let cut_mm = whole_mm.max(-nearest_mm(&self.cuts, point));
        cut_mm.min(nearest_mm(&self.burrs, point))
    }

    /// The largest inside distance of the nominal shape over what is missing of it: how deep a bite goes. A tip that
    /// has broken off is as deep as the tip is thick, not as it is long. `at_least_mm` where nothing is deeper.
    pub(super) fn missing_mm(&self, at_least_mm: f64) -> f64 {
        let nominal = &self.nominal.outline;
        highest(
            Square::around(self.nominal.radius_mm),
            at_least_mm.max(self.size_mm(-1.0)),
            |p| -nominal.signed_mm(p),
            |p| nearest_mm(&self.cuts, p).max(-nearest_mm(&self.burrs, p)),
        )
    }

    /// The largest distance to the nominal shape over what is too much: how far a burr sticks out. `at_least_mm` where
    /// nothing sticks out farther.
    pub(super) fn excess_mm(&self, at_least_mm: f64) -> f64 {
        let nominal = &self.nominal.outline;
        highest(
            self.all(),
            at_least_mm.max(self.size_mm(1.0)),
            |p| nominal.signed_mm(p),
            |p| nearest_mm(&self.burrs, p),
        )
    }

    /// Area of the nominal shape that cuts take away.
    pub(super) fn missing_mm2(&self) -> f64 {
        let nominal = &self.nominal.outline;
        area_mm2(Square::around(self.nominal.radius_mm), &|p| {
            nominal.signed_mm(p).max(nearest_mm(&self.cuts, p))
        })
    }

    /// Area that burrs add to the nominal shape.
    pub(super) fn excess_mm2(&self) -> f64 {
        let nominal = &self.nominal.outline;
        area_mm2(self.all(), &|p| {
            nearest_mm(&self.burrs, p).max(-nominal.signed_mm(p))
        })
    }

    /// Whether no bite has cut a piece off, however thin, or left one hanging by a neck of less than a millimetre.
    pub(super) fn hangs_together(&self) -> bool {
        self.one_piece(0.4, 0.5) && self.one_piece(0.2, 0.0)
    }

    /// Whether the points of a grid that lie deeper than this are all joined.
    fn one_piece(&self, step_mm: f64, deeper_mm: f64) -> bool {
        let half = (self.all().half_mm / step_mm).ceil() as usize;
        let side = 2 * half + 1;
        let at_mm = |index: usize| (index as f64 - half as f64) * step_mm;
        // Left out at the border of the grid, where no part reaches: every other point has four neighbours.
        let inner = |index: usize| (1..side - 1).contains(&index);
        let is_part = |index: usize| {
            let (x, y) = (index % side, index / side);
            let point = Point::new(at_mm(x), at_mm(y));
            inner(x) && inner(y) && self.signed_mm(point) < -deeper_mm
        };
        let mut left: Vec<bool> = (0..side * side).map(is_part).collect();
        let mut open: Vec<_> = left.iter().position(|&is| is).into_iter().collect();
        while let Some(index) = open.pop() {
            if std::mem::take(&mut left[index]) {
                open.extend([index - 1, index + 1, index - side, index + side]);
            }
        }
        !left.contains(&true)
    }

    /// How far a part of another size lies within (`side` -1) or beyond (1) the nominal shape, found at many places of
    /// its own outline: what is missing or too much without a cut or a burr is farthest there.
    fn size_mm(&self, side: f64) -> f64 {
        const STEP_MM: f64 = 0.2;
        let outline = &self.nominal.outline;
        let kept = |p: &Point| nearest_mm(&self.cuts, *p).min(nearest_mm(&self.burrs, *p)) > 0.0;
        outline
            .chords(STEP_MM)
            .map(|(p, _)| p * self.scale)
            .filter(kept)
            .map(|p| side * outline.signed_mm(p))
            .fold(0.0, f64::max)
    }

    /// How far the part reaches from its origin towards `direction`, a way of length 1.
    pub(super) fn reach_mm(&self, direction: Point) -> f64 {
        highest(self.all(), 0.0, |p| p.dot(direction), |p| self.signed_mm(p))
    }

    fn all(&self) -> Square {
        Square::around(self.nominal.radius_mm + LONGEST_BURR_MM)
    }
}

/// Distance to the nearest of several figures, negative inside any of them.
fn nearest_mm(forms: &[Form], point: Point) -> f64 {
    let each_mm = forms.iter().map(|form| form.signed_mm(point));
    each_mm.fold(f64::INFINITY, f64::min)
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Elementary distances to plain figures.
    #[test]
    fn distances_to_plain_figures() {
        let at = Point::new;
        let stroke = Form::Stroke {
            from: at(0.0, 0.0),
            to: at(4.0, 0.0),
            radius_mm: 0.5,
        };
        let wedge = Form::Wedge {
            apex: at(0.0, 0.0),
            axis: at(0.0, 1.0),
            half_rad: std::f64::consts::FRAC_PI_4,
            radius_mm: 0.0,
        };
        let beyond = Form::Beyond {
            at: at(0.0, 2.0),
            outward: at(0.0, 1.0),
        };
        for (form, point, want_mm) in [
            (stroke, at(2.0, 3.0), 2.5),
            (stroke, at(7.0, 4.0), 4.5),
            (stroke, at(1.0, 0.25), -0.25),
            (wedge, at(1.0, 0.0), 0.5_f64.sqrt()),
            (wedge, at(0.0, 1.0), -(0.5_f64.sqrt())),
            (wedge, at(-3.0, -4.0), 5.0),
            (beyond, at(9.0, 5.0), -3.0),
            (beyond, at(9.0, 1.5), 0.5),
        ] {
            let got_mm = form.signed_mm(point);
            assert!(
                (got_mm - want_mm).abs() < 1e-12,
                "{form:?} {point:?} {got_mm}"
            );
        }
    }
}
