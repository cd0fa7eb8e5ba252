//! The limits of each shape.

use std::f64::consts::PI;

use crate::settings::fields::{Settings, Shape};

use super::{Findings, n};

pub(super) fn check(settings: &Settings, found: &mut Findings) {
    for (index, shape) in settings.shapes.iter().enumerate() {
        let key = |name: &str| format!("shape[{index}].{name}");
        narrower_than_a_pixel(settings, shape, &key, found);
        pairs(shape, &key, found);
        width_within_length(shape, &key, found);
        branches(shape, &key, found);
        dropped_as_crumb(settings, shape, &key, found);
        flaw_hides_limit(settings, shape, &key, found);
    }
}

fn narrower_than_a_pixel(
    settings: &Settings,
    shape: &Shape,
    key: &dyn Fn(&str) -> String,
    found: &mut Findings,
) {
    let px_mm = settings.camera.mm_per_px;
    let lengths = [
        ("missing_mm", Some(shape.missing_mm)),
        ("excess_mm", Some(shape.excess_mm)),
        ("branch_above_mm", shape.branch_above_mm),
    ];
    for (name, length_mm) in lengths {
        if length_mm.is_some_and(|mm| mm < px_mm) {
            let expected = format!("at least {} mm", n(px_mm));
            let why = "that is one pixel (camera.mm_per_px), and nothing narrower can be measured";
            found.add(key(name), &expected, why);
        }
    }
}

fn pairs(shape: &Shape, key: &dyn Fn(&str) -> String, found: &mut Findings) {
    let count = |pair: Option<[u32; 2]>| pair.map(|ends| ends.map(f64::from));
    let pairs = [
        ("area_mm2", shape.area_mm2),
        ("length_mm", shape.length_mm),
        ("width_mm", shape.width_mm),
        ("holes", count(shape.holes)),
        ("boundary_mm", shape.boundary_mm),
        ("branches", count(shape.branches)),
    ];
    for (name, pair) in pairs {
        if let Some([low, high]) = pair
            && low > high
        {
            let expected = format!("[low, high], that is [{}, {}]", n(high), n(low));
            found.add(key(name), &expected, "no part could lie within");
        }
    }
}

fn width_within_length(shape: &Shape, key: &dyn Fn(&str) -> String, found: &mut Findings) {
    if let (Some([width_mm, _]), Some([_, length_mm])) = (shape.width_mm, shape.length_mm)
        && width_mm > length_mm
    {
        let expected = format!("a low end of at most {} mm", n(length_mm));
        let why = format!(
            "a part at least {} mm wide is never at most {} mm long (length_mm)",
            n(width_mm),
            n(length_mm)
        );
        found.add(key("width_mm"), &expected, &why);
    }
}

fn branches(shape: &Shape, key: &dyn Fn(&str) -> String, found: &mut Findings) {
    if shape.branches.is_some() && shape.branch_above_mm.is_none() {
        let why = "without it every step of a pixel along the edge counts as a branch";
        found.add(key("branches"), "branch_above_mm beside it", why);
    }
}

fn dropped_as_crumb(
    settings: &Settings,
    shape: &Shape,
    key: &dyn Fn(&str) -> String,
    found: &mut Findings,
) {
    let speck_mm2 = settings.picture.speck_below_mm2;
    if let Some([low_mm2, _]) = shape.area_mm2
        && low_mm2 < speck_mm2
    {
        let expected = format!(
            "a low end of at least picture.speck_below_mm2 = {}",
            n(speck_mm2)
        );
        let why = format!(
            "a good part of {} mm2 would be dropped as a crumb and never judged",
            n(low_mm2)
        );
        found.add(key("area_mm2"), &expected, &why);
    }
}

/// A bite in the shape of a half disc, as deep as the limit, must not be small enough to be ignored.
fn flaw_hides_limit(
    settings: &Settings,
    shape: &Shape,
    key: &dyn Fn(&str) -> String,
    found: &mut Findings,
) {
    let flaw_mm2 = settings.judge.flaw_below_mm2;
    for (name, depth_mm) in [
        ("missing_mm", shape.missing_mm),
        ("excess_mm", shape.excess_mm),
    ] {
        let bite_mm2 = PI / 2.0 * depth_mm * depth_mm;
        if depth_mm >= settings.camera.mm_per_px && bite_mm2 <= flaw_mm2 {
            let least_mm = (2.0 * flaw_mm2 / PI).sqrt();
            let expected = format!(
                "more than {} mm, or a smaller judge.flaw_below_mm2",
                n(least_mm)
            );
            let why = format!(
                "a round flaw of {} mm has {} mm2 and would be ignored, because judge.flaw_below_mm2 = {}",
                n(depth_mm),
                n(bite_mm2),
                n(flaw_mm2)
            );
            found.add(key(name), &expected, &why);
        }
    }
}
