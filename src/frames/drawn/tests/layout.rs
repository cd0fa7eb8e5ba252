//! Where parts lie.

use super::super::belt::{Part, Parts};
use super::super::job::{APART_MM, Job};
use super::super::plane::Point;
use super::super::{Drawing, DrawnBelt, DrawnError, Kind, Scene, truths};
use super::{drawing, scaled_chords, settings};
use crate::settings::{RegionMm, Settings, Tone, Travel};

fn parts(drawing: &Drawing, settings: &Settings) -> Vec<Part> {
    Parts::new(Job::new(drawing, settings).unwrap()).collect()
}

/// Points all around the part before cuts and burrs, on the belt.
fn rim(part: &Part) -> Vec<Point> {
    let chords = scaled_chords(&part.made.body);
    chords
        .iter()
        .map(|&(from, _)| part.centre + part.made.seen(from))
        .collect()
}

fn apart_mm(a: &Part, b: &Part) -> f64 {
    rim(a)
        .into_iter()
        .map(|at| b.signed_mm(at))
        .fold(f64::INFINITY, f64::min)
}

#[test]
fn only_touching_parts_touch() {
    for (scene, travel) in [
        (Scene::OatStars, Travel::Right),
        (Scene::Gaskets, Travel::Left),
    ] {
        let mut settings = settings(scene, 640);
        settings.belt.travel = travel;
        let parts = parts(&drawing(scene, 60, 4), &settings);
        let mut pairs = 0;
        for (index, a) in parts.iter().enumerate() {
            for b in &parts[index + 1..] {
                if (a.centre - b.centre).length() > 60.0 {
                    continue;
                }
                let apart_mm = apart_mm(a, b);
                if a.truth.thing == b.truth.thing {
                    assert_eq!(
                        (a.truth.kind, b.truth.kind),
                        (Kind::Touching, Kind::Touching)
                    );
                    assert!((-4.0..-0.2).contains(&apart_mm), "{apart_mm}");
                    pairs += 1;
                } else {
                    assert!(
                        apart_mm > APART_MM,
                        "{apart_mm} {:?} {:?}",
                        a.truth,
                        b.truth
                    );
                }
            }
        }
        assert_eq!(pairs, 2);
    }
}

#[test]
fn parts_are_whole_across_the_view_unless_meant_otherwise() {
    for scene in Scene::ALL {
        for part in parts(&drawing(scene, 60, 9), &settings(scene, 640)) {
            let top_mm = part.truth.across_mm - part.made.reach.top_mm;
            let bottom_mm = part.truth.across_mm + part.made.reach.bottom_mm;
            let inside_mm = top_mm.min(120.0 - bottom_mm);
            if part.truth.kind == Kind::AtEdge {
                assert!((-8.0..=-3.0).contains(&inside_mm), "{inside_mm}");
            } else {
                assert!(inside_mm >= APART_MM - 0.01, "{inside_mm}");
            }
        }
    }
}

#[test]
fn a_region_of_interest_is_the_view() {
    let mut settings = settings(Scene::OatStars, 640);
    settings.picture.region_mm = Some(RegionMm {
        left: 0.0,
        top: 30.0,
        width: 160.0,
        height: 60.0,
    });
    for part in parts(&drawing(Scene::OatStars, 30, 2), &settings) {
        let top_mm = part.truth.across_mm - part.made.reach.top_mm;
        let bottom_mm = part.truth.across_mm + part.made.reach.bottom_mm;
        let whole = top_mm > 30.0 && bottom_mm < 90.0;
        assert_eq!(whole, part.truth.kind != Kind::AtEdge);
    }
}

/// From one leading edge to the next in the same row, and every part whole in two or three frames of 50 mm.
#[test]
fn parts_keep_their_distance_and_are_seen_whole_twice() {
    for (scene, travel) in [
        (Scene::OatStars, Travel::Left),
        (Scene::Gaskets, Travel::Right),
    ] {
        let mut settings = settings(scene, 640);
        settings.belt.travel = travel;
        let parts = parts(&drawing(scene, 60, 3), &settings);
        let mut last_mm = [f64::NEG_INFINITY; 2];
        for part in &parts {
            let reach = &part.made.reach;
            let (front_mm, back_mm) = match travel {
                Travel::Right => (reach.right_mm, reach.left_mm),
                Travel::Left => (reach.left_mm, reach.right_mm),
            };
            let begins_mm = part.truth.along_mm - front_mm;
            let row = usize::from(part.truth.across_mm > 60.0);
            if part.truth.kind != Kind::Touching {
                assert!(begins_mm - last_mm[row] >= settings.belt.part_pitch_mm - 0.01);
                let whole = ((160.0 - front_mm - back_mm) / 50.0).floor();
                assert!((2.0..=3.0).contains(&whole), "{whole}");
            }
            last_mm[row] = begins_mm;
            assert!((part.ends_mm - part.truth.along_mm - back_mm).abs() < 1e-9);
        }
        assert!(
            parts
                .windows(2)
                .all(|two| two[0].begins_mm <= two[1].begins_mm)
        );
    }
}

#[test]
fn the_truth_is_the_same_every_time_and_another_for_another_seed() {
    for scene in Scene::ALL {
        let settings = settings(scene, 640);
        let all = |seed| -> Vec<_> {
            truths(&drawing(scene, 40, seed), &settings)
                .unwrap()
                .collect()
        };
        assert_eq!(all(1), all(1));
        assert_ne!(all(1), all(2));
        // A longer belt begins like a shorter one.
        let longer: Vec<_> = truths(&drawing(scene, 50, 1), &settings).unwrap().collect();
        assert_eq!(all(1)[..38], longer[..38]);
    }
}

#[test]
fn what_cannot_be_drawn_is_said() {
    let good = settings(Scene::OatStars, 640);
    let refused = |change: &dyn Fn(&mut Settings, &mut Drawing)| {
        let (mut settings, mut drawing) = (good.clone(), drawing(Scene::OatStars, 5, 1));
        change(&mut settings, &mut drawing);
        let error = DrawnBelt::new(&drawing, &settings).unwrap_err();
        assert_eq!(truths(&drawing, &settings).err(), Some(error.clone()));
        error
    };
    assert_eq!(
        refused(&|_, drawing| drawing.parts = 0),
        DrawnError::NoParts
    );
    assert_eq!(
        refused(&|settings, _| settings.shapes.clear()),
        DrawnError::Missing("shape")
    );
    assert_eq!(
        refused(&|settings, _| settings.picture.parts = Tone::Dark),
        DrawnError::Tone {
            scene: Scene::OatStars
        },
    );
    for (what, width_px, height_px) in [("along", 150, 480), ("across", 640, 150)] {
        let error = refused(&|settings, _| {
            settings.camera.width_px = width_px;
            settings.camera.height_px = height_px;
        });
        assert!(
            matches!(error, DrawnError::TooNarrow { what: way, .. } if way == what),
            "{error}"
        );
    }
    let deep = refused(&|settings, _| settings.shapes[0].missing_mm = 9.0);
    assert!(
        deep.to_string()
            .starts_with("shape.missing_mm is 9 mm, and oat-stars can only"),
        "{deep}"
    );
    let long = refused(&|settings, _| settings.shapes[0].excess_mm = 9.0);
    assert!(
        matches!(
            long,
            DrawnError::Limit {
                key: "excess_mm",
                ..
            }
        ),
        "{long}"
    );
    assert!(
        "oat_stars"
            .parse::<Scene>()
            .unwrap_err()
            .to_string()
            .contains("there are oat-stars and gaskets")
    );
    assert_eq!("gaskets".parse(), Ok(Scene::Gaskets));
}
