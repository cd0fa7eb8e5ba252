//! Making one part after the other: a deck of kinds, and each kind's geometry.

use super::body::Body;
use super::dice::{Dice, Stream};
use super::flaw::{self, Wanted};
use super::job::{CLEAR_MM, Job, Scene, farthest_mm};
use super::plane::Point;
use super::truth::Kind;

/// How far from its limit a near part is.
const NEAR_MM: f64 = 0.3;
/// Natural variation of size either way.
const VARIATION: f64 = 0.003;

/// The kinds in every thirty parts; the two touching ones are drawn from one card.
const DECK: [(Kind, usize); 12] = [
    (Kind::Good, 13),
    (Kind::SmallBite, 2),
    (Kind::SmallBurr, 2),
    (Kind::NearBiteWithin, 1),
    (Kind::NearBiteOver, 1),
    (Kind::NearBurrWithin, 1),
    (Kind::NearBurrOver, 1),
    (Kind::Bite, 2),
    (Kind::Burr, 2),
    (Kind::BrokenTip, 2),
    (Kind::Touching, 1),
    (Kind::AtEdge, 1),
];

/// Deals the kinds of parts, thirty at a time in random order.
#[derive(Clone, Debug)]
pub(super) struct Deck {
    special: Kind,
    cards: Vec<Kind>,
}

impl Deck {
    pub(super) fn new(scene: Scene) -> Self {
        Self {
            special: match scene {
                Scene::OatStars => Kind::BrokenTip,
                Scene::Gaskets => Kind::Flipped,
            },
            cards: Vec::new(),
        }
    }

    pub(super) fn deal(&mut self, dice: &mut Dice) -> Kind {
        if self.cards.is_empty() {
            let special = self.special;
            self.cards.extend(DECK.iter().flat_map(|&(kind, count)| {
                let kind = if kind == Kind::BrokenTip {
                    special
                } else {
                    kind
                };
                std::iter::repeat_n(kind, count)
            }));
            dice.shuffle(&mut self.cards);
        }
        self.cards.pop().unwrap_or(Kind::Good)
    }
}

/// A part that has been made but lies nowhere yet.
#[derive(Clone, Debug)]
pub(super) struct Made {
    pub number: u64,
    pub kind: Kind,
    pub body: Body,
    /// Unit length: how far it is turned.
    pub turn: Point,
    pub angle_deg: f64,
    pub flipped: bool,
    pub missing_mm: f64,
    pub excess_mm: f64,
    /// How far it reaches to the left, right, top and bottom of its centre.
    pub reach: Reach,
    /// For what is drawn on its surface.
    pub dice: Dice,
}

/// How far a part reaches from its centre in the picture.
#[derive(Clone, Copy, Debug)]
pub(super) struct Reach {
    pub left_mm: f64,
    pub right_mm: f64,
    pub top_mm: f64,
    pub bottom_mm: f64,
}

impl Reach {
    /// No side of the part's box is farther from its centre.
    pub(super) fn farthest_mm(&self) -> f64 {
        let x_mm = self.left_mm.max(self.right_mm);
        x_mm.max(self.top_mm).max(self.bottom_mm)
    }
}

impl Made {
    /// Part `number` of the belt.
    pub(super) fn new(job: &Job, number: u64, kind: Kind) -> Self {
        let mut dice = Dice::new(job.drawing.seed, Stream::Part(number));
        let mut body = Body {
            nominal: job.nominal.clone(),
            scale: 1.0 + dice.between(-VARIATION, VARIATION),
            cuts: Vec::new(),
            burrs: Vec::new(),
        };
        let flawless = matches!(kind, Kind::Flipped | Kind::Touching | Kind::AtEdge);
        let as_meant = flawless || add_flaw(&mut body, job, kind, &mut dice);
        let kind = if as_meant { kind } else { Kind::Good };
        let angle_deg = dice.between(0.0, 360.0);
        let mut made = Self {
            number,
            kind,
            turn: Point::towards(angle_deg.to_radians()),
            angle_deg,
            flipped: kind == Kind::Flipped,
            missing_mm: body.missing_mm(0.0),
            excess_mm: body.excess_mm(0.0),
            body,
            reach: Reach {
                left_mm: 0.0,
                right_mm: 0.0,
                top_mm: 0.0,
                bottom_mm: 0.0,
            },
            dice,
        };
        made.reach = made.reaches();
        made
    }

    /// From the picture's directions, about the part's centre, to the part's own.
    pub(super) fn own(&self, away: Point) -> Point {
        let mut own = away.turned_back(self.turn);
        if self.flipped {
            own.x_mm = -own.x_mm;
        }
        own
    }

    /// From the part's own directions to the picture's.
    pub(super) fn seen(&self, mut own: Point) -> Point {
        if self.flipped {
            own.x_mm = -own.x_mm;
        }
        own.turned(self.turn)
    }

    /// Distance to the part's outline at `away` from its centre, negative inside.
    pub(super) fn signed_mm(&self, away: Point) -> f64 {
        self.body.signed_mm(self.own(away))
    }

    fn reaches(&self) -> Reach {
        let reach_mm = |x, y| self.body.reach_mm(self.own(Point::new(x, y)));
        Reach {
            left_mm: reach_mm(-1.0, 0.0),
            right_mm: reach_mm(1.0, 0.0),
            top_mm: reach_mm(0.0, -1.0),
            bottom_mm: reach_mm(0.0, 1.0),
        }
    }
}

/// Gives `body` the flaw of `kind`. `false` where there is none to give: not asked for, limits too narrow for one, or
/// no place for it.
fn add_flaw(body: &mut Body, job: &Job, kind: Kind, dice: &mut Dice) -> bool {
    let (missing_mm, excess_mm) = (job.missing_mm, job.excess_mm);
    let deepest_mm = job.nominal.deepest_mm * 0.8;
    let (add, depth_mm): (fn(&mut Body, Wanted, &mut Dice) -> bool, _) = match kind {
        Kind::SmallBite => (flaw::bite, small_mm(missing_mm, dice)),
        Kind::NearBiteWithin => (flaw::bite, Some(missing_mm - NEAR_MM)),
        Kind::NearBiteOver => (flaw::bite, Some(missing_mm + NEAR_MM)),
        Kind::Bite => (flaw::bite, Some(clear_mm(missing_mm, deepest_mm, dice))),
        Kind::SmallBurr => (flaw::burr, small_mm(excess_mm, dice)),
        Kind::NearBurrWithin => (flaw::burr, Some(excess_mm - NEAR_MM)),
        Kind::NearBurrOver => (flaw::burr, Some(excess_mm + NEAR_MM)),
        Kind::Burr => (flaw::burr, Some(clear_mm(excess_mm, f64::INFINITY, dice))),
        Kind::BrokenTip => {
            let most_mm = missing_mm + CLEAR_MM + 1.0;
            (flaw::break_tip, Some(clear_mm(missing_mm, most_mm, dice)))
        }
        Kind::Good | Kind::Flipped | Kind::Touching | Kind::AtEdge => return false,
    };
    let wanted = depth_mm
        .filter(|&mm| mm >= LEAST_MM)
        .map(|depth_mm| Wanted {
            depth_mm,
            area_mm2: if depth_mm > SHALLOW_MM {
                2.0 * job.flaw_mm2
            } else {
                0.0
            },
        });
    wanted.is_some_and(|wanted| add(body, wanted, dice))
}

/// What is shallower is lost in the natural variation of size.
const LEAST_MM: f64 = 0.12;
/// What is shallower may be too small to count.
const SHALLOW_MM: f64 = 0.3;

/// Well within a limit: either hardly there, or large enough to count.
fn small_mm(limit_mm: f64, dice: &mut Dice) -> Option<f64> {
    let (low_mm, most_mm) = (2.5 * SHALLOW_MM, limit_mm - CLEAR_MM);
    let shallow_mm = SHALLOW_MM.min(most_mm);
    if most_mm > low_mm && dice.coin() {
        Some(dice.between(low_mm, most_mm))
    } else {
        (shallow_mm > LEAST_MM).then(|| dice.between(LEAST_MM, shallow_mm))
    }
}

/// Clearly over a limit, up to three times as much.
fn clear_mm(limit_mm: f64, most_mm: f64, dice: &mut Dice) -> f64 {
    let low_mm = limit_mm + CLEAR_MM;
    dice.between(low_mm, farthest_mm(limit_mm).min(most_mm).max(low_mm))
}
