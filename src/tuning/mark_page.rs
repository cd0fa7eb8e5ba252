//! The picture sheet that goes with proposed labels.

use maud::{Markup, html};

use super::change_page::said;
use super::mark::Proposal;
use crate::recording::RecordingError;
use crate::replay::report::album::Album;
use crate::replay::report::page::{Section, page};
use crate::replay::report::words::{counted, mm};

/// A sheet of pictures in the order of the rows, each with its line in `labels.csv`; proposals only, at most `most`.
///
/// # Errors
/// Those of reading frames.
pub fn sheet(
    recording: &str,
    rows: &[Proposal],
    most: usize,
    album: &mut Album<'_>,
) -> Result<String, RecordingError> {
    let proposed = || rows.iter().enumerate().filter(|(_, row)| !row.by_person);
    let mut cards = Vec::new();
    for (k, row) in proposed().take(most) {
        // The first line is the header.
        cards.push(card(k + 2, row, album)?);
    }
    let count = proposed().count();
    let body = html! {
        @if cards.is_empty() { p { "Nothing is left to look at: a person has labelled every part." } }
        div.gallery { @for card in &cards { (card) } }
        @if count > most { p.soft { "The " (most) " most doubtful of " (counted(count, "proposal", "proposals")) "." } }
    };
    let lead = html! {
        p {
            "Open " code { "labels.csv" } " in any editor. Where a picture shows something else than its line says, change "
            code { "keep" } " to " code { "reject" } " or the other way round. To say that you have looked and agree, write a note of \
            your own. Running " code { "mark" } " again leaves alone what you changed."
        }
        ul.key {
            li { b { (count) } "proposed" }
            li { b { (rows.len() - count) } "said by a person" }
        }
    };
    let sections = [Section {
        id: "parts",
        title: "The doubtful ones first",
        body,
    }];
    Ok(page(&format!("Labels for {recording}"), &lead, &sections))
}

fn card(line: usize, row: &Proposal, album: &mut Album<'_>) -> Result<Markup, RecordingError> {
    let seen = row.seen.as_ref();
    let picture = seen.map_or(Ok(None), |seen| album.part(&seen.case()))?;
    let what = said(seen);
    Ok(html! {
        figure {
            @if let Some(picture) = &picture { (picture) }
            figcaption {
                span.tag { "line " (line) } b { (row.label.verdict) } br;
                (what) br;
                (format!("{:.1} mm along, {:.1} mm across", row.label.along_mm, row.label.across_mm))
                @if let Some(left_mm) = seen.and_then(|seen| seen.flips_after_mm) { br; (mm(left_mm)) " mm from the other verdict" }
            }
        }
    })
}
