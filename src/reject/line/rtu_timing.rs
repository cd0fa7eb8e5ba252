//! How long Modbus RTU takes on the wire.
//!
//! Source: MODBUS over Serial Line, Specification and Implementation Guide V1.02, section 2.5.1: a character has 11 bits,
//! frames are parted by a silence of at least 3.5 characters, and above 19200 bit/s that silence is 1.750 ms.

use crate::units::Micros;

/// Bits of a character: start, eight data bits, parity and stop, or two stop bits.
pub const CHAR_BITS: f64 = 11.0;

const FIXED_ABOVE_BAUD: u32 = 19_200;
const FIXED_SILENCE_US: i64 = 1_750;

/// How long `bytes` characters take, rounded up.
pub fn wire_us(baud: u32, bytes: usize) -> Micros {
    characters_us(baud, bytes as f64)
}

/// The silence that ends a frame (t3.5), rounded up.
pub fn silence_us(baud: u32) -> Micros {
    if baud > FIXED_ABOVE_BAUD {
        Micros(FIXED_SILENCE_US)
    } else {
        characters_us(baud, 3.5)
    }
}

/// From the first bit of a request to the moment at which the device knows that it is complete.
pub fn message_us(baud: u32, bytes: usize) -> Micros {
    wire_us(baud, bytes) + silence_us(baud)
}

fn characters_us(baud: u32, characters: f64) -> Micros {
    Micros((characters * CHAR_BITS * 1e6 / f64::from(baud) - 1e-6).ceil() as i64)
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Source: the rule of section 2.5.1 worked out for the usual rates (11 bits over the rate), in milliseconds:
    /// silence, a frame of 8 characters, both together.
    #[test]
    fn the_usual_rates() {
        let table = [
            (1200, 32.083_333, 73.333_333, 105.416_667),
            (2400, 16.041_667, 36.666_667, 52.708_333),
            (4800, 8.020_833, 18.333_333, 26.354_167),
            (9600, 4.010_417, 9.166_667, 13.177_083),
            (19_200, 2.005_208, 4.583_333, 6.588_542),
            (38_400, 1.75, 2.291_667, 4.041_667),
            (57_600, 1.75, 1.527_778, 3.277_778),
            (115_200, 1.75, 0.763_889, 2.513_889),
        ];
        let near = |us: Micros, ms: f64| us.as_ms() >= ms - 1e-6 && us.as_ms() < ms + 0.002;
        for (baud, silence, frame, both) in table {
            assert!(near(silence_us(baud), silence), "{baud}");
            assert!(near(wire_us(baud, 8), frame), "{baud}");
            assert!(near(message_us(baud, 8), both), "{baud}");
        }
    }
}
