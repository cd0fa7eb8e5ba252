//! Shows our side of a line to an outside check.
//!
//! `line_oracle frames` reads `unit function coil states` (`1 5 7 1`, `17 15 19 1011001110`) or `crc HEX` a line and
//! writes the bytes. `line_oracle play PORT UNIT BAUD ANSWER_MS COIL,COIL,...` reads `due_ms changed on` a line, both a
//! list of outlets or `-`, plays them on the port between two all-offs, writes `signals.csv`, and last a line of JSON to
//! standard error. Exit code 3 when an outlet may still be on or the port is lost.

use std::io::{self, BufRead};
use std::process::ExitCode;

use beltwright::clock::Monotonic;
use beltwright::reject::line::modbus::{Frame, crc16};
use beltwright::reject::line::{Coils, Line, LineError, ModbusSerial, Signal, SignalWriter};
use beltwright::reject::{Outlets, Switch};
use beltwright::settings::{self, Parity};
use beltwright::units::Micros;

fn main() -> ExitCode {
    let words: Vec<String> = std::env::args().skip(1).collect();
    let words: Vec<&str> = words.iter().map(String::as_str).collect();
    match words[..] {
        ["frames"] => frames(),
        ["play", port, unit, baud, answer_ms, coils] => {
            let line = settings::Line {
                unit: unit.parse().unwrap(),
                baud: baud.parse().unwrap(),
                parity: Parity::Even,
                answer_within_ms: answer_ms.parse().unwrap(),
            };
            let coils: Vec<u16> = coils.split(',').map(|c| c.parse().unwrap()).collect();
            return play(port, &line, &coils);
        }
        _ => panic!("frames, or play PORT UNIT BAUD ANSWER_MS COILS"),
    }
    ExitCode::SUCCESS
}

fn frames() {
    for line in io::stdin().lock().lines().map(Result::unwrap) {
        let words: Vec<&str> = line.split_whitespace().collect();
        if let ["crc", hex] = words[..] {
            let byte = |i: usize| u8::from_str_radix(&hex[2 * i..2 * i + 2], 16).unwrap();
            let bytes: Vec<u8> = (0..hex.len() / 2).map(byte).collect();
            let [low, high] = crc16(&bytes).to_le_bytes();
            println!("{low:02X} {high:02X}");
            continue;
        }
        let [unit, function, coil, states] = words[..] else {
            panic!("unit function coil states")
        };
        let (unit, coil) = (unit.parse().unwrap(), coil.parse().unwrap());
        let states: Vec<bool> = states.chars().map(|c| c == '1').collect();
        match function {
            "5" => println!("{}", Frame::write_coil(unit, coil, states[0])),
            _ => println!("{}", Frame::write_coils(unit, coil, &states)),
        }
    }
}

fn outlets(list: &str) -> Outlets {
    let listed = list.split(',').filter(|word| *word != "-");
    let indices = listed.map(|word| word.parse().unwrap());
    indices.fold(Outlets::NONE, Outlets::with)
}

fn switches() -> Vec<Switch> {
    let lines = io::stdin().lock().lines().map(Result::unwrap);
    let parse = |line: String| {
        let words: Vec<&str> = line.split_whitespace().collect();
        Switch {
            due_us: Micros::from_ms(words[0].parse().unwrap()),
            changed: outlets(words[1]),
            on: outlets(words[2]),
        }
    };
    lines.map(parse).collect()
}

fn play(port: &str, line: &settings::Line, coils: &[u16]) -> ExitCode {
    let switches = switches();
    let mut signals = Vec::new();
    let clock = Monotonic::reading(Micros::ZERO);
    let ours = Coils::new(line.unit, coils).unwrap();
    let mut device = ModbusSerial::open(port, line, ours, clock).unwrap();
    let played = play_on(&mut device, &switches, &clock, &mut signals);

    let names = coils.iter().map(|coil| format!("coil{coil}")).collect();
    let mut table = SignalWriter::new(io::stdout().lock(), names).unwrap();
    signals.iter().for_each(|s| table.write(s).unwrap());
    drop(table.finish().unwrap());
    let faults = std::iter::from_fn(|| device.next_fault());
    let faults: Vec<String> = faults.map(|fault| fault.kind.to_string()).collect();
    let error = played.as_ref().err().map(LineError::to_string);
    let report = serde_json::json!({
        "counts": device.counts(), "faults": faults, "error": error,
        "may_be_on": device.may_be_on().iter().collect::<Vec<_>>(),
    });
    eprintln!("{report}");
    played.map_or(ExitCode::from(3), |()| ExitCode::SUCCESS)
}

fn play_on(
    device: &mut impl Line,
    switches: &[Switch],
    clock: &Monotonic,
    signals: &mut Vec<Signal>,
) -> Result<(), LineError> {
    device.all_off(clock.now(), signals)?;
    let start = clock.now();
    for switch in switches {
        let due_us = start + switch.due_us;
        clock.sleep_until(due_us);
        device.send(&Switch { due_us, ..*switch }, signals)?;
    }
    device.all_off(clock.now(), signals)
}
