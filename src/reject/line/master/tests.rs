//! The asking side against simulated devices on a simulated clock.

use super::*;
use crate::reject::line::modbus::crc16;
use crate::settings::Parity;

fn line(baud: u32) -> settings::Line {
    settings::Line {
        unit: 1,
        baud,
        parity: Parity::Even,
        answer_within_ms: 20.0,
    }
}

/// A master on a clock of its own, and everything that went out, with the moment.
struct Bench {
    master: Master,
    now: Micros,
    sent: Vec<(Micros, Vec<u8>)>,
    signals: Vec<Signal>,
}

/// What a device does with the request number `n`: bytes, each batch with how long it takes.
type Device<'a> = &'a mut dyn FnMut(usize, &[u8]) -> Vec<(i64, Vec<u8>)>;

impl Bench {
    fn new(coils: &[u16], baud: u32) -> Self {
        let coils = Coils::new(1, coils).unwrap();
        Self {
            master: Master::new(coils, &line(baud), Micros::ZERO),
            now: Micros::ZERO,
            sent: Vec::new(),
            signals: Vec::new(),
        }
    }

    fn off_and_on(&mut self, changed: Outlets, on: Outlets) {
        let due_us = self.now;
        self.master.switch(&Switch {
            due_us,
            changed,
            on,
        });
    }

    /// Runs until nothing is left to do.
    fn run(&mut self, device: Device) {
        loop {
            match self.master.step(self.now) {
                Step::Idle => return,
                Step::Listen(until) => self.now = until,
                Step::Send(frame, signal) => {
                    let bytes = frame.bytes().to_vec();
                    self.signals.extend(signal);
                    self.sent.push((self.now, bytes.clone()));
                    for (after_us, answer) in device(self.sent.len() - 1, &bytes) {
                        self.now += Micros(after_us);
                        self.master.received(self.now, &answer);
                    }
                }
            }
        }
    }

    fn hex(&self) -> Vec<String> {
        let hex = |b: &u8| format!("{b:02X}");
        let line = |bytes: &Vec<u8>| bytes[..bytes.len() - 2].iter().map(hex).collect::<String>();
        self.sent.iter().map(|(_, bytes)| line(bytes)).collect()
    }

    fn faults(&mut self) -> Vec<LineFaultKind> {
        let next = || self.master.record().next_fault();
        std::iter::from_fn(next).map(|fault| fault.kind).collect()
    }
}

fn sealed(mut body: Vec<u8>) -> Vec<u8> {
    let crc = crc16(&body).to_le_bytes();
    body.extend(crc);
    body
}

fn good(request: &[u8]) -> Vec<u8> {
    sealed(request[..6].to_vec())
}

fn exception(request: &[u8], code: u8) -> Vec<u8> {
    sealed(vec![request[0], request[1] | 0x80, code])
}

const ALL_OFF: Outlets = Outlets::NONE;

#[test]
fn on_and_off_are_sent_once_when_all_is_well() {
    let mut bench = Bench::new(&[7], 19_200);
    bench.master.all_off(Micros::ZERO);
    bench.run(&mut |_, request| vec![(9_000, good(request))]);
    assert!(bench.master.may_be_on().is_empty());
    bench.off_and_on(Outlets::one(0), Outlets::one(0));
    bench.run(&mut |_, request| vec![(9_000, good(request))]);
    assert_eq!(bench.master.may_be_on(), Outlets::one(0));
    bench.off_and_on(Outlets::one(0), ALL_OFF);
    bench.run(&mut |_, request| vec![(9_000, good(request))]);
    assert_eq!(
        bench.hex(),
        ["010F000700010100", "01050007FF00", "010500070000"]
    );
    assert!(bench.master.may_be_on().is_empty());
    assert_eq!(bench.signals.len(), 3);
    let counts = *bench.master.counts();
    assert_eq!(
        (counts.requests, counts.acknowledged, counts.repeats),
        (3, 3, 0)
    );
    assert!(bench.faults().is_empty());
}

/// Source: MODBUS over Serial Line V1.02, 2.5.1.1: at least 3.5 characters of silence between frames: 2.005 ms at 19200.
#[test]
fn there_is_silence_before_every_request() {
    let mut bench = Bench::new(&[0, 5], 19_200);
    bench.off_and_on(Outlets::first(2), Outlets::first(2));
    let mut answered = Vec::new();
    bench.run(&mut |_, request| {
        answered.push(8_000);
        // In two pieces, as a driver hands them over.
        let answer = good(request);
        vec![(6_000, answer[..3].to_vec()), (2_000, answer[3..].to_vec())]
    });
    assert_eq!(bench.sent[0].0, Micros(2_006));
    assert_eq!(bench.sent[1].0, Micros(2_006 + 8_000 + 2_006));
}

#[test]
fn a_mute_device_gets_off_ten_times_and_on_once() {
    let mut bench = Bench::new(&[0], 115_200);
    bench.off_and_on(Outlets::one(0), Outlets::one(0));
    bench.run(&mut |_, _| vec![]);
    assert_eq!(bench.sent.len(), 1);
    assert_eq!(bench.master.counts().on_unconfirmed, 1);
    bench.off_and_on(Outlets::one(0), ALL_OFF);
    bench.run(&mut |_, _| vec![]);
    assert_eq!(bench.sent.len(), 1 + usize::from(OFF_TRIES));
    assert_eq!(bench.signals.len(), 2);
    let counts = *bench.master.counts();
    assert_eq!(
        (counts.no_answer, counts.repeats, counts.off_given_up),
        (11, 9, 1)
    );
    assert_eq!(bench.master.may_be_on(), Outlets::one(0));
    let tries = OFF_TRIES;
    assert_eq!(
        bench.faults().last(),
        Some(&LineFaultKind::OffGivenUp { tries })
    );
}

#[test]
fn off_is_repeated_until_it_is_confirmed() {
    let mut bench = Bench::new(&[0, 1], 115_200);
    bench.off_and_on(Outlets::first(2), Outlets::one(1));
    bench.run(&mut |n, request| match n {
        0 => vec![],
        1 => vec![(3_000, exception(request, 6))],
        2 => vec![(3_000, vec![0x55; 8])],
        3 => vec![(3_000, good(&[9, 5, 0, 0, 0, 0]))],
        4 => vec![(3_000, good(request)[..5].to_vec())],
        _ => vec![(3_000, good(request))],
    });
    let repeated = "010500000000";
    assert_eq!(bench.hex()[0], "010F000000020102");
    assert!(bench.hex()[1..].iter().all(|request| request == repeated));
    assert_eq!(bench.sent.len(), 6);
    let counts = *bench.master.counts();
    assert_eq!(
        (counts.no_answer, counts.exceptions, counts.wrong_unit),
        (1, 1, 1)
    );
    assert_eq!((counts.garbled, counts.acknowledged), (2, 1));
    assert_eq!((counts.repeats, counts.on_unconfirmed), (5, 1));
    // The other one was told to go on and nobody knows whether it did.
    assert!(bench.master.may_be_on().has(1) && !bench.master.may_be_on().has(0));
}

#[test]
fn a_device_that_knows_only_fc05_is_spoken_to_in_fc05() {
    let mut bench = Bench::new(&[3, 4], 38_400);
    let mut simple = |_: usize, request: &[u8]| match request[1] {
        5 => vec![(5_000, good(request))],
        _ => vec![(5_000, exception(request, 1))],
    };
    bench.master.all_off(Micros::ZERO);
    bench.run(&mut simple);
    assert!(bench.master.may_be_on().is_empty());
    bench.off_and_on(Outlets::first(2), Outlets::first(2));
    bench.run(&mut simple);
    assert_eq!(
        bench.hex(),
        [
            "010F000300020100",
            "010500030000",
            "010500040000",
            "01050003FF00",
            "01050004FF00"
        ]
    );
    assert_eq!(bench.master.counts().on_unconfirmed, 0);
}

#[test]
fn an_adapter_that_reads_back_what_it_sends_is_no_device() {
    let mut bench = Bench::new(&[0], 115_200);
    bench.master.all_off(Micros::ZERO);
    bench.run(&mut |_, request| vec![(1_000, request.to_vec())]);
    assert_eq!(
        bench.master.may_be_on(),
        Outlets::one(0),
        "only the echo came"
    );
    assert_eq!(bench.master.counts().acknowledged, 0);
    // With a device behind it, also when echo and answer come in odd pieces.
    let mut echoing = |_: usize, request: &[u8]| {
        let all = [request.to_vec(), good(request)].concat();
        let (head, tail) = all.split_at(9);
        vec![(1_000, head.to_vec()), (1_000, tail.to_vec())]
    };
    bench.master.all_off(Micros::ZERO);
    bench.run(&mut echoing);
    assert!(bench.master.may_be_on().is_empty());
    bench.off_and_on(Outlets::one(0), Outlets::one(0));
    bench.off_and_on(Outlets::one(0), ALL_OFF);
    bench.run(&mut echoing);
    assert_eq!(bench.master.counts().acknowledged, 3);
    assert_eq!(bench.master.counts().stray_bytes, 0);
}

#[test]
fn what_is_new_is_not_held_up_by_repetitions() {
    let mut bench = Bench::new(&[0, 9], 115_200);
    bench.off_and_on(Outlets::one(0), ALL_OFF);
    bench.off_and_on(Outlets::one(1), Outlets::one(1));
    bench.off_and_on(Outlets::one(1), ALL_OFF);
    // Coil 0 does not answer.
    bench.run(&mut |_, request| match request[3] {
        0 => vec![],
        _ => vec![(2_000, good(request))],
    });
    let start: Vec<_> = bench.hex()[..5].to_vec();
    let (zero_off, nine_on, nine_off) = ("010500000000", "01050009FF00", "010500090000");
    assert_eq!(start, [zero_off, nine_on, zero_off, nine_off, zero_off]);
}

#[test]
fn a_newer_switch_supersedes_what_is_to_be_repeated() {
    let mut bench = Bench::new(&[0], 115_200);
    bench.off_and_on(Outlets::one(0), ALL_OFF);
    bench.off_and_on(Outlets::one(0), Outlets::one(0));
    bench.run(&mut |_, _| vec![]);
    assert_eq!(bench.hex(), ["010500000000", "01050000FF00"]);
}

#[test]
fn a_late_answer_is_not_taken_for_the_next_one() {
    let mut bench = Bench::new(&[0], 115_200);
    bench.off_and_on(Outlets::one(0), Outlets::one(0));
    bench.run(&mut |_, _| vec![]);
    let late = Frame::write_coil(1, 0, true);
    bench.master.received(bench.now, late.bytes());
    assert_eq!(bench.master.counts().stray_bytes, 8);
    assert_eq!(bench.master.counts().acknowledged, 0);
}

#[test]
fn endless_noise_does_not_hold_off_for_ever() {
    let mut bench = Bench::new(&[0], 115_200);
    bench.off_and_on(Outlets::one(0), ALL_OFF);
    let sent_at = loop {
        match bench.master.step(bench.now) {
            Step::Send(..) => break bench.now,
            Step::Listen(_) => {
                bench.now += Micros(500);
                bench.master.received(bench.now, &[0xA5; 3]);
            }
            Step::Idle => panic!("it has something to send"),
        }
    };
    assert!(
        sent_at > Micros(20_000) && sent_at < Micros(23_000),
        "{sent_at}"
    );
    for _ in 0..100 {
        bench.now += Micros(10);
        bench.master.received(bench.now, &[0xA5; 60]);
    }
    assert_eq!(bench.master.counts().garbled, 1);
}

#[test]
fn a_newer_switch_ends_repetitions_under_way() {
    let mut bench = Bench::new(&[0], 115_200);
    bench.off_and_on(Outlets::one(0), ALL_OFF);
    while bench.master.counts().repeats == 0 {
        if let Step::Listen(until) = bench.master.step(bench.now) {
            bench.now = until;
        }
    }
    bench.off_and_on(Outlets::one(0), Outlets::one(0));
    bench.run(&mut |_, _| vec![]);
    assert_eq!(bench.hex(), ["01050000FF00"]);
}
