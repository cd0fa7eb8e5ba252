//! How long the PC took for each frame.

use maud::{Markup, html};

use super::chart::{Plot, n};
use super::page::figure;
use crate::health::Durations;
use crate::units::Micros;

/// The section.
pub fn times(took: &Durations, latency_us: Micros) -> Markup {
    let (Some(half), Some(most)) = (took.not_exceeded_by(0.5), took.not_exceeded_by(0.99)) else {
        return html! { p { "No frame was judged." } };
    };
    let caption = format!(
        "From the decoded frame to its verdicts: half of {} frames within {:.2} ms, 99 % within {:.2} ms, the longest {:.2} ms; \
         verdicts take effect {:.1} ms after the capture.",
        took.count(),
        half.as_ms(),
        most.as_ms(),
        took.longest().as_ms(),
        latency_us.as_ms()
    );
    html! {
        p {
            "Measured on this PC while it worked on several frames at once as fast as it could, decoding left out. This is the one \
             section that differs from run to run."
        }
        (figure(&draw(took, latency_us), &caption, false))
    }
}

/// Times on a logarithmic axis.
fn draw(took: &Durations, latency_us: Micros) -> Markup {
    let log = |time: Micros| (time.0.max(1) as f64).log10();
    let latency = log(latency_us);
    let (mut from, mut to, mut most) = (latency - 0.1, latency + 0.1, 1);
    for bucket in took.buckets() {
        from = from.min(log(bucket.from));
        to = to.max(log(bucket.to));
        most = most.max(bucket.count);
    }
    let plot = Plot::new(560.0, 260.0, (from, to), (0.0, most as f64 * 1.05));
    let marks = html! {
        @for bucket in took.buckets() {
            @let (left, right) = (plot.x.at(log(bucket.from)), plot.x.at(log(bucket.to)));
            @let top = plot.y.at(bucket.count as f64);
            rect.good x=(n(left)) y=(n(top)) width=(n((right - left - 0.6).max(0.6))) height=(n(plot.y.start - top)) {
                title {
                    (format!("{:.3} to {:.3} ms: {}", bucket.from.as_ms(), bucket.to.as_ms(), bucket.count))
                }
            }
        }
        (plot.mark_x(latency, "takes effect"))
    };
    let ticks = plot.y.ticks(5);
    plot.draw_with(
        "Time taken for a frame",
        ("ms for a frame", "frames"),
        &log_ticks(from, to),
        &ticks,
        &marks,
    )
}

/// 1, 2 and 5 of each power of ten between two logarithms of microseconds, written in milliseconds.
fn log_ticks(from: f64, to: f64) -> Vec<(f64, String)> {
    let decades = from.floor() as i32..=to.ceil() as i32;
    let values = decades.flat_map(|decade| [1.0, 2.0, 5.0].map(|m| m * 10f64.powi(decade)));
    let inside = values.filter(|us| (from..=to).contains(&us.log10()));
    // Rust writes the shortest decimal that reads back the same.
    inside
        .map(|us| (us.log10(), format!("{}", us / 1e3)))
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn ticks_are_in_milliseconds() {
        let texts: Vec<_> = log_ticks(2.9, 4.4)
            .into_iter()
            .map(|(_, text)| text)
            .collect();
        assert_eq!(texts, ["1", "2", "5", "10", "20"]);
    }

    #[test]
    fn nothing_measured_is_said_so() {
        let text = times(&Durations::default(), Micros(100_000)).into_string();
        assert!(text.contains("No frame was judged"));
    }
}
