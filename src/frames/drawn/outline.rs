//! Outlines of lines and arcs, and the exact signed distance to them.
//!
//! Every outline here is smooth: where two pieces meet they have the same direction. The point of the outline that is
//! nearest to a given point then tells by itself which side the point lies on, without counting crossings.

use super::plane::Point;

/// A piece of an outline. Walked along, the material lies towards the quarter turn of the direction.
#[derive(Clone, Copy, Debug)]
pub(super) enum Piece {
    /// A straight line.
    Line {
        from: Point,
        along: Point,
        length_mm: f64,
    },
    /// An arc. The material is inside the circle when it is walked from x towards y, outside otherwise.
    Arc {
        centre: Point,
        radius_mm: f64,
        from_rad: f64,
        sweep_rad: f64,
        /// Unit length, to the middle of the arc.
        middle: Point,
        /// Cosine of half the sweep, -1 for the whole circle.
        half_cos: f64,
        ends: [Point; 2],
    },
}

/// A point of an outline.
#[derive(Clone, Copy, Debug)]
pub(super) struct Rim {
    pub at: Point,
    /// Unit length, away from the material.
    pub outward: Point,
    /// Whether the material bulges out here.
    pub convex: bool,
}

impl Piece {
    pub(super) fn line(from: Point, to: Point) -> Self {
        let length_mm = (to - from).length();
        Self::Line {
            from,
            along: (to - from) * (1.0 / length_mm),
            length_mm,
        }
    }

    pub(super) fn arc(centre: Point, radius_mm: f64, from_rad: f64, sweep_rad: f64) -> Self {
        let half_rad = (sweep_rad / 2.0).abs();
        Self::Arc {
            centre,
            radius_mm,
            from_rad,
            sweep_rad,
            middle: Point::towards(from_rad + sweep_rad / 2.0),
            ends: [0.0, 1.0]
                .map(|share| centre + Point::towards(from_rad + sweep_rad * share) * radius_mm),
            half_cos: if half_rad >= std::f64::consts::PI {
                -1.0
            } else {
                half_rad.cos()
            },
        }
    }

    fn length_mm(&self) -> f64 {
        match *self {
            Self::Line { length_mm, .. } => length_mm,
            Self::Arc {
                radius_mm,
                sweep_rad,
                ..
            } => radius_mm * sweep_rad.abs(),
        }
    }

    /// The point at `share` of the way, 0 to 1.
    fn at(&self, share: f64) -> Rim {
        match *self {
            Self::Line {
                from,
                along,
                length_mm,
            } => Rim {
                at: from + along * (length_mm * share),
                outward: along.quarter() * -1.0,
                convex: false,
            },
            Self::Arc {
                centre,
                radius_mm,
                from_rad,
                sweep_rad,
                ..
            } => {
                let ray = Point::towards(from_rad + sweep_rad * share);
                Rim {
                    at: centre + ray * radius_mm,
                    outward: ray * sweep_rad.signum(),
                    convex: sweep_rad > 0.0,
                }
            }
        }
    }

    /// Distance to the piece, negative on the material's side.
    fn signed_mm(&self, point: Point) -> f64 {
        match *self {
            Self::Line {
                from,
                along,
                length_mm,
            } => {
                let away = point - from;
                let past_mm = away.dot(along);
                let side_mm = -along.cross(away);
                if (0.0..=length_mm).contains(&past_mm) {
                    return side_mm;
                }
                let end = from + along * past_mm.clamp(0.0, length_mm);
                (point - end).length().copysign(side_mm)
            }
            Self::Arc {
                centre,
                radius_mm,
                sweep_rad,
                middle,
                half_cos,
                ends,
                ..
            } => {
                let away = point - centre;
                let away_mm = away.length();
                let side_mm = (away_mm - radius_mm) * sweep_rad.signum();
                if away.dot(middle) >= away_mm * half_cos {
                    return side_mm;
                }
                let ends_mm = ends.map(|end| (point - end).length());
                ends_mm[0].min(ends_mm[1]).copysign(side_mm)
            }
        }
    }

    fn turned(&self, unit: Point, angle_rad: f64) -> Self {
        match *self {
            Self::Line {
                from,
                along,
                length_mm,
            } => Self::Line {
                from: from.turned(unit),
                along: along.turned(unit),
                length_mm,
            },
            Self::Arc {
                centre,
                radius_mm,
                from_rad,
                sweep_rad,
                ..
            } => Self::arc(
                centre.turned(unit),
                radius_mm,
                from_rad + angle_rad,
                sweep_rad,
            ),
        }
    }

    fn moved(&self, by: Point) -> Self {
        let mut piece = *self;
        match &mut piece {
            Self::Line { from, .. } => *from = *from + by,
            Self::Arc { centre, ends, .. } => {
                *centre = *centre + by;
                *ends = ends.map(|end| end + by);
            }
        }
        piece
    }
}

/// One or several closed curves around material.
#[derive(Clone, Debug)]
pub(super) struct Outline {
    pieces: Vec<Piece>,
    /// Where the outline is its own mirror image: the pieces that the first wedge needs, and the wedge's far side.
    wedge: Option<(Vec<Piece>, Point)>,
}

impl Outline {
    /// Pieces in the order in which they are walked.
    pub(super) fn new(pieces: Vec<Piece>) -> Self {
        Self {
            pieces,
            wedge: None,
        }
    }

    /// `count` times the same corner, each its own mirror image about the line at its angle. `corner` runs from the
    /// line at angle 0 to the next corner and is turned by 1 / `count` of a full turn each time; `first` are the
    /// pieces nearest to any point between the line at angle 0 and the next mirror line.
    pub(super) fn repeated(corner: &[Piece], first: Vec<Piece>, count: u32) -> Self {
        let step_rad = std::f64::consts::TAU / f64::from(count);
        let pieces = (0..count)
            .flat_map(|index| {
                let angle_rad = step_rad * f64::from(index);
                let unit = Point::towards(angle_rad);
                corner
                    .iter()
                    .map(move |piece| piece.turned(unit, angle_rad))
            })
            .collect();
        Self {
            pieces,
            wedge: Some((first, Point::towards(step_rad / 2.0))),
        }
    }

    /// Turned about the origin.
    pub(super) fn turned(&self, angle_rad: f64) -> Self {
        let unit = Point::towards(angle_rad);
        let turned = |piece: &Piece| piece.turned(unit, angle_rad);
        Self::new(self.pieces.iter().map(turned).collect())
    }

    /// Moved.
    pub(super) fn moved(&self, by: Point) -> Self {
        Self::new(self.pieces.iter().map(|piece| piece.moved(by)).collect())
    }

    /// Distance to the outline, negative inside the material. It changes by at most 1 mm per mm.
    pub(super) fn signed_mm(&self, point: Point) -> f64 {
        let (point, pieces) = match &self.wedge {
            Some((pieces, far)) => (folded(point, *far), pieces),
            None => (point, &self.pieces),
        };
        let mut nearest_mm = f64::INFINITY;
        for piece in pieces {
            let signed_mm = piece.signed_mm(point);
            if signed_mm.abs() < nearest_mm.abs() {
                nearest_mm = signed_mm;
            }
        }
        nearest_mm
    }

    /// The point at `share` of the whole length, 0 to 1.
    pub(super) fn rim(&self, share: f64) -> Rim {
        let mut left_mm = share * self.length_mm();
        for piece in &self.pieces {
            if left_mm <= piece.length_mm() {
                return piece.at(left_mm / piece.length_mm());
            }
            left_mm -= piece.length_mm();
        }
        self.pieces[self.pieces.len() - 1].at(1.0)
    }

    /// The whole length.
    pub(super) fn length_mm(&self) -> f64 {
        self.pieces.iter().map(Piece::length_mm).sum()
    }

    /// Centroid of the material, by Green's theorem over chords of at most `step_mm`.
    pub(super) fn centroid(&self, step_mm: f64) -> Point {
        let (mut area, mut moment) = (0.0, Point::ORIGIN);
        for (from, to) in self.chords(step_mm) {
            let twice = from.cross(to);
            area += twice / 2.0;
            moment = moment + (from + to) * (twice / 6.0);
        }
        moment * (1.0 / area)
    }

    /// The outline as short straight lines.
    pub(super) fn chords(&self, step_mm: f64) -> impl Iterator<Item = (Point, Point)> {
        self.pieces.iter().flat_map(move |piece| {
            let count = (piece.length_mm() / step_mm).ceil().max(1.0);
            let at = move |index: u32| piece.at(f64::from(index) / count).at;
            (0..count as u32).map(move |index| (at(index), at(index + 1)))
        })
    }
}

/// Mirrors a point into the wedge between the x axis and the line along `far`, whose angle divides a half turn.
fn folded(mut point: Point, far: Point) -> Point {
    loop {
        point.y_mm = point.y_mm.abs();
        // The tolerance ends the loop for a point on the line.
        if far.cross(point) <= 1e-12 {
            return point;
        }
        point = far * (2.0 * point.dot(far)) - point;
    }
}
