//! Outlines against their own chords.

use super::super::dice::{Dice, Stream};
use super::super::nominal::{Nominal, gasket, star};
use super::super::plane::Point;
use super::inside_polygon;
use crate::frames::drawn::{Scene, mask};

fn chords(nominal: &Nominal) -> Vec<(Point, Point)> {
    nominal.outline.chords(0.02).collect()
}

fn to_chord_mm((a, b): (Point, Point), at: Point) -> f64 {
    let whole = b - a;
    let share = ((at - a).dot(whole) / whole.dot(whole)).clamp(0.0, 1.0);
    (at - (a + whole * share)).length()
}

#[test]
fn outlines_are_closed_and_smooth() {
    for nominal in [star(), gasket()] {
        let chords = chords(&nominal);
        for (index, &(_, end)) in chords.iter().enumerate() {
            // The next chord begins where this one ends; the bore is a curve of its own.
            let next = chords[(index + 1) % chords.len()].0;
            let closes = chords
                .iter()
                .any(|&(start, _)| (start - end).length() < 1e-9);
            assert!((next - end).length() < 1e-9 || closes);
        }
        for share in 0..2000 {
            let rim = |step: f64| nominal.outline.rim((f64::from(share) + step) / 2000.0);
            let turn = rim(0.0).outward.dot(rim(0.01).outward);
            // Either a smooth step or the jump from the outer curve to the bore.
            assert!(
                turn > 0.999 || (rim(0.0).at - rim(0.01).at).length() > 1.0,
                "{share}"
            );
        }
    }
}

#[test]
fn signed_distances_match_the_chords() {
    for nominal in [star(), gasket()] {
        let chords = chords(&nominal);
        let mut dice = Dice::new(11, Stream::Belt);
        for _ in 0..400 {
            let at = Point::new(dice.between(-26.0, 26.0), dice.between(-26.0, 26.0));
            let want_mm = chords
                .iter()
                .map(|&chord| to_chord_mm(chord, at))
                .fold(1e9, f64::min);
            let got_mm = nominal.outline.signed_mm(at);
            assert!(
                (got_mm.abs() - want_mm).abs() < 1e-3,
                "{at:?}: {got_mm}, chords {want_mm}"
            );
            assert_eq!(got_mm < 0.0, inside_polygon(&chords, at), "{at:?}");
        }
    }
}

#[test]
fn the_star_is_38_mm_from_tip_to_tip() {
    let star = star();
    let points: Vec<_> = star.outline.chords(0.2).map(|(from, _)| from).collect();
    let widest_mm = points
        .iter()
        .flat_map(|a| points.iter().map(|b| (*a - *b).length()))
        .fold(0.0, f64::max);
    // Between the tips' circles, 17.5 mm out and 144 degrees apart, plus both radii.
    let want_mm = 2.0 * 17.5 * 72_f64.to_radians().sin() + 5.0;
    assert!(
        (widest_mm - want_mm).abs() < 0.01 && (widest_mm - 38.0).abs() < 0.5,
        "{widest_mm}"
    );
    assert!((star.radius_mm - 20.0).abs() < 1e-3);
    assert!(star.outline.centroid(0.01).length() < 1e-6);
    for &tip in &star.tips {
        assert!((star.outline.rim(tip).at.length() - 20.0).abs() < 1e-9);
    }
}

#[test]
fn the_gasket_has_its_centroid_at_the_origin() {
    let gasket = gasket();
    assert!(gasket.outline.centroid(0.01).length() < 1e-6);
    // The widest wall, 17.5 + 2.2 - 8 mm, holds a disc of half of that; the tab's root a slightly larger one.
    assert!(
        (5.85..6.5).contains(&gasket.deepest_mm),
        "{}",
        gasket.deepest_mm
    );
}

/// However a mirrored gasket is turned and moved, it differs by more than any limit in use.
#[test]
fn a_gasket_is_told_from_its_mirror_image() {
    let outline = gasket().outline;
    let grid: Vec<_> = (-33..=33)
        .flat_map(|x| (-33..=33).map(move |y| Point::new(f64::from(x), f64::from(y)) * 0.7))
        .map(|at| (at, outline.signed_mm(at)))
        .collect();
    let mut least_mm = f64::INFINITY;
    for angle_deg in (0..360).step_by(6) {
        let turn = Point::towards(f64::from(angle_deg).to_radians());
        for (dx, dy) in (-1..=1).flat_map(|dx| (-1..=1).map(move |dy| (dx, dy))) {
            let shift = Point::new(f64::from(dx), f64::from(dy));
            let mut worst_mm = 0.0_f64;
            for &(at, signed_mm) in &grid {
                let own = (at - shift).turned_back(turn);
                let other_mm = outline.signed_mm(Point::new(-own.x_mm, own.y_mm));
                if (signed_mm < 0.0) != (other_mm < 0.0) {
                    worst_mm = worst_mm.max(signed_mm.abs());
                }
            }
            least_mm = least_mm.min(worst_mm);
        }
    }
    assert!(least_mm > 2.0, "{least_mm}");
}

#[test]
fn a_mask_covers_what_the_shape_covers() {
    for (scene, nominal) in [(Scene::OatStars, star()), (Scene::Gaskets, gasket())] {
        let mask = mask(scene, 0.25);
        assert_eq!(mask.pixels.len(), (mask.width_px * mask.height_px) as usize);
        let area_mm2 = chords(&nominal)
            .iter()
            .map(|(a, b)| a.cross(*b) / 2.0)
            .sum::<f64>();
        let sum = |weight: &dyn Fn(f64, f64) -> f64| {
            let each = mask.pixels.iter().enumerate().map(|(at, &value)| {
                let (x, y) = (at as u32 % mask.width_px, at as u32 / mask.width_px);
                f64::from(value) / 255.0 * weight(f64::from(x) + 0.5, f64::from(y) + 0.5)
            });
            each.sum::<f64>()
        };
        let area_px = sum(&|_, _| 1.0);
        assert!((area_px * 0.0625 / area_mm2 - 1.0).abs() < 1e-3);
        let middle_px = f64::from(mask.width_px) / 2.0;
        assert!((sum(&|x, _| x) / area_px - middle_px).abs() < 0.01);
        assert!((sum(&|_, y| y) / area_px - middle_px).abs() < 0.01);
        let border = mask.pixels.iter().enumerate().filter(|(at, _)| {
            let (x, y) = (*at as u32 % mask.width_px, *at as u32 / mask.width_px);
            x.min(y)
                .min(mask.width_px - 1 - x)
                .min(mask.height_px - 1 - y)
                < 2
        });
        assert!(border.into_iter().all(|(_, &value)| value == 0));
    }
}
