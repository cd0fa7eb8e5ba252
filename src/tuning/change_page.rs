//! The report of a comparison.

use maud::{Markup, html};

use super::change::{Change, Comparison, Seen};
use crate::recording::RecordingError;
use crate::replay::report::album::Album;
use crate::replay::report::page::{Section, page, table};
use crate::replay::report::words::{counted, mm};

/// Pictures of parts that differ, and of parts near a flip; more would make the file too large to open.
const SHOWN: usize = 60;

/// Both settings with what they see.
pub struct Sides<'a> {
    /// The settings files as they were named.
    pub names: [String; 2],
    /// Pictures as the first and as the second settings see them.
    pub albums: [Album<'a>; 2],
}

/// One file with everything that differs.
///
/// # Errors
/// Those of reading the frames that are shown.
pub fn page_of_changes(
    recording: &str,
    comparison: &Comparison,
    margin_mm: Option<f64>,
    sides: &mut Sides<'_>,
) -> Result<String, RecordingError> {
    let lead = lead(comparison, &sides.names);
    let mut sections = vec![
        Section {
            id: "differences",
            title: "What differs",
            body: list(&comparison.differing),
        },
        Section {
            id: "pictures",
            title: "Pictures of what differs",
            body: gallery(&comparison.differing, sides)?,
        },
    ];
    if let Some(margin_mm) = margin_mm {
        let pictures = gallery(&comparison.near, sides)?;
        sections.push(Section {
            id: "near",
            title: "Near a flip",
            body: html! {
                p { "The same with both settings, but within " (mm(margin_mm)) " mm of another verdict with one of them." }
                (list(&comparison.near)) (pictures)
            },
        });
    }
    Ok(page(
        &format!("Two settings on {recording}"),
        &lead,
        &sections,
    ))
}

fn lead(comparison: &Comparison, names: &[String; 2]) -> Markup {
    html! {
        p.soft { "A: " code { (names[0]) } ", B: " code { (names[1]) } }
        ul.key {
            li { b { (comparison.differing.len()) } "differ" }
            li { b { (comparison.parts) } "parts in all" }
            li { b { (format!("{:.0} mm", comparison.unseen_mm[0])) } "not seen with A" }
            li { b { (format!("{:.0} mm", comparison.unseen_mm[1])) } "not seen with B" }
        }
    }
}

fn list(changes: &[Change]) -> Markup {
    let head = [
        "along mm",
        "across mm",
        "A",
        "B",
        "missing A",
        "missing B",
        "excess A",
        "excess B",
        "flips after mm",
    ];
    let rows: Vec<_> = changes.iter().filter_map(row).collect();
    html! {
        @if rows.is_empty() { p { "Nothing." } } @else { (table(&head, &[0, 1, 4, 5, 6, 7, 8], &rows)) }
    }
}

fn row(change: &Change) -> Option<Vec<String>> {
    let place = change.any()?;
    let figure = |seen: &Option<Seen>, figure: fn(&Seen) -> Option<f64>| {
        let value = seen.as_ref().and_then(figure);
        value.map_or_else(|| "-".to_owned(), mm)
    };
    Some(vec![
        format!("{:.1}", place.part.along_mm),
        format!("{:.1}", place.part.across_mm),
        said(change.a.as_ref()),
        said(change.b.as_ref()),
        figure(&change.a, Seen::missing_mm),
        figure(&change.b, Seen::missing_mm),
        figure(&change.a, Seen::excess_mm),
        figure(&change.b, Seen::excess_mm),
        change.flips_after_mm().map_or_else(|| "-".to_owned(), mm),
    ])
}

/// What a settings file makes of a part: `reject (missing) to air-nozzle`.
pub fn said(seen: Option<&Seen>) -> String {
    let Some(seen) = seen else {
        return "not found".to_owned();
    };
    let mut text = seen.part.verdict.to_string();
    if !seen.part.reasons.is_empty() {
        text = format!("{text} ({})", seen.part.reasons);
    }
    match &seen.outlet {
        Some(outlet) => format!("{text} to {outlet}"),
        None => text,
    }
}

fn gallery(changes: &[Change], sides: &mut Sides<'_>) -> Result<Markup, RecordingError> {
    let mut cards = Vec::new();
    for change in changes.iter().take(SHOWN) {
        for (k, seen) in [&change.a, &change.b].into_iter().enumerate() {
            let Some(seen) = seen else { continue };
            if let Some(picture) = sides.albums[k].part(&seen.case())? {
                cards.push(card(["A", "B"][k], seen, &picture));
            }
        }
    }
    Ok(html! {
        div.gallery { @for card in &cards { (card) } }
        @if changes.len() > SHOWN {
            p.soft { "The first " (SHOWN) " of " (counted(changes.len(), "part", "parts")) "." }
        }
    })
}

fn card(side: &str, seen: &Seen, picture: &Markup) -> Markup {
    let part = &seen.part;
    let what = said(Some(seen));
    html! {
        figure {
            (picture)
            figcaption {
                span.tag { (side) } b { "part " (part.number) } ", " (what) br;
                (format!("{:.1} mm along, {:.1} mm across", part.along_mm, part.across_mm))
            }
        }
    }
}
