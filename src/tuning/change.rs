//! Which parts two settings treat differently.

use serde::Serialize;

use super::pairs::pair_parts;
use crate::belt::Part;
use crate::replay::Outcome;
use crate::replay::report::facts::{Case, Figures};
use crate::replay::report::words::mm;
use crate::settings::Settings;
use crate::shape::{Reason, Reasons, Verdict};

/// A part as one of the two settings sees it.
#[derive(Clone, Debug, PartialEq)]
pub struct Seen {
    /// The part.
    pub part: Part,
    /// Where it goes; `None` if it stays on the belt.
    pub outlet: Option<String>,
    /// Its shape.
    pub shape: Option<String>,
    /// Its figures with their limits.
    pub figures: Option<Figures>,
    /// How far the figures are from the place where the verdict would flip; `None` where no figure in mm could flip it.
    pub flips_after_mm: Option<f64>,
}

impl Seen {
    pub(super) fn new(part: &Part, outlet: Option<usize>, settings: &Settings) -> Self {
        let shape = part.judged.map(|judged| &settings.shapes[judged.shape]);
        Self {
            part: *part,
            outlet: outlet.map(|outlet| settings.outlets[outlet].name.clone()),
            shape: shape.map(|shape| shape.name.clone()),
            figures: Figures::of(part, settings),
            flips_after_mm: flips_after_mm(part, settings),
        }
    }

    /// Deepest bite.
    pub fn missing_mm(&self) -> Option<f64> {
        self.figures.map(|figures| figures.missing_mm)
    }

    /// Farthest burr.
    pub fn excess_mm(&self) -> Option<f64> {
        self.figures.map(|figures| figures.excess_mm)
    }

    /// The part as a report pictures it.
    pub fn case(&self) -> Case<'_> {
        Case {
            part: &self.part,
            label: None,
            figures: self.figures,
        }
    }
}

/// A kept part flips when one figure reaches its limit, a rejected one when all that are too large come back to theirs.
fn flips_after_mm(part: &Part, settings: &Settings) -> Option<f64> {
    let judged = part.judged?;
    let shape = &settings.shapes[judged.shape];
    let beyond = [
        settings.scale().mm(judged.missing.px) - shape.missing_mm,
        settings.scale().mm(judged.excess.px) - shape.excess_mm,
    ];
    let worst = beyond[0].max(beyond[1]);
    let figured = Reasons::NONE.with(Reason::Missing).with(Reason::Excess);
    let all_figured = part.reasons.iter().all(|reason| figured.has(reason));
    (all_figured && (part.verdict == Verdict::Keep || worst > 0.0)).then_some(worst.abs())
}

/// A part of either settings, or of both.
#[derive(Clone, Debug, PartialEq)]
pub struct Change {
    /// With the first settings; `None` if they find nothing there.
    pub a: Option<Seen>,
    /// With the second.
    pub b: Option<Seen>,
}

impl Change {
    /// What differs: `verdict`, `reasons`, `outlet`, or `found` where only one of the two finds a part.
    pub fn differs(&self) -> Vec<&'static str> {
        let (Some(a), Some(b)) = (&self.a, &self.b) else {
            return vec!["found"];
        };
        let differ = [
            ("verdict", a.part.verdict != b.part.verdict),
            ("reasons", a.part.reasons != b.part.reasons),
            ("outlet", a.outlet != b.outlet),
        ];
        differ
            .into_iter()
            .filter(|(_, differ)| *differ)
            .map(|(what, _)| what)
            .collect()
    }

    /// The nearer of the two distances to a flip.
    pub fn flips_after_mm(&self) -> Option<f64> {
        let sides = [&self.a, &self.b].into_iter().flatten();
        sides
            .filter_map(|seen| seen.flips_after_mm)
            .min_by(f64::total_cmp)
    }

    /// The part as the first settings see it, or the second.
    pub fn any(&self) -> Option<&Seen> {
        self.a.as_ref().or(self.b.as_ref())
    }
}

/// What came of both.
#[derive(Clone, Debug, PartialEq)]
pub struct Comparison {
    /// Parts that differ, in the order of the belt.
    pub differing: Vec<Change>,
    /// Parts that do not differ but came within the stated margin of a flip, nearest first.
    pub near: Vec<Change>,
    /// How many parts either of the two found.
    pub parts: usize,
    /// Belt that nobody saw, with the first and with the second settings.
    pub unseen_mm: [f64; 2],
}

impl Comparison {
    /// Whether a plant would notice any difference.
    pub fn same(&self) -> bool {
        self.differing.is_empty() && self.unseen_mm[0] == self.unseen_mm[1]
    }
}

/// Holds the outcomes of two settings on one recording against each other. Parts are the same when their centroids are at
/// most `gate_mm` apart; `margin_mm` asks for parts near a flip as well.
pub fn compare(
    a: (&Outcome, &Settings),
    b: (&Outcome, &Settings),
    gate_mm: f64,
    margin_mm: Option<f64>,
) -> Comparison {
    let parts = |outcome: &Outcome| {
        outcome
            .parts
            .iter()
            .map(|(part, _)| *part)
            .collect::<Vec<_>>()
    };
    let seen = |(outcome, settings): (&Outcome, &Settings), k: usize| {
        let (part, outlet) = &outcome.parts[k];
        Seen::new(part, *outlet, settings)
    };
    let pairs = pair_parts(&parts(a.0), &parts(b.0), gate_mm);
    let count = pairs.len();
    let changes = pairs.into_iter().map(|pair| Change {
        a: pair.a.map(|k| seen(a, k)),
        b: pair.b.map(|k| seen(b, k)),
    });
    let (differing, same): (Vec<_>, Vec<_>) =
        changes.partition(|change| !change.differs().is_empty());
    let within = |change: &Change| {
        let mm = change.flips_after_mm();
        margin_mm
            .zip(mm)
            .is_some_and(|(margin_mm, mm)| mm <= margin_mm)
    };
    let mut near: Vec<_> = same.into_iter().filter(within).collect();
    near.sort_by(|x, y| {
        let mm = |change: &Change| change.flips_after_mm().unwrap_or(f64::INFINITY);
        mm(x).total_cmp(&mm(y))
    });
    Comparison {
        differing,
        near,
        parts: count,
        unseen_mm: [a.0, b.0].map(unseen_mm),
    }
}

fn unseen_mm(outcome: &Outcome) -> f64 {
    let lengths = outcome
        .unseen
        .iter()
        .map(|(stretch, _)| stretch.to_mm - stretch.from_mm);
    lengths.fold(0.0, |sum, mm| sum + mm)
}

#[derive(Serialize)]
struct Line {
    along_mm: String,
    across_mm: String,
    differs: String,
    verdict: Option<Verdict>,
    against_verdict: Option<Verdict>,
    reasons: Option<String>,
    against_reasons: Option<String>,
    outlet: Option<String>,
    against_outlet: Option<String>,
    missing_mm: Option<String>,
    against_missing_mm: Option<String>,
    excess_mm: Option<String>,
    against_excess_mm: Option<String>,
    flips_after_mm: Option<String>,
}

impl Line {
    fn of(change: &Change) -> Option<Self> {
        let place = change.any()?;
        let (a, b) = (change.a.as_ref(), change.b.as_ref());
        let verdict = |seen: Option<&Seen>| seen.map(|seen| seen.part.verdict);
        let reasons = |seen: Option<&Seen>| seen.map(|seen| seen.part.reasons.to_string());
        let outlet = |seen: Option<&Seen>| seen.and_then(|seen| seen.outlet.clone());
        let missing = |seen: Option<&Seen>| seen.and_then(Seen::missing_mm).map(mm);
        let excess = |seen: Option<&Seen>| seen.and_then(Seen::excess_mm).map(mm);
        Some(Self {
            along_mm: mm(place.part.along_mm),
            across_mm: mm(place.part.across_mm),
            differs: change.differs().join("+"),
            verdict: verdict(a),
            against_verdict: verdict(b),
            reasons: reasons(a),
            against_reasons: reasons(b),
            outlet: outlet(a),
            against_outlet: outlet(b),
            missing_mm: missing(a),
            against_missing_mm: missing(b),
            excess_mm: excess(a),
            against_excess_mm: excess(b),
            flips_after_mm: change.flips_after_mm().map(mm),
        })
    }
}

const HEADER: [&str; 14] = [
    "along_mm",
    "across_mm",
    "differs",
    "verdict",
    "against_verdict",
    "reasons",
    "against_reasons",
    "outlet",
    "against_outlet",
    "missing_mm",
    "against_missing_mm",
    "excess_mm",
    "against_excess_mm",
    "flips_after_mm",
];

/// First the parts that differ, then those near a flip, whose `differs` is empty; CSV with a header.
///
/// # Errors
/// Those of the CSV writer.
pub fn changes_csv(comparison: &Comparison) -> Result<Vec<u8>, csv::Error> {
    let mut csv = csv::WriterBuilder::new()
        .has_headers(false)
        .from_writer(Vec::new());
    csv.write_record(HEADER)?;
    let changes = comparison.differing.iter().chain(&comparison.near);
    for line in changes.filter_map(Line::of) {
        csv.serialize(line)?;
    }
    csv.into_inner()
        .map_err(|error| csv::Error::from(error.into_error()))
}
