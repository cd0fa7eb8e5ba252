//! What each step made of three parts: an ordinary good one, the kept one nearest to a limit, and one far beyond.

use maud::{Markup, html};

use super::album::Album;
use super::facts::{Case, Facts};
use crate::recording::RecordingError;
use crate::shape::Verdict;

/// The section.
///
/// # Errors
/// Those of reading frames.
pub fn steps(facts: &Facts<'_>, album: &mut Album<'_>) -> Result<Markup, RecordingError> {
    let mut strips = Vec::new();
    for (why, case) in chosen(facts) {
        strips.push((why, case, album.steps(case)?));
    }
    Ok(html! {
        @if strips.is_empty() { p { "No part was seen whole." } }
        @for (why, case, pictures) in &strips {
            h3 { (why) ": part " (case.part.number) ", " (case.verdict()) }
            div.strip { @for (name, picture) in pictures { figure { (picture) figcaption { (name) } } } }
        }
    })
}

/// Up to three parts, each for a reason.
fn chosen<'f>(facts: &'f Facts<'_>) -> Vec<(&'static str, &'f Case<'f>)> {
    let with = |verdict: Verdict| {
        let cases = facts
            .cases
            .iter()
            .filter(move |case| case.part.verdict == verdict);
        let finite =
            |case: &&Case<'_>| Some(case.severity()?).filter(|severity| severity.is_finite());
        let mut cases: Vec<_> = cases
            .filter_map(|case| Some((finite(&case)?, case)))
            .collect();
        cases.sort_by(|a, b| a.0.total_cmp(&b.0));
        cases.into_iter().map(|(_, case)| case).collect::<Vec<_>>()
    };
    let (kept, rejected) = (with(Verdict::Keep), with(Verdict::Reject));
    let ordinary = kept.get(kept.len().saturating_sub(1) / 2).copied();
    let nearest = kept.last().filter(|_| kept.len() > 1).copied();
    let named = [
        ("An ordinary good part", ordinary),
        ("The kept part nearest to a limit", nearest),
        (
            "The rejected part farthest beyond its limit",
            rejected.last().copied(),
        ),
    ];
    named
        .into_iter()
        .filter_map(|(why, case)| Some((why, case?)))
        .collect()
}
