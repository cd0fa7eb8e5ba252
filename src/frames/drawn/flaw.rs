//! Bites and burrs, made so large that the figure computed from the geometry is the wanted one.

use super::body::{Body, Form};
use super::dice::Dice;
use super::outline::Rim;
use super::plane::Point;

/// A flaw at a place on the rim, of any size.
#[derive(Clone, Copy, Debug)]
enum Flaw {
    /// A round bite.
    Bite { rim: Rim, radius_mm: f64 },
    /// A V with a rounded end. No narrower: what is narrower than a pixel at its end cannot be measured.
    Notch {
        rim: Rim,
        half_rad: f64,
        radius_mm: f64,
    },
    /// A piece broken off along a straight line.
    Chip { rim: Rim, outward: Point },
    /// A thread of flash, or a lump: a stroke that is rooted in the part.
    Burr {
        rim: Rim,
        towards: Point,
        radius_mm: f64,
    },
}

/// How near the wanted figure a flaw must come.
const CLOSE_MM: f64 = 0.01;
/// Deeper than any bite is ever pushed.
const LARGEST_MM: f64 = 12.0;
/// How many places on the rim are tried.
const TRIES: usize = 60;

/// What a flaw should come to.
#[derive(Clone, Copy, Debug)]
pub(super) struct Wanted {
    /// The figure.
    pub depth_mm: f64,
    /// The least area, so that it is not taken for noise along the edge.
    pub area_mm2: f64,
}

/// Cuts a bite of the wanted depth. `false`, leaving the part as it is, if no tried place takes one.
pub(super) fn bite(body: &mut Body, wanted: Wanted, dice: &mut Dice) -> bool {
    place(body, wanted, dice, |body, dice| {
        let rim = body.nominal.outline.rim(dice.between(0.0, 1.0));
        match dice.below(4) {
            0 => Flaw::Notch {
                rim,
                half_rad: dice.between(0.35, 0.6),
                radius_mm: dice.between(0.7, 1.0),
            },
            1 if rim.convex => Flaw::Chip {
                rim,
                outward: rim.outward,
            },
            _ => Flaw::Bite {
                rim,
                radius_mm: dice.between(2.5, 6.0),
            },
        }
    })
}

/// Breaks off a tip so that what is missing has the wanted depth. Answers like [`bite`].
pub(super) fn break_tip(body: &mut Body, wanted: Wanted, dice: &mut Dice) -> bool {
    place(body, wanted, dice, |body, dice| {
        let tips = &body.nominal.tips;
        let rim = body.nominal.outline.rim(tips[dice.below(tips.len())]);
        Flaw::Chip {
            rim,
            outward: rim.outward.turned(Point::towards(dice.between(-0.3, 0.3))),
        }
    })
}

/// Adds a burr that sticks out as far as wanted. Answers like [`bite`].
pub(super) fn burr(body: &mut Body, wanted: Wanted, dice: &mut Dice) -> bool {
    place(body, wanted, dice, |body, dice| {
        let rim = body.nominal.outline.rim(dice.between(0.0, 1.0));
        let (thin_mm, thick_mm) = if dice.coin() { (0.6, 0.9) } else { (1.5, 4.0) };
        Flaw::Burr {
            rim,
            towards: rim.outward.turned(Point::towards(dice.between(-0.4, 0.4))),
            radius_mm: dice.between(thin_mm, thick_mm),
        }
    })
}

fn place(
    body: &mut Body,
    wanted: Wanted,
    dice: &mut Dice,
    mut flaw: impl FnMut(&Body, &mut Dice) -> Flaw,
) -> bool {
    for _ in 0..TRIES {
        let flaw = flaw(body, dice);
        if let Some(made) = flaw.sized(body, wanted.depth_mm)
            && flaw.area_mm2(&made) >= wanted.area_mm2
            && flaw.leaves_one_piece(&made)
        {
            *body = made;
            return true;
        }
    }
    false
}

impl Flaw {
    /// `body` with this flaw at the size at which its figure is the wanted one; `None` if no size gives it.
    fn sized(self, body: &Body, wanted_mm: f64) -> Option<Body> {
        let (mut low_mm, mut high_mm) = (0.0, (wanted_mm * 3.0).min(LARGEST_MM));
        let beyond_mm = |body: &Body| self.figure_mm(body, wanted_mm - 2.0 * CLOSE_MM) - wanted_mm;
        if beyond_mm(&self.on(body, high_mm)) < 0.0 || beyond_mm(&self.on(body, low_mm)) > 0.0 {
            return None;
        }
        for _ in 0..24 {
            let size_mm = (low_mm + high_mm) / 2.0;
            let made = self.on(body, size_mm);
            let beyond_mm = beyond_mm(&made);
            if beyond_mm.abs() < CLOSE_MM {
                return Some(made);
            }
            *(if beyond_mm < 0.0 {
                &mut low_mm
            } else {
                &mut high_mm
            }) = size_mm;
        }
        None
    }

    fn figure_mm(self, body: &Body, at_least_mm: f64) -> f64 {
        match self {
            Self::Bite { .. } | Self::Notch { .. } | Self::Chip { .. } => {
                body.missing_mm(at_least_mm)
            }
            Self::Burr { .. } => body.excess_mm(at_least_mm),
        }
    }

    fn leaves_one_piece(self, body: &Body) -> bool {
        matches!(self, Self::Burr { .. }) || body.hangs_together()
    }

    fn area_mm2(self, body: &Body) -> f64 {
        match self {
            Self::Bite { .. } | Self::Notch { .. } | Self::Chip { .. } => body.missing_mm2(),
            Self::Burr { .. } => body.excess_mm2(),
        }
    }

    /// `body` with this flaw reaching `size_mm` inwards or outwards from the rim.
    fn on(self, body: &Body, size_mm: f64) -> Body {
        let mut body = body.clone();
        match self {
            Self::Bite { rim, radius_mm } => body.cuts.push(Form::Disc {
                centre: rim.at + rim.outward * (radius_mm - size_mm),
                radius_mm,
            }),
            Self::Notch {
                rim,
                half_rad,
                radius_mm,
            } => body.cuts.push(Form::Wedge {
                apex: rim.at + rim.outward * (radius_mm - size_mm),
                axis: rim.outward,
                half_rad,
                radius_mm,
            }),
            Self::Chip { rim, outward } => body.cuts.push(Form::Beyond {
                at: rim.at - outward * size_mm,
                outward,
            }),
            Self::Burr {
                rim,
                towards,
                radius_mm,
            } => body.burrs.push(Form::Stroke {
                from: rim.at - rim.outward * (2.0 * radius_mm),
                to: rim.at + towards * (size_mm - radius_mm),
                radius_mm,
            }),
        }
        body
    }
}
