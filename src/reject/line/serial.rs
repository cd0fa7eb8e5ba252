//! Modbus RTU over a serial port.

use std::io::{self, ErrorKind, Read, Write};
use std::time::Duration;

use serialport::{DataBits, FlowControl, SerialPort, StopBits};

use super::master::{Master, Step};
use super::{Coils, Line, LineCounts, LineError, LineFault, Signal};
use crate::clock::Monotonic;
use crate::reject::{Outlets, Switch};
use crate::settings::{self, Parity};
use crate::units::Micros;

/// What a serial port has to offer.
pub trait Port: Read + Write {
    /// How long a read may wait for the first byte, and a write for room.
    ///
    /// # Errors
    /// The port is lost.
    fn wait_at_most(&mut self, time: Duration) -> io::Result<()>;

    /// Bytes that can be read without waiting.
    ///
    /// # Errors
    /// The port is lost.
    fn waiting_bytes(&mut self) -> io::Result<usize>;
}

impl Port for Box<dyn SerialPort> {
    fn wait_at_most(&mut self, time: Duration) -> io::Result<()> {
        Ok(self.set_timeout(time)?)
    }

    fn waiting_bytes(&mut self) -> io::Result<usize> {
        Ok(self.bytes_to_read()? as usize)
    }
}

/// A Modbus RTU device on a serial port. Sends and waits for each answer.
pub struct ModbusSerial<P: Port = Box<dyn SerialPort>> {
    port: P,
    name: String,
    clock: Monotonic,
    master: Master,
    lost: bool,
}

impl ModbusSerial {
    /// Opens the port at `path` for this program alone. Nothing is sent yet: begin with [`Line::all_off`].
    ///
    /// Linux raises RTS and DTR whenever a port is opened; both are lowered at once. A port without these pins (a
    /// pseudo-terminal) refuses, which is no fault.
    ///
    /// # Errors
    /// [`LineError::Open`] with what the system says.
    pub fn open(
        path: &str,
        line: &settings::Line,
        coils: Coils,
        clock: Monotonic,
    ) -> Result<Self, LineError> {
        let (parity, stop_bits) = framing(line.parity);
        let port = serialport::new(path, line.baud)
            .data_bits(DataBits::Eight)
            .parity(parity)
            .stop_bits(stop_bits)
            .flow_control(FlowControl::None)
            .exclusive(true)
            .dtr_on_open(false)
            .open();
        let mut port = port.map_err(|source| LineError::Open {
            port: path.into(),
            source,
        })?;
        let _ = port.write_request_to_send(false);
        Ok(Self::over(port, path, line, coils, clock))
    }
}

/// A character has 11 bits: where there is no parity bit, a second stop bit takes its place.
fn framing(parity: Parity) -> (serialport::Parity, StopBits) {
    match parity {
        Parity::Even => (serialport::Parity::Even, StopBits::One),
        Parity::Odd => (serialport::Parity::Odd, StopBits::One),
        Parity::None => (serialport::Parity::None, StopBits::Two),
    }
}

impl<P: Port> ModbusSerial<P> {
    /// Takes an open port; `name` stands in messages. `clock` is the one that switches are due by.
    pub fn over(
        port: P,
        name: &str,
        line: &settings::Line,
        coils: Coils,
        clock: Monotonic,
    ) -> Self {
        Self {
            port,
            name: name.into(),
            clock,
            master: Master::new(coils, line, clock.now()),
            lost: false,
        }
    }

    /// Sends, listens and repeats until there is nothing left to do.
    fn run(&mut self, signals: &mut Vec<Signal>) -> Result<(), LineError> {
        let done = self.exchange(signals);
        done.map_err(|source| {
            self.lost = true;
            LineError::PortLost {
                port: self.name.clone(),
                source,
            }
        })
    }

    fn exchange(&mut self, signals: &mut Vec<Signal>) -> io::Result<()> {
        loop {
            if self.port.waiting_bytes()? > 0 {
                self.listen(Duration::ZERO)?;
            }
            let now = self.clock.now();
            match self.master.step(now) {
                Step::Idle => return Ok(()),
                Step::Listen(until) => {
                    let left = (until - now).0.max(0).unsigned_abs();
                    self.listen(Duration::from_micros(left))?;
                }
                Step::Send(frame, signal) => {
                    unless_late(self.port.write_all(frame.bytes()))?;
                    signals.extend(signal);
                }
            }
        }
    }

    fn listen(&mut self, time: Duration) -> io::Result<()> {
        let mut bytes = [0; 64];
        self.port.wait_at_most(time)?;
        match self.port.read(&mut bytes) {
            Ok(0) => Err(ErrorKind::UnexpectedEof.into()),
            Ok(count) => {
                self.master.received(self.clock.now(), &bytes[..count]);
                Ok(())
            }
            Err(error) => unless_late(Err(error)),
        }
    }
}

/// Too late is not lost: a request that did not get out whole gets no answer, and that is dealt with.
fn unless_late(result: io::Result<()>) -> io::Result<()> {
    match result {
        Err(e) if matches!(e.kind(), ErrorKind::TimedOut | ErrorKind::Interrupted) => Ok(()),
        other => other,
    }
}

impl<P: Port> Line for ModbusSerial<P> {
    fn send(&mut self, switch: &Switch, signals: &mut Vec<Signal>) -> Result<(), LineError> {
        self.master.switch(switch);
        self.run(signals)
    }

    fn all_off(&mut self, due_us: Micros, signals: &mut Vec<Signal>) -> Result<(), LineError> {
        self.master.all_off(due_us);
        self.run(signals)?;
        let left = self.master.may_be_on();
        if left.is_empty() {
            return Ok(());
        }
        let coils = self.master.coils().of(left);
        Err(LineError::MayBeOn { coils })
    }

    fn may_be_on(&self) -> Outlets {
        self.master.may_be_on()
    }

    fn counts(&self) -> &LineCounts {
        self.master.counts()
    }

    fn next_fault(&mut self) -> Option<LineFault> {
        self.master.record().next_fault()
    }
}

impl<P: Port> Drop for ModbusSerial<P> {
    /// Whatever ends the program in order also turns everything off, unless that is already confirmed.
    fn drop(&mut self) {
        if !self.lost && !self.may_be_on().is_empty() {
            let now = self.clock.now();
            // Nobody is left to be told.
            let _ = self.all_off(now, &mut Vec::new());
        }
    }
}

#[cfg(test)]
mod tests;
