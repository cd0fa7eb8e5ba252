//! What is said before anything may move.

/// Printed on stderr whenever outputs are armed.
pub(super) fn print() {
    eprintln!("{TEXT}");
}

const TEXT: &str = "\
ARMED: outlets will switch.
  Stand clear of nozzles, pushers and flaps; wear eye protection near compressed air.
  On the bench: shut off the air, or disconnect the valves.
  This program is NOT a safety function. Guards, interlocks, emergency stop and isolation are hardware, designed by a
  competent person under the local code (places to look: ISO 12100, ISO 13849-1, ISO 13857, ISO 14120, ISO 14119,
  IEC 60204-1, ISO 4414, OSHA 29 CFR 1910.212 and 1910.147, ASME B20.1, EN 619).
  Ctrl-C ends it with every outlet off, as far as the line still carries it.";
