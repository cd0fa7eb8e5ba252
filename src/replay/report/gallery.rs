//! Pictures of the parts that went wrong, and of those nearest to a limit.

use maud::{Markup, html};

use super::album::Album;
use super::facts::{Case, Facts, Wrong};
use super::words::mm;
use crate::recording::RecordingError;

/// Pictures of misses, and of false rejects.
const WRONG: usize = 18;
/// Pictures of parts near a limit.
const NEAREST: usize = 12;

/// The section.
///
/// # Errors
/// Those of reading frames.
pub fn gallery(facts: &Facts<'_>, album: &mut Album<'_>) -> Result<Markup, RecordingError> {
    let misses = wrong(facts, Wrong::Miss);
    let false_rejects = wrong(facts, Wrong::FalseReject);
    let nearest = nearest(facts);
    let key = "The thin line is the taught outline. What is missing is hatched upwards (/), what is too much downwards (\\); a ring with \
               the figure in mm marks the worst point where more than half of a limit is used up.";
    Ok(html! {
        p { (key) }
        @if facts.labels.is_some() {
            h3 { "Misses" } (sheet(&misses, WRONG, album)?)
            h3 { "False rejects" } (sheet(&false_rejects, WRONG, album)?)
        }
        h3 { "Nearest to a limit" }
        (sheet(&nearest, NEAREST, album)?)
    })
}

fn wrong<'f>(facts: &'f Facts<'_>, how: Wrong) -> Vec<&'f Case<'f>> {
    let cases = facts.cases.iter();
    cases.filter(|case| case.wrong() == Some(how)).collect()
}

/// Parts that are right, by their distance to the limit on either side.
fn nearest<'f>(facts: &'f Facts<'_>) -> Vec<&'f Case<'f>> {
    let distance = |case: &Case<'_>| {
        let severity = case.severity().filter(|severity| severity.is_finite())?;
        Some((severity - 1.0).abs())
    };
    let right = facts.cases.iter().filter(|case| case.wrong().is_none());
    let mut near: Vec<_> = right
        .filter_map(|case| Some((distance(case)?, case)))
        .collect();
    near.sort_by(|a, b| a.0.total_cmp(&b.0));
    near.truncate(NEAREST);
    near.into_iter().map(|(_, case)| case).collect()
}

/// The first `most` of `cases`.
///
/// # Errors
/// Those of reading frames.
pub fn sheet(
    cases: &[&Case<'_>],
    most: usize,
    album: &mut Album<'_>,
) -> Result<Markup, RecordingError> {
    let mut shown = Vec::new();
    for case in cases.iter().take(most) {
        if let Some(picture) = album.part(case)? {
            shown.push((*case, picture));
        }
    }
    Ok(html! {
        @if cases.is_empty() { p { "None." } }
        div.gallery { @for (case, picture) in &shown { (card(case, picture)) } }
        @if cases.len() > most {
            p.soft { "The first " (most) " of " (cases.len()) ", in the order of the belt." }
        }
    })
}

/// A part with its picture and what is to be said of it.
pub fn card(case: &Case<'_>, picture: &Markup) -> Markup {
    let part = case.part;
    html! {
        figure {
            (picture)
            figcaption {
                @match case.wrong() {
                    Some(Wrong::Miss) => span.tag.miss { "miss" },
                    Some(Wrong::FalseReject) => span.tag.false-reject { "false reject" },
                    None => {},
                }
                b { "part " (part.number) } ", " (case.verdict()) br;
                (format!("{:.1} mm along, {:.1} mm across", part.along_mm, part.across_mm))
                @if let Some(figures) = &case.figures {
                    br; "missing " (mm(figures.missing_mm)) " of " (mm(figures.missing_limit_mm))
                    ", excess " (mm(figures.excess_mm)) " of " (mm(figures.excess_limit_mm)) " mm"
                }
                @if let Some(label) = case.label {
                    br; "label: " (label.verdict)
                    @if !label.note.is_empty() { " (" (label.note) ")" }
                }
            }
        }
    }
}
