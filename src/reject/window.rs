//! One outlet: its windows in belt millimetres, and when it has to change.
//!
//! A window stays in millimetres until its signal goes out, so a belt that stands neither fires it nor lets it age.

use std::collections::VecDeque;

use super::ledger::{Ledger, Loss, Why};
use crate::belt::Motion;
use crate::settings::{Line, Outlet};
use crate::units::Micros;

/// Where an outlet is and how fast it follows its signal.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct OutletTiming {
    /// From the picture's upstream edge to the middle of the outlet, along the belt.
    pub distance_mm: f64,
    /// How much earlier it opens and later it closes than the edges ask for.
    pub margin_mm: f64,
    /// From the signal to the open valve: wire and valve.
    pub open_lead_us: Micros,
    /// From the signal to the shut valve: wire and valve.
    pub close_lead_us: Micros,
    /// The shortest time from ON to OFF that the valve and the wire can follow.
    pub min_on_us: Micros,
    /// The shortest time from OFF to ON that the valve and the wire can follow.
    pub min_off_us: Micros,
    /// The longest time from ON to OFF.
    pub max_on_us: Micros,
}

impl OutletTiming {
    /// The timing that the settings amount to, for messages that switch one coil.
    pub fn of(outlet: &Outlet, line: &Line) -> Self {
        let message = line.switch_us();
        let request_and_answer = line.exchange_us();
        let open_delay = Micros::from_ms(outlet.open_delay_ms);
        let close_delay = Micros::from_ms(outlet.close_delay_ms);
        Self {
            distance_mm: outlet.distance_mm,
            margin_mm: outlet.margin_mm,
            open_lead_us: message + open_delay,
            close_lead_us: message + close_delay,
            min_on_us: request_and_answer.max(open_delay),
            min_off_us: request_and_answer.max(close_delay),
            max_on_us: Micros::from_ms(outlet.max_on_ms),
        }
    }
}

/// Belt readings between which the outlet is to be open.
#[derive(Clone, Copy, Debug)]
struct Stretch {
    from_mm: f64,
    to_mm: f64,
}

impl Stretch {
    fn length_mm(self) -> f64 {
        self.to_mm - self.from_mm
    }

    /// What of it lies beyond `belt_mm`.
    fn beyond_mm(self, belt_mm: f64) -> f64 {
        (self.to_mm - self.from_mm.max(belt_mm)).max(0.0)
    }

    /// What of it lies before `belt_mm`.
    fn before_mm(self, belt_mm: f64) -> f64 {
        (self.to_mm.min(belt_mm) - self.from_mm).max(0.0)
    }

    fn touches(self, other: Self) -> bool {
        self.from_mm <= other.to_mm && other.from_mm <= self.to_mm
    }

    fn joined(self, other: Self) -> Self {
        Self {
            from_mm: self.from_mm.min(other.from_mm),
            to_mm: self.to_mm.max(other.to_mm),
        }
    }
}

/// The outlet is on.
#[derive(Clone, Copy, Debug)]
struct Pulse {
    on_us: Micros,
    belt: Stretch,
}

/// The last time it was on.
#[derive(Clone, Copy, Debug)]
struct Ended {
    belt: Stretch,
    /// Shut before the belt's end had passed.
    cut: bool,
}

/// The next change of an outlet that is on.
struct Closing {
    at_us: Micros,
    /// How many waiting stretches are too near to shut in between.
    joined: usize,
    to_mm: f64,
    cut: bool,
}

/// What a due moment brought.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Change {
    On,
    Off,
    /// Its window had passed; nothing to switch.
    Nothing,
}

/// One outlet with its windows.
#[derive(Debug)]
pub(super) struct Track {
    outlet: usize,
    timing: OutletTiming,
    /// Still to come: sorted, and nowhere touching.
    waiting: VecDeque<Stretch>,
    pulse: Option<Pulse>,
    ended: Option<Ended>,
    /// Not on again before this.
    ready_us: Micros,
}

impl Track {
    pub(super) fn new(outlet: usize, mut timing: OutletTiming) -> Self {
        // A pulse or a pause of no length would put two changes on one moment.
        timing.min_on_us = timing.min_on_us.max(Micros(1));
        timing.min_off_us = timing.min_off_us.max(Micros(1));
        timing.max_on_us = timing.max_on_us.max(Micros(1));
        Self {
            outlet,
            timing,
            waiting: VecDeque::with_capacity(64),
            pulse: None,
            ended: None,
            ready_us: Micros(i64::MIN),
        }
    }

    /// Takes in a window at the moment `now`; everything due by then has been switched.
    pub(super) fn add(
        &mut self,
        now: Micros,
        motion: &Motion,
        edges_mm: [f64; 2],
        ledger: &mut Ledger,
    ) {
        ledger.counts.windows += 1;
        let shift_mm = self.timing.distance_mm;
        let window = Stretch {
            from_mm: edges_mm[0] + shift_mm - self.timing.margin_mm,
            to_mm: edges_mm[1] + shift_mm + self.timing.margin_mm,
        };
        let Some(window) = self.not_yet_ended(now, window, ledger) else {
            return;
        };
        let on_us = self.pulse.map_or(now.max(self.ready_us), |p| p.on_us);
        if self.has_passed(on_us, window, motion) {
            return self.lose(now, Why::Missed, window.length_mm(), ledger);
        }
        match self.pulse {
            Some(pulse) if window.from_mm <= pulse.belt.to_mm => {
                self.note_if_late(on_us, window, motion, ledger);
                let belt = self.absorb(pulse.belt.joined(window));
                self.pulse = Some(Pulse { belt, ..pulse });
            }
            _ => self.wait_for(window),
        }
    }

    /// What of a new window the last pulse leaves to do. One stretch of belt gets one pulse: what touches a stretch
    /// that was cut is lost with it, whenever it was added.
    fn not_yet_ended(
        &mut self,
        now: Micros,
        window: Stretch,
        ledger: &mut Ledger,
    ) -> Option<Stretch> {
        let Some(Ended { belt, cut }) = self.ended.filter(|ended| ended.belt.touches(window))
        else {
            return Some(window);
        };
        if cut {
            self.lose_with(now, belt, window, ledger);
            return None;
        }
        if window.from_mm < belt.from_mm {
            return Some(window);
        }
        let rest = Stretch {
            from_mm: belt.to_mm,
            ..window
        };
        (rest.length_mm() > 0.0).then_some(rest)
    }

    fn lose_with(&mut self, now: Micros, cut: Stretch, window: Stretch, ledger: &mut Ledger) {
        let belt = cut.joined(window);
        let lost_mm = belt.beyond_mm(cut.to_mm) + belt.before_mm(cut.from_mm);
        if lost_mm > 0.0 {
            self.lose(now, Why::Cut, lost_mm, ledger);
        }
        self.ended = Some(Ended { belt, cut: true });
    }

    /// Joins `stretch` with everything waiting that touches it, and takes that out of the queue.
    fn absorb(&mut self, mut stretch: Stretch) -> Stretch {
        self.waiting.retain(|&waiting| {
            let apart = !waiting.touches(stretch);
            if !apart {
                stretch = stretch.joined(waiting);
            }
            apart
        });
        stretch
    }

    fn wait_for(&mut self, window: Stretch) {
        let stretch = self.absorb(window);
        let place = self
            .waiting
            .partition_point(|waiting| waiting.from_mm < stretch.from_mm);
        self.waiting.insert(place, stretch);
    }

    /// When the outlet changes next, at `floor` at the earliest; never while the belt stands before the place.
    pub(super) fn next_us(&self, floor: Micros, motion: &Motion) -> Option<Micros> {
        let at_us = match self.pulse {
            Some(pulse) => self.closing(pulse, motion).at_us,
            None => self
                .opening_us(self.waiting.front()?.from_mm, motion)
                .max(self.ready_us),
        };
        const NEVER: Micros = Micros(i64::MAX / 2);
        (at_us < NEVER).then_some(at_us.max(floor))
    }

    /// Makes the change that [`Self::next_us`] gave `at_us` for.
    pub(super) fn change(&mut self, at_us: Micros, motion: &Motion, ledger: &mut Ledger) -> Change {
        if let Some(pulse) = self.pulse {
            self.close(at_us, pulse, motion, ledger);
            return Change::Off;
        }
        let Some(belt) = self.waiting.pop_front() else {
            return Change::Nothing;
        };
        if self.has_passed(at_us, belt, motion) {
            self.lose(at_us, Why::Missed, belt.length_mm(), ledger);
            return Change::Nothing;
        }
        self.note_if_late(at_us, belt, motion, ledger);
        self.pulse = Some(Pulse { on_us: at_us, belt });
        ledger.counts.pulses += 1;
        Change::On
    }

    fn close(&mut self, at_us: Micros, pulse: Pulse, motion: &Motion, ledger: &mut Ledger) {
        let closing = self.closing(pulse, motion);
        self.waiting.drain(..closing.joined);
        let belt = Stretch {
            to_mm: closing.to_mm,
            ..pulse.belt
        };
        if closing.cut {
            // With the pauses in between: a window that is added there later is already counted.
            let shut_mm = motion.position_mm(at_us + self.timing.close_lead_us);
            self.lose(at_us, Why::Cut, belt.beyond_mm(shut_mm), ledger);
        }
        self.ended = Some(Ended {
            belt,
            cut: closing.cut,
        });
        self.pulse = None;
        self.ready_us = at_us + self.timing.min_off_us;
    }

    /// When an outlet that is on goes off: not before the valve can follow, not for a pause that it could not follow,
    /// and not later than its limit.
    fn closing(&self, pulse: Pulse, motion: &Motion) -> Closing {
        let earliest_us = pulse.on_us + self.timing.min_on_us;
        let limit_us = pulse.on_us + self.timing.max_on_us;
        let mut to_mm = pulse.belt.to_mm;
        let mut joined = 0;
        loop {
            let wanted_us = self.closing_us(to_mm, motion).max(earliest_us);
            let at_us = wanted_us.min(limit_us);
            let on_again_us = at_us + self.timing.min_off_us;
            match self.waiting.get(joined) {
                Some(next) if self.opening_us(next.from_mm, motion) < on_again_us => {
                    to_mm = next.to_mm;
                    joined += 1;
                }
                _ => {
                    return Closing {
                        at_us,
                        joined,
                        to_mm,
                        cut: wanted_us > limit_us,
                    };
                }
            }
        }
    }

    /// Ends at `now`: what is still waiting or open is lost.
    pub(super) fn end(&mut self, now: Micros, motion: &Motion, ledger: &mut Ledger) {
        let shut_mm = motion.position_mm(now + self.timing.close_lead_us);
        if let Some(pulse) = self.pulse.take() {
            let lost_mm = pulse.belt.beyond_mm(shut_mm);
            if lost_mm > 0.0 {
                self.lose(now, Why::Ended, lost_mm, ledger);
            }
        }
        while let Some(belt) = self.waiting.pop_front() {
            self.lose(now, Why::Ended, belt.length_mm(), ledger);
        }
    }

    fn opening_us(&self, belt_mm: f64, motion: &Motion) -> Micros {
        motion.time_of(belt_mm) - self.timing.open_lead_us
    }

    fn closing_us(&self, belt_mm: f64, motion: &Motion) -> Micros {
        motion.time_of(belt_mm) - self.timing.close_lead_us
    }

    /// Whether an outlet switched on at `on_us` opens after all of `belt` has gone by.
    fn has_passed(&self, on_us: Micros, belt: Stretch, motion: &Motion) -> bool {
        on_us > self.opening_us(belt.from_mm, motion)
            && on_us >= self.opening_us(belt.to_mm, motion)
    }

    fn note_if_late(&self, on_us: Micros, belt: Stretch, motion: &Motion, ledger: &mut Ledger) {
        let by_us = on_us - self.opening_us(belt.from_mm, motion);
        if by_us > Micros::ZERO {
            let open_mm = motion.position_mm(on_us + self.timing.open_lead_us);
            let lost_mm = belt.before_mm(open_mm);
            self.lose(on_us, Why::Late { by_us }, lost_mm, ledger);
        }
    }

    fn lose(&self, at_us: Micros, why: Why, lost_mm: f64, ledger: &mut Ledger) {
        ledger.lose(Loss {
            outlet: self.outlet,
            at_us,
            why,
            lost_mm,
        });
    }
}
