//! The belt as a map: along from left to right, across from top to bottom, true to scale.

use maud::{Markup, html};

use super::chart::n;
use super::facts::{Case, Facts};
use super::page::figure;
use super::words::counted;
use crate::belt::{Extent, Stretch};
use crate::settings::Settings;
use crate::shape::Verdict;

/// Width of a row in the drawing.
const WIDTH: f64 = 900.0;
/// How high a row should be, and how many there may be.
const HEIGHT: f64 = 90.0;
const ROWS: f64 = 24.0;
/// More parts than this are counted, not placed one by one.
const PLACED: usize = 2000;
/// Columns of the counted belt.
const COLUMNS: usize = 120;

/// The section.
pub fn belt(facts: &Facts<'_>, unseen: &[Stretch]) -> Markup {
    let Some(whole) = whole(facts, unseen) else {
        return html! { p { "Nothing lay on the belt." } };
    };
    let map = Map::of(facts.settings, whole);
    if map.rows() <= ROWS && facts.cases.len() <= PLACED {
        html! {
            (legend(facts))
            div.wide.map {
                @for row in 0..map.rows() as usize { (map.draw(row, facts, unseen)) }
            }
        }
    } else {
        summary(whole, facts, unseen)
    }
}

/// From the first thing on the belt to the last.
fn whole(facts: &Facts<'_>, unseen: &[Stretch]) -> Option<Stretch> {
    let parts = facts
        .cases
        .iter()
        .map(|case| (case.part.extent.lead_mm, case.part.extent.trail_mm));
    let stretches = unseen
        .iter()
        .map(|stretch| (stretch.from_mm, stretch.to_mm));
    parts
        .chain(stretches)
        .reduce(|a, b| (a.0.min(b.0), a.1.max(b.1)))
        .map(|(from_mm, to_mm)| Stretch { from_mm, to_mm })
}

fn legend(facts: &Facts<'_>) -> Markup {
    html! {
        p {
            "Millimetres along the belt under each row, parts at their true size: a box for a kept part; a crossed box with its number \
             for a rejected one; hatched belt was not seen in time."
            @if facts.labels.is_some() { " A dashed ring marks a part whose label says otherwise." }
        }
    }
}

/// How the belt is cut into rows.
#[derive(Clone, Copy, Debug)]
struct Map {
    whole: Stretch,
    top_mm: f64,
    row_mm: f64,
}

impl Map {
    fn of(settings: &Settings, whole: Stretch) -> Self {
        let geometry = settings.geometry();
        let top_mm = geometry.below_top_mm(0.0);
        let across_mm = geometry.below_top_mm(geometry.window.height_px as f64) - top_mm;
        Self {
            whole,
            top_mm,
            row_mm: across_mm * WIDTH / HEIGHT,
        }
    }

    fn rows(&self) -> f64 {
        ((self.whole.to_mm - self.whole.from_mm) / self.row_mm)
            .ceil()
            .max(1.0)
    }

    fn draw(&self, row: usize, facts: &Facts<'_>, unseen: &[Stretch]) -> Markup {
        let from_mm = self.whole.from_mm + row as f64 * self.row_mm;
        let to_mm = from_mm + self.row_mm;
        let scale = WIDTH / self.row_mm;
        let x = |along_mm: f64| (along_mm - from_mm) * scale;
        let lies = |from: f64, to: f64| from < to_mm && to > from_mm;
        let step = super::chart::round_step(self.row_mm / 9.0);
        let ticks = ((from_mm / step).ceil() as i64..=(to_mm / step).floor() as i64)
            .map(|k| k as f64 * step);
        html! {
            svg viewBox={ "0 0 " (n(WIDTH)) " " (n(HEIGHT + 18.0)) } role="img"
                aria-label={ "Belt from " (n(from_mm)) " to " (n(to_mm)) " mm" } {
                rect.belt width=(n(x(self.whole.to_mm).min(WIDTH))) height=(n(HEIGHT)) {}
                @for stretch in unseen.iter().filter(|stretch| lies(stretch.from_mm, stretch.to_mm)) {
                    @let (left, right) = (x(stretch.from_mm).max(0.0), x(stretch.to_mm).min(WIDTH));
                    rect.unseen x=(n(left)) width=(n(right - left)) height=(n(HEIGHT)) {}
                    text.note x=(n(left + 3.0)) y="13" { "not seen" }
                }
                @for case in facts.cases.iter().filter(|case| lies(case.part.extent.lead_mm, case.part.extent.trail_mm)) {
                    (part(case, |extent| [
                        x(extent.lead_mm), (extent.top_mm - self.top_mm) * scale,
                        x(extent.trail_mm), (extent.bottom_mm - self.top_mm) * scale,
                    ]))
                }
                @for along_mm in ticks.filter(|along_mm| *along_mm <= self.whole.to_mm) {
                    path.axis d={ "M" (n(x(along_mm))) " " (n(HEIGHT)) "v3" } {}
                    text.tick.middle x=(n(x(along_mm).clamp(16.0, WIDTH - 16.0))) y=(n(HEIGHT + 15.0)) { (format!("{along_mm:.0}")) }
                }
            }
        }
    }
}

fn part(case: &Case<'_>, place: impl Fn(&Extent) -> [f64; 4]) -> Markup {
    let part = case.part;
    let [left, top, right, bottom] = place(&part.extent);
    let (width, height) = (right - left, bottom - top);
    let rejected = part.verdict == Verdict::Reject;
    let cross = format!(
        "M{} {}L{} {}M{} {}L{} {}",
        n(left),
        n(top),
        n(right),
        n(bottom),
        n(left),
        n(bottom),
        n(right),
        n(top)
    );
    html! {
        g {
            title { "part " (part.number) ": " (part.verdict) " " (part.reasons) }
            rect class=(if rejected { "rejected" } else { "kept" }) x=(n(left)) y=(n(top)) width=(n(width)) height=(n(height)) rx="3" {}
            @if rejected {
                path.rejected d=(cross) {}
                text.note.middle x=(n((left + right) / 2.0)) y=(n((top + bottom) / 2.0 + 4.0)) { (part.number) }
            }
            @if case.wrong().is_some() {
                ellipse.wrong cx=(n((left + right) / 2.0)) cy=(n((top + bottom) / 2.0))
                    rx=(n(width * 0.66)) ry=(n(height * 0.66)) {}
            }
        }
    }
}

/// One piece of a long belt.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
struct Piece {
    kept: usize,
    rejected: usize,
    unseen_mm: f64,
}

fn pieces(whole: Stretch, facts: &Facts<'_>, unseen: &[Stretch]) -> Vec<Piece> {
    let long_mm = (whole.to_mm - whole.from_mm) / COLUMNS as f64;
    let mut pieces = vec![Piece::default(); COLUMNS];
    for case in &facts.cases {
        let k = ((case.part.along_mm - whole.from_mm) / long_mm).max(0.0) as usize;
        let piece = &mut pieces[k.min(COLUMNS - 1)];
        match case.part.verdict {
            Verdict::Keep => piece.kept += 1,
            Verdict::Reject => piece.rejected += 1,
        }
    }
    for stretch in unseen {
        for (k, piece) in pieces.iter_mut().enumerate() {
            let from_mm = whole.from_mm + k as f64 * long_mm;
            let shared = stretch.to_mm.min(from_mm + long_mm) - stretch.from_mm.max(from_mm);
            piece.unseen_mm += shared.max(0.0);
        }
    }
    pieces
}

/// Too long for a map: kept parts upwards, rejected ones downwards, and where belt was not seen.
fn summary(whole: Stretch, facts: &Facts<'_>, unseen: &[Stretch]) -> Markup {
    let pieces = pieces(whole, facts, unseen);
    let most_kept = pieces
        .iter()
        .map(|piece| piece.kept)
        .max()
        .unwrap_or(0)
        .max(1) as f64;
    let most_rejected = pieces
        .iter()
        .map(|piece| piece.rejected)
        .max()
        .unwrap_or(0)
        .max(1) as f64;
    let metres = (whole.from_mm / 1e3, whole.to_mm / 1e3);
    let plot = super::chart::Plot::new(WIDTH, 300.0, metres, (-1.0, 1.0));
    let wide = (plot.x.end - plot.x.start) / COLUMNS as f64;
    let long_mm = (whole.to_mm - whole.from_mm) / COLUMNS as f64;
    let marks = html! {
        @for (k, piece) in pieces.iter().enumerate() {
            @let left = plot.x.start + k as f64 * wide;
            @let (base, up) = (plot.y.at(0.0), plot.y.at(piece.kept as f64 / most_kept));
            @let down = plot.y.at(-(piece.rejected as f64) / most_rejected);
            @if piece.unseen_mm > 0.0 {
                rect.unseen x=(n(left)) y=(n(plot.y.end - 12.0)) width=(n(wide)) height="12" {
                    title { (format!("{:.0} of {long_mm:.0} mm not seen", piece.unseen_mm)) }
                }
            }
            rect.good x=(n(left + 0.5)) y=(n(up)) width=(n(wide - 1.0)) height=(n(base - up)) {}
            @if piece.rejected > 0 {
                rect.bad x=(n(left + 0.5)) y=(n(base)) width=(n(wide - 1.0)) height=(n(down - base)) {}
            }
        }
        text.note x=(n(plot.x.start + 6.0)) y=(n(plot.y.at(0.9))) { "kept" }
        text.note x=(n(plot.x.start + 6.0)) y=(n(plot.y.at(-0.9))) { "rejected" }
    };
    let y_ticks = [
        (1.0, n(most_kept)),
        (0.0, "0".to_owned()),
        (-1.0, n(most_rejected)),
    ];
    let drawing = plot.draw_with(
        "Parts along the belt",
        ("metres along the belt", "parts"),
        &plot.x.ticks(8),
        &y_ticks,
        &marks,
    );
    let caption = format!(
        "Too long to place each of {}: a column stands for {:.1} m of belt, kept parts upwards, rejected ones (hatched) downwards, \
         each on its own scale. A hatched mark on top means that belt in the column was not seen in time ({}).",
        counted(facts.cases.len(), "part", "parts"),
        long_mm / 1e3,
        counted(unseen.len(), "stretch", "stretches")
    );
    figure(&drawing, &caption, true)
}

#[cfg(test)]
mod tests {
    use std::path::Path;

    use super::*;
    use crate::belt::Part;
    use crate::replay::Outcome;
    use crate::settings;
    use crate::shape::{Reason, Reasons};
    use crate::units::Micros;

    /// A row of parts 50 mm apart; every tenth is rejected.
    fn outcome(parts: u64) -> Outcome {
        let part = |k: u64| {
            let lead_mm = k as f64 * 50.0;
            let rejected = k % 10 == 9;
            Part {
                number: k + 1,
                along_mm: lead_mm + 19.0,
                across_mm: 30.0,
                area_mm2: 700.0,
                extent: Extent {
                    lead_mm,
                    trail_mm: lead_mm + 38.0,
                    top_mm: 11.0,
                    bottom_mm: 49.0,
                },
                first_us: Micros(0),
                decided_us: Micros(0),
                views: 2,
                spoken_us: Micros(0),
                judged: None,
                verdict: if rejected {
                    Verdict::Reject
                } else {
                    Verdict::Keep
                },
                reasons: if rejected {
                    Reasons::NONE.with(Reason::Partial)
                } else {
                    Reasons::NONE
                },
            }
        };
        Outcome {
            parts: (0..parts).map(|k| (part(k), None)).collect(),
            ..Outcome::default()
        }
    }

    fn drawn(parts: u64, unseen: &[Stretch]) -> String {
        let loaded = settings::load(Path::new("config/oat-stars.toml")).unwrap();
        let outcome = outcome(parts);
        let facts = Facts::gather(&loaded.settings, &outcome, None);
        belt(&facts, unseen).into_string()
    }

    #[test]
    fn a_short_belt_shows_each_part() {
        let gap = Stretch {
            from_mm: 1000.0,
            to_mm: 1100.0,
        };
        let map = drawn(100, &[gap]);
        // 24 parts of 50 mm fill a row of 1200 mm, so none lies across its end.
        assert_eq!(map.matches("<title>part ").count(), 100);
        assert_eq!(map.matches("class=\"unseen\"").count(), 1);
        assert!(map.contains("<title>part 10: reject partial</title>"));
    }

    #[test]
    fn a_long_belt_is_counted_in_columns() {
        let gap = Stretch {
            from_mm: 400_000.0,
            to_mm: 401_000.0,
        };
        let map = drawn(50_000, &[gap]);
        assert!(map.len() < 60_000, "{} bytes", map.len());
        assert!(map.contains("Too long to place each of 50000 parts"));
        assert!(map.contains("1000 of 20833 mm not seen"));
        let loaded = settings::load(Path::new("config/oat-stars.toml")).unwrap();
        let outcome = outcome(50_000);
        let facts = Facts::gather(&loaded.settings, &outcome, None);
        let pieces = pieces(whole(&facts, &[]).unwrap(), &facts, &[]);
        let count = |of: fn(&Piece) -> usize| pieces.iter().map(of).sum::<usize>();
        assert_eq!(
            (count(|piece| piece.kept), count(|piece| piece.rejected)),
            (45_000, 5_000)
        );
    }
}
