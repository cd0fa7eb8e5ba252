//! What can go wrong on a line, and how often it did.

use std::collections::VecDeque;
use std::io;

use serde::Serialize;
use thiserror::Error;

use super::modbus::AnswerError;
use crate::reject::outlets::{MAX_OUTLETS, Outlets};
use crate::units::Micros;

/// The line cannot be used, or not any more.
#[derive(Debug, Error)]
pub enum LineError {
    /// More outlets than fit in a set.
    #[error("{came} outlets are set, but one line switches at most {MAX_OUTLETS}")]
    TooManyOutlets {
        /// How many.
        came: usize,
    },
    /// Two outlets on one coil.
    #[error("coil {coil} belongs to two outlets")]
    CoilTwice {
        /// Which coil.
        coil: u16,
    },
    /// The port cannot be opened.
    #[error(
        "{port} cannot be opened: {source} (is it plugged in, not held by another program, and may this user open it?)"
    )]
    Open {
        /// Its path.
        port: String,
        /// What the system says.
        source: serialport::Error,
    },
    /// The port is gone.
    #[error("{port} is lost: {source}")]
    PortLost {
        /// Its path.
        port: String,
        /// What the system says.
        source: io::Error,
    },
    /// Coils that did not confirm that they are off.
    #[error(
        "coils {coils:?} did not confirm OFF: their outlets may still be open, shut off the air"
    )]
    MayBeOn {
        /// Which.
        coils: Vec<u16>,
    },
}

/// A message that did not do what it should.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct LineFault {
    /// When that became certain.
    pub at_us: Micros,
    /// The outlets that it was for.
    pub outlets: Outlets,
    /// What happened.
    pub kind: LineFaultKind,
}

/// Why a message did not do what it should.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Error)]
pub enum LineFaultKind {
    /// Not a byte came back.
    #[error("no answer within {within_ms} ms", within_ms = within_us.as_ms())]
    NoAnswer {
        /// How long was waited, from the first byte of the request on.
        within_us: Micros,
    },
    /// Something else than the right answer came back.
    #[error(transparent)]
    Answer(#[from] AnswerError),
    /// OFF was repeated and never confirmed.
    #[error(
        "OFF was not confirmed in {tries} tries: the outlet may still be open, shut off the air"
    )]
    OffGivenUp {
        /// How often it was sent.
        tries: u8,
    },
}

/// Figures of a line.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize)]
pub struct LineCounts {
    /// Requests, with repetitions.
    pub requests: u64,
    /// Requests that were answered as they should be.
    pub acknowledged: u64,
    /// Requests that repeated an OFF.
    pub repeats: u64,
    /// Not a byte came back.
    pub no_answer: u64,
    /// The device refused.
    pub exceptions: u64,
    /// Another unit answered.
    pub wrong_unit: u64,
    /// Another function, coil or state was answered.
    pub wrong_content: u64,
    /// Noise, or an answer cut short.
    pub garbled: u64,
    /// Bytes that came while no answer was due.
    pub stray_bytes: u64,
    /// Requests that came back by the adapter's own echo, before the answer.
    pub echoes: u64,
    /// Outlets whose ON was not confirmed. It is not repeated.
    pub on_unconfirmed: u64,
    /// Outlets whose OFF was given up.
    pub off_given_up: u64,
}

/// Faults that nobody has asked for yet; beyond this they are only counted.
const UNREAD_FAULTS: usize = 256;

/// Counts and unread faults.
#[derive(Debug, Default)]
pub(super) struct Record {
    pub(super) counts: LineCounts,
    faults: VecDeque<LineFault>,
}

impl Record {
    pub(super) fn fault(&mut self, fault: LineFault) {
        let counts = &mut self.counts;
        let count = match fault.kind {
            LineFaultKind::NoAnswer { .. } => &mut counts.no_answer,
            LineFaultKind::OffGivenUp { .. } => &mut counts.off_given_up,
            LineFaultKind::Answer(answer) => match answer {
                AnswerError::Exception { .. } => &mut counts.exceptions,
                AnswerError::WrongUnit { .. } => &mut counts.wrong_unit,
                AnswerError::WrongFunction { .. } | AnswerError::Mismatch { .. } => {
                    &mut counts.wrong_content
                }
                AnswerError::Crc { .. } | AnswerError::Short { .. } => &mut counts.garbled,
            },
        };
        *count += 1;
        if self.faults.len() < UNREAD_FAULTS {
            self.faults.push_back(fault);
        }
    }

    pub(super) fn next_fault(&mut self) -> Option<LineFault> {
        self.faults.pop_front()
    }
}
