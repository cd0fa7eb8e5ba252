//! What came of a replay, and the files it is written to.

use serde::Serialize;

use crate::belt::{Part, Stretch};
use crate::health::Health;
use crate::reject::Loss;
use crate::shape::{Reason, Verdict};
use crate::sorter::{Cause, Event};
use crate::units::{Micros, Scale};

/// Everything that was decided, in the order of the decisions.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Outcome {
    /// Parts with the outlet they go to.
    pub parts: Vec<(Part, Option<usize>)>,
    /// Unseen belt with the moment at which its last piece was decided; stretches that touch are one.
    pub unseen: Vec<(Stretch, Micros)>,
    /// Belt that should have gone to an outlet and did not.
    pub losses: Vec<Loss>,
    /// Why and when the sorter stopped by itself.
    pub stopped: Option<(Cause, Micros)>,
    /// What the sorter counted.
    pub health: Health,
}

impl Outcome {
    /// Takes note of an event.
    pub fn note(&mut self, event: &Event) {
        match event {
            Event::Part(part, outlet) => self.parts.push((*part, *outlet)),
            Event::Unseen(piece, at) => match self.unseen.last_mut() {
                Some((last, when)) if last.to_mm == piece.from_mm => {
                    last.to_mm = piece.to_mm;
                    *when = *at;
                }
                _ => self.unseen.push((*piece, *at)),
            },
            Event::Switch(_) => {}
            Event::Lost(loss) => self.losses.push(*loss),
            Event::Stopped(cause, at) => self.stopped = Some((*cause, *at)),
        }
    }
}

/// A row of `parts.csv`. Unseen belt has a row too, without a number.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Row {
    /// Number of the part.
    pub part: Option<u64>,
    /// Centroid, or the middle of unseen belt.
    pub along_mm: String,
    /// Centroid.
    pub across_mm: Option<String>,
    /// Capture time of the first view.
    pub first_us: Option<i64>,
    /// When the verdict became final.
    pub decided_us: i64,
    /// Number of views.
    pub views: u32,
    /// Name of the best-fitting shape.
    pub shape: Option<String>,
    /// How it is turned.
    pub angle_deg: Option<String>,
    /// Whether it lies face down.
    pub flipped: Option<bool>,
    /// Depth of the deepest bite.
    pub missing_mm: Option<String>,
    /// How far the farthest burr sticks out.
    pub excess_mm: Option<String>,
    /// Area.
    pub area_mm2: Option<String>,
    /// `keep` or `reject`.
    pub verdict: Verdict,
    /// The reasons, joined by `+`.
    pub reasons: String,
}

/// The rows of `parts.csv` in the order of the decisions.
pub fn rows(outcome: &Outcome, shapes: &[String], scale: Scale, unseen: Verdict) -> Vec<Row> {
    let parts = outcome
        .parts
        .iter()
        .map(|(part, _)| part_row(part, shapes, scale));
    let stretches = outcome
        .unseen
        .iter()
        .map(|(stretch, at)| unseen_row(*stretch, *at, unseen));
    let mut rows: Vec<Row> = parts.chain(stretches).collect();
    rows.sort_by_key(|row| (row.decided_us, row.part.is_none(), row.part));
    rows
}

fn part_row(part: &Part, shapes: &[String], scale: Scale) -> Row {
    let judged = part.judged.as_ref();
    Row {
        part: Some(part.number),
        along_mm: two_places(part.along_mm),
        across_mm: Some(two_places(part.across_mm)),
        first_us: Some(part.first_us.0),
        decided_us: part.decided_us.0,
        views: part.views,
        shape: judged.map(|judged| shapes[judged.shape].clone()),
        angle_deg: judged.map(|judged| format!("{:.1}", judged.pose.angle_deg)),
        flipped: judged.map(|judged| judged.pose.flipped),
        missing_mm: judged.map(|judged| two_places(scale.mm(judged.missing.px))),
        excess_mm: judged.map(|judged| two_places(scale.mm(judged.excess.px))),
        area_mm2: Some(format!("{:.1}", part.area_mm2)),
        verdict: part.verdict,
        reasons: part.reasons.to_string(),
    }
}

fn unseen_row(stretch: Stretch, at: Micros, verdict: Verdict) -> Row {
    Row {
        part: None,
        along_mm: two_places((stretch.from_mm + stretch.to_mm) / 2.0),
        across_mm: None,
        first_us: None,
        decided_us: at.0,
        views: 0,
        shape: None,
        angle_deg: None,
        flipped: None,
        missing_mm: None,
        excess_mm: None,
        area_mm2: None,
        verdict,
        reasons: Reason::Unseen.name().to_owned(),
    }
}

/// Hundredths of a millimetre; nothing finer is measured here. Zero has no sign.
fn two_places(mm: f64) -> String {
    let text = format!("{mm:.2}");
    if text == "-0.00" {
        "0.00".to_owned()
    } else {
        text
    }
}

/// The rows as CSV with a header.
///
/// # Errors
/// Those of the CSV writer.
pub fn parts_csv(rows: &[Row]) -> Result<Vec<u8>, csv::Error> {
    let mut csv = csv::Writer::from_writer(Vec::new());
    for row in rows {
        csv.serialize(row)?;
    }
    if rows.is_empty() {
        csv.write_record(HEADER)?;
    }
    csv.into_inner()
        .map_err(|error| csv::Error::from(error.into_error()))
}

const HEADER: [&str; 14] = [
    "part",
    "along_mm",
    "across_mm",
    "first_us",
    "decided_us",
    "views",
    "shape",
    "angle_deg",
    "flipped",
    "missing_mm",
    "excess_mm",
    "area_mm2",
    "verdict",
    "reasons",
];
