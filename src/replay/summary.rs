//! The short table at the end of a replay.

use std::fmt::Write;

use serde::Serialize;

use super::outcome::Outcome;
use crate::belt::Part;
use crate::settings::Settings;
use crate::shape::{Reason, Verdict};
use crate::sorter::Cause;

/// The kept part that came nearest to a limit.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct WorstMargin {
    /// Its number.
    pub part: u64,
    /// `missing` or `excess`.
    pub figure: &'static str,
    /// The figure.
    pub value_mm: f64,
    /// Its limit.
    pub limit_mm: f64,
}

/// Counts that a person reads first.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Summary {
    /// Frames whose verdicts took effect.
    pub frames: u64,
    /// Parts that were decided.
    pub parts: usize,
    /// Parts that were kept.
    pub kept: usize,
    /// Parts that were rejected.
    pub rejected: usize,
    /// How many parts were rejected for each reason; a part may have several.
    pub reasons: Vec<(&'static str, usize)>,
    /// How many good parts went to each outlet.
    pub sorted: Vec<(String, usize)>,
    /// Belt that nobody saw in time.
    pub unseen_mm: f64,
    /// Frames that were not judged by their due time.
    pub overdue_frames: u64,
    /// Crumbs that were left out.
    pub specks: u64,
    /// The kept part that came nearest to a limit.
    pub worst_margin: Option<WorstMargin>,
}

/// Sums up what came of a replay.
pub fn summarize(outcome: &Outcome, settings: &Settings) -> Summary {
    let parts = || outcome.parts.iter().map(|(part, _)| part);
    let with = |verdict: Verdict| parts().filter(move |part| part.verdict == verdict);
    let count = |reason: Reason| {
        with(Verdict::Reject)
            .filter(|part| part.reasons.has(reason))
            .count()
    };
    let good_to = |index: usize| {
        let goes = |(part, outlet): &&(Part, Option<usize>)| {
            part.verdict == Verdict::Keep && *outlet == Some(index)
        };
        outcome.parts.iter().filter(goes).count()
    };
    let sorted = settings
        .outlets
        .iter()
        .enumerate()
        .map(|(k, outlet)| (outlet.name.clone(), good_to(k)));
    Summary {
        frames: outcome.health.frames,
        parts: outcome.parts.len(),
        kept: with(Verdict::Keep).count(),
        rejected: with(Verdict::Reject).count(),
        reasons: Reason::ALL
            .into_iter()
            .map(|reason| (reason.name(), count(reason)))
            .filter(|(_, count)| *count > 0)
            .collect(),
        sorted: sorted.filter(|(_, count)| *count > 0).collect(),
        unseen_mm: outcome
            .unseen
            .iter()
            .map(|(stretch, _)| stretch.to_mm - stretch.from_mm)
            .fold(0.0, |sum, mm| sum + mm),
        overdue_frames: outcome.health.overdue_frames,
        specks: outcome.health.specks,
        worst_margin: with(Verdict::Keep)
            .filter_map(|part| margin(part, settings))
            .min_by(|a, b| (a.limit_mm - a.value_mm).total_cmp(&(b.limit_mm - b.value_mm))),
    }
}

/// The figure of a part that is nearest to its limit.
fn margin(part: &Part, settings: &Settings) -> Option<WorstMargin> {
    let judged = part.judged?;
    let shape = &settings.shapes[judged.shape];
    let scale = settings.scale();
    let figure = |figure, px, limit_mm| WorstMargin {
        part: part.number,
        figure,
        value_mm: scale.mm(px),
        limit_mm,
    };
    let missing = figure("missing", judged.missing.px, shape.missing_mm);
    let excess = figure("excess", judged.excess.px, shape.excess_mm);
    let nearer = missing.limit_mm - missing.value_mm <= excess.limit_mm - excess.value_mm;
    Some(if nearer { missing } else { excess })
}

impl Summary {
    /// The table, a line each.
    pub fn table(&self, outcome: &Outcome) -> String {
        let mut text = String::new();
        let mut line = |name: &str, what: String| {
            let _ = writeln!(text, "  {name:<15} {what}");
        };
        line("parts", format!("{} in {} frames", self.parts, self.frames));
        line(
            "kept",
            counted(
                self.kept,
                self.sorted.iter().map(|(name, n)| (name.as_str(), *n)),
            ),
        );
        line(
            "rejected",
            counted(self.rejected, self.reasons.iter().copied()),
        );
        line("unseen belt", unseen(self.unseen_mm, outcome));
        line("overdue frames", self.overdue_frames.to_string());
        if self.specks > 0 {
            line("crumbs", format!("{} left out", self.specks));
        }
        if let Some(worst) = &self.worst_margin {
            line("worst margin", worst.to_string());
        }
        if let Some((cause, at)) = outcome.stopped {
            line(
                "stopped",
                format!("{cause} (at {:.3} s); every outlet is off", at.as_seconds()),
            );
        }
        text
    }
}

impl std::fmt::Display for WorstMargin {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        let Self {
            part,
            figure,
            value_mm,
            limit_mm,
        } = self;
        let left = limit_mm - value_mm;
        write!(
            f,
            "{left:.2} mm: part {part}, {figure} {value_mm:.2} of {limit_mm:.2} mm"
        )
    }
}

impl std::fmt::Display for Cause {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self {
            Self::Partial { along_mm } => {
                write!(
                    f,
                    "a part at {along_mm:.1} mm was never seen whole, and judge.partial says stop"
                )
            }
            Self::Unseen { along_mm } => {
                write!(
                    f,
                    "belt from {along_mm:.1} mm on passed unseen, and belt.unseen says stop"
                )
            }
        }
    }
}

/// `12 (missing 4, excess 3)`.
fn counted<'a>(total: usize, of: impl Iterator<Item = (&'a str, usize)>) -> String {
    let of: Vec<_> = of.map(|(name, count)| format!("{name} {count}")).collect();
    if of.is_empty() {
        total.to_string()
    } else {
        format!("{total} ({})", of.join(", "))
    }
}

fn unseen(total_mm: f64, outcome: &Outcome) -> String {
    const SHOWN: usize = 3;
    let mut text = format!("{total_mm:.1} mm");
    for (stretch, _) in outcome.unseen.iter().take(SHOWN) {
        let _ = write!(text, ", {:.1} to {:.1} mm", stretch.from_mm, stretch.to_mm);
    }
    if outcome.unseen.len() > SHOWN {
        let _ = write!(text, " and {} more", outcome.unseen.len() - SHOWN);
    }
    text
}
