//! Every part with what its label and its figures say.

use crate::belt::Part;
use crate::recording::Label;
use crate::replay::{Outcome, Score};
use crate::settings::Settings;
use crate::shape::{Reason, Verdict};

/// Both figures of a part with their limits.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Figures {
    /// The shape it was held against.
    pub shape: usize,
    /// Depth of the deepest bite.
    pub missing_mm: f64,
    /// Its limit.
    pub missing_limit_mm: f64,
    /// How far the farthest burr sticks out.
    pub excess_mm: f64,
    /// Its limit.
    pub excess_limit_mm: f64,
}

impl Figures {
    /// The figures of a part that was seen whole.
    pub fn of(part: &Part, settings: &Settings) -> Option<Self> {
        let judged = part.judged?;
        let (shape, scale) = (&settings.shapes[judged.shape], settings.scale());
        Some(Self {
            shape: judged.shape,
            missing_mm: scale.mm(judged.missing.px),
            missing_limit_mm: shape.missing_mm,
            excess_mm: scale.mm(judged.excess.px),
            excess_limit_mm: shape.excess_mm,
        })
    }

    /// How far the nearer limit is away; negative beyond it.
    pub fn margin_mm(&self) -> f64 {
        let missing = self.missing_limit_mm - self.missing_mm;
        missing.min(self.excess_limit_mm - self.excess_mm)
    }
}

/// How verdict and label disagree.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Wrong {
    /// Should be rejected, was kept.
    Miss,
    /// Should be kept, was rejected.
    FalseReject,
}

/// A part.
#[derive(Clone, Copy, Debug)]
pub struct Case<'a> {
    /// What was decided.
    pub part: &'a Part,
    /// What it really is. Of two labels on one part the worse one.
    pub label: Option<&'a Label>,
    /// `None` if it was never seen whole.
    pub figures: Option<Figures>,
}

impl Case<'_> {
    /// Whether its label contradicts its verdict.
    pub fn wrong(&self) -> Option<Wrong> {
        match (self.label?.verdict, self.part.verdict) {
            (Verdict::Reject, Verdict::Keep) => Some(Wrong::Miss),
            (Verdict::Keep, Verdict::Reject) => Some(Wrong::FalseReject),
            _ => None,
        }
    }

    /// `keep`, or `reject: missing+excess`.
    pub fn verdict(&self) -> String {
        let (verdict, reasons) = (self.part.verdict, self.part.reasons);
        if reasons.is_empty() {
            verdict.to_string()
        } else {
            format!("{verdict}: {reasons}")
        }
    }

    /// The largest share of a limit that the part uses up: above 1 it is rejected. Infinite where it is rejected for
    /// something that has no limit; `None` where it was kept without being judged.
    pub fn severity(&self) -> Option<f64> {
        let no_limit = [Reason::Touching, Reason::Partial];
        let hopeless = no_limit.iter().any(|&reason| self.part.reasons.has(reason));
        match self.part.judged {
            Some(judged) if !hopeless => Some(judged.severity),
            _ => (self.part.verdict == Verdict::Reject).then_some(f64::INFINITY),
        }
    }
}

/// All parts of a replay.
pub struct Facts<'a> {
    /// The settings it ran with.
    pub settings: &'a Settings,
    /// One for each part, in the order of the decisions.
    pub cases: Vec<Case<'a>>,
    /// Labels and how they were matched.
    pub labels: Option<(&'a [Label], &'a Score)>,
}

impl<'a> Facts<'a> {
    /// Puts parts and labels together.
    pub fn gather(
        settings: &'a Settings,
        outcome: &'a Outcome,
        labels: Option<(&'a [Label], &'a Score)>,
    ) -> Self {
        let case = |(part, _): &'a (Part, Option<usize>)| Case {
            part,
            label: None,
            figures: Figures::of(part, settings),
        };
        let mut cases: Vec<Case<'a>> = outcome.parts.iter().map(case).collect();
        if let Some((labels, score)) = labels {
            for found in &score.matches {
                if let (Some(l), Some(p)) = (found.label, found.part) {
                    let label = &mut cases[p].label;
                    if label.is_none_or(|before| before.verdict == Verdict::Keep) {
                        *label = Some(&labels[l]);
                    }
                }
            }
        }
        Self {
            settings,
            cases,
            labels,
        }
    }

    /// What the two sides are called: after the labels where there are some, after the verdicts otherwise.
    pub fn side_names(&self) -> [&'static str; 2] {
        match self.labels {
            Some(_) => ["good", "bad"],
            None => ["kept", "rejected"],
        }
    }

    /// Which side a part is on; `None` for a part without a label where others have one.
    pub fn is_good(&self, case: &Case<'_>) -> Option<bool> {
        let verdict = match self.labels {
            Some(_) => case.label?.verdict,
            None => case.part.verdict,
        };
        Some(verdict == Verdict::Keep)
    }

    /// The parts on one side.
    pub fn side(&self, good: bool) -> impl Iterator<Item = &Case<'a>> {
        self.cases
            .iter()
            .filter(move |case| self.is_good(case) == Some(good))
    }
}
