//! Whether each outlet can be reached in time and takes only what it is meant to take.

use crate::settings::derived::UNSEEN_STEP_MM;
use crate::settings::fields::{Outlet, Settings};

use super::{Findings, down, n, up};

pub(super) fn check(settings: &Settings, found: &mut Findings) {
    for (index, outlet) in settings.outlets.iter().enumerate() {
        let key = |name: &str| format!("outlet[{index}].{name}");
        reached(settings, outlet, key("distance_mm"), found);
        margin_within_pitch(settings, outlet, key("margin_mm"), found);
        margin_covers_drift(settings, outlet, key("margin_mm"), found);
        long_enough(settings, outlet, key("max_on_ms"), found);
    }
    answer_fits(settings, found);
    line_keeps_up(settings, found);
}

/// Distances are not known to less than this.
const SPARE_MM: f64 = 1e-3;

/// See the point of decision in `derived`.
fn reached(settings: &Settings, outlet: &Outlet, key: String, found: &mut Findings) {
    let reach = settings.reach(outlet);
    if reach.slack_mm >= -SPARE_MM {
        return;
    }
    let latency_ms = settings.camera.latency_ms + reach.slack_ms;
    let or = if latency_ms >= 1.0 {
        format!("or camera.latency_ms of at most {}", down(latency_ms))
    } else {
        "and no latency is short enough for this distance".to_owned()
    };
    let lead = settings.open_lead_us(outlet);
    let why = format!(
        "a part is decided {} mm past the upstream edge ({} mm of view, then up to {} mm during the latency of {} ms), \
         unseen belt in steps of {} mm, and the signal must leave {} mm of margin and {} mm ({} ms) of lead before the \
         outlet",
        n(settings.decision_mm()),
        n(settings.view_mm()),
        n(settings.fastest_mm_in(settings.latency_us())),
        n(settings.camera.latency_ms),
        n(UNSEEN_STEP_MM),
        n(outlet.margin_mm),
        n(settings.fastest_mm_in(lead)),
        n(lead.as_ms()),
    );
    found.add(
        key,
        &format!("at least {} mm, {or}", up(reach.needed_mm)),
        &why,
    );
}

fn margin_within_pitch(settings: &Settings, outlet: &Outlet, key: String, found: &mut Findings) {
    let pitch_mm = settings.belt.part_pitch_mm;
    if 2.0 * outlet.margin_mm >= pitch_mm {
        let why = format!(
            "before and after a part the outlet would stay open for {} mm of belt, and parts follow each other every \
             {} mm (belt.part_pitch_mm): rejecting one would take its neighbours",
            n(2.0 * outlet.margin_mm),
            n(pitch_mm)
        );
        found.add(key, &format!("less than {} mm", n(pitch_mm / 2.0)), &why);
    }
}

/// From the end of the view on nothing corrects where a part is thought to be.
fn margin_covers_drift(settings: &Settings, outlet: &Outlet, key: String, found: &mut Findings) {
    let blind_mm = outlet.distance_mm - settings.view_mm();
    let drift_mm = blind_mm * settings.speed_tolerance();
    if outlet.margin_mm < drift_mm {
        let why = format!(
            "over the {} mm from the end of the view to the outlet a belt that is {} % off moves a part by {} mm, and \
             it would be missed",
            n(blind_mm),
            n(settings.belt.speed_tolerance_percent),
            n(drift_mm)
        );
        found.add(key, &format!("at least {} mm", up(drift_mm)), &why);
    }
}

/// A good part is at least as long as the low end of its shape's `length_mm`, and some lie along the belt.
fn long_enough(settings: &Settings, outlet: &Outlet, key: String, found: &mut Findings) {
    let lengths = settings.shapes.iter().filter_map(|shape| shape.length_mm);
    let part_mm = lengths.map(|[low, _]| low).fold(0.0, f64::max);
    let on_ms = settings.on_ms(outlet, part_mm);
    if on_ms > outlet.max_on_ms {
        let why = format!(
            "a part of {} mm and two margins of {} mm hold it open for that long",
            n(part_mm),
            n(outlet.margin_mm)
        );
        found.add(key, &format!("at least {} ms", up(on_ms)), &why);
    }
}

fn answer_fits(settings: &Settings, found: &mut Findings) {
    let least = settings.line.switch_us();
    if settings.line.answer_within_ms < least.as_ms() {
        let why = format!(
            "the answer alone takes that long at {} baud, with the silence before it",
            settings.line.baud
        );
        found.add(
            "line.answer_within_ms",
            &format!("at least {} ms", up(least.as_ms())),
            &why,
        );
    }
}

/// Every part may need two messages, one to open and one to close, each with its answer.
fn line_keeps_up(settings: &Settings, found: &mut Findings) {
    let needed_ms = 2.0 * settings.line.exchange_us().as_ms();
    let pitch_ms = settings.belt.part_pitch_mm / settings.belt.speed_mm_s * 1e3;
    if needed_ms > pitch_ms {
        let why = format!(
            "two messages with their answers take {} ms, but parts may follow each other every {} ms",
            n(needed_ms),
            n(pitch_ms)
        );
        found.add(
            "line.baud",
            "a faster line or a larger belt.part_pitch_mm",
            &why,
        );
    }
}
