//! The line to the reject device: what a switch looks like as bytes, and how it gets there.

mod coils;
mod dry_run;
mod fault;
mod master;
pub mod modbus;
mod serial;
mod signals;

use std::fmt;

pub use coils::Coils;
pub use dry_run::DryRun;
pub use fault::{LineCounts, LineError, LineFault, LineFaultKind};
pub use serial::{ModbusSerial, Port};
pub use signals::SignalWriter;

use super::{Outlets, Switch};
use crate::units::Micros;
use modbus::Frame;

/// Whether a signal went out.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Mode {
    /// Over a port.
    Sent,
    /// Nowhere; no port was opened.
    DryRun,
}

impl fmt::Display for Mode {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.pad(match self {
            Self::Sent => "sent",
            Self::DryRun => "dry-run",
        })
    }
}

/// One message that switches outlets.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Signal {
    /// When it had to go out.
    pub due_us: Micros,
    /// When its first byte was handed to the port; on a dry run the moment at which it was due.
    pub sent_us: Micros,
    /// The outlets that it is sent for.
    pub changed: Outlets,
    /// Those of them that it switches on; the others it switches off.
    pub on: Outlets,
    /// Its bytes.
    pub frame: Frame,
    /// Whether it went out.
    pub mode: Mode,
}

/// Where switches go.
///
/// A line turns everything off when it is dropped, as far as it can; [`Line::all_off`] also says whether it could.
pub trait Line {
    /// Sends what `switch` changes, and appends a signal for each message. Returns once each message is acknowledged or
    /// known to have failed: OFF is repeated, ON is not, because by then the part has gone by. Failed messages are no
    /// error; they are counted and told by [`Line::next_fault`].
    ///
    /// # Errors
    /// The port is lost.
    fn send(&mut self, switch: &Switch, signals: &mut Vec<Signal>) -> Result<(), LineError>;

    /// Turns every outlet off, whatever it is thought to be.
    ///
    /// # Errors
    /// The port is lost, or an outlet did not confirm: it may still be on.
    fn all_off(&mut self, due_us: Micros, signals: &mut Vec<Signal>) -> Result<(), LineError>;

    /// Outlets that were not confirmed as off since they could last be on. All of them before the first all-off.
    fn may_be_on(&self) -> Outlets;

    /// Figures so far.
    fn counts(&self) -> &LineCounts;

    /// The next fault that was not told yet. At most 256 are kept; all are counted.
    fn next_fault(&mut self) -> Option<LineFault>;
}
