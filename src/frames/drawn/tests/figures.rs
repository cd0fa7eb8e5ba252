//! Truth against brute force on a raster: outlines by counting crossings, distances by imageproc's exact transform
//! (Felzenszwalb & Huttenlocher 2012), figures from their definition.

use std::collections::HashMap;

use super::super::belt::{Part, Parts};
use super::super::job::{CLEAR_MM, Job};
use super::super::{Kind, Scene};
use super::{Raster, drawing, settings};

fn parts(scene: Scene, count: u64, seed: u64) -> Vec<Part> {
    let job = Job::new(&drawing(scene, count, seed), &settings(scene, 640)).unwrap();
    Parts::new(job).collect()
}

#[test]
fn figures_match_brute_force_on_a_raster() {
    const MM_PER_PX: f64 = 0.05;
    for scene in Scene::ALL {
        let parts = parts(scene, 30, 77);
        let outline = &parts[0].made.body.nominal.outline;
        let reach_mm = parts[0].made.body.nominal.radius_mm + 6.5;
        let chords: Vec<_> = outline.chords(0.02).collect();
        let nominal = Raster::of(&chords, reach_mm, MM_PER_PX);
        let (inside_mm, outside_mm) = (nominal.distances_mm(true), nominal.distances_mm(false));
        for part in &parts {
            let drawn = Raster::of_body(&part.made.body, reach_mm, MM_PER_PX);
            let mut want_mm = [0.0_f64; 2];
            for (at, (&is, &was)) in drawn.set.iter().zip(&nominal.set).enumerate() {
                if was && !is {
                    want_mm[0] = want_mm[0].max(inside_mm[at]);
                } else if is && !was {
                    want_mm[1] = want_mm[1].max(outside_mm[at]);
                }
            }
            let got_mm = [part.truth.missing_mm, part.truth.excess_mm];
            for (got_mm, want_mm) in got_mm.into_iter().zip(want_mm) {
                // Half a pixel's diagonal, and as much again for the search.
                assert!(
                    (got_mm - want_mm).abs() < 0.06,
                    "{:?}: {got_mm} {want_mm}",
                    part.truth
                );
            }
        }
    }
}

#[test]
fn every_part_is_in_one_piece() {
    for (scene, seed) in [(Scene::OatStars, 5), (Scene::Gaskets, 6)] {
        for part in parts(scene, 60, seed) {
            let reach_mm = part.made.body.nominal.radius_mm + 6.5;
            let raster = Raster::of_body(&part.made.body, reach_mm, 0.25);
            assert_eq!(raster.pieces(), 1, "{:?}", part.truth);
        }
    }
}

#[test]
fn flaws_are_as_far_from_their_limits_as_they_should_be() {
    const CLOSE_MM: f64 = 0.02;
    for scene in Scene::ALL {
        let settings = settings(scene, 640);
        let (missing_mm, excess_mm) = (settings.shapes[0].missing_mm, settings.shapes[0].excess_mm);
        for seed in 0..4 {
            for part in parts(scene, 60, seed) {
                let truth = &part.truth;
                let (missing, excess) =
                    (truth.missing_mm - missing_mm, truth.excess_mm - excess_mm);
                let near = |beyond_mm: f64, want_mm: f64| (beyond_mm - want_mm).abs() < CLOSE_MM;
                let small =
                    |mm: f64, limit_mm: f64| (0.1..limit_mm - CLEAR_MM + CLOSE_MM).contains(&mm);
                let good = match truth.kind {
                    Kind::NearBiteWithin => near(missing, -0.3),
                    Kind::NearBiteOver => near(missing, 0.3),
                    Kind::NearBurrWithin => near(excess, -0.3),
                    Kind::NearBurrOver => near(excess, 0.3),
                    Kind::Bite | Kind::BrokenTip => missing > CLEAR_MM - CLOSE_MM,
                    Kind::Burr => excess > CLEAR_MM - CLOSE_MM,
                    Kind::SmallBite => small(truth.missing_mm, missing_mm),
                    Kind::SmallBurr => small(truth.excess_mm, excess_mm),
                    _ => truth.missing_mm < 0.08 && truth.excess_mm < 0.08,
                };
                assert!(good, "{truth:?}");
                assert!((truth.scale - 1.0).abs() <= 0.003);
            }
        }
    }
}

#[test]
fn verdicts_follow_from_figures_and_limits() {
    for scene in Scene::ALL {
        let settings = settings(scene, 640);
        let shape = &settings.shapes[0];
        for part in parts(scene, 60, 8) {
            let truth = &part.truth;
            let against = truth.against;
            assert_eq!(against.missing, truth.missing_mm > shape.missing_mm);
            assert_eq!(against.excess, truth.excess_mm > shape.excess_mm);
            assert_eq!(against.touching, truth.kind == Kind::Touching);
            assert_eq!(against.partial, truth.kind == Kind::AtEdge);
            assert_eq!(against.flipped, truth.flipped);
            assert_eq!(truth.flipped, truth.kind == Kind::Flipped);
            let kept = matches!(
                truth.kind,
                Kind::Good
                    | Kind::SmallBite
                    | Kind::SmallBurr
                    | Kind::NearBiteWithin
                    | Kind::NearBurrWithin
            );
            assert_eq!(against.any(), !kept, "{truth:?}");
        }
    }
}

#[test]
fn policies_decide_on_flipped_and_partial_parts() {
    let mut settings = settings(Scene::Gaskets, 640);
    settings.shapes[0].face_down = crate::settings::FaceDown::Keep;
    settings.judge.partial = crate::settings::Policy::Keep;
    let job = Job::new(&drawing(Scene::Gaskets, 30, 1), &settings).unwrap();
    let mut seen = 0;
    for part in Parts::new(job) {
        if matches!(part.truth.kind, Kind::Flipped | Kind::AtEdge) {
            assert!(!part.truth.against.any());
            seen += 1;
        }
    }
    assert_eq!(seen, 3);
}

#[test]
fn thirty_parts_hold_every_kind_of_the_scene() {
    for (scene, special) in [
        (Scene::OatStars, Kind::BrokenTip),
        (Scene::Gaskets, Kind::Flipped),
    ] {
        for seed in 0..5 {
            let mut counts = HashMap::new();
            for part in parts(scene, 30, seed) {
                *counts.entry(part.truth.kind.name()).or_insert(0) += 1;
            }
            assert_eq!(counts.values().sum::<i32>(), 30);
            for kind in [
                Kind::SmallBite,
                Kind::SmallBurr,
                Kind::NearBiteWithin,
                Kind::NearBiteOver,
                Kind::NearBurrWithin,
                Kind::NearBurrOver,
                Kind::Bite,
                Kind::Burr,
                Kind::Touching,
                Kind::AtEdge,
                special,
            ] {
                assert!(counts.contains_key(kind.name()), "{seed} {}", kind.name());
            }
            assert!(counts[Kind::Good.name()] >= 12);
        }
    }
}
