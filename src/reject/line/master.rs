//! The asking side of Modbus RTU without a port or a clock: what to send and when, what an answer means, what to repeat.
//!
//! One request is under way at a time. Before each there is a silence of 3.5 characters after the last byte in either
//! direction. An OFF that is not confirmed is repeated, in turns with what is new; an ON is not, because by then its part
//! has gone by.

use std::collections::VecDeque;

use super::coils::{Coils, Request, Style};
use super::fault::{LineFault, LineFaultKind, Record};
use super::modbus::{ANSWER_BYTES, AnswerError, Frame, answer_bytes, check_answer};
use super::{Mode, Signal};
use crate::reject::outlets::MAX_OUTLETS;
use crate::reject::{Outlets, Switch};
use crate::settings;
use crate::units::Micros;

/// How often an OFF is sent before it is given up.
pub(super) const OFF_TRIES: u8 = 10;

const ILLEGAL_FUNCTION: u8 = 0x01;

/// What the port has to do next.
#[derive(Debug)]
pub(super) enum Step {
    /// Nothing to send and nothing to wait for.
    Idle,
    /// Listen, at the longest until this moment.
    Listen(Micros),
    /// Send this now; a signal unless it is a repetition.
    Send(Frame, Option<Signal>),
}

/// Coils, timing, and everything under way.
#[derive(Debug)]
pub(super) struct Master {
    coils: Coils,
    line: settings::Line,
    answer_within_us: Micros,
    waiting: VecDeque<(Request, Micros)>,
    flight: Option<Flight>,
    /// What has come back for it.
    got: Vec<u8>,
    /// Outlets whose OFF has to be repeated, and how often it was sent.
    repeat: Outlets,
    tries: [u8; MAX_OUTLETS],
    repeat_is_next: bool,
    may_be_on: Outlets,
    knows_only_fc05: bool,
    echoes: bool,
    quiet_at: Micros,
    /// When to send in spite of noise on the line.
    send_anyway_at: Option<Micros>,
    record: Record,
}

/// The request under way.
#[derive(Clone, Copy, Debug)]
struct Flight {
    request: Request,
    sent_us: Micros,
    answer_by: Micros,
    echo_is_off: bool,
}

/// An echo and an answer, and some noise.
const LONGEST_ANSWER: usize = 64;

impl Master {
    /// Nothing is known about the line before `now`; every outlet may be on.
    pub(super) fn new(coils: Coils, line: &settings::Line, now: Micros) -> Self {
        Self {
            may_be_on: coils.outlets(),
            coils,
            line: *line,
            answer_within_us: Micros::from_ms(line.answer_within_ms),
            waiting: VecDeque::with_capacity(MAX_OUTLETS),
            flight: None,
            got: Vec::with_capacity(LONGEST_ANSWER),
            repeat: Outlets::NONE,
            tries: [0; MAX_OUTLETS],
            repeat_is_next: false,
            knows_only_fc05: false,
            echoes: false,
            quiet_at: now + line.t3_5_us(),
            send_anyway_at: None,
            record: Record::default(),
        }
    }

    pub(super) fn record(&mut self) -> &mut Record {
        &mut self.record
    }

    pub(super) fn counts(&self) -> &super::LineCounts {
        &self.record.counts
    }

    pub(super) fn may_be_on(&self) -> Outlets {
        self.may_be_on
    }

    pub(super) fn coils(&self) -> &Coils {
        &self.coils
    }

    /// Takes in a switch. It supersedes what is still to be repeated for its outlets.
    pub(super) fn switch(&mut self, switch: &Switch) {
        self.forget_repeats(switch.changed);
        let requests = self.coils.switch(switch, self.knows_only_fc05);
        self.waiting.extend(requests.map(|r| (r, switch.due_us)));
    }

    /// Turns everything off in place of whatever was still to be sent.
    pub(super) fn all_off(&mut self, due_us: Micros) {
        self.forget_repeats(self.coils.outlets());
        self.waiting.clear();
        let requests = self.coils.all_off(self.knows_only_fc05);
        self.waiting.extend(requests.map(|r| (r, due_us)));
    }

    fn forget_repeats(&mut self, outlets: Outlets) {
        self.repeat = self.repeat.without(outlets);
        outlets.iter().for_each(|outlet| self.tries[outlet] = 0);
    }

    /// What to do at `now`.
    pub(super) fn step(&mut self, now: Micros) -> Step {
        if let Some(flight) = self.flight.take_if(|flight| now >= flight.answer_by) {
            self.no_more_to_come(now, flight);
        }
        if let Some(flight) = &self.flight {
            return Step::Listen(flight.answer_by);
        }
        if self.waiting.is_empty() && self.repeat.is_empty() {
            return Step::Idle;
        }
        let patience = self.line.t3_5_us() + self.answer_within_us;
        let send_anyway_at = *self.send_anyway_at.get_or_insert(now + patience);
        let send_at = self.quiet_at.min(send_anyway_at);
        if now < send_at {
            return Step::Listen(send_at);
        }
        self.send_anyway_at = None;
        self.send(now)
    }

    fn send(&mut self, now: Micros) -> Step {
        let turn = self.repeat_is_next || self.waiting.is_empty();
        let repeat = if turn { self.next_repeat() } else { None };
        self.repeat_is_next = repeat.is_none() && !self.repeat.is_empty();
        let (request, due_us) = match repeat {
            Some(request) => (request, None),
            None => match self.waiting.pop_front() {
                Some((request, due_us)) => (request, Some(due_us)),
                None => return Step::Idle,
            },
        };
        self.depart(now, request);
        let signal = due_us.map(|due_us| Signal {
            due_us,
            sent_us: now,
            changed: request.changed,
            on: request.on.within(request.changed),
            frame: request.frame,
            mode: Mode::Sent,
        });
        Step::Send(request.frame, signal)
    }

    fn next_repeat(&self) -> Option<Request> {
        let style = match self.knows_only_fc05 {
            true => Style::Single,
            false => Style::Short,
        };
        let (off, none) = (self.repeat, Outlets::NONE);
        self.coils.requests(off, none, none, style).next()
    }

    fn depart(&mut self, now: Micros, request: Request) {
        let counts = &mut self.record.counts;
        counts.requests += 1;
        let off = request.changed.without(request.on);
        counts.repeats += u64::from(off.iter().any(|outlet| self.tries[outlet] > 0));
        off.iter().for_each(|outlet| self.tries[outlet] += 1);
        self.may_be_on = self.may_be_on.and(request.on);
        let on_the_wire = self
            .line
            .wire_us(request.frame.bytes().len() + ANSWER_BYTES);
        self.flight = Some(Flight {
            request,
            sent_us: now,
            answer_by: now + on_the_wire + self.answer_within_us,
            echo_is_off: false,
        });
        self.got.clear();
        let gone = now + self.line.wire_us(request.frame.bytes().len());
        self.quiet_at = gone + self.line.t3_5_us();
    }

    /// Takes in bytes that were read at `now`.
    pub(super) fn received(&mut self, now: Micros, bytes: &[u8]) {
        self.quiet_at = self.quiet_at.max(now + self.line.t3_5_us());
        let Some(flight) = self.flight.take() else {
            self.record.counts.stray_bytes += bytes.len() as u64;
            return;
        };
        let room = LONGEST_ANSWER - self.got.len();
        let (taken, surplus) = bytes.split_at(bytes.len().min(room));
        self.got.extend_from_slice(taken);
        self.record.counts.stray_bytes += surplus.len() as u64;
        let flight = self.take_echo_off(flight);
        self.judge(now, flight);
    }

    /// Some adapters read back what they send. An FC15 request cannot be mistaken for its answer, so it tells; from then
    /// on the echo of FC05 requests is taken off as well.
    fn take_echo_off(&mut self, mut flight: Flight) -> Flight {
        let request = flight.request.frame;
        let tells = self.echoes || request.bytes().len() > ANSWER_BYTES;
        if tells && !flight.echo_is_off && self.got.starts_with(request.bytes()) {
            self.got.drain(..request.bytes().len());
            flight.echo_is_off = true;
            self.echoes = true;
            self.record.counts.echoes += 1;
        }
        flight
    }

    fn judge(&mut self, now: Micros, flight: Flight) {
        let got = self.got.as_slice();
        let complete = answer_bytes(got).is_some_and(|len| got.len() >= len);
        let request = flight.request.frame;
        match check_answer(&request, got) {
            Ok(()) => self.acknowledged(flight),
            Err(error) if complete && !request.bytes().starts_with(got) => {
                self.failed(now, &flight.request, error.into());
            }
            // The rest of the answer, or of an echo, is on its way.
            Err(_) => self.flight = Some(flight),
        }
    }

    fn no_more_to_come(&mut self, now: Micros, flight: Flight) {
        let within_us = now - flight.sent_us;
        let kind = match check_answer(&flight.request.frame, &self.got) {
            Err(error) if !self.got.is_empty() => error.into(),
            _ => LineFaultKind::NoAnswer { within_us },
        };
        self.failed(now, &flight.request, kind);
    }

    fn acknowledged(&mut self, flight: Flight) {
        self.record.counts.acknowledged += 1;
        self.record.counts.stray_bytes += (self.got.len() - ANSWER_BYTES) as u64;
        let off = flight.request.named.without(flight.request.on);
        self.may_be_on = self.may_be_on.without(off);
        self.forget_repeats(flight.request.named);
    }

    fn failed(&mut self, now: Micros, request: &Request, kind: LineFaultKind) {
        let told_fc15 = request.frame.bytes().len() > ANSWER_BYTES;
        if let LineFaultKind::Answer(AnswerError::Exception { code }) = kind {
            self.knows_only_fc05 |= told_fc15 && code == ILLEGAL_FUNCTION;
        }
        self.fault(now, request.changed, kind);
        let on = request.changed.within(request.on);
        self.record.counts.on_unconfirmed += on.count();
        let newer = self.waiting.iter().map(|(request, _)| request.changed);
        let newer = newer.fold(Outlets::NONE, Outlets::and);
        let off = request.changed.without(on).without(newer);
        off.iter().for_each(|outlet| self.repeat_off(now, outlet));
    }

    fn repeat_off(&mut self, now: Micros, outlet: usize) {
        let tries = self.tries[outlet];
        if tries < OFF_TRIES {
            self.repeat = self.repeat.with(outlet);
            return;
        }
        let one = Outlets::one(outlet);
        self.forget_repeats(one);
        self.fault(now, one, LineFaultKind::OffGivenUp { tries });
    }

    fn fault(&mut self, at_us: Micros, outlets: Outlets, kind: LineFaultKind) {
        self.record.fault(LineFault {
            at_us,
            outlets,
            kind,
        });
    }
}

#[cfg(test)]
mod tests;
