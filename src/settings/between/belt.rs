//! Speed, exposure, frames and pitch.

use crate::settings::fields::Settings;

use super::{Findings, down, n, up};

pub(super) fn check(settings: &Settings, found: &mut Findings) {
    blur(settings, found);
    exposure_within_interval(settings, found);
    frames_overlap(settings, found);
    neighbours_told_apart(settings, found);
}

fn blur(settings: &Settings, found: &mut Findings) {
    let limit_mm = settings.smallest_limit_mm();
    if settings.blur_mm() > limit_mm {
        let longest_ms = limit_mm / settings.belt.speed_mm_s * 1e3;
        let expected = format!("at most {} ms", down(longest_ms));
        let why = format!(
            "at {} mm/s a part moves {} mm during the exposure, more than the smallest limit of a shape ({} mm)",
            n(settings.belt.speed_mm_s),
            n(settings.blur_mm()),
            n(limit_mm)
        );
        found.add("camera.exposure_ms", &expected, &why);
    }
}

fn exposure_within_interval(settings: &Settings, found: &mut Findings) {
    let interval_ms = 1e3 / settings.camera.frames_per_s;
    if settings.camera.exposure_ms > interval_ms {
        let expected = format!("at most {} ms", down(interval_ms));
        let why = format!(
            "at {} frames/s the next frame begins then",
            n(settings.camera.frames_per_s)
        );
        found.add("camera.exposure_ms", &expected, &why);
    }
}

fn frames_overlap(settings: &Settings, found: &mut Findings) {
    let step_mm = settings.fastest_mm_s() / settings.camera.frames_per_s;
    let region_mm = settings.region_length_mm();
    if step_mm > region_mm && region_mm > 0.0 {
        let expected = format!(
            "at least {} frames/s",
            up(settings.fastest_mm_s() / region_mm)
        );
        let why = format!(
            "the belt moves up to {} mm from frame to frame, but a frame shows only {} mm of it, so that some belt \
             would always pass unseen",
            n(step_mm),
            n(region_mm)
        );
        found.add("camera.frames_per_s", &expected, &why);
    }
}

/// While a part crosses the view, its place is known only to the speed tolerance.
fn neighbours_told_apart(settings: &Settings, found: &mut Findings) {
    let (view_mm, pitch_mm) = (settings.view_mm(), settings.belt.part_pitch_mm);
    let drift_mm = view_mm * settings.speed_tolerance();
    if 2.0 * drift_mm >= pitch_mm {
        let expected = format!("less than {} %", n(pitch_mm / view_mm / 2.0 * 100.0));
        let why = format!(
            "over the {} mm of view a part may then be {} mm off, half of part_pitch_mm = {} or more, so that it could \
             be taken for its neighbour",
            n(view_mm),
            n(drift_mm),
            n(pitch_mm)
        );
        found.add("belt.speed_tolerance_percent", &expected, &why);
    }
}
