//! What was counted, and why parts were rejected.

use maud::{Markup, html};

use super::Report;
use super::chart::n;
use super::page::pairs;
use super::words::counted;
use crate::replay::{Summary, summarize};

/// The counts of the run, the same that the command prints.
pub fn counts(report: &Report<'_>) -> Markup {
    let summary = summarize(report.outcome, report.settings);
    let (first_us, last_us) = report.span_us;
    let mut rows = vec![
        ("parts", summary.parts.to_string()),
        ("kept", kept(&summary)),
        ("rejected", summary.rejected.to_string()),
        ("frames", summary.frames.to_string()),
        (
            "recorded time",
            format!("{:.1} s", (last_us - first_us).as_seconds()),
        ),
        ("unseen belt", unseen(&summary, report)),
        ("overdue frames", summary.overdue_frames.to_string()),
        ("crumbs left out", summary.specks.to_string()),
    ];
    if let Some(worst) = &summary.worst_margin {
        rows.push(("worst margin", worst.to_string()));
    }
    if let Some((cause, at)) = report.outcome.stopped {
        let at = at.as_seconds();
        rows.push((
            "stopped",
            format!("{cause} (at {at:.3} s); every outlet is off"),
        ));
    }
    pairs(&rows)
}

fn kept(summary: &Summary) -> String {
    let to = summary
        .sorted
        .iter()
        .map(|(name, count)| format!("{count} to {name}"));
    let to: Vec<_> = to.collect();
    if to.is_empty() {
        summary.kept.to_string()
    } else {
        format!("{} ({})", summary.kept, to.join(", "))
    }
}

fn unseen(summary: &Summary, report: &Report<'_>) -> String {
    let stretches = report.outcome.unseen.len();
    if stretches == 0 {
        return "none".to_owned();
    }
    let stretches = counted(stretches, "stretch", "stretches");
    format!("{:.1} mm in {stretches}", summary.unseen_mm)
}

/// A bar for each reason.
pub fn reasons(report: &Report<'_>) -> Markup {
    const ROW: f64 = 26.0;
    const FROM: f64 = 90.0;
    const WIDEST: f64 = 400.0;
    let summary = summarize(report.outcome, report.settings);
    if summary.rejected == 0 {
        return html! { p { "No part was rejected." } };
    }
    let most = summary
        .reasons
        .iter()
        .map(|(_, count)| *count)
        .max()
        .unwrap_or(1)
        .max(1);
    let height = ROW * summary.reasons.len() as f64;
    html! {
        p { (summary.rejected) " of " (counted(summary.parts, "part was", "parts were")) " rejected. A part may have several reasons." }
        figure.chart {
            svg viewBox={ "0 0 560 " (n(height)) } role="img" aria-label="Rejected parts by reason" {
                @for (row, (name, count)) in summary.reasons.iter().enumerate() {
                    @let y = ROW * row as f64;
                    @let width = WIDEST * *count as f64 / most as f64;
                    text.end x=(n(FROM - 8.0)) y=(n(y + 17.0)) { (name) }
                    rect.bad x=(n(FROM)) y=(n(y + 4.0)) width=(n(width)) height=(n(ROW - 8.0)) {}
                    text.note x=(n(FROM + width + 7.0)) y=(n(y + 17.0)) { (count) }
                }
            }
        }
    }
}
