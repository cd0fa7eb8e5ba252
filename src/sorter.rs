//! The sorter without pictures, threads or clocks: what frames showed goes in, decisions and due switches come out.
//!
//! Everything happens at a moment that follows from the frames' capture times and the settings, never from when
//! [`Sorter::poll`] happens to be called. So a replay, a slow PC and a fast one all do the same.

use crate::belt::{Coverage, Gate, Motion, Part, Parts, Stretch, View};
use crate::health::Health;
use crate::inspect::{Look, seen_at_zero};
use crate::reject::{Loss, OutletTiming, PlanError, Planner, Switch};
use crate::settings::{Policy, Settings};
use crate::shape::{Reason, Verdict};
use crate::units::Micros;

/// What the sorter has to know of the station.
#[derive(Clone, Debug, PartialEq)]
pub struct Plan {
    /// Stated speed of the belt.
    pub speed_mm_s: f64,
    /// How far two views of one part may be apart.
    pub gate: Gate,
    /// The belt that a frame shows when the belt reads 0.
    pub seen_at_zero: Stretch,
    /// How far a piece of belt has moved on from the upstream edge when its verdict falls.
    pub decision_mm: f64,
    /// The outlet for rejected parts and unseen belt.
    pub reject_outlet: usize,
    /// For each shape the outlet of its good parts.
    pub shape_outlets: Vec<Option<usize>>,
    /// What happens to parts that were never seen whole.
    pub partial: Policy,
    /// What happens to unseen belt.
    pub unseen: Policy,
}

/// What the picture alone may move a part's edges from one view to the next.
const GATE_PX: f64 = 3.0;

impl Plan {
    /// What the settings amount to. Their outlets' names were checked when they were loaded.
    ///
    /// # Panics
    /// When a name has no outlet.
    pub fn of(settings: &Settings) -> Self {
        let outlet = |name: &String| {
            settings
                .outlet_named(name)
                .expect("the loader checks outlet names")
        };
        Self {
            speed_mm_s: settings.belt.speed_mm_s,
            gate: Gate {
                base_mm: settings.scale().mm(GATE_PX),
                drift_mm_s: settings.belt.speed_mm_s * settings.speed_tolerance(),
            },
            seen_at_zero: seen_at_zero(&settings.geometry()),
            decision_mm: settings.decision_mm(),
            reject_outlet: outlet(&settings.reject.outlet),
            shape_outlets: settings
                .shapes
                .iter()
                .map(|shape| shape.outlet.as_ref().map(outlet))
                .collect(),
            partial: settings.judge.partial,
            unseen: settings.belt.unseen,
        }
    }
}

/// Why the sorter stopped by itself.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Cause {
    /// A part was never seen whole, and the settings say stop.
    Partial {
        /// Where it lies.
        along_mm: f64,
    },
    /// Belt passed unseen, and the settings say stop.
    Unseen {
        /// Where it begins.
        along_mm: f64,
    },
}

/// Something that happened at its moment.
#[derive(Clone, Debug, PartialEq)]
pub enum Event {
    /// A part's verdict became final; it goes to this outlet, or stays on the belt.
    Part(Part, Option<usize>),
    /// This belt passed the point of decision unseen. Stretches that follow each other come one by one.
    Unseen(Stretch, Micros),
    /// Outlets switch.
    Switch(Switch),
    /// Belt that should have gone to an outlet did not get there, or not in time.
    Lost(Loss),
    /// The sorter stopped: every outlet is off and stays off.
    Stopped(Cause, Micros),
}

/// Belt, parts and rejects of one station.
pub struct Sorter {
    plan: Plan,
    motion: Motion,
    parts: Parts,
    coverage: Coverage,
    planner: Planner,
    views: Vec<View>,
    health: Health,
    latest_us: Micros,
    stopping: Option<Cause>,
    stopped: bool,
}

/// What comes next on the belt.
enum Next {
    Part,
    Unseen,
}

impl Sorter {
    /// The sorter that the settings amount to.
    ///
    /// # Errors
    /// More outlets than one station can switch.
    pub fn of(settings: &Settings) -> Result<Self, PlanError> {
        let timing = |outlet| OutletTiming::of(outlet, &settings.line);
        let planner = Planner::new(settings.outlets.iter().map(timing).collect())?;
        Ok(Self::new(Plan::of(settings), planner))
    }

    /// A belt that reads 0 mm at time 0 and carries nothing yet.
    pub fn new(plan: Plan, planner: Planner) -> Self {
        Self {
            motion: Motion::at_speed(plan.speed_mm_s),
            parts: Parts::new(plan.gate),
            coverage: Coverage::default(),
            planner,
            views: Vec::new(),
            health: Health::default(),
            latest_us: Micros::ZERO,
            stopping: None,
            stopped: false,
            plan,
        }
    }

    /// Lets what a frame showed take effect. The caller polls up to the frame's due time first.
    pub fn take(&mut self, look: &Look) {
        if let Some(belt_mm) = look.belt_mm {
            self.motion.anchor(look.captured_us, belt_mm);
        }
        let belt_mm = self.motion.position_mm(look.captured_us);
        self.views.clear();
        self.views.extend(look.views(belt_mm));
        let seen = self.plan.seen_at_zero;
        let seen = Stretch {
            from_mm: seen.from_mm + belt_mm,
            to_mm: seen.to_mm + belt_mm,
        };
        self.parts.take(&self.views, seen.from_mm);
        self.coverage.cover(seen);
        self.health.frames += 1;
        self.health.specks += u64::from(look.specks);
    }

    /// Counts a frame that was not judged by its due time. It must not be taken on a live belt: what it showed would take
    /// effect late, so its belt is left uncovered.
    pub fn count_overdue(&mut self) {
        self.health.overdue_frames += 1;
    }

    /// No more frames will come, and the belt behind the last one is none of ours.
    pub fn end_of_belt(&mut self) {
        self.coverage.end();
    }

    /// The next thing that happened up to `now`, in the order of time; `None` when there is nothing more.
    pub fn poll(&mut self, now: Micros) -> Option<Event> {
        if self.stopped {
            return None;
        }
        if let Some(loss) = self.planner.next_loss() {
            return Some(Event::Lost(loss));
        }
        if let Some(cause) = self.stopping {
            return Some(self.stop(cause));
        }
        let decision = self.next_decision();
        let decision_us = decision.as_ref().map(|(at, _)| *at).filter(|&at| at <= now);
        let switch_us = self.planner.next_due(&self.motion).filter(|&at| at <= now);
        match (decision_us, switch_us) {
            // A decision first: it may change what is switched at the same moment.
            (Some(at), switch) if switch.is_none_or(|switch| at <= switch) => {
                self.latest_us = self.latest_us.max(at);
                decision.map(|(_, next)| self.decide(next))
            }
            (_, Some(at)) => {
                self.latest_us = self.latest_us.max(at);
                self.planner.poll(now, &self.motion).map(Event::Switch)
            }
            _ => None,
        }
    }

    /// When the next thing happens if no frame comes before; `None` if nothing is left to happen.
    pub fn next_due(&self) -> Option<Micros> {
        let decision = self.next_decision().map(|(at, _)| at);
        let switch = self.planner.next_due(&self.motion);
        [decision, switch]
            .into_iter()
            .flatten()
            .min()
            .filter(|_| !self.stopped)
    }

    /// What was counted.
    pub fn health(&self) -> &Health {
        &self.health
    }

    /// The rejects and what was counted of them.
    pub fn planner(&self) -> &Planner {
        &self.planner
    }

    /// Where the belt is.
    pub fn motion(&self) -> &Motion {
        &self.motion
    }

    fn next_decision(&self) -> Option<(Micros, Next)> {
        let at = |mm: f64| {
            self.motion
                .time_of(mm + self.plan.decision_mm)
                .max(self.latest_us)
        };
        let part = self.parts.next_mm();
        let unseen = self.coverage.next_mm();
        match (part, unseen) {
            (Some(part), unseen) if unseen.is_none_or(|unseen| part <= unseen) => {
                Some((at(part), Next::Part))
            }
            (_, Some(unseen)) => Some((at(unseen), Next::Unseen)),
            _ => None,
        }
    }

    fn decide(&mut self, next: Next) -> Event {
        match next {
            Next::Part => self.decide_part(),
            Next::Unseen => self.decide_unseen(),
        }
    }

    fn decide_part(&mut self) -> Event {
        let mut part = self
            .parts
            .decide(self.latest_us)
            .expect("next_mm() saw a part");
        self.health.parts += 1;
        if part.reasons.has(Reason::Partial) {
            match self.plan.partial {
                Policy::Reject => {}
                Policy::Keep => part.verdict = Verdict::Keep,
                Policy::Stop => {
                    self.stopping = Some(Cause::Partial {
                        along_mm: part.along_mm,
                    })
                }
            }
        }
        let outlet = match part.verdict {
            Verdict::Reject => Some(self.plan.reject_outlet),
            Verdict::Keep => part
                .judged
                .and_then(|judged| self.plan.shape_outlets[judged.shape]),
        };
        if let Some(outlet) = outlet {
            self.open(outlet, part.extent.lead_mm, part.extent.trail_mm);
        }
        Event::Part(part, outlet)
    }

    fn decide_unseen(&mut self) -> Event {
        let stretch = self
            .coverage
            .take_unseen()
            .expect("next_mm() saw a stretch");
        self.health.unseen_mm += stretch.to_mm - stretch.from_mm;
        match self.plan.unseen {
            Policy::Reject => {
                self.open(self.plan.reject_outlet, stretch.from_mm, stretch.to_mm);
            }
            Policy::Keep => {}
            Policy::Stop => {
                self.stopping = Some(Cause::Unseen {
                    along_mm: stretch.from_mm,
                })
            }
        }
        Event::Unseen(stretch, self.latest_us)
    }

    fn open(&mut self, outlet: usize, from_mm: f64, to_mm: f64) {
        self.planner
            .add(self.latest_us, &self.motion, outlet, from_mm, to_mm);
    }

    /// First the all-off, then the word that it stopped.
    fn stop(&mut self, cause: Cause) -> Event {
        if let Some(switch) = self.planner.finish(self.latest_us, &self.motion) {
            return Event::Switch(switch);
        }
        self.stopped = true;
        Event::Stopped(cause, self.latest_us)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::reject::OutletTiming;

    const SPEED_MM_S: f64 = 400.0;
    const DECISION_MM: f64 = 200.0;

    fn sorter(unseen: Policy) -> Sorter {
        let plan = Plan {
            speed_mm_s: SPEED_MM_S,
            gate: Gate {
                base_mm: 0.75,
                drift_mm_s: 8.0,
            },
            seen_at_zero: Stretch {
                from_mm: -160.0,
                to_mm: 0.0,
            },
            decision_mm: DECISION_MM,
            reject_outlet: 0,
            shape_outlets: vec![None],
            partial: Policy::Reject,
            unseen,
        };
        let outlet = OutletTiming {
            distance_mm: 300.0,
            margin_mm: 5.0,
            open_lead_us: Micros::from_ms(20.0),
            close_lead_us: Micros::from_ms(30.0),
            min_on_us: Micros(1),
            min_off_us: Micros(1),
            max_on_us: Micros::from_seconds(10.0),
        };
        Sorter::new(plan, Planner::new(vec![outlet]).unwrap())
    }

    fn empty(captured_ms: f64) -> Look {
        Look {
            captured_us: Micros::from_ms(captured_ms),
            ..Look::default()
        }
    }

    /// Frames at these times, each taking effect 50 ms later, then whatever is left.
    fn events(sorter: &mut Sorter, captured_ms: &[f64], poll_every_ms: Option<f64>) -> Vec<Event> {
        let mut events = Vec::new();
        let mut now = Micros::ZERO;
        for &ms in captured_ms {
            let due = Micros::from_ms(ms + 50.0);
            while let Some(step) = poll_every_ms
                .map(Micros::from_ms)
                .filter(|&step| now + step < due)
            {
                now += step;
                events.extend(std::iter::from_fn(|| sorter.poll(now)));
            }
            events.extend(std::iter::from_fn(|| sorter.poll(due)));
            sorter.take(&empty(ms));
        }
        sorter.end_of_belt();
        while let Some(due) = sorter.next_due() {
            events.extend(std::iter::from_fn(|| sorter.poll(due)));
        }
        events
    }

    /// At 400 mm/s a frame each 300 ms moves the belt 120 mm, so 160 mm of view leave nothing out; a missing frame
    /// leaves 80 mm.
    #[test]
    fn a_missing_frame_leaves_the_belt_that_it_alone_covered() {
        let mut sorter = sorter(Policy::Reject);
        let events = events(&mut sorter, &[0.0, 300.0, 900.0, 1200.0], None);
        assert!((sorter.health().unseen_mm - 80.0).abs() < 1e-9);
        let switches: Vec<_> = events
            .iter()
            .filter_map(|event| match event {
                Event::Switch(switch) => Some(switch.due_us),
                _ => None,
            })
            .collect();
        // Unseen is 120 to 200 mm; open from 120 + 300 - 5 = 415 mm (1037.5 ms) less 20 ms, to 505 mm less 30 ms.
        assert_eq!(switches, [Micros::from_ms(1017.5), Micros::from_ms(1232.5)]);
    }

    #[test]
    fn what_happens_does_not_depend_on_how_often_it_is_asked_for() {
        let frames = [0.0, 300.0, 1500.0, 1800.0];
        let rarely = events(&mut sorter(Policy::Reject), &frames, None);
        let often = events(&mut sorter(Policy::Reject), &frames, Some(0.25));
        assert!(rarely.len() > 100);
        assert_eq!(rarely, often);
    }

    #[test]
    fn kept_unseen_belt_is_counted_and_switches_nothing() {
        let mut sorter = sorter(Policy::Keep);
        let events = events(&mut sorter, &[0.0, 300.0, 900.0], None);
        assert!(
            events
                .iter()
                .all(|event| matches!(event, Event::Unseen(..)))
        );
        assert!(sorter.health().unseen_mm > 79.0);
    }

    #[test]
    fn stop_ends_with_everything_off_and_nothing_after() {
        let mut sorter = sorter(Policy::Stop);
        let events = events(&mut sorter, &[0.0, 300.0, 1500.0, 1800.0], None);
        assert!(
            matches!(events.last(), Some(Event::Stopped(Cause::Unseen { .. }, _))),
            "{events:?}"
        );
        assert_eq!(sorter.next_due(), None);
        assert_eq!(sorter.poll(Micros::MAX), None);
    }
}
