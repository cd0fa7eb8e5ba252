//! Axes and marks of the charts, as SVG inside the page.
//!
//! Colours and patterns stand in the page's style sheet; whatever is told apart by colour is told apart by shape, pattern
//! or side as well.

use maud::{Markup, html};

/// Room around a plot for ticks and titles.
const LEFT: f64 = 54.0;
const RIGHT: f64 = 14.0;
const TOP: f64 = 22.0;
const BELOW: f64 = 42.0;

/// A number as it stands in an SVG attribute.
pub fn n(value: f64) -> String {
    let text = format!("{value:.1}");
    text.strip_suffix(".0").map(str::to_owned).unwrap_or(text)
}

/// A stretch of values laid over a stretch of the drawing.
#[derive(Clone, Copy, Debug)]
pub struct Axis {
    /// First value.
    pub from: f64,
    /// Last value.
    pub to: f64,
    /// Where the first value is drawn.
    pub start: f64,
    /// Where the last value is drawn.
    pub end: f64,
}

impl Axis {
    /// Where a value is drawn; values outside are drawn at the nearer end.
    pub fn at(&self, value: f64) -> f64 {
        let share = (value - self.from) / (self.to - self.from);
        self.start + share.clamp(0.0, 1.0) * (self.end - self.start)
    }

    /// Round values between the ends, about this many, each with its text.
    pub fn ticks(&self, about: usize) -> Vec<(f64, String)> {
        let step = round_step((self.to - self.from) / about.max(1) as f64);
        let places = (-step.log10().floor()).max(0.0) as usize;
        let first = (self.from / step - 1e-9).ceil() as i64;
        let last = (self.to / step + 1e-9).floor() as i64;
        let tick = |k: i64| {
            let value = k as f64 * step;
            (value, format!("{value:.places$}"))
        };
        (first..=last).map(tick).collect()
    }
}

/// 1, 2 or 5 times a power of ten, not below `step`.
pub fn round_step(step: f64) -> f64 {
    let power = 10f64.powf(step.log10().floor());
    let round = [1.0, 2.0, 5.0]
        .into_iter()
        .find(|m| m * power >= step * (1.0 - 1e-9));
    round.unwrap_or(10.0) * power
}

/// A rectangle with two axes.
#[derive(Clone, Copy, Debug)]
pub struct Plot {
    /// Width of the whole drawing.
    pub width: f64,
    /// Height of the whole drawing.
    pub height: f64,
    /// From left to right.
    pub x: Axis,
    /// From bottom to top.
    pub y: Axis,
}

impl Plot {
    /// A drawing of this size whose axes run over `x` and `y` (first value, last value).
    pub fn new(width: f64, height: f64, x: (f64, f64), y: (f64, f64)) -> Self {
        // A single value has a neighbourhood too.
        let spread = |(from, to): (f64, f64)| {
            if to > from {
                (from, to)
            } else {
                (from, from + 1.0)
            }
        };
        let axis = |(from, to), start, end| Axis {
            from,
            to,
            start,
            end,
        };
        Self {
            width,
            height,
            x: axis(spread(x), LEFT, width - RIGHT),
            y: axis(spread(y), height - BELOW, TOP),
        }
    }

    /// The drawing with `marks` between its axes. `name` is read out to those who cannot see it.
    pub fn draw(&self, name: &str, titles: (&str, &str), marks: &Markup) -> Markup {
        let (x_ticks, y_ticks) = (self.x.ticks(8), self.y.ticks(5));
        self.draw_with(name, titles, &x_ticks, &y_ticks, marks)
    }

    /// As [`Plot::draw`], with ticks of one's own.
    pub fn draw_with(
        &self,
        name: &str,
        titles: (&str, &str),
        x_ticks: &[(f64, String)],
        y_ticks: &[(f64, String)],
        marks: &Markup,
    ) -> Markup {
        let (left, right, top, bottom) = (self.x.start, self.x.end, self.y.end, self.y.start);
        html! {
            svg viewBox={ "0 0 " (n(self.width)) " " (n(self.height)) } role="img" aria-label=(name) {
                @for (value, text) in y_ticks {
                    @let y = n(self.y.at(*value));
                    path.grid d={ "M" (n(left)) " " (y) "H" (n(right)) } {}
                    text.tick.end x=(n(left - 6.0)) y=(y) dy="0.35em" { (text) }
                }
                @for (value, text) in x_ticks {
                    @let x = n(self.x.at(*value));
                    path.axis d={ "M" (x) " " (n(bottom)) "v5" } {}
                    text.tick.middle x=(x) y=(n(bottom + 18.0)) { (text) }
                }
                (marks)
                path.axis d={ "M" (n(left)) " " (n(top)) "V" (n(bottom)) "H" (n(right)) } {}
                text.title.middle x=(n((left + right) / 2.0)) y=(n(self.height - 5.0)) { (titles.0) }
                text.title x="2" y="13" { (titles.1) }
            }
        }
    }

    /// A line across the plot at the value `x`, with its meaning beside it.
    pub fn mark_x(&self, x: f64, text: &str) -> Markup {
        let at = self.x.at(x);
        let near_the_end = at > (self.x.start + self.x.end) / 2.0;
        let (class, shift) = if near_the_end {
            ("note end", -5.0)
        } else {
            ("note", 5.0)
        };
        html! {
            path.limit d={ "M" (n(at)) " " (n(self.y.end - 6.0)) "V" (n(self.y.start)) } {}
            text class=(class) x=(n(at + shift)) y=(n(self.y.end + 2.0)) { (text) }
        }
    }

    /// A line along the plot at the value `y`, with its meaning above it.
    pub fn mark_y(&self, y: f64, text: &str) -> Markup {
        let at = self.y.at(y);
        html! {
            path.limit d={ "M" (n(self.x.start)) " " (n(at)) "H" (n(self.x.end)) } {}
            text.note.end x=(n(self.x.end - 4.0)) y=(n(at - 5.0)) { (text) }
        }
    }
}

/// A disc, for good and kept.
pub fn disc(x: f64, y: f64) -> Markup {
    html! { circle.good cx=(n(x)) cy=(n(y)) r="3" {} }
}

/// A cross, for bad and rejected.
pub fn cross(x: f64, y: f64) -> Markup {
    html! { path.bad.stroke d={ "M" (n(x - 3.5)) " " (n(y - 3.5)) "l7 7m0-7l-7 7" } {} }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn axis(from: f64, to: f64) -> Axis {
        Axis {
            from,
            to,
            start: 0.0,
            end: 100.0,
        }
    }

    #[test]
    fn ticks_are_round_and_inside() {
        let texts = |from, to| -> Vec<String> {
            axis(from, to)
                .ticks(5)
                .into_iter()
                .map(|(_, text)| text)
                .collect()
        };
        assert_eq!(texts(0.0, 1.0), ["0.0", "0.2", "0.4", "0.6", "0.8", "1.0"]);
        assert_eq!(texts(-3.0, 11.0), ["0", "5", "10"]);
        assert_eq!(
            texts(1000.0, 5000.0),
            ["1000", "2000", "3000", "4000", "5000"]
        );
    }

    #[test]
    fn values_outside_stay_in_the_drawing() {
        let axis = axis(0.0, 10.0);
        assert_eq!(
            (axis.at(5.0), axis.at(-1.0), axis.at(99.0)),
            (50.0, 0.0, 100.0)
        );
    }

    #[test]
    fn a_single_value_can_be_drawn() {
        let plot = Plot::new(100.0, 100.0, (2.0, 2.0), (0.0, 0.0));
        assert!(plot.x.at(2.0).is_finite() && plot.y.at(0.0).is_finite());
    }
}
