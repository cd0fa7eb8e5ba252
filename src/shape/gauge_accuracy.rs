//! How near both figures come to those of the same flaw drawn four times as large, without any pose to be found.

use rand::{RngExt, SeedableRng};
use rand_pcg::Pcg64Mcg;

use super::drawn::{self, Flaw, Outline};
use super::{Common, Judge, Limits, Pose, gauge_masks};

const ENLARGED: f64 = 4.0;

/// Both figures in px, from the enlarged drawing.
fn truth(shape: Shape, radius: f64, flaws: &[Flaw]) -> [f64; 2] {
    let outline = shape(ENLARGED * radius);
    let large = |&flaw: &Flaw| match flaw {
        Flaw::Bite { x, y, radius } => Flaw::Bite {
            x: ENLARGED * x,
            y: ENLARGED * y,
            radius: ENLARGED * radius,
        },
        Flaw::Burr { x, y, radius } => Flaw::Burr {
            x: ENLARGED * x,
            y: ENLARGED * y,
            radius: ENLARGED * radius,
        },
        Flaw::Broken { angle, at } => Flaw::Broken {
            angle,
            at: ENLARGED * at,
        },
    };
    let half = (1.4 * ENLARGED * radius).ceil();
    let pose = Pose {
        x_px: half,
        y_px: half,
        ..Pose::default()
    };
    let size = (2 * half as usize + 1, 2 * half as usize + 1);
    let flaws: Vec<Flaw> = flaws.iter().map(large).collect();
    let (missing, excess) = gauge_masks(
        &outline.draw(pose, &[], size),
        &outline.draw(pose, &flaws, size),
    );
    [missing.px / ENLARGED, excess.px / ENLARGED]
}

/// A bite and a burr on opposite sides of the ring or star, away from the gasket's tab.
fn flaws(random: &mut Pcg64Mcg, radius: f64) -> Vec<Flaw> {
    let mut round = |from: f64, to: f64| {
        let angle: f64 = random.random_range(from..to);
        let at = radius * random.random_range(0.8..1.0);
        let size = radius * random.random_range(0.05..0.25);
        (at * angle.cos(), at * angle.sin(), size)
    };
    let (x, y, size) = round(1.2, 2.8);
    let bite = Flaw::Bite { x, y, radius: size };
    let (x, y, size) = round(3.6, 5.2);
    vec![bite, Flaw::Burr { x, y, radius: size }]
}

type Shape = fn(f64) -> Outline;

#[test]
fn figures_come_near_the_drawn_truth_at_any_angle() {
    let asked = std::env::var("POSES")
        .ok()
        .and_then(|text| text.parse().ok());
    let count: u64 = asked.unwrap_or(10);
    let shapes: [(&str, Shape, f64); 2] = [
        ("star", Outline::star, 76.0),
        ("gasket", Outline::gasket, 60.0),
    ];
    for (name, shape, radius) in shapes {
        let limits = Limits {
            missing_px: 8.0,
            excess_px: 8.0,
            reject_flipped: false,
            area_px: None,
            length_px: None,
            width_px: None,
            holes: None,
            boundary_px: None,
            branches: None,
            branch_above_px: 20.0,
        };
        let common = Common {
            flaw_below_px: 8.0,
            fit_at_least: 0.5,
        };
        let outline = shape(radius);
        let mut judge = Judge::new(vec![(drawn::silhouette(&outline, 0.25).0, limits)], common);
        let mut errors = [Vec::new(), Vec::new()];
        for seed in 0..count {
            let mut random = Pcg64Mcg::seed_from_u64(seed);
            let flaws = flaws(&mut random, radius);
            let pose = Pose {
                x_px: random.random_range(110.0..120.0),
                y_px: random.random_range(110.0..120.0),
                angle_deg: random.random_range(0.0..360.0),
                flipped: random.random_bool(0.5),
            };
            let (region, runs) = outline.draw(pose, &flaws, (230, 230)).to_region().unwrap();
            let judged = judge.judge(&region, &runs);
            let found = [judged.missing.px, judged.excess.px];
            for (errors, (found, truth)) in errors
                .iter_mut()
                .zip(found.iter().zip(truth(shape, radius, &flaws)))
            {
                errors.push(found - truth);
            }
        }
        for (figure, mut errors) in ["missing", "excess"].into_iter().zip(errors) {
            errors.sort_by(f64::total_cmp);
            let at = |share: f64| errors[((errors.len() - 1) as f64 * share).round() as usize];
            let spread = [0.0, 0.01, 0.5, 0.99, 1.0].map(at);
            println!(
                "{name} {figure}, {count} parts: error in px, min p1 p50 p99 max {spread:.2?}"
            );
            // 0.35 mm at 0.25 mm to a pixel.
            assert!(
                spread[1] >= -1.4 && spread[3] <= 1.4,
                "{name} {figure} {spread:.2?}"
            );
        }
    }
}
