//! What happened on the belt, line by line: verdicts when they fell, signals when they are due.

use std::io::{self, Write};

use crate::belt::Part;
use crate::reject::line::Signal;
use crate::replay::Outcome;
use crate::settings::Settings;
use crate::units::Micros;

/// Lines that are shown; the tables hold all.
const SHOWN: usize = 60;

enum Line<'a> {
    Part(&'a Part),
    Signal(&'a Signal),
}

/// Prints the first lines in the order of time.
pub(super) fn print(
    outcome: &Outcome,
    signals: &[Signal],
    settings: &Settings,
    out: &mut dyn Write,
) -> io::Result<()> {
    let parts = outcome
        .parts
        .iter()
        .map(|(part, _)| (part.decided_us, Line::Part(part)));
    let sent = signals
        .iter()
        .map(|signal| (signal.due_us, Line::Signal(signal)));
    let mut lines: Vec<(Micros, Line<'_>)> = parts.chain(sent).collect();
    lines.sort_by_key(|(at, _)| *at);
    for (at, line) in lines.iter().take(SHOWN) {
        write!(out, "{:>9.3} s  ", at.as_seconds())?;
        match line {
            Line::Part(part) => write_part(part, settings, out)?,
            Line::Signal(signal) => write_signal(signal, settings, out)?,
        }
    }
    if lines.len() > SHOWN {
        let more = lines.len() - SHOWN;
        writeln!(
            out,
            "  ... and {more} lines more; --parts FILE and --signals FILE write them all"
        )?;
    }
    writeln!(out)
}

fn write_part(part: &Part, settings: &Settings, out: &mut dyn Write) -> io::Result<()> {
    let Part {
        number,
        along_mm,
        across_mm,
        verdict,
        reasons,
        ..
    } = part;
    write!(
        out,
        "part {number:>3} at {along_mm:>7.1}, {across_mm:>5.1} mm  {verdict:<6} "
    )?;
    match part.judged {
        Some(judged) => {
            let [missing, excess] =
                [judged.missing.px, judged.excess.px].map(|px| settings.scale().mm(px));
            writeln!(
                out,
                "{reasons:<16} missing {missing:5.2} mm, excess {excess:5.2} mm"
            )
        }
        None => writeln!(out, "{reasons:<16} never seen whole"),
    }
}

fn write_signal(signal: &Signal, settings: &Settings, out: &mut dyn Write) -> io::Result<()> {
    for outlet in signal.changed.iter() {
        let state = if signal.on.has(outlet) { "on" } else { "off" };
        let name = &settings.outlets[outlet].name;
        writeln!(
            out,
            "{:>20} {state:<3}  {}",
            format!("{name}:"),
            signal.frame
        )?;
    }
    Ok(())
}
