//! Verdicts against labels, matched by belt position.

use crate::belt::{Extent, Part, Stretch};
use crate::recording::Label;
use crate::shape::Verdict;

/// A label may lie this share of the part pitch outside the box of its part.
pub const LABEL_GATE: f64 = 0.25;

/// What matters of a part when it is held against labels.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Placed {
    /// Everything that was ever seen of it.
    pub extent: Extent,
    /// Centroid along the belt.
    pub along_mm: f64,
    /// Centroid across the belt.
    pub across_mm: f64,
    /// What becomes of it.
    pub verdict: Verdict,
}

impl From<&Part> for Placed {
    fn from(part: &Part) -> Self {
        Self {
            extent: part.extent,
            along_mm: part.along_mm,
            across_mm: part.across_mm,
            verdict: part.verdict,
        }
    }
}

/// A label and the part it belongs to, or one without the other.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Match {
    /// Index of the label.
    pub label: Option<usize>,
    /// Index of the part.
    pub part: Option<usize>,
}

/// How verdicts and labels agree.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Score {
    /// Every label and every part exactly once, in the order of the belt. Two labels may share a part that touches.
    pub matches: Vec<Match>,
    /// Labelled `reject`, kept, or not seen at all and not on belt that was rejected for that.
    pub misses: Vec<Match>,
    /// Labelled `keep`, rejected.
    pub false_rejects: Vec<Match>,
    /// Labelled `keep`, not seen at all.
    pub not_found: Vec<Match>,
    /// A part that has no label.
    pub unlabelled: Vec<Match>,
}

impl Score {
    /// Whether every label agrees with its part and no part is without one.
    pub fn agrees(&self) -> bool {
        let wrong = [
            &self.misses,
            &self.false_rejects,
            &self.not_found,
            &self.unlabelled,
        ];
        wrong.iter().all(|list| list.is_empty())
    }
}

/// Matches labels and parts, nearest first, and compares their verdicts.
///
/// A label belongs to the part nearest to it, at most `gate_mm` outside its box; each part takes one label so, and what
/// is left over goes to parts that already have one (a pair that has grown together carries two labels). What lay on
/// `rejected` belt was thrown away with it, seen or not.
pub fn score(labels: &[Label], parts: &[Placed], rejected: &[Stretch], gate_mm: f64) -> Score {
    let gone = |label: &Label| {
        let holds = |belt: &Stretch| (belt.from_mm..=belt.to_mm).contains(&label.along_mm);
        rejected.iter().any(holds)
    };
    let (of_label, labelled) = pair_up(labels, parts, gate_mm);
    let mut score = Score::default();
    for (l, label) in labels.iter().enumerate() {
        let found = Match {
            label: Some(l),
            part: of_label[l],
        };
        score.matches.push(found);
        match (label.verdict, of_label[l].map(|p| parts[p].verdict)) {
            (Verdict::Reject, None) if gone(label) => {}
            (Verdict::Reject, Some(Verdict::Keep) | None) => score.misses.push(found),
            (Verdict::Keep, Some(Verdict::Reject)) => score.false_rejects.push(found),
            (Verdict::Keep, None) => score.not_found.push(found),
            _ => {}
        }
    }
    for p in (0..parts.len()).filter(|&p| !labelled[p]) {
        let alone = Match {
            label: None,
            part: Some(p),
        };
        score.matches.push(alone);
        score.unlabelled.push(alone);
    }
    score
        .matches
        .sort_by(|a, b| along_mm(a, labels, parts).total_cmp(&along_mm(b, labels, parts)));
    score
}

fn along_mm(found: &Match, labels: &[Label], parts: &[Placed]) -> f64 {
    let label = found.label.map(|l| labels[l].along_mm);
    label
        .or(found.part.map(|p| parts[p].along_mm))
        .unwrap_or(f64::INFINITY)
}

fn pair_up(labels: &[Label], parts: &[Placed], gate_mm: f64) -> (Vec<Option<usize>>, Vec<bool>) {
    let mut pairs = candidates(labels, parts, gate_mm);
    pairs.sort_by(|a, b| a.0.total_cmp(&b.0).then((a.1, a.2).cmp(&(b.1, b.2))));
    let mut of_label = vec![None; labels.len()];
    let mut labelled = vec![false; parts.len()];
    for shared in [false, true] {
        for &(_, l, p) in &pairs {
            if of_label[l].is_none() && (shared || !labelled[p]) {
                of_label[l] = Some(p);
                labelled[p] = true;
            }
        }
    }
    (of_label, labelled)
}

/// Pairs that are near enough, with the distance of label and centroid. Both lists are in belt order but for a few
/// places, so only a window of parts is looked at for each label.
fn candidates(labels: &[Label], parts: &[Placed], gate_mm: f64) -> Vec<(f64, usize, usize)> {
    let mut order: Vec<usize> = (0..parts.len()).collect();
    order.sort_by(|&a, &b| parts[a].extent.lead_mm.total_cmp(&parts[b].extent.lead_mm));
    let longest_mm = parts
        .iter()
        .map(|part| part.extent.trail_mm - part.extent.lead_mm)
        .fold(0.0, f64::max);
    let mut pairs = Vec::new();
    for (l, label) in labels.iter().enumerate() {
        let from_mm = label.along_mm - longest_mm - gate_mm;
        let first = order.partition_point(|&p| parts[p].extent.lead_mm < from_mm);
        for &p in &order[first..] {
            let part = &parts[p];
            if part.extent.lead_mm > label.along_mm + gate_mm {
                break;
            }
            if part.extent.distance_mm(label.along_mm, label.across_mm) <= gate_mm {
                let (along, across) = (
                    label.along_mm - part.along_mm,
                    label.across_mm - part.across_mm,
                );
                pairs.push((along.hypot(across), l, p));
            }
        }
    }
    pairs
}

#[cfg(test)]
mod tests {
    use super::*;

    fn label(along_mm: f64, verdict: Verdict) -> Label {
        Label {
            along_mm,
            across_mm: 30.0,
            verdict,
            note: String::new(),
        }
    }

    #[test]
    fn a_bad_part_that_nobody_saw_passes_unless_its_belt_was_rejected() {
        let labels = [
            label(100.0, Verdict::Reject),
            label(200.0, Verdict::Reject),
            label(210.0, Verdict::Keep),
        ];
        let gone = Stretch {
            from_mm: 180.0,
            to_mm: 230.0,
        };
        let score = score(&labels, &[], &[gone], 10.0);
        let labels = |list: &[Match]| list.iter().map(|found| found.label).collect::<Vec<_>>();
        assert_eq!(labels(&score.misses), [Some(0)]);
        assert_eq!(labels(&score.not_found), [Some(2)]);
    }
}
