//! How far bites and burrs of good and of bad parts spread, with the limits drawn in.

use maud::{Markup, html};

use super::chart::{Plot, n, round_step};
use super::facts::{Facts, Figures};
use super::page::figure;
use super::words::{counted, mm};

const BINS: usize = 40;

/// One of the two figures.
struct Figure {
    name: &'static str,
    value_mm: fn(&Figures) -> f64,
    limit_mm: fn(&Figures) -> f64,
}

const FIGURES: [Figure; 2] = [
    Figure {
        name: "missing_mm",
        value_mm: |figures| figures.missing_mm,
        limit_mm: |figures| figures.missing_limit_mm,
    },
    Figure {
        name: "excess_mm",
        value_mm: |figures| figures.excess_mm,
        limit_mm: |figures| figures.excess_limit_mm,
    },
];

/// The section: two charts for each shape that was met.
pub fn spread(facts: &Facts<'_>) -> Markup {
    let [good, bad] = facts.side_names();
    let met = |shape: usize| {
        let of_it = |figures: Figures| figures.shape == shape;
        facts
            .cases
            .iter()
            .any(|case| case.figures.is_some_and(of_it))
    };
    let shapes: Vec<usize> = (0..facts.settings.shapes.len())
        .filter(|&shape| met(shape))
        .collect();
    if shapes.is_empty() {
        return html! { p { "No part was seen whole." } };
    }
    html! {
        p {
            "Upwards " (good) " parts (solid), downwards " (bad) " parts (hatched), each side on its own scale; the dashed line is \
             the limit. Parts that were never seen whole have no figures."
        }
        @for shape in shapes {
            h3 { (facts.settings.shapes[shape].name) }
            div.charts { @for which in &FIGURES { (chart(facts, shape, which)) } }
        }
    }
}

fn chart(facts: &Facts<'_>, shape: usize, which: &Figure) -> Markup {
    let values = |good: bool| -> Vec<f64> {
        let of_it = facts.side(good).filter_map(|case| case.figures);
        of_it
            .filter(|figures| figures.shape == shape)
            .map(|figures| (which.value_mm)(&figures))
            .collect()
    };
    let sides = [values(true), values(false)];
    let limit = facts.cases.iter().filter_map(|case| case.figures);
    let limit_mm = limit
        .filter(|figures| figures.shape == shape)
        .map(|figures| (which.limit_mm)(&figures))
        .next()
        .unwrap_or_default();
    let drawing = draw(which.name, &sides, facts.side_names(), limit_mm);
    figure(
        &drawing,
        &caption(&sides, facts.side_names(), which.name),
        false,
    )
}

/// Where the middle and the far end of each side lie.
fn caption(sides: &[Vec<f64>; 2], names: [&str; 2], figure: &str) -> String {
    let side = |(values, name): (&Vec<f64>, &str)| {
        let mut values = values.clone();
        values.sort_by(f64::total_cmp);
        let count = counted(values.len(), "part", "parts");
        match (values.first(), values.get(values.len() / 2), values.last()) {
            (Some(first), Some(middle), Some(last)) => {
                format!(
                    "{name}: {count}, {} to {} mm, median {}",
                    mm(*first),
                    mm(*last),
                    mm(*middle)
                )
            }
            _ => format!("{name}: no part"),
        }
    };
    let each: Vec<_> = sides.iter().zip(names).map(side).collect();
    format!("{figure}. {}.", each.join("; "))
}

/// Counts in equal bins from 0 on, each with its upper end: a value on the limit lies below it, as for the judge. The last
/// one takes everything beyond.
fn bins(values: &[f64], width: f64) -> [usize; BINS] {
    let mut bins = [0; BINS];
    for value in values {
        let bin = (value / width - 1e-9).max(0.0) as usize;
        bins[bin.min(BINS - 1)] += 1;
    }
    bins
}

/// A whole part of the limit, so that no bin lies across it; reaching over nearly all values, but no farther than some
/// limits, since a pair that has grown together would squeeze the rest.
fn bin_width(sides: &[Vec<f64>; 2], limit_mm: f64) -> f64 {
    const LIMITS_SHOWN: f64 = 4.0;
    let mut all: Vec<f64> = sides.iter().flatten().copied().collect();
    all.sort_by(f64::total_cmp);
    let most = all.get(all.len() * 49 / 50).copied().unwrap_or(0.0);
    if limit_mm <= 0.0 {
        return round_step((most / BINS as f64).max(1e-3));
    }
    let reach = most.clamp(limit_mm * 1.25, limit_mm * LIMITS_SHOWN);
    limit_mm / (BINS as f64 * limit_mm / reach).floor().max(1.0)
}

fn draw(name: &str, sides: &[Vec<f64>; 2], names: [&str; 2], limit_mm: f64) -> Markup {
    let width = bin_width(sides, limit_mm);
    let counts = [&sides[0], &sides[1]].map(|values| bins(values, width));
    let most = counts.map(|bins| bins.into_iter().max().unwrap_or(0).max(1));
    let plot = Plot::new(560.0, 280.0, (0.0, width * BINS as f64), (-1.0, 1.0));
    let y_ticks = [
        (1.0, most[0].to_string()),
        (0.0, "0".to_owned()),
        (-1.0, most[1].to_string()),
    ];
    let beyond = sides
        .iter()
        .flatten()
        .any(|value| *value > width * BINS as f64);
    let marks = html! {
        @for (side, counts) in counts.iter().enumerate() {
            @for (bin, &count) in counts.iter().enumerate().filter(|(_, count)| **count > 0) {
                @let share = count as f64 / most[side] as f64;
                (bar(&plot, bin, width, if side == 0 { share } else { -share }, count, names[side]))
            }
            @let y = plot.y.at(if side == 0 { 0.82 } else { -0.82 });
            text.note.end x=(n(plot.x.end - 4.0)) y=(n(y)) {
                (if sides[side].is_empty() { "no part " } else { "" }) (names[side])
            }
        }
        (plot.mark_x(limit_mm, &format!("limit {} mm", mm(limit_mm))))
    };
    let title = if beyond {
        format!("{name} (the last bar: that and more)")
    } else {
        name.to_owned()
    };
    plot.draw_with(
        &format!("Distribution of {name}"),
        (&title, "parts"),
        &plot.x.ticks(8),
        &y_ticks,
        &marks,
    )
}

fn bar(plot: &Plot, bin: usize, width: f64, share: f64, count: usize, name: &str) -> Markup {
    let (from, to) = (bin as f64 * width, (bin + 1) as f64 * width);
    let (left, right) = (plot.x.at(from), plot.x.at(to));
    let (base, tip) = (plot.y.at(0.0), plot.y.at(share));
    let class = if share > 0.0 { "good" } else { "bad" };
    html! {
        rect class=(class) x=(n(left + 0.5)) y=(n(base.min(tip))) width=(n(right - left - 1.0)) height=(n((base - tip).abs())) {
            title { (mm(from)) " to " (mm(to)) " mm: " (count) " " (name) }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_value_is_in_one_bin_and_the_last_takes_the_rest() {
        let bins = bins(&[0.0, 0.1, 0.101, 3.95, 400.0, -0.0], 0.1);
        assert_eq!((bins[0], bins[1], bins[39]), (3, 1, 2));
        assert_eq!(bins.iter().sum::<usize>(), 6);
    }

    #[test]
    fn bins_reach_past_the_limit_and_not_to_a_single_stray() {
        let mut good = vec![0.3; 100];
        good.push(80.0);
        let width = bin_width(&[good, vec![]], 2.0);
        assert!((2.5..=8.0).contains(&(width * BINS as f64)), "{width}");
        assert!(
            (2.0 / width).fract() < 1e-9,
            "a bin ends at the limit: {width}"
        );
        assert!(bin_width(&[vec![], vec![]], 0.0) > 0.0);
    }
}
