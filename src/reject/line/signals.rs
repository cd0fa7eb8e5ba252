//! `signals.csv`: one row for each outlet that a message switches.

use std::io;

use super::Signal;

const COLUMNS: [&str; 6] = ["due_us", "sent_us", "outlet", "state", "bytes_hex", "mode"];

/// Writes signals as a table.
pub struct SignalWriter<W: io::Write> {
    csv: csv::Writer<W>,
    names: Vec<String>,
}

impl<W: io::Write> SignalWriter<W> {
    /// Writes the heading. `names` are those of the outlets, in their order in the settings.
    ///
    /// # Errors
    /// Whatever `out` refuses.
    pub fn new(out: W, names: Vec<String>) -> csv::Result<Self> {
        let mut csv = csv::Writer::from_writer(out);
        csv.write_record(COLUMNS)?;
        Ok(Self { csv, names })
    }

    /// Writes a row for each outlet that `signal` changes.
    ///
    /// # Errors
    /// Whatever the underlying writer refuses.
    ///
    /// # Panics
    /// When an outlet has no name.
    pub fn write(&mut self, signal: &Signal) -> csv::Result<()> {
        for outlet in signal.changed.iter() {
            let state = if signal.on.has(outlet) { "on" } else { "off" };
            self.csv.write_record([
                &signal.due_us.0.to_string(),
                &signal.sent_us.0.to_string(),
                &self.names[outlet],
                state,
                &signal.frame.to_string(),
                &signal.mode.to_string(),
            ])?;
        }
        Ok(())
    }

    /// Hands everything over to the underlying writer, and gives it back.
    ///
    /// # Errors
    /// Whatever it refuses.
    pub fn finish(self) -> io::Result<W> {
        self.csv.into_inner().map_err(|e| e.into_error())
    }
}

#[cfg(test)]
mod tests {
    use super::super::{Coils, DryRun, Line};
    use super::*;
    use crate::reject::{Outlets, Switch};
    use crate::units::Micros;

    #[test]
    fn a_row_for_each_outlet_that_changes() {
        let mut line = DryRun::new(Coils::new(1, &[0, 1, 2, 9]).unwrap());
        let mut signals = Vec::new();
        let mut send = |due_us, changed, on| {
            let switch = Switch {
                due_us,
                changed,
                on,
            };
            line.send(&switch, &mut signals).unwrap();
        };
        send(Micros(1_500), Outlets::one(0), Outlets::one(0));
        send(
            Micros(2_500),
            Outlets::first(4).without(Outlets::one(1)),
            Outlets::one(1).with(3),
        );
        line.all_off(Micros(9_000), &mut signals).unwrap();

        let names = ["crumbs", "broken", "odd", "far, left"].map(String::from);
        let mut writer = SignalWriter::new(Vec::new(), names.to_vec()).unwrap();
        signals.iter().for_each(|s| writer.write(s).unwrap());
        let text = String::from_utf8(writer.finish().unwrap()).unwrap();
        // The data bytes by hand: coils 0 to 2 are 0, 1, 0; then none. The CRCs are checked in `modbus`.
        let short: Vec<_> = text.lines().map(|line| line.replace(' ', "")).collect();
        let crc = |body: &[u8]| {
            let [low, high] = super::super::modbus::crc16(body).to_le_bytes();
            format!("{low:02X}{high:02X}")
        };
        let many = format!("010F000000030102{}", crc(&[1, 15, 0, 0, 0, 3, 1, 2]));
        let far = format!("01050009FF00{}", crc(&[1, 5, 0, 9, 255, 0]));
        let off = format!("010F000000030100{}", crc(&[1, 15, 0, 0, 0, 3, 1, 0]));
        let far_off = format!("010F000900010100{}", crc(&[1, 15, 0, 9, 0, 1, 1, 0]));
        assert_eq!(
            short,
            [
                "due_us,sent_us,outlet,state,bytes_hex,mode".to_string(),
                "1500,1500,crumbs,on,01050000FF008C3A,dry-run".to_string(),
                format!("2500,2500,crumbs,off,{many},dry-run"),
                format!("2500,2500,odd,off,{many},dry-run"),
                format!("2500,2500,\"far,left\",on,{far},dry-run"),
                format!("9000,9000,crumbs,off,{off},dry-run"),
                format!("9000,9000,broken,off,{off},dry-run"),
                format!("9000,9000,odd,off,{off},dry-run"),
                format!("9000,9000,\"far,left\",off,{far_off},dry-run"),
            ]
        );
        assert!(text.contains(",01 05 00 00 FF 00 8C 3A,"));
    }
}
