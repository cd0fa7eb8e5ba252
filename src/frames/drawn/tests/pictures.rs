//! What frames show against what is true.

use super::super::look::Look;
use super::super::plane::Point;
use super::super::{Drawing, DrawnBelt, Kind, Scene, Truth, truths};
use super::{drawing, settings};
use crate::frames::{Frame, FrameSource};
use crate::settings::{Settings, Travel};
use crate::units::Micros;

/// Even light, no texture and no noise: levels are those of belt and part alone.
fn plain(scene: Scene) -> Look {
    Look {
        belt_clouds: 0.0,
        belt_weave: 0.0,
        belt_stripes: 0.0,
        grain: 0.0,
        rim: 0.0,
        bevel: 0.0,
        pores: 0,
        glares: 0,
        crumbs: 0,
        vignetting: 1.0,
        noise: 0.0,
        ..Look::of(scene)
    }
}

fn frames(mut belt: DrawnBelt) -> Vec<Frame> {
    let mut frame = Frame::default();
    let mut frames = Vec::new();
    while belt.next_into(&mut frame).unwrap() {
        frames.push(frame.clone());
    }
    frames
}

fn plain_frames(drawing: &Drawing, settings: &Settings) -> Vec<Frame> {
    frames(DrawnBelt::with_look(drawing, settings, plain(drawing.scene)).unwrap())
}

/// A point of the picture in the part's own coordinates, from the documented conventions alone.
fn own(truth: &Truth, settings: &Settings, belt_mm: f64, x_px: f64, y_px: f64) -> Point {
    let mm_per_px = settings.camera.mm_per_px;
    let centre_px = match settings.belt.travel {
        Travel::Right => (belt_mm - truth.along_mm) / mm_per_px,
        Travel::Left => {
            f64::from(settings.camera.width_px) - (belt_mm - truth.along_mm) / mm_per_px
        }
    };
    let (x_mm, y_mm) = (
        (x_px - centre_px) * mm_per_px,
        y_px * mm_per_px - truth.across_mm,
    );
    let (sin, cos) = truth.angle_deg.to_radians().sin_cos();
    let (x_mm, y_mm) = (cos * x_mm + sin * y_mm, cos * y_mm - sin * x_mm);
    Point::new(if truth.flipped { -x_mm } else { x_mm }, y_mm)
}

/// Where a row or column passes through `half`, as (x, y) of the picture.
fn crossings(frame: &Frame, half: f64) -> Vec<(f64, f64)> {
    let gray = frame.gray();
    let value = |x: usize, y: usize| f64::from(gray.row(y)[x]);
    let mut found = Vec::new();
    for y in 0..gray.height_px - 1 {
        for x in 0..gray.width_px - 1 {
            let (here, right, below) = (value(x, y), value(x + 1, y), value(x, y + 1));
            let middle = (x as f64 + 0.5, y as f64 + 0.5);
            if (here > half) != (right > half) {
                found.push((middle.0 + (half - here) / (right - here), middle.1));
            }
            if (here > half) != (below > half) {
                found.push((middle.0, middle.1 + (half - here) / (below - here)));
            }
        }
    }
    found
}

/// The level half way between belt and part lies on the true outline, to a few hundredths of a pixel: position,
/// angle, mirroring and scale are all as the truth says.
#[test]
fn the_half_level_lies_on_the_true_edge() {
    for (scene, travel) in [
        (Scene::OatStars, Travel::Right),
        (Scene::Gaskets, Travel::Right),
        (Scene::Gaskets, Travel::Left),
    ] {
        let mut settings = settings(scene, 640);
        settings.belt.travel = travel;
        let drawing = drawing(scene, 30, 21);
        let truths: Vec<_> = truths(&drawing, &settings).unwrap().collect();
        let outline = scene.nominal().outline;
        let (mut checked, mut flipped) = (0, 0);
        for frame in plain_frames(&drawing, &settings).iter().step_by(3) {
            let look = plain(scene);
            let half = 1.0 + 268.0 * f64::from(look.belt + look.part) / 2.0;
            for (x, y) in crossings(frame, half) {
                let signed_mm = |truth: &Truth| {
                    let at = own(truth, &settings, frame.belt_mm.unwrap(), x, y);
                    truth.scale * outline.signed_mm(at * (1.0 / truth.scale))
                };
                let nearest = truths
                    .iter()
                    .min_by(|a, b| signed_mm(a).abs().total_cmp(&signed_mm(b).abs()))
                    .unwrap();
                if matches!(nearest.kind, Kind::Good | Kind::Flipped | Kind::AtEdge) {
                    let off_px = signed_mm(nearest) / settings.camera.mm_per_px;
                    assert!(off_px.abs() < 0.06, "{off_px} at {x} {y} of {nearest:?}");
                    checked += 1;
                    flipped += usize::from(nearest.flipped);
                }
            }
        }
        assert!(checked > 5000, "{checked}");
        assert_eq!(flipped > 500, scene == Scene::Gaskets, "{flipped}");
    }
}

/// A belt that moves 10 px while the shutter is open smears an edge that stands across it over 10 px, evenly about
/// the true edge; an edge along the belt stays sharp.
#[test]
fn a_long_exposure_smears_along_the_belt_only() {
    let mut settings = settings(Scene::Gaskets, 320);
    settings.camera.exposure_ms = 12.5;
    let drawing = drawing(Scene::Gaskets, 6, 21);
    let look = plain(Scene::Gaskets);
    let good = truths(&drawing, &settings)
        .unwrap()
        .find(|truth| truth.kind == Kind::Good)
        .unwrap();
    let off_mm = |frame: &Frame| (frame.belt_mm.unwrap() - good.along_mm - 80.0).abs();
    let frame = plain_frames(&drawing, &settings)
        .into_iter()
        .min_by(|a, b| off_mm(a).total_cmp(&off_mm(b)))
        .unwrap();
    let x_px = (frame.belt_mm.unwrap() - good.along_mm) * 2.0;
    let y_px = good.across_mm * 2.0;
    // Out of the bore, whose middle lies within 4 mm of the centroid, into the ring.
    let row: Vec<u8> = frame.gray().row(y_px as usize)[x_px as usize..].to_vec();
    let column: Vec<u8> = (y_px as usize..240)
        .map(|y| frame.gray().row(y)[x_px as usize])
        .collect();
    let reaches = |values: &[u8], share: f32| {
        let level = 1.0 + 268.0 * f64::from(look.belt + (look.part - look.belt) * share);
        let at = values
            .iter()
            .position(|&value| f64::from(value) < level)
            .unwrap();
        let (a, b) = (f64::from(values[at - 1]), f64::from(values[at]));
        at as f64 - (b - level) / (b - a)
    };
    let width_px = |values: &[u8]| reaches(values, 0.75) - reaches(values, 0.25);
    assert!((4.5..7.0).contains(&width_px(&row)), "{}", width_px(&row));
    assert!(
        (0.5..3.0).contains(&width_px(&column)),
        "{}",
        width_px(&column)
    );
    let middle_px = (reaches(&row, 0.25) + reaches(&row, 0.75)) / 2.0;
    assert!((middle_px - reaches(&row, 0.5)).abs() < 0.3);
}

/// The light alone, then with the belt's texture over it.
#[test]
fn the_middle_is_three_times_as_bright_as_the_corners() {
    for scene in Scene::ALL {
        let light = Look {
            vignetting: Look::of(scene).vignetting,
            ..plain(scene)
        };
        for (look, least) in [(light, 3.0), (Look::of(scene), 2.7)] {
            let (drawing, settings) = (drawing(scene, 1, 3), settings(scene, 640));
            let mut belt = DrawnBelt::with_look(&drawing, &settings, look).unwrap();
            let mut empty = Frame::default();
            assert!(belt.next_into(&mut empty).unwrap());
            let mean = |left: usize, top: usize| {
                let rows = top..top + 24;
                let values = rows.flat_map(|y| &empty.gray().row(y)[left..left + 24]);
                values.map(|&value| f64::from(value)).sum::<f64>() / (24.0 * 24.0)
            };
            let middle = mean(308, 228);
            for (left, top) in [(0, 0), (616, 0), (0, 456), (616, 456)] {
                let ratio = middle / mean(left, top);
                assert!((least..5.0).contains(&ratio), "{ratio}");
            }
        }
    }
}

#[test]
fn noise_is_moderate_and_differs_from_frame_to_frame() {
    for scene in Scene::ALL {
        let look = Look {
            noise: Look::of(scene).noise,
            ..plain(scene)
        };
        let settings = settings(scene, 320);
        let frames = frames(DrawnBelt::with_look(&drawing(scene, 1, 3), &settings, look).unwrap());
        let empty = &frames[0].pixels;
        let mean = empty.iter().map(|&v| f64::from(v)).sum::<f64>() / empty.len() as f64;
        let spread = empty
            .iter()
            .map(|&v| (f64::from(v) - mean).powi(2))
            .sum::<f64>()
            / empty.len() as f64;
        assert!((0.9..2.2).contains(&spread.sqrt()), "{spread}");
        assert!(
            (mean - 1.0 - 268.0 * f64::from(look.belt)).abs() < 0.1,
            "{mean}"
        );
    }
    let settings = settings(Scene::OatStars, 160);
    let frames = frames(DrawnBelt::new(&drawing(Scene::OatStars, 2, 3), &settings).unwrap());
    assert_ne!(frames[0].pixels, frames[1].pixels);
}

/// Glare shows inside parts: a biscuit shines white, a gasket shines like the belt.
#[test]
fn glare_lies_inside_parts() {
    for scene in Scene::ALL {
        let settings = settings(scene, 640);
        let drawing = drawing(scene, 30, 21);
        let look = Look {
            glares: Look::of(scene).glares,
            ..plain(scene)
        };
        let truths: Vec<_> = truths(&drawing, &settings).unwrap().collect();
        let outline = scene.nominal().outline;
        let mut shining = 0;
        for frame in frames(DrawnBelt::with_look(&drawing, &settings, look).unwrap())
            .iter()
            .step_by(4)
        {
            for (at, &value) in frame.pixels.iter().enumerate() {
                if scene == Scene::OatStars && value < 230 {
                    continue;
                }
                let (x, y) = ((at % 640) as f64 + 0.5, (at / 640) as f64 + 0.5);
                let deepest_mm = |truths: &[Truth]| {
                    let each = truths.iter().map(|t| {
                        outline.signed_mm(own(t, &settings, frame.belt_mm.unwrap(), x, y))
                    });
                    each.fold(f64::INFINITY, f64::min)
                };
                if scene == Scene::OatStars {
                    assert!(deepest_mm(&truths) < -1.2);
                    shining += 1;
                } else if value > 120 && at % 7 == 0 && deepest_mm(&truths) < -1.2 {
                    shining += 1;
                }
            }
        }
        assert!(shining > 100, "{shining}");
    }
}

#[test]
fn frames_come_at_the_stated_rate_with_belt_readings() {
    let settings = settings(Scene::OatStars, 160);
    let frames = frames(DrawnBelt::new(&drawing(Scene::OatStars, 10, 3), &settings).unwrap());
    for (index, frame) in frames.iter().enumerate() {
        assert_eq!(
            frame.captured_us,
            Micros(1_000_000 + 125_000 * index as i64)
        );
        assert_eq!(frame.belt_mm, Some(50.0 * index as f64));
        assert_eq!((frame.width_px, frame.height_px), (160, 120));
    }
    let last_mm = truths(&drawing(Scene::OatStars, 10, 3), &settings)
        .unwrap()
        .map(|truth| truth.along_mm)
        .fold(0.0, f64::max);
    let seen_mm = frames.last().unwrap().belt_mm.unwrap();
    assert!((last_mm + 160.0 - 40.0..last_mm + 160.0 + 25.0).contains(&seen_mm));
}

#[test]
fn the_same_seed_gives_the_same_bytes() {
    for scene in Scene::ALL {
        let settings = settings(scene, 320);
        let all = |seed| frames(DrawnBelt::new(&drawing(scene, 12, seed), &settings).unwrap());
        assert_eq!(all(1), all(1));
        assert_ne!(all(1), all(2));
    }
}

/// A belt of a thousand parts is drawn with no more in memory than what is in view.
#[test]
fn a_long_belt_takes_no_more_memory_than_a_short_one() {
    let settings = settings(Scene::OatStars, 80);
    let drawing = drawing(Scene::OatStars, 1000, 5);
    let mut belt = DrawnBelt::new(&drawing, &settings).unwrap();
    let mut frame = Frame::default();
    let (mut most_parts, mut most_crumbs, mut seen, mut count) = (0, 0, 0, 0);
    while belt.next_into(&mut frame).unwrap() {
        most_parts = most_parts.max(belt.shown.len());
        most_crumbs = most_crumbs.max(belt.crumbs.len());
        seen = belt
            .shown
            .iter()
            .map(|(part, _)| part.truth.part + 1)
            .fold(seen, u64::max);
        count += 1;
    }
    assert!(
        most_parts <= 16 && most_crumbs <= 40,
        "{most_parts} {most_crumbs}"
    );
    assert!(belt.shown.capacity() <= 32 && belt.crumbs.capacity() <= 64);
    assert_eq!(frame.pixels.capacity(), 80 * 60);
    assert_eq!(seen, 1000);
    assert!((500..800).contains(&count), "{count}");
}
