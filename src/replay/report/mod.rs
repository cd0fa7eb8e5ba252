//! The report of a replay: one HTML file that needs no script and nothing from outside.
//!
//! Everything but the pictures comes from what the replay kept; frames are decoded once more only for the parts that are
//! shown, so memory does not grow with the length of the recording. The page is the same on every run, but for the section
//! on times.

pub mod album;
pub mod chart;
pub mod facts;
pub mod gallery;
pub mod page;
pub mod picture;
pub mod words;

mod agreement;
mod belt;
mod counts;
mod drift;
mod overlay;
mod source;
mod spread;
mod steps;
mod times;

pub use agreement::Tally;
pub use source::SourceFile;

use maud::{Markup, html};

use super::{Artist, Outcome, Score, summarize};
use crate::belt::Stretch;
use crate::health::Durations;
use crate::recording::{Label, Recording, RecordingError};
use crate::settings::Settings;
use crate::units::Micros;
use album::Album;
use facts::Facts;
use page::{Section, page};
use words::counted;

/// What a report tells of.
pub struct Report<'a> {
    /// What the recording is called.
    pub name: String,
    /// When its first and its last frame were captured.
    pub span_us: (Micros, Micros),
    /// The settings.
    pub settings: &'a Settings,
    /// The settings file, then the taught shapes.
    pub sources: &'a [SourceFile],
    /// What came of the replay.
    pub outcome: &'a Outcome,
    /// The recording's labels and how they were matched, where it has some.
    pub labels: Option<(&'a [Label], &'a Score)>,
    /// How long frames took.
    pub took: &'a Durations,
}

impl Report<'_> {
    /// The page. Pictures are drawn by `artist` from `recording`.
    ///
    /// # Errors
    /// Those of reading the frames that are shown.
    pub fn html(
        &self,
        recording: &Recording,
        artist: Artist<'_>,
    ) -> Result<String, RecordingError> {
        let facts = Facts::gather(self.settings, self.outcome, self.labels);
        let mut album = Album::new(recording, artist);
        let unseen: Vec<Stretch> = self
            .outcome
            .unseen
            .iter()
            .map(|(stretch, _)| *stretch)
            .collect();
        let section = |id, title, body| Section { id, title, body };
        let sections = [
            section("counts", "Counts", counts::counts(self)),
            section(
                "agreement",
                "Misses and false rejects",
                agreement::agreement(&facts),
            ),
            section("spread", "Bites and burrs", spread::spread(&facts)),
            section("drift", "Margin over time", drift::drift(&facts)),
            section("reasons", "Rejects by reason", counts::reasons(self)),
            section("belt", "Belt map", belt::belt(&facts, &unseen)),
            section(
                "gallery",
                "Parts to look at",
                gallery::gallery(&facts, &mut album)?,
            ),
            section("steps", "Step by step", steps::steps(&facts, &mut album)?),
            section(
                "times",
                "Time for a frame",
                times::times(self.took, self.settings.latency_us()),
            ),
            section("settings", "Settings", source::settings(self.sources)),
        ];
        Ok(page(
            &format!("Replay of {}", self.name),
            &self.lead(),
            &sections,
        ))
    }

    /// The few figures that are asked for first.
    fn lead(&self) -> Markup {
        let summary = summarize(self.outcome, self.settings);
        let tally = self.labels.map(|(labels, score)| Tally::of(labels, score));
        let settings = self.sources.first();
        html! {
            p.soft {
                (counted(self.outcome.health.frames as usize, "frame", "frames"))
                @if let Some(source) = settings {
                    ", settings " code { (source.path.display()) } ", SHA-256 " code { (source.sha256.get(..12).unwrap_or_default()) }
                }
            }
            ul.key {
                li { b { (summary.parts) } "parts" }
                li { b { (summary.kept) } "kept" }
                li { b { (summary.rejected) } "rejected" }
                li { b { (format!("{:.0} mm", summary.unseen_mm)) } "not seen" }
                @if let Some(tally) = tally {
                    li { b { (tally.misses.hits()) } "of " (tally.misses.of()) " bad missed" }
                    li { b { (tally.false_rejects.hits()) } "of " (tally.false_rejects.of()) " good rejected" }
                } @else {
                    li { b { "-" } "no labels" }
                }
            }
        }
    }
}
