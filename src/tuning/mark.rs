//! Proposed labels: the present verdicts, the doubtful ones first, beside what a person has already said.

use super::change::Seen;
use crate::recording::Label;
use crate::replay::{Outcome, Placed, score};
use crate::settings::Settings;

/// What a proposal's note begins with. A row whose note begins otherwise, or whose verdict is no longer the one in its
/// note, is a person's.
const MARK: &str = "proposed";

/// A row of `labels.csv` with the part it is about.
#[derive(Clone, Debug, PartialEq)]
pub struct Proposal {
    /// The row.
    pub label: Label,
    /// The part as it is judged now; `None` for a person's row where nothing is found.
    pub seen: Option<Seen>,
    /// Whether a person said so.
    pub by_person: bool,
}

/// Whether the row is a proposal that nobody has touched.
fn is_proposal(label: &Label) -> bool {
    let verdict = label.verdict.to_string();
    let words = label.note.strip_prefix(MARK).map(str::trim_start);
    words.is_some_and(|words| {
        let rest = words.strip_prefix(verdict.as_str());
        rest.is_some_and(|rest| !rest.starts_with(char::is_alphanumeric))
    })
}

/// Rows for all parts: proposals first, those nearest to another verdict in front, then what a person said, in the order in
/// which it stood. A part that a person has labelled, by its place on the belt, gets no proposal.
pub fn propose(
    outcome: &Outcome,
    settings: &Settings,
    known: &[Label],
    gate_mm: f64,
) -> Vec<Proposal> {
    let persons: Vec<Label> = known
        .iter()
        .filter(|label| !is_proposal(label))
        .cloned()
        .collect();
    let placed: Vec<Placed> = outcome
        .parts
        .iter()
        .map(|(part, _)| Placed::from(part))
        .collect();
    let score = score(&persons, &placed, &[], gate_mm);
    let seen = |k: usize| {
        let (part, outlet) = &outcome.parts[k];
        Seen::new(part, *outlet, settings)
    };
    let mut proposals: Vec<Proposal> = score
        .unlabelled
        .iter()
        .filter_map(|found| found.part)
        .map(|k| proposal(seen(k)))
        .collect();
    let doubt = |proposal: &Proposal| {
        let mm = proposal.seen.as_ref().and_then(|seen| seen.flips_after_mm);
        mm.unwrap_or(f64::INFINITY)
    };
    proposals.sort_by(|a, b| doubt(a).total_cmp(&doubt(b)));
    let part_of = |l: usize| {
        score
            .matches
            .iter()
            .find(|found| found.label == Some(l))?
            .part
    };
    let said = persons.into_iter().enumerate().map(|(l, label)| Proposal {
        label,
        seen: part_of(l).map(seen),
        by_person: true,
    });
    proposals.extend(said);
    proposals
}

fn proposal(seen: Seen) -> Proposal {
    let verdict = seen.part.verdict;
    let why = match (seen.part.reasons.is_empty(), seen.flips_after_mm) {
        (true, Some(mm)) => format!(", {mm:.2} mm to spare"),
        (false, Some(mm)) => format!(": {}, {mm:.2} mm beyond", seen.part.reasons),
        (false, None) => format!(": {}", seen.part.reasons),
        (true, None) => String::new(),
    };
    Proposal {
        label: Label {
            along_mm: seen.part.along_mm,
            across_mm: seen.part.across_mm,
            verdict,
            note: format!("{MARK} {verdict}{why}"),
        },
        seen: Some(seen),
        by_person: false,
    }
}

#[cfg(test)]
mod tests {
    use super::super::pairs::tests::part;
    use super::*;
    use crate::shape::Verdict;

    fn label(along_mm: f64, verdict: Verdict, note: &str) -> Label {
        Label {
            along_mm,
            across_mm: 30.0,
            verdict,
            note: note.to_owned(),
        }
    }

    #[test]
    fn only_untouched_proposals_are_ours() {
        let keep = |note| is_proposal(&label(1.0, Verdict::Keep, note));
        assert!(keep("proposed keep") && keep("proposed keep, 0.20 mm to spare"));
        for persons in [
            "",
            "fine",
            "proposed reject: missing",
            "Proposed keep",
            "proposed keeper",
            "looked at, proposed keep",
        ] {
            assert!(!keep(persons), "{persons}");
        }
    }

    #[test]
    fn what_a_person_said_stays_and_the_rest_is_proposed_anew() {
        let settings = crate::settings::parse(
            std::path::Path::new("x.toml"),
            include_str!("../../config/oat-stars.toml"),
        );
        let settings = settings.unwrap().settings;
        let outcome = Outcome {
            parts: [100.0, 160.0, 220.0]
                .map(|mm| (part(mm, 30.0), None))
                .to_vec(),
            ..Outcome::default()
        };
        let first = propose(&outcome, &settings, &[], 10.0);
        let mut labels: Vec<Label> = first.iter().map(|row| row.label.clone()).collect();
        assert_eq!(labels.len(), 3);
        assert!(labels.iter().all(|label| label.note == "proposed keep"));
        // A person turns one over, writes about another, and adds one where nothing was found.
        labels[1].verdict = Verdict::Reject;
        labels[2].note = "seen it, fine".to_owned();
        labels.push(label(500.0, Verdict::Reject, "fell off"));
        let again = propose(&outcome, &settings, &labels, 10.0);
        let rows: Vec<_> = again
            .iter()
            .map(|row| (row.label.clone(), row.by_person, row.seen.is_some()))
            .collect();
        assert_eq!(
            rows,
            [
                (labels[0].clone(), false, true),
                (labels[1].clone(), true, true),
                (labels[2].clone(), true, true),
                (labels[3].clone(), true, false),
            ]
        );
    }
}
