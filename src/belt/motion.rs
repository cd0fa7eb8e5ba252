//! Where the belt is at any moment.

use crate::units::Micros;

/// Belt position as a function of time: the last known reading, carried on at the stated speed.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Motion {
    at_us: Micros,
    at_mm: f64,
    speed_mm_s: f64,
}

impl Motion {
    /// A belt that reads 0 mm at time 0 and runs at `speed_mm_s`.
    pub fn at_speed(speed_mm_s: f64) -> Self {
        Self {
            at_us: Micros::ZERO,
            at_mm: 0.0,
            speed_mm_s,
        }
    }

    /// The belt was seen at `belt_mm` at the moment `at_us`.
    pub fn anchor(&mut self, at_us: Micros, belt_mm: f64) {
        self.at_us = at_us;
        self.at_mm = belt_mm;
    }

    /// The belt reading at `at_us`.
    pub fn position_mm(&self, at_us: Micros) -> f64 {
        self.at_mm + (at_us - self.at_us).as_seconds() * self.speed_mm_s
    }

    /// The first whole microsecond at which the belt reads at least `belt_mm`.
    pub fn time_of(&self, belt_mm: f64) -> Micros {
        let ahead_us = (belt_mm - self.at_mm) / self.speed_mm_s * 1e6;
        // The tolerance keeps a reading that is exact on paper from slipping a microsecond through rounding.
        self.at_us + Micros((ahead_us - 1e-6).ceil() as i64)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Elementary: 250 mm at 500 mm/s take 500 ms.
    #[test]
    fn distance_over_speed() {
        let motion = Motion::at_speed(500.0);
        assert_eq!(motion.time_of(250.0), Micros::from_ms(500.0));
        assert_eq!(motion.position_mm(Micros::from_ms(1.0)), 0.5);
    }

    #[test]
    fn a_reading_moves_everything_after_it() {
        let mut motion = Motion::at_speed(400.0);
        motion.anchor(Micros(1_000_000), 390.0);
        assert_eq!(motion.time_of(400.0), Micros(1_025_000));
        assert_eq!(motion.position_mm(Micros(1_025_000)), 400.0);
    }
}
