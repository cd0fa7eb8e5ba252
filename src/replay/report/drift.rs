//! The distance to the nearer limit over time: what wanders towards it wants the light, the lens or the belt looked at.

use maud::{Markup, html};

use super::chart::{Plot, cross, disc, n};
use super::facts::{Facts, Figures};
use super::page::figure;
use super::words::mm;

/// Above this many parts a column stands for those that it covers.
const SINGLE_PARTS: usize = 1500;
/// Columns then.
const COLUMNS: usize = 240;
/// Pieces of the line of medians, and how many parts one needs.
const PIECES: usize = 20;
const LEAST: usize = 3;

/// A part on the chart.
#[derive(Clone, Copy, Debug)]
struct Dot {
    seconds: f64,
    margin_mm: f64,
    good: bool,
}

/// The section.
pub fn drift(facts: &Facts<'_>) -> Markup {
    let dots = dots(facts);
    if dots.is_empty() {
        return html! { p { "No part was seen whole." } };
    }
    let [good, bad] = facts.side_names();
    let marks = if dots.len() <= SINGLE_PARTS {
        format!(
            "Discs are {good} parts, crosses {bad} ones; what lies outside is drawn at the edge."
        )
    } else {
        format!(
            "Each bar spans the {good} parts of its moment, each cross is the {bad} part that came nearest to passing."
        )
    };
    let caption = format!(
        "Margin is the distance to the nearer limit; below 0 a part is beyond it. {marks} The line is the median of {good} \
         parts. {}",
        trend(&dots, good)
    );
    figure(&draw(&dots), &caption, true)
}

fn dots(facts: &Facts<'_>) -> Vec<Dot> {
    let start = facts.cases.iter().map(|case| case.part.first_us).min();
    let dot = |case: &super::facts::Case<'_>| {
        Some(Dot {
            seconds: (case.part.first_us - start?).as_seconds(),
            margin_mm: case.figures.as_ref().map(Figures::margin_mm)?,
            good: facts.is_good(case)?,
        })
    };
    facts.cases.iter().filter_map(dot).collect()
}

fn median(values: &mut [f64]) -> Option<f64> {
    values.sort_by(f64::total_cmp);
    values.get(values.len() / 2).copied()
}

/// Median margin of good parts in each piece of the time, with the middle of the piece.
fn medians(dots: &[Dot]) -> Vec<(f64, f64)> {
    let end = dots.iter().map(|dot| dot.seconds).fold(0.0, f64::max);
    let piece = (end / PIECES as f64).max(1e-9);
    let mut margins = vec![Vec::new(); PIECES];
    for dot in dots.iter().filter(|dot| dot.good) {
        margins[((dot.seconds / piece) as usize).min(PIECES - 1)].push(dot.margin_mm);
    }
    let middle = |k: usize| (k as f64 + 0.5) * piece;
    let enough = margins
        .iter_mut()
        .enumerate()
        .filter(|(_, margins)| margins.len() >= LEAST);
    enough
        .filter_map(|(k, margins)| Some((middle(k), median(margins)?)))
        .collect()
}

fn trend(dots: &[Dot], good: &str) -> String {
    let mut margins: Vec<f64> = dots
        .iter()
        .filter(|dot| dot.good)
        .map(|dot| dot.margin_mm)
        .collect();
    let fifth = margins.len() / 5;
    if fifth < LEAST {
        return format!("Too few {good} parts to tell a trend.");
    }
    let last = margins.len() - fifth;
    let (first, last) = (
        median(&mut margins[..fifth].to_vec()),
        median(&mut margins[last..]),
    );
    let (first, last) = (first.unwrap_or_default(), last.unwrap_or_default());
    format!(
        "Median margin of {good} parts: {} mm in the first fifth, {} mm in the last.",
        mm(first),
        mm(last)
    )
}

fn draw(dots: &[Dot]) -> Markup {
    let end = dots.iter().map(|dot| dot.seconds).fold(0.0, f64::max);
    let most = dots.iter().map(|dot| dot.margin_mm).fold(0.0, f64::max);
    let least = dots.iter().map(|dot| dot.margin_mm).fold(0.0, f64::min);
    // Broken parts are far beyond: they must not squeeze the good ones.
    let plot = Plot::new(
        900.0,
        300.0,
        (0.0, end),
        (least.max(-1.5 * most.max(0.1)), most.max(0.1) * 1.05),
    );
    let line: Vec<_> = medians(dots)
        .iter()
        .map(|(seconds, margin)| format!("{} {}", n(plot.x.at(*seconds)), n(plot.y.at(*margin))))
        .collect();
    let marks = html! {
        @if dots.len() <= SINGLE_PARTS {
            @for dot in dots { (mark(&plot, dot)) }
        } @else {
            (columns(&plot, dots))
        }
        (plot.mark_y(0.0, "limit"))
        @if line.len() > 1 { path.median d={ "M" (line.join("L")) } {} }
    };
    plot.draw(
        "Margin over time",
        ("seconds since the first part", "margin in mm"),
        &marks,
    )
}

fn mark(plot: &Plot, dot: &Dot) -> Markup {
    let (x, y) = (plot.x.at(dot.seconds), plot.y.at(dot.margin_mm));
    if dot.good { disc(x, y) } else { cross(x, y) }
}

/// For each column of the chart a bar from the smallest to the largest margin of good parts, and a cross for the
/// bad part that came nearest to passing.
fn columns(plot: &Plot, dots: &[Dot]) -> Markup {
    let mut ends = vec![[None::<(f64, f64)>; 2]; COLUMNS];
    for dot in dots {
        let column = (dot.seconds / plot.x.to * COLUMNS as f64) as usize;
        let end = &mut ends[column.min(COLUMNS - 1)][usize::from(!dot.good)];
        let (low, high) = end.unwrap_or((dot.margin_mm, dot.margin_mm));
        *end = Some((low.min(dot.margin_mm), high.max(dot.margin_mm)));
    }
    let x =
        |k: usize| plot.x.start + (k as f64 + 0.5) / COLUMNS as f64 * (plot.x.end - plot.x.start);
    html! {
        @for (k, [good, bad]) in ends.iter().enumerate() {
            @if let Some((low, high)) = good {
                path.good.stroke d={ "M" (n(x(k))) " " (n(plot.y.at(*low) + 1.0)) "V" (n(plot.y.at(*high) - 1.0)) } {}
            }
            @if let Some((_, high)) = bad { (cross(x(k), plot.y.at(*high))) }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn dots(count: usize, margin_mm: impl Fn(usize) -> f64) -> Vec<Dot> {
        let dot = |k: usize| Dot {
            seconds: k as f64,
            margin_mm: margin_mm(k),
            good: true,
        };
        (0..count).map(dot).collect()
    }

    #[test]
    fn a_margin_that_shrinks_is_told() {
        let text = trend(&dots(100, |k| 2.0 - k as f64 / 100.0), "good");
        assert!(
            text.contains("1.91 mm in the first fifth, 1.11 mm in the last"),
            "{text}"
        );
        assert!(trend(&dots(10, |_| 1.0), "good").starts_with("Too few"));
    }

    #[test]
    fn long_recordings_are_drawn_in_columns() {
        let long = draw(&dots(100_000, |k| (k % 7) as f64 / 7.0)).into_string();
        assert!(long.len() < 60_000, "{}", long.len());
        assert_eq!(medians(&dots(100_000, |_| 1.0)).len(), PIECES);
    }
}
