//! What the settings cost: each is made cheaper in turn, and the steps that it bears on are timed again.

use super::tally::Tally;
use crate::frames::Frame;
use crate::inspect::{Inspector, Look};
use crate::laps::Step;
use crate::settings::{ElementKind, Settings, Threshold};

/// One setting made cheaper.
#[derive(Clone, Debug)]
pub struct Change {
    /// What would be different, for a person.
    pub what: String,
    /// The settings with it.
    pub settings: Settings,
    /// The steps that it bears on. Others are left out: an element that is too small for the parts also breaks them up,
    /// and what that does to the time for judging them is beside the point.
    steps: &'static [Step],
}

/// What a change saves in a frame.
#[derive(Clone, Debug, PartialEq, serde::Serialize)]
pub struct Saving {
    /// What would be different, for a person.
    pub instead: String,
    /// Median over the frames.
    pub saves_ms: f64,
}

/// Every change that applies to these settings.
pub fn changes(settings: &Settings) -> Vec<Change> {
    let mut found = picture_changes(settings);
    found.extend(judge_changes(settings));
    found
}

fn change(
    settings: &Settings,
    what: impl Into<String>,
    steps: &'static [Step],
    apply: impl FnOnce(&mut Settings),
) -> Change {
    let mut settings = settings.clone();
    apply(&mut settings);
    Change {
        what: what.into(),
        settings,
        steps,
    }
}

fn picture_changes(settings: &Settings) -> Vec<Change> {
    const HAT: &[Step] = &[Step::TopHat];
    const LEVEL: &[Step] = &[Step::TopHat, Step::Threshold];
    let picture = &settings.picture;
    let half_mm = picture.element_mm / 2.0;
    let what = format!("picture.element_mm = {half_mm}: half as large");
    let mut found = vec![change(settings, what, HAT, |s| {
        s.picture.element_mm = half_mm;
    })];
    if picture.element == ElementKind::Octagon {
        let what = "picture.element = \"square\"";
        found.push(change(settings, what, HAT, |s| {
            s.picture.element = ElementKind::Square;
        }));
    }
    let fixed = match picture.threshold {
        Threshold::Fixed { .. } => None,
        Threshold::Otsu { floor } => Some(floor),
        Threshold::Hysteresis { high, .. } => Some(high),
    };
    if let Some(level) = fixed {
        let what = "picture.threshold with method = \"fixed\"";
        found.push(change(settings, what, LEVEL, |s| {
            s.picture.threshold = Threshold::Fixed { level };
        }));
    }
    if picture.fill_below_mm2 > 0.0 {
        let what = "picture.fill_below_mm2 = 0: no hole is closed";
        found.push(change(settings, what, &[Step::Fill], |s| {
            s.picture.fill_below_mm2 = 0.0;
        }));
    }
    found
}

fn judge_changes(settings: &Settings) -> Vec<Change> {
    const PARTS: &[Step] = &[Step::Part];
    let mut found = Vec::new();
    if settings.shapes.len() > 1 {
        let what = format!("the first [[shape]] only, of {}", settings.shapes.len());
        found.push(change(settings, what, PARTS, |s| s.shapes.truncate(1)));
    }
    let further = |s: &mut Settings| {
        for shape in &mut s.shapes {
            (shape.area_mm2, shape.length_mm, shape.width_mm) = (None, None, None);
            (shape.holes, shape.boundary_mm, shape.branches) = (None, None, None);
        }
    };
    let change = change(
        settings,
        "no further limits in [[shape]] than missing_mm and excess_mm",
        PARTS,
        further,
    );
    if change.settings != *settings {
        found.push(change);
    }
    found
}

/// Times all `changes` against `settings`, most useful first; half as many parts are reckoned from their times. `inspector`
/// makes an inspector for settings whose shapes are the first of the station's.
///
/// # Errors
/// The first of `read`.
pub fn savings<E>(
    settings: &Settings,
    frames: usize,
    inspector: impl Fn(&Settings) -> Inspector,
    mut read: impl FnMut(usize, &mut Frame) -> Result<(), E>,
) -> Result<Vec<Saving>, E> {
    let mut found = Vec::new();
    let mut parts_ns = Vec::new();
    for change in changes(settings) {
        let pair = [inspector(settings), inspector(&change.settings)];
        let [now, then] = in_turns(pair, frames, &mut read)?;
        let differences = now.sums(change.steps).zip(then.sums(change.steps));
        found.push(Saving {
            instead: change.what,
            saves_ms: median_ms(differences.map(|(now, then)| now as i64 - then as i64)),
        });
        parts_ns.extend(now.sums(&[Step::Part]));
    }
    if parts_ns.iter().any(|&ns| ns > 0) {
        found.push(Saving {
            instead: "half as many parts in view".to_owned(),
            saves_ms: median_ms(parts_ns.into_iter().map(|ns| (ns / 2) as i64)),
        });
    }
    found.sort_by(|a, b| b.saves_ms.total_cmp(&a.saves_ms));
    Ok(found)
}

/// Both on every frame, so that whatever else the PC does meets both; each goes first as often as the other, because the
/// second finds the frame in the cache.
fn in_turns<E>(
    mut pair: [Inspector; 2],
    frames: usize,
    read: &mut impl FnMut(usize, &mut Frame) -> Result<(), E>,
) -> Result<[Tally; 2], E> {
    let mut tallies = [Tally::for_frames(frames), Tally::for_frames(frames)];
    let (mut frame, mut look) = (Frame::default(), Look::default());
    for k in 0..frames {
        read(k, &mut frame)?;
        for turn in 0..2 {
            let which = (k + turn) % 2;
            tallies[which].inspect(&mut pair[which], &frame, &mut look);
        }
    }
    Ok(tallies)
}

fn median_ms(times_ns: impl Iterator<Item = i64>) -> f64 {
    let mut times: Vec<i64> = times_ns.collect();
    times.sort_unstable();
    times
        .get(times.len() / 2)
        .map_or(0.0, |&ns| ns as f64 / 1e6)
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::path::Path;

    fn settings(text: &str) -> Settings {
        let loaded = crate::settings::parse(Path::new("x.toml"), text);
        loaded.expect("good settings").settings
    }

    #[test]
    fn only_what_the_settings_use_can_be_made_cheaper() {
        let keys = |text| -> Vec<String> {
            let found = changes(&settings(text)).into_iter();
            found.map(|c| c.what.chars().take(20).collect()).collect()
        };
        let stars = keys(include_str!("../../config/oat-stars.toml"));
        assert_eq!(stars, ["picture.element_mm =", "picture.fill_below_m"]);
        let gaskets = keys(include_str!("../../config/gaskets.toml"));
        let expected = [
            "picture.element_mm =",
            "picture.element = \"s",
            "picture.threshold wi",
            "picture.fill_below_m",
            "no further limits in",
        ];
        assert_eq!(gaskets, expected);
    }

    #[test]
    fn each_change_changes_what_it_says() {
        let gaskets = settings(include_str!("../../config/gaskets.toml"));
        let found = changes(&gaskets);
        let picture = |k: usize| found[k].settings.picture.clone();
        assert_eq!(picture(0).element_mm, 13.0);
        assert_eq!(picture(1).element, ElementKind::Square);
        assert_eq!(picture(2).threshold, Threshold::Fixed { level: 30 });
        assert_eq!(picture(3).fill_below_mm2, 0.0);
        assert_eq!(found[4].settings.shapes[0].holes, None);
        for change in &found[..4] {
            assert_eq!(change.settings.shapes, gaskets.shapes);
        }
    }

    #[test]
    fn a_median_of_nothing_is_nothing() {
        assert_eq!(median_ms([].into_iter()), 0.0);
        assert_eq!(
            median_ms([9_000_000, -1_000_000, 2_000_000].into_iter()),
            2.0
        );
    }
}
