//! Region, element, threshold and areas.

use crate::settings::fields::{RegionMm, Settings, Threshold};

use super::{Findings, down, n};

/// The smallest region of interest, as for the picture itself.
const SMALLEST_REGION_PX: usize = 16;

/// The smallest element that takes anything away.
const SMALLEST_ELEMENT_PX: usize = 3;

pub(super) fn check(settings: &Settings, found: &mut Findings) {
    if let Some(region) = &settings.picture.region_mm {
        region_inside_picture(settings, region, found);
        region_large_enough(settings, found);
    }
    element_small(settings, found);
    element_large(settings, found);
    threshold(&settings.picture.threshold, found);
    areas_of_a_pixel(settings, found);
    areas_of_the_region(settings, found);
    fill_smaller_than_speck(settings, found);
}

fn region_inside_picture(settings: &Settings, region: &RegionMm, found: &mut Findings) {
    let half_px_mm = settings.camera.mm_per_px / 2.0;
    let sides = [
        ("width", region.left, region.width, settings.camera.width_px),
        (
            "height",
            region.top,
            region.height,
            settings.camera.height_px,
        ),
    ];
    for (side, start_mm, length_mm, picture_px) in sides {
        let picture_mm = settings.scale().mm(f64::from(picture_px));
        if start_mm + length_mm > picture_mm + half_px_mm {
            let expected = format!("at most {} mm", n((picture_mm - start_mm).max(0.0)));
            let why = format!(
                "the region starts at {} mm and would end at {} mm, but the picture is only {} mm ({picture_px} px)",
                n(start_mm),
                n(start_mm + length_mm),
                n(picture_mm),
            );
            found.add(format!("picture.region_mm.{side}"), &expected, &why);
        }
    }
}

fn region_large_enough(settings: &Settings, found: &mut Findings) {
    let region = settings.region_px();
    for (side, px) in [("width", region.width_px), ("height", region.height_px)] {
        if px < SMALLEST_REGION_PX {
            let least_mm = settings.scale().mm(SMALLEST_REGION_PX as f64);
            let expected = format!("at least {} mm inside the picture", n(least_mm));
            let why = format!("the region has {px} px there, and needs {SMALLEST_REGION_PX} px");
            found.add(format!("picture.region_mm.{side}"), &expected, &why);
        }
    }
}

fn element_small(settings: &Settings, found: &mut Findings) {
    let px = settings.element_px();
    if px < SMALLEST_ELEMENT_PX {
        let expected = format!(
            "more than the part's widest inside, {} mm at the very least",
            n(settings.scale().mm(SMALLEST_ELEMENT_PX as f64))
        );
        let why = format!("an element of {px} px leaves nothing of the picture after the top-hat");
        found.add("picture.element_mm", &expected, &why);
    }
}

fn element_large(settings: &Settings, found: &mut Findings) {
    let (px, region) = (settings.element_px(), settings.region_px());
    if px > region.width_px && px > region.height_px {
        let longer_px = region.width_px.max(region.height_px);
        let odd_px = longer_px - usize::from(longer_px % 2 == 0);
        let expected = format!("at most {} mm", down(settings.scale().mm(odd_px as f64)));
        let why = format!(
            "the element ({px} px) is larger than both sides of the region of interest ({} x {} px), so that the \
             top-hat could no longer follow uneven light",
            region.width_px, region.height_px
        );
        found.add("picture.element_mm", &expected, &why);
    }
}

fn threshold(threshold: &Threshold, found: &mut Findings) {
    let (key, highest) = match *threshold {
        Threshold::Fixed { level } => ("level", level),
        Threshold::Otsu { floor } => ("floor", floor),
        Threshold::Hysteresis { low, high } => {
            if low >= high {
                let expected = format!("less than high = {high}");
                let why = "the lower level must lie below the upper one";
                found.add("picture.threshold.low", &expected, why);
            }
            ("high", high)
        }
    };
    if highest == u8::MAX {
        let why = "foreground is what is above the level, and no gray value is above 255";
        found.add(format!("picture.threshold.{key}"), "at most 254", why);
    }
}

/// The areas of the settings, each with its key.
fn areas(settings: &Settings) -> [(&'static str, f64); 3] {
    [
        ("picture.fill_below_mm2", settings.picture.fill_below_mm2),
        ("picture.speck_below_mm2", settings.picture.speck_below_mm2),
        ("judge.flaw_below_mm2", settings.judge.flaw_below_mm2),
    ]
}

fn areas_of_a_pixel(settings: &Settings, found: &mut Findings) {
    let px_mm2 = settings.scale().mm2(1.0);
    for (key, mm2) in areas(settings) {
        if mm2 > 0.0 && mm2 < px_mm2 * (1.0 - 1e-9) {
            let expected = format!("0 to switch it off, or at least {} mm2", n(px_mm2));
            found.add(
                key,
                &expected,
                "an area smaller than one pixel does nothing",
            );
        }
    }
}

fn areas_of_the_region(settings: &Settings, found: &mut Findings) {
    let region = settings.region_px();
    let region_mm2 = settings
        .scale()
        .mm2((region.width_px * region.height_px) as f64);
    for (key, mm2) in areas(settings) {
        if mm2 >= region_mm2 {
            let why = "that is as much as the whole region of interest";
            found.add(key, &format!("less than {} mm2", n(region_mm2)), why);
        }
    }
}

fn fill_smaller_than_speck(settings: &Settings, found: &mut Findings) {
    let (fill_mm2, speck_mm2) = (
        settings.picture.fill_below_mm2,
        settings.picture.speck_below_mm2,
    );
    if fill_mm2 > 0.0 && fill_mm2 >= speck_mm2 {
        let expected = format!("less than speck_below_mm2 = {}", n(speck_mm2));
        let why =
            "a hair curled round a bare spot of belt would be filled and then judged as a part";
        found.add("picture.fill_below_mm2", &expected, why);
    }
}
