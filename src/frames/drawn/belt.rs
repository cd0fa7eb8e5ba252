//! Laying parts on the belt, one after the other, in rows.

use crate::settings::Travel;

use super::dice::{Dice, Stream};
use super::job::{APART_MM, Job, Lane};
use super::make::{Deck, Made};
use super::plane::Point;
use super::search::{Square, highest};
use super::truth::{Against, Kind, Truth};

/// A part on the belt.
#[derive(Clone, Debug)]
pub(super) struct Part {
    pub made: Made,
    pub truth: Truth,
    /// Its centre in belt coordinates that grow with x and y in the picture, see [`x_mm`].
    pub centre: Point,
    /// Where its thing begins along the belt; later things begin no earlier.
    pub begins_mm: f64,
    /// Where the part itself ends along the belt.
    pub ends_mm: f64,
}

impl Part {
    /// Distance to its outline, negative inside.
    pub(super) fn signed_mm(&self, at: Point) -> f64 {
        self.made.signed_mm(at - self.centre)
    }
}

/// The belt coordinate that grows with x in the picture, from the one that grows upstream.
pub(super) fn x_mm(travel: Travel, along_mm: f64) -> f64 {
    match travel {
        Travel::Right => -along_mm,
        Travel::Left => along_mm,
    }
}

/// The parts of a belt in the order in which their things begin.
#[derive(Clone, Debug)]
pub(super) struct Parts {
    job: Job,
    dice: Dice,
    deck: Deck,
    /// Where the next thing begins in each row.
    begins_mm: Vec<f64>,
    made: u64,
    things: u64,
    /// The second of two that touch.
    second: Option<Part>,
}

impl Parts {
    pub(super) fn new(job: Job) -> Self {
        let mut dice = Dice::new(job.drawing.seed, Stream::Belt);
        let begins_mm = job.lanes.iter().map(|_| dice.between(8.0, 30.0)).collect();
        Self {
            deck: Deck::new(job.drawing.scene),
            dice,
            begins_mm,
            made: 0,
            things: 0,
            second: None,
            job,
        }
    }

    fn make(&mut self, kind: Kind) -> Made {
        let made = Made::new(&self.job, self.made, kind);
        self.made += 1;
        made
    }

    /// Puts one part into its row, its front at `begins_mm`.
    fn lay(&mut self, made: Made, lane: usize, begins_mm: f64) -> Part {
        let job = &self.job;
        let (front_mm, _) = ends(job.travel, &made);
        let along_mm = begins_mm + front_mm;
        let across_mm = match made.kind {
            Kind::AtEdge => across_edge(job, lane, &made, &mut self.dice),
            _ => within(job.lanes[lane], &made, &mut self.dice),
        };
        self.part(made, along_mm, across_mm, begins_mm)
    }

    fn part(&self, made: Made, along_mm: f64, across_mm: f64, begins_mm: f64) -> Part {
        let job = &self.job;
        let truth = Truth {
            part: made.number,
            thing: self.things,
            along_mm,
            across_mm,
            angle_deg: made.angle_deg,
            flipped: made.flipped,
            kind: made.kind,
            scale: made.body.scale,
            missing_mm: made.missing_mm,
            excess_mm: made.excess_mm,
            against: Against {
                missing: made.missing_mm > job.missing_mm,
                excess: made.excess_mm > job.excess_mm,
                partial: made.kind == Kind::AtEdge && job.reject_partial,
                touching: made.kind == Kind::Touching,
                flipped: made.flipped && job.reject_flipped,
            },
        };
        let (_, back_mm) = ends(job.travel, &made);
        Part {
            centre: Point::new(x_mm(job.travel, along_mm), across_mm),
            begins_mm,
            ends_mm: along_mm + back_mm,
            truth,
            made,
        }
    }

    /// Puts a second part right behind the first, so near that the two overlap by [`OVERLAP_MM`].
    fn lay_behind(&mut self, first: &Part, lane: usize) -> Part {
        let made = self.make(Kind::Touching);
        let across_mm = within(self.job.lanes[lane], &made, &mut self.dice);
        let at = |along_mm| self.part(made.clone(), along_mm, across_mm, first.begins_mm);
        let (mut near_mm, mut far_mm) = (0.0, 4.0 * self.job.nominal.radius_mm);
        while far_mm - near_mm > 1e-3 {
            let middle_mm = (near_mm + far_mm) / 2.0;
            let overlap_mm = overlap_mm(first, &at(first.truth.along_mm + middle_mm));
            *(if overlap_mm > OVERLAP_MM {
                &mut near_mm
            } else {
                &mut far_mm
            }) = middle_mm;
        }
        at(first.truth.along_mm + near_mm)
    }

    /// Where the next thing in this row begins at the earliest.
    fn go_on(&mut self, lane: usize, last: &Part, front_mm: f64) {
        let pitch_mm = self.job.pitch_mm * self.dice.between(1.0, 1.12);
        let gap_mm = self.dice.between(2.0 * APART_MM, 4.0 * APART_MM);
        self.begins_mm[lane] = (front_mm + pitch_mm).max(last.ends_mm + gap_mm);
    }
}

impl Iterator for Parts {
    type Item = Part;

    fn next(&mut self) -> Option<Part> {
        if let Some(second) = self.second.take() {
            return Some(second);
        }
        if self.made == self.job.drawing.parts {
            return None;
        }
        let lane = (0..self.begins_mm.len())
            .min_by(|&a, &b| self.begins_mm[a].total_cmp(&self.begins_mm[b]))?;
        let begins_mm = self.begins_mm[lane];
        let mut kind = self.deck.deal(&mut self.dice);
        if kind == Kind::Touching && self.made + 1 == self.job.drawing.parts {
            kind = Kind::Good;
        }
        let made = self.make(kind);
        let first = self.lay(made, lane, begins_mm);
        if kind == Kind::Touching {
            let second = self.lay_behind(&first, lane);
            let front_mm = second.truth.along_mm - ends(self.job.travel, &second.made).0;
            self.go_on(lane, &second, front_mm);
            self.second = Some(second);
        } else {
            self.go_on(lane, &first, begins_mm);
        }
        self.things += 1;
        Some(first)
    }
}

/// How deep two parts that touch lie in each other: enough for a neck of several pixels.
const OVERLAP_MM: f64 = 0.8;

/// Twice the inside distance of the point that lies deepest in both; 0 when none does.
fn overlap_mm(a: &Part, b: &Part) -> f64 {
    let all = Square {
        centre: (a.centre + b.centre) * 0.5,
        half_mm: 2.0 * a.made.body.nominal.radius_mm,
    };
    let both_mm = |p: Point| -a.signed_mm(p).max(b.signed_mm(p));
    2.0 * highest(all, 0.0, both_mm, |p| -both_mm(p))
}

/// How far a part reaches downstream and upstream from its centre.
fn ends(travel: Travel, made: &Made) -> (f64, f64) {
    match travel {
        Travel::Right => (made.reach.right_mm, made.reach.left_mm),
        Travel::Left => (made.reach.left_mm, made.reach.right_mm),
    }
}

/// Somewhere near the middle of the row, whole, and apart from the next row.
fn within(lane: Lane, made: &Made, dice: &mut Dice) -> f64 {
    const WANDER_MM: f64 = 4.0;
    let low_mm = lane.top_mm + APART_MM + made.reach.top_mm;
    let high_mm = lane.bottom_mm - APART_MM - made.reach.bottom_mm;
    let middle_mm = (lane.top_mm + lane.bottom_mm) / 2.0;
    let wish_mm = middle_mm + dice.between(-WANDER_MM, WANDER_MM);
    wish_mm.max(low_mm).min(high_mm)
}

/// So that the outer edge of the picture takes a slice off the part.
fn across_edge(job: &Job, lane: usize, made: &Made, dice: &mut Dice) -> f64 {
    let off_mm = dice.between(3.0, 8.0);
    let only = job.lanes.len() == 1;
    if lane == 0 && !(only && dice.coin()) {
        job.lanes[lane].top_mm + made.reach.top_mm - off_mm
    } else {
        job.lanes[lane].bottom_mm - made.reach.bottom_mm + off_mm
    }
}
