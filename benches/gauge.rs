//! How long one part takes: pose, gauge and verdict. Parts are about 150 px across, as in the demo recordings.

use std::f64::consts::TAU;
use std::hint::black_box;

use beltwright::shape::{Bitmap, Common, Judge, Limits, Model, Silhouette, gauge_masks};
use beltwright::stage::{Region, Run};
use criterion::{Criterion, criterion_group, criterion_main};

/// Whether a place is in the shape, measured from its middle in px.
type Inside = fn(f64, f64) -> bool;

/// A five-pointed star of 76 px radius: within the radius that its edge has at this angle.
fn star(x: f64, y: f64) -> bool {
    let sector = TAU / 10.0;
    let angle = (y.atan2(x).rem_euclid(2.0 * sector) - sector).abs();
    // The edge runs from the outer corner (at the sector's end) to the inner one (at its middle).
    let (outer, inner) = (76.0, 38.0);
    let (a, b) = ((outer * sector.cos(), outer * sector.sin()), (inner, 0.0));
    let (sin, cos) = angle.sin_cos();
    let (dx, dy) = (a.0 - b.0, a.1 - b.1);
    x.hypot(y) * (cos * dy - sin * dx) <= b.0 * dy - b.1 * dx
}

/// A ring with a tab beside its middle line.
fn gasket(x: f64, y: f64) -> bool {
    let radius = x.hypot(y);
    let tab = x > 30.0 && x < 75.0 && y > 3.0 && y < 24.0;
    radius > 33.0 && (radius < 60.0 || tab)
}

fn taught(inside: Inside) -> Silhouette {
    let side = 161;
    let share = |i: usize| {
        let (x, y) = ((i % side) as f64 - 80.0, (i / side) as f64 - 80.0);
        let offset = |k: i32| (f64::from(k) + 0.5) / 8.0 - 0.5;
        let covered = (0..64).filter(|k| inside(x + offset(k % 8), y + offset(k / 8)));
        (covered.count() as f64 / 64.0 * 255.0).round() as u8
    };
    Silhouette {
        width_px: side,
        height_px: side,
        mm_per_px: 0.25,
        share: (0..side * side).map(share).collect(),
    }
}

/// Parts at many angles, `broken` ones without what lies farther than 45 px to the left.
fn parts(inside: Inside, broken: bool) -> Vec<(Region, Vec<Run>)> {
    let part = |i: u32| {
        let (sin, cos) = (f64::from(i) * 0.377).sin_cos();
        let middle = (100.0 + f64::from(i) * 0.37, 100.0 + f64::from(i) * 0.73);
        let mut picture = Bitmap::new(230, 240);
        for (x, y) in (0..230 * 240).map(|i| (i % 230, i / 230)) {
            let (dx, dy) = (x as f64 - middle.0, y as f64 - middle.1);
            let (u, v) = (cos * dx + sin * dy, cos * dy - sin * dx);
            if inside(u, v) && !(broken && u < -45.0) {
                picture.insert(x, y);
            }
        }
        picture.to_region()
    };
    (0..24).filter_map(part).collect()
}

fn limits() -> Limits {
    Limits {
        missing_px: 8.0,
        excess_px: 6.0,
        reject_flipped: true,
        area_px: None,
        length_px: None,
        width_px: None,
        holes: None,
        boundary_px: None,
        branches: None,
        branch_above_px: 20.0,
    }
}

fn with_all_limits() -> Limits {
    Limits {
        area_px: Some([0.0, 1e9]),
        length_px: Some([0.0, 1e9]),
        width_px: Some([0.0, 1e9]),
        holes: Some([0, 9]),
        boundary_px: Some([0.0, 1e9]),
        branches: Some([0, 99]),
        ..limits()
    }
}

fn judging(c: &mut Criterion) {
    let common = Common {
        flaw_below_px: 8.0,
        fit_at_least: 0.7,
    };
    let mut group = c.benchmark_group("judge_one_part");
    let cases: [(&str, Inside, bool, Limits); 6] = [
        ("star_good", star, false, limits()),
        ("star_broken", star, true, limits()),
        ("gasket_good", gasket, false, limits()),
        ("gasket_broken", gasket, true, limits()),
        ("star_all_limits", star, false, with_all_limits()),
        ("gasket_all_limits", gasket, false, with_all_limits()),
    ];
    for (name, inside, broken, limits) in cases {
        let mut judge = Judge::new(vec![(taught(inside), limits)], common);
        let parts = parts(inside, broken);
        let mut next = parts.iter().cycle();
        group.bench_function(name, |b| {
            b.iter(|| {
                next.next()
                    .map(|(region, runs)| black_box(judge.judge(region, runs)))
            });
        });
    }
    group.finish();
}

fn gauging(c: &mut Criterion) {
    let masks = |inside: Inside| taught(inside).majority();
    let t = masks(gasket);
    let mut a = t.clone();
    (60..110).for_each(|y| (15..45).for_each(|x| a.remove(x, y)));
    c.bench_function("gauge_masks_large_bite", |b| {
        b.iter(|| black_box(gauge_masks(&t, &a)))
    });
    c.bench_function("model_of_a_silhouette", |b| {
        b.iter(|| black_box(Model::new(taught(gasket))))
    });
}

criterion_group!(benches, judging, gauging);
criterion_main!(benches);
