//! What a sweep found: as text, as a table, as a page.

use std::fmt::Write;

use maud::{Markup, html};

use super::sweep::{Costs, Point, Standing, ranked};
use super::vary::Axis;
use crate::replay::report::chart::{Plot, cross, disc, n};
use crate::replay::report::page::{Section, figure, page, pairs, table};
use crate::replay::report::words::{FALSE_REJECTS, MISSES, counted};
use crate::stats::{Count, Share};

/// Rows of a list that are written out on the page.
const LISTED: usize = 100;
/// Trade-offs that are printed.
const PRINTED: usize = 12;

/// A finished sweep.
pub struct SweepPage<'a> {
    /// Where the recording is.
    pub recording: String,
    /// Where the settings are.
    pub settings: String,
    /// What was varied.
    pub axes: &'a [Axis],
    /// All points, the settings as they are first.
    pub points: &'a [Point],
    /// What is known of those that could be run.
    pub standings: &'a [Standing],
    /// The best.
    pub chosen: &'a Standing,
    /// How far it could be moved along each axis.
    pub stretches: Vec<(String, String)>,
    /// How misses are weighed.
    pub costs: Costs,
    /// How many labels there are.
    pub labels: usize,
}

impl SweepPage<'_> {
    fn present(&self) -> Option<&Standing> {
        self.standings.iter().find(|standing| standing.point == 0)
    }

    fn values(&self, standing: &Standing) -> String {
        let values = self.axes.iter().zip(&self.points[standing.point].values);
        let values = values.map(|(axis, value)| format!("{} = {value}", axis.key));
        values.collect::<Vec<_>>().join(", ")
    }

    /// The trade-offs that nothing beats, fewest misses first; of equal ones the best.
    fn front(&self) -> Vec<&Standing> {
        let mut front = ranked(self.standings, self.costs);
        front.retain(|standing| standing.on_front);
        let mut seen = Vec::new();
        front.retain(|standing| {
            let counts = (standing.tried.misses, standing.tried.false_alarms());
            let new = !seen.contains(&counts);
            seen.push(counts);
            new
        });
        front.sort_by_key(|standing| standing.tried.misses);
        front
    }

    fn invalid(&self) -> Vec<(&Point, &String)> {
        let wrong = self
            .points
            .iter()
            .filter_map(|point| Some((point, point.stand.as_ref().err()?)));
        wrong.collect()
    }

    /// A short table for the terminal.
    pub fn text(&self) -> String {
        let mut text = String::new();
        let mut line = |name: &str, what: String| {
            let _ = writeln!(text, "  {name:<15} {what}");
        };
        let invalid = self.invalid().len();
        let given_up = self
            .standings
            .iter()
            .filter(|standing| !standing.tried.is_whole())
            .count();
        let tried = self.standings.len();
        line(
            "tried",
            format!(
                "{tried} settings, {given_up} of them given up early; {invalid} more contradict themselves"
            ),
        );
        match self.present() {
            Some(present) => line("as they are", self.counts(present)),
            None => line("as they are", "not valid".to_owned()),
        }
        for standing in self.front().into_iter().take(PRINTED) {
            line(
                "trade-off",
                format!("{}: {}", self.counts(standing), self.values(standing)),
            );
        }
        line(
            "chosen",
            format!("{}: {}", self.counts(self.chosen), self.values(self.chosen)),
        );
        for (axis, (low, high)) in self.axes.iter().zip(&self.stretches) {
            line("as good", format!("{} from {low} to {high}", axis.key));
        }
        for (name, tried) in &self.chosen.shifted {
            let (misses, alarms) = (tried.misses, tried.false_alarms());
            line(name, format!("{misses} missed, {alarms} false alarms"));
        }
        text
    }

    fn counts(&self, standing: &Standing) -> String {
        let tried = &standing.tried;
        let mut text = format!(
            "{} of {} missed, {} of {} rejected wrongly",
            tried.misses, tried.bad, tried.false_rejects, tried.good
        );
        for (count, what) in [(tried.not_found, "not found"), (tried.stray, "stray")] {
            if count > 0 {
                let _ = write!(text, ", {count} {what}");
            }
        }
        if let Some(labels) = tried.given_up_after {
            let _ = write!(text, ", given up after {labels} labels");
        }
        text
    }

    /// The page.
    pub fn html(&self) -> String {
        let section = |id, title, body| Section { id, title, body };
        let sections = [
            section("chosen", "The chosen settings", self.chosen_section()),
            section("trade-offs", "Best trade-offs", self.front_section()),
            section("curve", "Misses against false alarms", self.curve()),
            section("keys", "Key by key", self.keys()),
            section(
                "invalid",
                "Points that contradict themselves",
                self.invalid_section(),
            ),
        ];
        let lead = html! {
            p.soft { code { (self.settings) } " varied on " code { (self.recording) } ", " (counted(self.labels, "label", "labels")) }
            ul.key {
                li { b { (self.standings.len()) } "settings tried" }
                li { b { (self.standings.iter().filter(|standing| !standing.tried.is_whole()).count()) } "given up early" }
                li { b { (self.chosen.tried.misses) } "of " (self.chosen.tried.bad) " bad missed" }
                li { b { (self.chosen.tried.false_rejects) } "of " (self.chosen.tried.good) " good rejected" }
            }
        };
        page("Sweep", &lead, &sections)
    }

    fn chosen_section(&self) -> Markup {
        let tried = &self.chosen.tried;
        let count = |hits: usize, of: usize| Count::new(hits as u64, of as u64);
        let row = |(k, axis): (usize, &Axis)| {
            let value = |standing: &Standing| self.points[standing.point].values[k].clone();
            let as_good = self
                .stretches
                .get(k)
                .map(|(low, high)| format!("{low} to {high}"));
            vec![
                axis.key.clone(),
                self.points[0].values[k].clone(),
                value(self.chosen),
                as_good.unwrap_or_else(|| "-".to_owned()),
            ]
        };
        let rows: Vec<_> = self.axes.iter().enumerate().map(row).collect();
        let miss = self.costs.miss;
        html! {
            (table(&["key", "as it is", "chosen", "as good from .. to"], &[], &rows))
            p { (MISSES.sentence(count(tried.misses, tried.bad), Share::P95)) "." }
            p { (FALSE_REJECTS.sentence(count(tried.false_rejects, tried.good), Share::P95)) "." }
            p.soft {
                "These bounds hold for settings that were fixed before the recording was made. The sweep has chosen by this very \
                 recording, so check the chosen settings on another one."
            }
            p {
                "Least cost first, a miss costing as much as " (miss) " false alarms; of equal ones the one that stays best when light \
                 and scale shift a little; then the one in the middle of the widest stretch of equally good values; then the one with \
                 the most room to its limits."
            }
            @if self.chosen.shifted.is_empty() {
                p { "Not judged on a shifted recording: " code { "--shift 3" } " does that." }
            } @else {
                (self.shifted())
            }
        }
    }

    /// The candidates on the changed recordings.
    fn shifted(&self) -> Markup {
        let judged = ranked(self.standings, self.costs);
        let judged: Vec<_> = judged
            .into_iter()
            .filter(|standing| !standing.shifted.is_empty())
            .collect();
        let names = judged.first().map_or_else(Vec::new, |s| {
            s.shifted.iter().map(|(name, _)| *name).collect()
        });
        let mut head = vec!["settings", "as recorded"];
        head.extend(names);
        let counts = |tried: &super::Tried| format!("{} / {}", tried.misses, tried.false_alarms());
        let row = |standing: &&Standing| {
            let mut row = vec![self.values(standing), counts(&standing.tried)];
            row.extend(standing.shifted.iter().map(|(_, tried)| counts(tried)));
            row
        };
        let rows: Vec<_> = judged.iter().map(row).collect();
        html! {
            h3 { "On shifted recordings" }
            p { "Misses / false alarms. The best first." }
            (table(&head, &[], &rows))
        }
    }

    fn front_section(&self) -> Markup {
        let row = |standing: &&Standing| {
            let tried = &standing.tried;
            vec![
                tried.misses.to_string(),
                tried.false_rejects.to_string(),
                tried.not_found.to_string(),
                tried.stray.to_string(),
                self.values(standing),
            ]
        };
        let front = self.front();
        let rows: Vec<_> = front.iter().take(LISTED).map(row).collect();
        let head = [
            "missed",
            "rejected wrongly",
            "good not found",
            "shots at nothing",
            "settings",
        ];
        html! {
            p { "No other setting that was tried has fewer of one and no more of the other." }
            (table(&head, &[0, 1, 2, 3], &rows))
        }
    }

    fn curve(&self) -> Markup {
        let percent = |count: usize, of: usize| 100.0 * count as f64 / of.max(1) as f64;
        let at = |standing: &Standing| {
            let tried = &standing.tried;
            (
                percent(tried.false_alarms(), tried.good),
                percent(tried.misses, tried.bad),
            )
        };
        let whole = || {
            self.standings
                .iter()
                .filter(|standing| standing.tried.is_whole())
        };
        let most = whole().map(at).fold((1.0, 1.0), |most: (f64, f64), at| {
            (most.0.max(at.0), most.1.max(at.1))
        });
        let plot = Plot::new(640.0, 360.0, (0.0, most.0.min(100.0)), (0.0, most.1));
        let place = |standing: &Standing| {
            let (x, y) = at(standing);
            (plot.x.at(x), plot.y.at(y))
        };
        let mut front = self.front();
        front.sort_by(|a, b| at(a).0.total_cmp(&at(b).0));
        let line: Vec<_> = front
            .iter()
            .map(|s| place(s))
            .map(|(x, y)| format!("{} {}", n(x), n(y)))
            .collect();
        let mut dots: Vec<(f64, f64)> = whole().map(place).collect();
        dots.sort_by(|a, b| a.0.total_cmp(&b.0).then(a.1.total_cmp(&b.1)));
        dots.dedup();
        let chosen = place(self.chosen);
        let marks = html! {
            @for &(x, y) in &dots { (disc(x, y)) }
            @if line.len() > 1 { path.median d={ "M" (line.join("L")) } {} }
            @if let Some(present) = self.present() {
                @let (x, y) = place(present);
                (cross(x, y)) text.note x=(n(x + 8.0)) y=(n(y - 6.0)) { "as they are" }
            }
            circle.here cx=(n(chosen.0)) cy=(n(chosen.1)) r="6" {}
            text.note x=(n(chosen.0 + 10.0)) y=(n(chosen.1 - 8.0)) { "chosen" }
        };
        let titles = ("false alarms, % of good parts", "misses, % of bad parts");
        let drawing = plot.draw(
            "Misses against false alarms of all settings",
            titles,
            &marks,
        );
        figure(
            &drawing,
            "A dot for each result; the line joins the best trade-offs, the ring is the chosen one, the cross the settings as they are.",
            false,
        )
    }

    /// What the best setting with each value of a key comes to.
    fn keys(&self) -> Markup {
        let best = |k: usize, value: &str| {
            let with = self.standings.iter().filter(|s| {
                s.point > 0 && s.tried.is_whole() && self.points[s.point].values[k] == value
            });
            with.min_by(|a, b| self.costs.of(&a.tried).total_cmp(&self.costs.of(&b.tried)))
        };
        let row = |k: usize, value: &String| {
            let counts = best(k, value).map(|s| [s.tried.misses, s.tried.false_alarms()]);
            let text =
                |at: usize| counts.map_or_else(|| "-".to_owned(), |counts| counts[at].to_string());
            vec![value.clone(), text(0), text(1)]
        };
        html! {
            @for (k, axis) in self.axes.iter().enumerate() {
                h3 { code { (axis.key) } }
                p { "With each of its values the best that the others can make of it." }
                @let rows: Vec<_> = axis.values.iter().take(LISTED).map(|value| row(k, value)).collect();
                (table(&["value", "missed", "false alarms"], &[0, 1, 2], &rows))
            }
        }
    }

    fn invalid_section(&self) -> Markup {
        let invalid = self.invalid();
        let rows: Vec<_> = invalid
            .iter()
            .take(LISTED)
            .map(|(point, why)| vec![point.values.join(", "), (*why).clone()])
            .collect();
        html! {
            @if invalid.is_empty() {
                p { "None." }
            } @else {
                (pairs(&[("points", invalid.len().to_string())]))
                (table(&["values", "why"], &[], &rows))
            }
        }
    }
}

/// A row for each point, in their order.
///
/// # Errors
/// Those of the CSV writer.
pub fn points_csv(page: &SweepPage<'_>) -> Result<Vec<u8>, csv::Error> {
    let mut csv = csv::Writer::from_writer(Vec::new());
    let mut head: Vec<&str> = vec!["point"];
    head.extend(page.axes.iter().map(|axis| axis.key.as_str()));
    head.extend([
        "misses",
        "bad",
        "false_rejects",
        "good",
        "not_found",
        "stray",
        "room_percent",
        "given_up_after",
        "cost",
    ]);
    head.extend(["worst_shifted_cost", "trade_off", "chosen", "problem"]);
    csv.write_record(&head)?;
    for (k, point) in page.points.iter().enumerate() {
        let standing = page.standings.iter().find(|standing| standing.point == k);
        let mut row = vec![k.to_string()];
        row.extend(point.values.iter().cloned());
        row.extend(figures(page, standing));
        row.push(point.stand.as_ref().err().cloned().unwrap_or_default());
        csv.write_record(&row)?;
    }
    csv.into_inner()
        .map_err(|error| csv::Error::from(error.into_error()))
}

fn figures(page: &SweepPage<'_>, standing: Option<&Standing>) -> [String; 12] {
    let Some(standing) = standing else {
        return Default::default();
    };
    let tried = &standing.tried;
    let yes = |yes: bool| if yes { "yes" } else { "" }.to_owned();
    let worst = (!standing.shifted.is_empty()).then(|| standing.worst(page.costs).to_string());
    [
        tried.misses.to_string(),
        tried.bad.to_string(),
        tried.false_rejects.to_string(),
        tried.good.to_string(),
        tried.not_found.to_string(),
        tried.stray.to_string(),
        tried.room_percent.to_string(),
        tried
            .given_up_after
            .map(|labels| labels.to_string())
            .unwrap_or_default(),
        page.costs.of(tried).to_string(),
        worst.unwrap_or_default(),
        yes(standing.on_front),
        yes(standing.point == page.chosen.point),
    ]
}
