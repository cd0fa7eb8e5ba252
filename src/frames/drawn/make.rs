//! Making one part after the other: a deck of kinds, and each kind's geometry.

use super::body::Body;
use super::dice::{Dice, Stream};
use super::flaw;
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
        add_flaw(&mut body, job, kind, &mut dice);
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

fn add_flaw(body: &mut Body, job: &Job, kind: Kind, dice: &mut Dice) {
    let clear_mm = |limit_mm: f64, most_mm: f64, dice: &mut Dice| {
        let low_mm = limit_mm + CLEAR_MM;
        dice.between(low_mm, farthest_mm(limit_mm).min(most_mm).max(low_mm))
    };
    // What is as small as the natural variation is no flaw.
    let small_mm = |limit_mm: f64, dice: &mut Dice| {
        let most_mm = (limit_mm / 2.0).min(limit_mm - CLEAR_MM);
        (most_mm > 0.2).then(|| dice.between(0.2, most_mm))
    };
    let (missing_mm, excess_mm) = (job.missing_mm, job.excess_mm);
    let deepest_mm = job.nominal.deepest_mm * 0.8;
    let bite_mm = match kind {
        Kind::SmallBite => small_mm(missing_mm, dice),
        Kind::NearBiteWithin => Some(missing_mm - NEAR_MM).filter(|&mm| mm > 0.2),
        Kind::NearBiteOver => Some(missing_mm + NEAR_MM),
        Kind::Bite => Some(clear_mm(missing_mm, deepest_mm, dice)),
        _ => None,
    };
    let burr_mm = match kind {
        Kind::SmallBurr => small_mm(excess_mm, dice),
        Kind::NearBurrWithin => Some(excess_mm - NEAR_MM).filter(|&mm| mm > 0.2),
        Kind::NearBurrOver => Some(excess_mm + NEAR_MM),
        Kind::Burr => Some(clear_mm(excess_mm, f64::INFINITY, dice)),
        _ => None,
    };
    if let Some(bite_mm) = bite_mm {
        flaw::bite(body, bite_mm, dice);
    }
    if let Some(burr_mm) = burr_mm {
        flaw::burr(body, burr_mm, dice);
    }
    if kind == Kind::BrokenTip {
        let most_mm = missing_mm + CLEAR_MM + 1.0;
        flaw::break_tip(body, clear_mm(missing_mm, most_mm, dice), dice);
    }
}
