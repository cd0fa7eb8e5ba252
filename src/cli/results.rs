//! What a replay writes and prints.

use std::io::{Cursor, Write};
use std::path::Path;

use anyhow::Context;
use serde_json::{Value, json};

use super::files::write_whole;
use super::station::Station;
use super::timeline;
use crate::belt::{Part, Stretch};
use crate::frames::Frame;
use crate::recording::{Label, Recording};
use crate::reject::line::{LineCounts, LineFault, Signal, SignalWriter};
use crate::reject::{Loss, Why};
use crate::replay::{
    LABEL_GATE, Match, Outcome, Placed, Row, Score, parts_csv, rows, score, summarize,
};
use crate::settings::{Policy, Settings};
use crate::shape::Verdict;

/// A finished replay.
pub(super) struct Results<'a> {
    pub(super) station: &'a Station,
    pub(super) folder: &'a Path,
    pub(super) recording: &'a Recording,
    pub(super) outcome: &'a Outcome,
    pub(super) signals: &'a [Signal],
}

impl Results<'_> {
    fn settings(&self) -> &Settings {
        self.station.settings()
    }

    fn rows(&self) -> Vec<Row> {
        let settings = self.settings();
        let names: Vec<_> = settings
            .shapes
            .iter()
            .map(|shape| shape.name.clone())
            .collect();
        let unseen = match settings.belt.unseen {
            Policy::Keep => Verdict::Keep,
            Policy::Reject | Policy::Stop => Verdict::Reject,
        };
        rows(self.outcome, &names, settings.scale(), unseen)
    }

    fn outlet_names(&self) -> Vec<String> {
        self.settings()
            .outlets
            .iter()
            .map(|outlet| outlet.name.clone())
            .collect()
    }

    pub(super) fn write_parts(&self, file: &Path) -> anyhow::Result<()> {
        write_whole(file, &parts_csv(&self.rows())?)
    }

    pub(super) fn write_signals(&self, file: &Path) -> anyhow::Result<()> {
        let mut table = SignalWriter::new(Vec::new(), self.outlet_names())?;
        for signal in self.signals {
            table.write(signal)?;
        }
        write_whole(file, &table.finish()?)
    }

    /// One PNG for each part, named after its number, verdict and reasons.
    pub(super) fn draw_pictures(&self, folder: &Path) -> anyhow::Result<()> {
        std::fs::create_dir_all(folder)
            .with_context(|| format!("cannot make {}", folder.display()))?;
        let mut artist = self.station.artist();
        let mut frame = Frame::default();
        for (part, _) in &self.outcome.parts {
            let at = self
                .recording
                .frame_at(part.spoken_us)
                .context("a part speaks from a frame")?;
            self.recording.read_into(at, &mut frame)?;
            let mut png = Cursor::new(Vec::new());
            artist
                .draw_part(&frame, part)
                .write_to(&mut png, image::ImageFormat::Png)?;
            let reasons = part.reasons.to_string();
            let why = if reasons.is_empty() { "keep" } else { &reasons };
            let file = folder.join(format!("part-{:05}-{why}.png", part.number));
            write_whole(&file, png.get_ref())?;
        }
        Ok(())
    }

    pub(super) fn score(&self, labels: &[Label]) -> Score {
        let parts = self.outcome.parts.iter();
        let parts: Vec<Placed> = parts.map(|(part, _)| Placed::from(part)).collect();
        let unseen = self.outcome.unseen.iter().map(|(stretch, _)| *stretch);
        let rejected: Vec<Stretch> = match self.settings().belt.unseen {
            Policy::Reject => unseen.collect(),
            Policy::Keep | Policy::Stop => Vec::new(),
        };
        score(
            labels,
            &parts,
            &rejected,
            self.settings().belt.part_pitch_mm * LABEL_GATE,
        )
    }

    pub(super) fn print_table(
        &self,
        score: Option<&(&[Label], Score)>,
        faults: &[LineFault],
        quiet: bool,
        out: &mut dyn Write,
    ) -> anyhow::Result<()> {
        if !quiet {
            timeline::print(self.outcome, self.signals, self.settings(), out)?;
            let summary = summarize(self.outcome, self.settings());
            write!(out, "{}", summary.table(self.outcome))?;
            writeln!(out, "  {:<15} {}", "signals", self.signal_line())?;
        }
        for loss in &self.outcome.losses {
            writeln!(out, "{}", self.loss_line(loss))?;
        }
        for fault in faults {
            writeln!(out, "line: {} ({})", fault.kind, self.named(fault))?;
        }
        if let Some((labels, score)) = score {
            self.print_score(labels, score, quiet, out)?;
        }
        Ok(())
    }

    fn signal_line(&self) -> String {
        let count = self.signals.len();
        match self
            .signals
            .first()
            .map(|signal| signal.mode.to_string())
            .as_deref()
        {
            Some("sent") => format!("{count} sent"),
            _ => format!("{count} (dry run: nothing was sent)"),
        }
    }

    fn named(&self, fault: &LineFault) -> String {
        let names = self.outlet_names();
        let outlets: Vec<_> = fault
            .outlets
            .iter()
            .map(|outlet| names[outlet].as_str())
            .collect();
        outlets.join(", ")
    }

    fn loss_line(&self, loss: &Loss) -> String {
        let outlet = &self.settings().outlets[loss.outlet].name;
        let lost_mm = loss.lost_mm;
        match loss.why {
            Why::Late { by_us } => format!(
                "{outlet}: opened {:.1} ms late, {lost_mm:.1} mm passed; raise its distance_mm or lower the latency",
                by_us.as_ms()
            ),
            Why::Missed => format!("{outlet}: {lost_mm:.1} mm had passed before it could open"),
            Why::Cut => format!(
                "{outlet}: shut after max_on_ms, {lost_mm:.1} mm that should have been rejected passed; stop the belt \
                 when that much goes wrong, or raise max_on_ms if the valve may bear it"
            ),
            Why::Ended => format!(
                "{outlet}: {lost_mm:.1} mm were still to be rejected when the station ended"
            ),
        }
    }

    fn print_score(
        &self,
        labels: &[Label],
        score: &Score,
        quiet: bool,
        out: &mut dyn Write,
    ) -> anyhow::Result<()> {
        let lists = [
            ("missed (should be rejected, would pass)", &score.misses),
            ("false reject (should be kept)", &score.false_rejects),
            ("not found (should be kept, was not seen)", &score.not_found),
            ("no label", &score.unlabelled),
        ];
        for (what, list) in lists {
            for found in list {
                writeln!(out, "{what}: {}", self.match_line(found, labels))?;
            }
        }
        if !quiet {
            let good = labels
                .iter()
                .filter(|label| label.verdict == Verdict::Keep)
                .count();
            let bad = labels.len() - good;
            writeln!(
                out,
                "  {:<15} {bad} to reject, {} missed; {good} to keep, {} rejected, {} not found; {} parts without a label",
                "labels",
                score.misses.len(),
                score.false_rejects.len(),
                score.not_found.len(),
                score.unlabelled.len()
            )?;
        }
        Ok(())
    }

    fn match_line(&self, found: &Match, labels: &[Label]) -> String {
        let label = found.label.map(|l| {
            let Label {
                along_mm,
                across_mm,
                verdict,
                note,
            } = &labels[l];
            format!("label {verdict} at {along_mm:.1}, {across_mm:.1} mm ({note})")
        });
        let part = found.part.map(|p| {
            let (part, _) = &self.outcome.parts[p];
            let figures = part.judged.map_or_else(String::new, |judged| {
                let [missing, excess] =
                    [judged.missing.px, judged.excess.px].map(|px| self.settings().scale().mm(px));
                format!(", missing {missing:.2} mm, excess {excess:.2} mm")
            });
            let (number, along_mm, across_mm) = (part.number, part.along_mm, part.across_mm);
            let Part {
                verdict, reasons, ..
            } = part;
            format!(
                "part {number} at {along_mm:.1}, {across_mm:.1} mm: {verdict} {reasons}{figures}"
            )
        });
        [label, part]
            .into_iter()
            .flatten()
            .collect::<Vec<_>>()
            .join("; ")
    }

    pub(super) fn print_json(
        &self,
        score: Option<&(&[Label], Score)>,
        counts: &LineCounts,
        faults: &[LineFault],
        out: &mut dyn Write,
    ) -> anyhow::Result<()> {
        let unseen = self.outcome.unseen.iter().map(|(stretch, at)| {
            json!({"from_mm": stretch.from_mm, "to_mm": stretch.to_mm, "decided_us": at})
        });
        let stopped = self
            .outcome
            .stopped
            .map(|(cause, at)| json!({"why": cause.to_string(), "at_us": at}));
        let object = json!({
            "summary": summarize(self.outcome, self.settings()),
            "parts": self.rows(),
            "unseen": unseen.collect::<Vec<_>>(),
            "signals": self.signals.iter().map(|signal| self.signal_json(signal)).collect::<Vec<_>>(),
            "losses": self.outcome.losses.iter().map(|loss| self.loss_line(loss)).collect::<Vec<_>>(),
            "line": {
                "counts": counts,
                "faults": faults.iter().map(|fault| fault.kind.to_string()).collect::<Vec<_>>(),
            },
            "stopped": stopped,
            "labels": score.map(|(labels, score)| self.score_json(labels, score)),
        });
        writeln!(out, "{object}")?;
        Ok(())
    }

    fn signal_json(&self, signal: &Signal) -> Value {
        let names = self.outlet_names();
        let state = |outlet: usize| (names[outlet].clone(), json!(signal.on.has(outlet)));
        json!({
            "due_us": signal.due_us,
            "sent_us": signal.sent_us,
            "outlets": signal.changed.iter().map(state).collect::<serde_json::Map<_, _>>(),
            "bytes_hex": signal.frame.to_string(),
            "mode": signal.mode.to_string(),
        })
    }

    fn score_json(&self, labels: &[Label], score: &Score) -> Value {
        let lines = |list: &[Match]| {
            list.iter()
                .map(|found| self.match_line(found, labels))
                .collect::<Vec<_>>()
        };
        json!({
            "labels": labels.len(),
            "agrees": score.agrees(),
            "misses": lines(&score.misses),
            "false_rejects": lines(&score.false_rejects),
            "not_found": lines(&score.not_found),
            "unlabelled": lines(&score.unlabelled),
        })
    }
}
