//! Misses and false rejects: how many, how sure that is, and what other limits would change.

use maud::{Markup, html};

use super::chart::{Plot, n};
use super::facts::{Case, Facts, Figures};
use super::page::{figure, table};
use super::words::{FALSE_REJECTS, MISSES, Rounding, counted, mm, percent};
use crate::recording::Label;
use crate::replay::{Match, Score};
use crate::shape::Verdict;
use crate::stats::{Count, Share, Tradeoff, fewest_without_failure};

/// Rows of a list that are written out.
const LISTED: usize = 100;

/// What labels and verdicts count up to.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Tally {
    /// Bad parts that would pass.
    pub misses: Count,
    /// Good parts that would be rejected.
    pub false_rejects: Count,
}

impl Tally {
    /// Counts every label once.
    pub fn of(labels: &[Label], score: &Score) -> Self {
        let bad = labels
            .iter()
            .filter(|label| label.verdict == Verdict::Reject)
            .count();
        let count = |hits: usize, of: usize| Count::new(hits as u64, of as u64);
        Self {
            misses: count(score.misses.len(), bad),
            false_rejects: count(score.false_rejects.len(), labels.len() - bad),
        }
    }
}

/// The section.
pub fn agreement(facts: &Facts<'_>) -> Markup {
    let Some((labels, score)) = facts.labels else {
        return without_labels();
    };
    let tally = Tally::of(labels, score);
    html! {
        (bounds(&tally))
        (sentences(&tally))
        (list("Misses", &score.misses, labels, facts))
        (list("False rejects", &score.false_rejects, labels, facts))
        (list("Labelled good, not seen", &score.not_found, labels, facts))
        @if !score.unlabelled.is_empty() {
            p {
                "Without a label, and left out here: " (counted(score.unlabelled.len(), "part", "parts")) "."
            }
        }
        (curve(facts))
    }
}

fn without_labels() -> Markup {
    html! {
        p { "This recording has no labels, so misses and false rejects cannot be counted." }
        p {
            "To get them, write a file " code { "labels.csv" } " into the recording's folder, with the heading "
            code { "along_mm,across_mm,verdict,note" } " and a line for each part: where it lies, and "
            code { "keep" } " or " code { "reject" } " as it should be. The table that " code { "--parts" }
            " writes has the places of all parts; the pictures that " code { "--pictures" }
            " draws help to decide. About 300 bad parts, all rejected, show that at most one in a hundred passes."
        }
    }
}

fn bounds(tally: &Tally) -> Markup {
    let row = |name: &str, among: &str, count: Count| -> Vec<String> {
        let interval = count.between(Share::P95);
        let none = || "-".to_owned();
        vec![
            name.to_owned(),
            count.hits().to_string(),
            format!("{} {among}", count.of()),
            count
                .ratio()
                .map_or_else(none, |ratio| percent(ratio, Rounding::Nearest)),
            percent(interval.low, Rounding::Down),
            percent(interval.high, Rounding::Up),
        ]
    };
    let head = ["", "count", "of", "share", "at least", "at most"];
    let rows = [
        row("misses", "bad", tally.misses),
        row("false rejects", "good", tally.false_rejects),
    ];
    html! {
        (table(&head, &[1, 2, 3, 4, 5], &rows))
        p.soft {
            "At least and at most: the exact two-sided 95 % interval for a binomial count (Clopper and Pearson, 1934). It holds \
             for belts like the recorded one, and if the labelled parts were not picked by their looks."
        }
    }
}

fn sentences(tally: &Tally) -> Markup {
    let each = [(MISSES, tally.misses), (FALSE_REJECTS, tally.false_rejects)];
    let one_in_a_hundred = Share::new(0.01).map(|share| fewest_without_failure(share, Share::P95));
    html! {
        @for (nouns, count) in each {
            p {
                span.verdict { (nouns.sentence(count, Share::P95)) "." }
                @if let Some(rule) = nouns.in_the_head(count) { " " (rule) }
            }
        }
        @if let Some(needed) = one_in_a_hundred {
            p.soft {
                "To show at 95 % confidence (one-sided) that at most 1 % of bad parts pass takes " (needed)
                " bad parts without a miss."
            }
        }
    }
}

fn list(title: &str, found: &[Match], labels: &[Label], facts: &Facts<'_>) -> Markup {
    if found.is_empty() {
        return html! {};
    }
    let head = [
        "part",
        "along mm",
        "across mm",
        "label",
        "note",
        "verdict",
        "missing mm",
        "excess mm",
    ];
    let rows: Vec<_> = found
        .iter()
        .take(LISTED)
        .map(|found| row(found, labels, facts))
        .collect();
    html! {
        h3 { (title) }
        (table(&head, &[0, 1, 2, 6, 7], &rows))
        @if found.len() > LISTED { p.soft { "and " (found.len() - LISTED) " more" } }
    }
}

fn row(found: &Match, labels: &[Label], facts: &Facts<'_>) -> Vec<String> {
    let label = found.label.map(|l| &labels[l]);
    let case = found.part.map(|p| &facts.cases[p]);
    let place = case.map(|case| (case.part.along_mm, case.part.across_mm));
    let (along_mm, across_mm) = place
        .or(label.map(|label| (label.along_mm, label.across_mm)))
        .unwrap_or_default();
    let figure = |of: fn(&Figures) -> (f64, f64)| {
        let figures = case.and_then(|case| case.figures);
        figures.map_or_else(String::new, |figures| {
            let (value, limit) = of(&figures);
            format!("{} of {}", mm(value), mm(limit))
        })
    };
    vec![
        case.map_or_else(String::new, |case| case.part.number.to_string()),
        format!("{along_mm:.1}"),
        format!("{across_mm:.1}"),
        label.map_or_else(String::new, |label| label.verdict.to_string()),
        label.map_or_else(String::new, |label| label.note.clone()),
        case.map_or_else(|| "not seen".to_owned(), Case::verdict),
        figure(|figures| (figures.missing_mm, figures.missing_limit_mm)),
        figure(|figures| (figures.excess_mm, figures.excess_limit_mm)),
    ]
}

/// Misses against false rejects when all limits are multiplied by the same factor.
fn curve(facts: &Facts<'_>) -> Markup {
    let severities = |good| {
        facts
            .side(good)
            .filter_map(Case::severity)
            .collect::<Vec<_>>()
    };
    let (good, bad) = (severities(true), severities(false));
    let curve = Tradeoff::of(&good, &bad);
    let Some(area) = curve.area() else {
        return html! {};
    };
    html! {
        h3 { "Misses against false rejects" }
        (figure(&draw_curve(&curve), &caption(&curve, area), false))
    }
}

fn caption(curve: &Tradeoff, area: f64) -> String {
    let scaled = "All limits multiplied by one factor, lax on the left, strict on the right; the circle is where they stand now. Parts \
                  that were not seen are left out.";
    // Shown to one part in ten thousand, and 1 only when it is 1.
    let area = (area * 1e4).floor() / 1e4;
    format!(
        "{scaled} Area under the curve of caught bad parts over false rejects: {area:.4} (1 is a clean separation, 0.5 a coin). {}",
        clean(curve)
    )
}

/// The factors at which nothing goes wrong.
fn clean(curve: &Tradeoff) -> String {
    let is_clean = |k: &usize| curve.points[*k].misses == 0 && curve.points[*k].false_rejects == 0;
    let Some(first) = (0..curve.points.len()).find(is_clean) else {
        return "No factor separates good from bad without an error.".to_owned();
    };
    let from = curve.points[first].limit.max(0.0);
    match curve.points.get(first + 1).map(|next| next.limit) {
        Some(to) if to.is_finite() => {
            format!("Without any error from {from:.2} to {to:.2} times the limits.")
        }
        _ => format!("Without any error from {from:.2} times the limits on."),
    }
}

fn draw_curve(curve: &Tradeoff) -> Markup {
    let most = |of: fn(&crate::stats::Point) -> usize| {
        // The ends, where everything or nothing is rejected, would squeeze the part that matters.
        let near = curve
            .points
            .iter()
            .filter(|point| (0.8..=1.25).contains(&point.limit));
        near.map(of).max().unwrap_or(0).max(1) as f64
    };
    let shares = |count: f64, of: usize| count / of as f64 * 100.0;
    let x = most(|point| point.false_rejects);
    let y = most(|point| point.misses);
    let (x_most, y_most) = (shares(x, curve.good), shares(y, curve.bad));
    let plot = Plot::new(560.0, 300.0, (0.0, x_most * 1.1), (0.0, y_most * 1.1));
    let place = |point: &crate::stats::Point| {
        let x = plot.x.at(shares(point.false_rejects as f64, curve.good));
        (x, plot.y.at(shares(point.misses as f64, curve.bad)))
    };
    let shown = curve.points.iter().filter(|point| {
        shares(point.false_rejects as f64, curve.good) <= plot.x.to
            && shares(point.misses as f64, curve.bad) <= plot.y.to
    });
    let mut path = String::new();
    for (k, point) in shown.enumerate() {
        let (x, y) = place(point);
        path.push_str(&format!(
            "{}{} {}",
            if k == 0 { "M" } else { "L" },
            n(x),
            n(y)
        ));
    }
    let now = curve.points.iter().rev().find(|point| point.limit <= 1.0);
    let marks = html! {
        path.median d=(path) {}
        @if let Some(now) = now {
            @let (x, y) = place(now);
            circle.here cx=(n(x)) cy=(n(y)) r="6" {}
            @let right = x > plot.width / 2.0;
            text class=(if right { "note end" } else { "note" }) x=(n(if right { x - 10.0 } else { x + 10.0 })) y=(n(y - 9.0)) {
                "now: " (counted(now.misses, "miss", "misses")) ", " (counted(now.false_rejects, "false reject", "false rejects"))
            }
        }
    };
    plot.draw(
        "Misses against false rejects",
        ("false rejects, % of good parts", "misses, % of bad parts"),
        &marks,
    )
}
