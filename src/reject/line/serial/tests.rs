//! The serial line on a fake port and on a pseudo-terminal.

use std::collections::VecDeque;
use std::sync::{Arc, Mutex};

use super::*;
use crate::reject::line::modbus::crc16;

fn line() -> settings::Line {
    settings::Line {
        unit: 1,
        baud: 115_200,
        parity: Parity::Even,
        answer_within_ms: 4.0,
    }
}

/// A port with a device behind it that does what it is told, as long as the port is not lost.
#[derive(Clone, Default)]
struct Fake {
    shared: Arc<Mutex<Inside>>,
}

#[derive(Default)]
struct Inside {
    written: Vec<Vec<u8>>,
    to_read: VecDeque<u8>,
    mute: bool,
    lost: bool,
}

impl Fake {
    fn written(&self) -> Vec<Vec<u8>> {
        self.shared.lock().unwrap().written.clone()
    }
}

impl Write for Fake {
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
        let mut inside = self.shared.lock().unwrap();
        if inside.lost {
            return Err(ErrorKind::BrokenPipe.into());
        }
        inside.written.push(bytes.to_vec());
        if !inside.mute {
            let crc = crc16(&bytes[..6]).to_le_bytes();
            inside.to_read.extend(&bytes[..6]);
            inside.to_read.extend(crc);
        }
        Ok(bytes.len())
    }

    fn flush(&mut self) -> io::Result<()> {
        panic!("flushing waits without a bound");
    }
}

impl Read for Fake {
    fn read(&mut self, bytes: &mut [u8]) -> io::Result<usize> {
        let mut inside = self.shared.lock().unwrap();
        // In pieces, as a driver hands them over.
        let count = inside.to_read.len().min(3).min(bytes.len());
        if count == 0 {
            return Err(ErrorKind::TimedOut.into());
        }
        for byte in &mut bytes[..count] {
            *byte = inside.to_read.pop_front().unwrap();
        }
        Ok(count)
    }
}

impl Port for Fake {
    fn wait_at_most(&mut self, _time: Duration) -> io::Result<()> {
        Ok(())
    }

    fn waiting_bytes(&mut self) -> io::Result<usize> {
        Ok(self.shared.lock().unwrap().to_read.len())
    }
}

fn on_a_fake() -> (ModbusSerial<Fake>, Fake) {
    let fake = Fake::default();
    let coils = Coils::new(1, &[0]).unwrap();
    let clock = Monotonic::reading(Micros(5_000_000));
    let serial = ModbusSerial::over(fake.clone(), "fake", &line(), coils, clock);
    (serial, fake)
}

fn turn_on(serial: &mut impl Line) -> Result<Vec<Signal>, LineError> {
    let switch = Switch {
        due_us: Micros(5_000_000),
        changed: Outlets::one(0),
        on: Outlets::one(0),
    };
    let mut signals = Vec::new();
    serial.send(&switch, &mut signals).map(|()| signals)
}

const ALL_OFF: [u8; 8] = [1, 0x0F, 0, 0, 0, 1, 1, 0];

#[test]
fn what_is_on_when_dropped_is_turned_off() {
    let (mut serial, fake) = on_a_fake();
    serial.all_off(Micros(5_000_000), &mut Vec::new()).unwrap();
    let signals = turn_on(&mut serial).unwrap();
    assert!(
        signals[0].sent_us > signals[0].due_us,
        "the line was busy with all off"
    );
    drop(serial);
    let written = fake.written();
    assert_eq!(written.len(), 3);
    assert_eq!(written[0][..8], ALL_OFF);
    assert_eq!(written[1], [1, 5, 0, 0, 0xFF, 0, 0x8C, 0x3A]);
    assert_eq!(written[2][..8], ALL_OFF);
}

#[test]
fn what_is_confirmed_off_is_not_turned_off_again() {
    let (mut serial, fake) = on_a_fake();
    serial.all_off(Micros(5_000_000), &mut Vec::new()).unwrap();
    drop(serial);
    assert_eq!(fake.written().len(), 1);
}

#[test]
fn a_mute_device_may_still_be_on() {
    let (mut serial, fake) = on_a_fake();
    fake.shared.lock().unwrap().mute = true;
    let error = serial.all_off(Micros(5_000_000), &mut Vec::new());
    let text = error.unwrap_err().to_string();
    assert_eq!(
        text,
        "coils [0] did not confirm OFF: their outlets may still be open, shut off the air"
    );
    assert_eq!(serial.counts().off_given_up, 1);
}

#[test]
fn a_lost_port_is_an_error_and_ends_at_once() {
    let (mut serial, fake) = on_a_fake();
    serial.all_off(Micros(5_000_000), &mut Vec::new()).unwrap();
    fake.shared.lock().unwrap().lost = true;
    assert!(matches!(
        turn_on(&mut serial),
        Err(LineError::PortLost { .. })
    ));
    assert_eq!(serial.may_be_on(), Outlets::one(0));
    drop(serial);
    assert_eq!(fake.written().len(), 1);
}

#[test]
fn a_port_that_is_not_there_is_named() {
    let coils = Coils::new(1, &[0]).unwrap();
    let clock = Monotonic::reading(Micros::ZERO);
    let opened = ModbusSerial::open("/dev/no-such-port", &line(), coils, clock);
    let text = opened.err().unwrap().to_string();
    assert!(
        text.starts_with("/dev/no-such-port cannot be opened: "),
        "{text}"
    );
}

#[cfg(unix)]
mod on_a_pseudo_terminal {
    use serialport::TTYPort;

    use super::*;

    /// A device that answers every request, until its end of the pseudo-terminal is closed.
    fn device(mut end: TTYPort) -> std::thread::JoinHandle<Vec<Vec<u8>>> {
        std::thread::spawn(move || {
            let mut heard = Vec::new();
            let mut bytes = [0; 64];
            while let Ok(count) = end.read(&mut bytes) {
                let request = &bytes[..count];
                heard.push(request.to_vec());
                let crc = crc16(&request[..6]).to_le_bytes();
                end.write_all(&request[..6]).unwrap();
                end.write_all(&crc).unwrap();
            }
            heard
        })
    }

    #[test]
    fn requests_and_answers_go_through() {
        let (mut far, near) = TTYPort::pair().unwrap();
        far.set_timeout(Duration::from_millis(500)).unwrap();
        let path = near.name().unwrap();
        let clock = Monotonic::reading(Micros::ZERO);
        let line = settings::Line {
            // The device is a thread of this test and may be kept waiting.
            answer_within_ms: 2_000.0,
            ..line()
        };
        let open = || ModbusSerial::open(&path, &line, Coils::new(1, &[0]).unwrap(), clock);
        let mut serial = open().unwrap();
        let second = open().err().unwrap();
        assert!(
            matches!(second, LineError::Open { .. }),
            "the port is held: {second}"
        );
        let device = device(far);
        serial.all_off(Micros::ZERO, &mut Vec::new()).unwrap();
        turn_on(&mut serial).unwrap();
        assert_eq!(
            (serial.counts().acknowledged, serial.counts().repeats),
            (2, 0)
        );
        drop((serial, near));
        let heard = device.join().unwrap();
        assert_eq!(heard.len(), 3);
        assert_eq!(heard[2][..8], ALL_OFF);
    }
}
