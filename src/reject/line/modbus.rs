//! The bytes of Modbus RTU: requests that switch coils, and the check of what comes back. No input or output here.
//!
//! Sources: MODBUS Application Protocol Specification V1.1b3 (6.5 Write Single Coil, 6.11 Write Multiple Coils,
//! 7 exception codes); MODBUS over Serial Line V1.02 (2.5.1.2: CRC, low byte first).

use std::fmt;

use crc::{CRC_16_MODBUS, Crc, Table};
use thiserror::Error;

use crate::reject::outlets::MAX_OUTLETS;

const WRITE_COIL: u8 = 0x05;
const WRITE_COILS: u8 = 0x0F;
const EXCEPTION: u8 = 0x80;
const CRC: Crc<u16, Table<1>> = Crc::<u16, Table<1>>::new(&CRC_16_MODBUS);

/// Characters of an answer to either function, and of an exception.
pub const ANSWER_BYTES: usize = 8;
const EXCEPTION_BYTES: usize = 5;

/// A request for [`MAX_OUTLETS`] coils.
const LONGEST: usize = 9 + MAX_OUTLETS / 8;

/// The bytes of one request, with its CRC.
#[derive(Clone, Copy, PartialEq, Eq)]
pub struct Frame {
    bytes: [u8; LONGEST],
    len: usize,
}

impl Frame {
    /// FC05: one coil.
    pub fn write_coil(unit: u8, coil: u16, on: bool) -> Self {
        let [high, low] = coil.to_be_bytes();
        let state = if on { 0xFF } else { 0x00 };
        Self::sealed(&[unit, WRITE_COIL, high, low, state, 0x00])
    }

    /// FC15: `states.len()` coils from `first` on, 1 to [`MAX_OUTLETS`] of them.
    pub fn write_coils(unit: u8, first: u16, states: &[bool]) -> Self {
        let [high, low] = first.to_be_bytes();
        let data_bytes = states.len().div_ceil(8);
        let mut body = [0; LONGEST - 2];
        let head = [unit, WRITE_COILS, high, low, 0, states.len() as u8];
        body[..6].copy_from_slice(&head);
        body[6] = data_bytes as u8;
        for (i, _) in states.iter().enumerate().filter(|(_, on)| **on) {
            body[7 + i / 8] |= 1 << (i % 8);
        }
        Self::sealed(&body[..7 + data_bytes])
    }

    fn sealed(body: &[u8]) -> Self {
        let len = body.len() + 2;
        let mut bytes = [0; LONGEST];
        bytes[..body.len()].copy_from_slice(body);
        bytes[body.len()..len].copy_from_slice(&crc16(body).to_le_bytes());
        Self { bytes, len }
    }

    /// The bytes as they go over the wire.
    pub fn bytes(&self) -> &[u8] {
        &self.bytes[..self.len]
    }

    /// What the device answers when it did as it was told: FC05 the request itself, FC15 its head.
    fn good_answer(&self) -> Self {
        match self.bytes[1] {
            WRITE_COIL => *self,
            _ => Self::sealed(&self.bytes[..6]),
        }
    }
}

/// Pairs of hexadecimal digits with spaces between: `01 05 00 00 FF 00 8C 3A`.
impl fmt::Display for Frame {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        for (i, byte) in self.bytes().iter().enumerate() {
            let space = if i == 0 { "" } else { " " };
            write!(f, "{space}{byte:02X}")?;
        }
        Ok(())
    }
}

impl fmt::Debug for Frame {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{self}")
    }
}

/// CRC-16/MODBUS. It goes over the wire low byte first.
pub fn crc16(bytes: &[u8]) -> u16 {
    CRC.checksum(bytes)
}

/// Why an answer is not the one that was waited for.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Error)]
pub enum AnswerError {
    /// The device refused.
    #[error("the device refused with exception {code:02X}: {}", exception_name(*code))]
    Exception {
        /// As it stands in the answer.
        code: u8,
    },
    /// Someone else answered.
    #[error("unit {came} answered in place of unit {expected}")]
    WrongUnit {
        /// Who was asked.
        expected: u8,
        /// Who answered.
        came: u8,
    },
    /// An answer to another question.
    #[error("the answer is for function {came:02X}, asked was {expected:02X}")]
    WrongFunction {
        /// What was asked.
        expected: u8,
        /// What was answered.
        came: u8,
    },
    /// The device names another coil, state or number of coils.
    #[error("the answer repeats {came:02X?} where the request had {expected:02X?}")]
    Mismatch {
        /// Four bytes of the request.
        expected: [u8; 4],
        /// The same four in the answer.
        came: [u8; 4],
    },
    /// Bytes were changed on their way, or are no Modbus.
    #[error(
        "the answer's CRC is {came:04X}, its bytes give {expected:04X}: noise, or wrong baud rate or parity"
    )]
    Crc {
        /// Worked out from the bytes.
        expected: u16,
        /// As it came.
        came: u16,
    },
    /// It stopped too early.
    #[error("the answer stopped after {came} bytes of {expected}")]
    Short {
        /// How long it would have been.
        expected: usize,
        /// How much came.
        came: usize,
    },
}

/// The standard's name of an exception code, and what it means here.
pub fn exception_name(code: u8) -> &'static str {
    match code {
        0x01 => "illegal function (the device cannot switch coils this way)",
        0x02 => "illegal data address (it has no such coil)",
        0x03 => "illegal data value (it does not take this state or number of coils)",
        0x04 => "server device failure (it tried and failed)",
        0x05 => "acknowledge (it needs longer, and has not switched yet)",
        0x06 => "server device busy",
        0x08 => "memory parity error (its memory is damaged)",
        0x0A => "gateway path unavailable (the gateway is set up wrongly or overloaded)",
        0x0B => "gateway target device failed to respond (the device behind the gateway is mute)",
        _ => "not a code of the standard",
    }
}

/// How many bytes the answer that begins with `head` has; `None` while that cannot be told yet.
pub fn answer_bytes(head: &[u8]) -> Option<usize> {
    head.get(1).map(|function| match function & EXCEPTION {
        0 => ANSWER_BYTES,
        _ => EXCEPTION_BYTES,
    })
}

/// Whether `answer` says that `request` was done. Bytes after the answer's own end are ignored.
pub fn check_answer(request: &Frame, answer: &[u8]) -> Result<(), AnswerError> {
    let expected = answer_bytes(answer).unwrap_or(ANSWER_BYTES);
    if answer.len() < expected {
        let came = answer.len();
        return Err(AnswerError::Short { expected, came });
    }
    let (body, crc) = answer[..expected].split_at(expected - 2);
    check_crc(body, [crc[0], crc[1]])?;
    check_head(request.bytes(), body)?;
    let good = request.good_answer();
    let four = |bytes: &[u8]| [bytes[2], bytes[3], bytes[4], bytes[5]];
    if body == &good.bytes()[..6] {
        return Ok(());
    }
    Err(AnswerError::Mismatch {
        expected: four(good.bytes()),
        came: four(body),
    })
}

fn check_crc(body: &[u8], crc: [u8; 2]) -> Result<(), AnswerError> {
    let came = u16::from_le_bytes(crc);
    let expected = crc16(body);
    if came == expected {
        Ok(())
    } else {
        Err(AnswerError::Crc { expected, came })
    }
}

fn check_head(request: &[u8], body: &[u8]) -> Result<(), AnswerError> {
    if body[0] != request[0] {
        return Err(AnswerError::WrongUnit {
            expected: request[0],
            came: body[0],
        });
    }
    if body[1] & !EXCEPTION != request[1] {
        return Err(AnswerError::WrongFunction {
            expected: request[1],
            came: body[1] & !EXCEPTION,
        });
    }
    match body[1] & EXCEPTION {
        0 => Ok(()),
        _ => Err(AnswerError::Exception { code: body[2] }),
    }
}

#[cfg(test)]
mod tests {
    use proptest::prelude::*;

    use super::*;

    fn bytes(hex: &str) -> Vec<u8> {
        let pairs = hex.split(' ');
        pairs.map(|p| u8::from_str_radix(p, 16).unwrap()).collect()
    }

    fn states(bits: &str) -> Vec<bool> {
        bits.chars().map(|bit| bit == '1').collect()
    }

    /// Source: catalogue of parametrised CRC algorithms, CRC-16/MODBUS: check value 0x4B37, start value 0xFFFF, and no
    /// remainder over bytes with their own CRC behind. 02 07 41 12: MODBUS over Serial Line V1.02, appendix B.
    #[test]
    fn crc_of_the_catalogue_and_of_the_standard() {
        assert_eq!(crc16(b"123456789"), 0x4B37);
        assert_eq!(crc16(b""), 0xFFFF);
        assert_eq!(crc16(&[0x02, 0x07]).to_le_bytes(), [0x41, 0x12]);
        assert_eq!(crc16(&bytes("01 03 00 85 00 01 95 E3")), 0);
    }

    /// Source: MODBUS Application Protocol V1.1b3, 6.5 (coil 173 on: address 00 AC) and 6.11 (ten coils from 20: address
    /// 00 13, data CD 01), with unit 17 and the CRC of MODBUS over Serial Line V1.02.
    #[test]
    fn the_examples_of_the_standard() {
        let on = Frame::write_coil(17, 172, true);
        assert_eq!(on.to_string(), "11 05 00 AC FF 00 4E 8B");
        let off = Frame::write_coil(17, 172, false);
        assert_eq!(off.to_string(), "11 05 00 AC 00 00 0F 7B");
        let ten = Frame::write_coils(17, 19, &states("1011001110"));
        assert_eq!(ten.to_string(), "11 0F 00 13 00 0A 02 CD 01 BF 0B");
        assert_eq!(
            check_answer(&ten, &bytes("11 0F 00 13 00 0A 26 99")),
            Ok(())
        );
        assert_eq!(check_answer(&on, on.bytes()), Ok(()));
    }

    /// Source: the same sections, for a relay board with unit 1.
    #[test]
    fn the_first_coils_of_unit_1() {
        let frame = |coil, on| Frame::write_coil(1, coil, on).to_string();
        assert_eq!(frame(0, true), "01 05 00 00 FF 00 8C 3A");
        assert_eq!(frame(0, false), "01 05 00 00 00 00 CD CA");
        assert_eq!(frame(1, true), "01 05 00 01 FF 00 DD FA");
    }

    #[test]
    fn every_coil_that_fits_has_room() {
        let frame = Frame::write_coils(1, 0, &[true; MAX_OUTLETS]);
        assert_eq!(frame.bytes().len(), LONGEST);
        assert_eq!(crc16(frame.bytes()), 0);
    }

    /// Source of the two exceptions: V1.1b3, section 7.
    #[test]
    fn every_wrong_answer_says_what_is_wrong() {
        let request = Frame::write_coil(1, 0, true);
        let check = |hex: &str| check_answer(&request, &bytes(hex)).unwrap_err();
        assert_eq!(check("01 85 02 C3 51"), AnswerError::Exception { code: 2 });
        assert_eq!(check("01 85 01 83 50"), AnswerError::Exception { code: 1 });
        let (expected, came) = (1, 17);
        assert_eq!(
            check("11 05 00 AC FF 00 4E 8B"),
            AnswerError::WrongUnit { expected, came }
        );
        let fifteen = Frame::write_coils(1, 0, &[true]).good_answer().to_string();
        assert!(matches!(
            check(&fifteen),
            AnswerError::WrongFunction { came: 15, .. }
        ));
        assert!(matches!(
            check("01 05 00 01 FF 00 DD FA"),
            AnswerError::Mismatch {
                came: [0, 1, 255, 0],
                ..
            }
        ));
        assert!(matches!(
            check("01 05 00 00 00 00 CD CA"),
            AnswerError::Mismatch {
                came: [0, 0, 0, 0],
                ..
            }
        ));
        assert!(matches!(
            check("01 05 00 00 FF 00 8C 3B"),
            AnswerError::Crc { came: 0x3B8C, .. }
        ));
        assert_eq!(
            check("01 05 00 00 FF"),
            AnswerError::Short {
                expected: 8,
                came: 5
            }
        );
        assert_eq!(
            check("01"),
            AnswerError::Short {
                expected: 8,
                came: 1
            }
        );
        assert_eq!(
            check("01 85 02"),
            AnswerError::Short {
                expected: 5,
                came: 3
            }
        );
        let text = check("01 85 02 C3 51").to_string();
        assert_eq!(
            text,
            "the device refused with exception 02: illegal data address (it has no such coil)"
        );
    }

    proptest! {
        #[test]
        fn anything_but_the_right_answer_is_refused(
            coil in any::<u16>(),
            on in any::<bool>(),
            garbage in prop::collection::vec(any::<u8>(), 0..40),
        ) {
            let request = Frame::write_coil(9, coil, on);
            if !garbage.starts_with(request.bytes()) {
                prop_assert!(check_answer(&request, &garbage).is_err());
            }
        }

        /// A CRC of 16 bits finds every single error burst of up to 16 bits.
        #[test]
        fn a_flipped_bit_is_found(coil in any::<u16>(), on in any::<bool>(), bit in 0..64_usize) {
            let request = Frame::write_coil(9, coil, on);
            let mut answer = request.bytes().to_vec();
            answer[bit / 8] ^= 1 << (bit % 8);
            prop_assert!(check_answer(&request, &answer).is_err());
        }
    }
}
