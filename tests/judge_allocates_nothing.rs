//! Judging takes no memory once the judge is made.

use std::alloc::{GlobalAlloc, Layout, System};
use std::sync::atomic::{AtomicUsize, Ordering};

use beltwright::shape::{Bitmap, Common, Judge, Limits, Silhouette};

struct Counting;

static COUNT: AtomicUsize = AtomicUsize::new(0);

// SAFETY: everything is handed on to the system's allocator as it came.
unsafe impl GlobalAlloc for Counting {
    unsafe fn alloc(&self, layout: Layout) -> *mut u8 {
        COUNT.fetch_add(1, Ordering::Relaxed);
        // SAFETY: the caller keeps the contract.
        unsafe { System.alloc(layout) }
    }

    unsafe fn dealloc(&self, memory: *mut u8, layout: Layout) {
        // SAFETY: the caller keeps the contract.
        unsafe { System.dealloc(memory, layout) }
    }

    unsafe fn realloc(&self, memory: *mut u8, layout: Layout, size: usize) -> *mut u8 {
        COUNT.fetch_add(1, Ordering::Relaxed);
        // SAFETY: the caller keeps the contract.
        unsafe { System.realloc(memory, layout, size) }
    }
}

#[global_allocator]
static ALLOCATOR: Counting = Counting;

/// A ring with a tab, turned, with a bite of this radius.
fn part(picture: &mut Bitmap, middle: (f64, f64), angle: f64, bite: f64) {
    let (sin, cos) = angle.sin_cos();
    let (width, height) = (picture.width_px(), picture.height_px());
    for (x, y) in (0..width * height).map(|i| (i % width, i / width)) {
        let (dx, dy) = (x as f64 - middle.0, y as f64 - middle.1);
        let (u, v) = (cos * dx + sin * dy, cos * dy - sin * dx);
        let radius = u.hypot(v);
        let tab = (30.0..75.0).contains(&u) && (3.0..24.0).contains(&v);
        let inside = radius > 33.0 && (radius < 60.0 || tab);
        if inside && (u + 60.0).hypot(v) > bite {
            picture.insert(x, y);
        }
    }
}

#[test]
fn judging_allocates_nothing() {
    let mut drawn = Bitmap::new(170, 170);
    part(&mut drawn, (85.0, 85.0), 0.0, 0.0);
    let silhouette = Silhouette::from_mask(&drawn, 0.25).expect("a silhouette");
    let wide = Some([0.0, 1e9]);
    let limits = Limits {
        missing_px: 4.0,
        excess_px: 4.0,
        reject_flipped: true,
        area_px: wide,
        length_px: wide,
        width_px: wide,
        holes: Some([0, 9]),
        boundary_px: wide,
        branches: Some([0, 99]),
        branch_above_px: 20.0,
    };
    let common = Common {
        flaw_below_px: 8.0,
        fit_at_least: 0.7,
    };
    let mut judge = Judge::new(vec![(silhouette, limits)], common);
    judge.reserve(320, 320);
    let mut regions = Vec::new();
    for (angle, bite) in [(0.3, 0.0), (2.0, 14.0), (4.0, 45.0)] {
        let mut picture = Bitmap::new(320, 320);
        part(&mut picture, (101.3, 97.8), angle, bite);
        regions.push(picture.to_region().expect("a part"));
        part(&mut picture, (210.0, 120.0), 1.0, 0.0);
        regions.push(picture.to_region().expect("two parts"));
    }
    let mut all = Bitmap::new(320, 320);
    (0..320).for_each(|y| all.insert_run(y, 0, 320));
    regions.push(all.to_region().expect("everything"));
    let before = COUNT.load(Ordering::Relaxed);
    let mut reasons = 0;
    for (region, runs) in &regions {
        reasons += usize::from(!judge.judge(region, runs).reasons.is_empty());
    }
    assert_eq!(COUNT.load(Ordering::Relaxed) - before, 0);
    assert_eq!(
        reasons, 6,
        "all but the good part have something against them"
    );
}
