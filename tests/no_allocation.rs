//! The stage allocates nothing once it is built, whatever the frames show.

use std::alloc::{GlobalAlloc, Layout, System};
use std::cell::Cell;

use beltwright::frames::Gray;
use beltwright::stage::{Element, Level, Plan, Polarity, Stage, Threshold};

/// Counts the allocations of each thread.
struct Counting;

thread_local! {
    static COUNT: Cell<usize> = const { Cell::new(0) };
}

fn count_one() {
    // A thread that is ending has no counter any more.
    let _ = COUNT.try_with(|count| count.set(count.get() + 1));
}

// SAFETY: every call is passed on unchanged to the system's allocator.
unsafe impl GlobalAlloc for Counting {
    unsafe fn alloc(&self, layout: Layout) -> *mut u8 {
        count_one();
        // SAFETY: the caller's promises are those that `System` asks for.
        unsafe { System.alloc(layout) }
    }
    unsafe fn realloc(&self, block: *mut u8, layout: Layout, size: usize) -> *mut u8 {
        count_one();
        // SAFETY: as above.
        unsafe { System.realloc(block, layout, size) }
    }
    unsafe fn dealloc(&self, block: *mut u8, layout: Layout) {
        // SAFETY: as above.
        unsafe { System.dealloc(block, layout) }
    }
}

#[global_allocator]
static ALLOCATOR: Counting = Counting;

const WIDTH: usize = 320;
const HEIGHT: usize = 240;

/// A belt with discs, some with a bore, and grain that differs from frame to frame; every fifth frame is all noise.
fn draw(frame: u32, pixels: &mut [u8]) {
    let mut state = frame.wrapping_mul(0x9e37_79b9) | 1;
    let mut noise = move || {
        state ^= state << 13;
        state ^= state >> 17;
        state ^= state << 5;
        state
    };
    for (i, pixel) in pixels.iter_mut().enumerate() {
        let (x, y) = ((i % WIDTH) as i64, (i / WIDTH) as i64);
        let grain = noise() as u8;
        if frame % 5 == 4 {
            *pixel = grain;
            continue;
        }
        let near = |cx: i64, cy: i64| (x - cx).pow(2) + (y - cy).pow(2);
        let shift = i64::from(frame) * 17 % 60;
        let spots = [
            near(50 + shift, 60),
            near(160 + shift, 130),
            near(250, 180 - shift),
        ];
        let part = spots.iter().any(|d| (40..900).contains(d));
        *pixel = if part { 150 } else { 30 } + grain / 10;
    }
}

/// Allocations while frames `0..frames` run, after one frame to warm up.
fn allocations(plan: &Plan, level: Level, frames: u32) -> usize {
    let mut stage = Stage::new(plan, level);
    let mut pixels = vec![0; WIDTH * HEIGHT];
    let (mut counted, mut regions) = (0, 0);
    for frame in 0..=frames {
        draw(frame, &mut pixels);
        let picture = Gray {
            pixels: &pixels,
            width_px: WIDTH,
            height_px: HEIGHT,
            stride_px: WIDTH,
        };
        let before = COUNT.get();
        regions += stage.run(picture).regions.len();
        if frame > 0 {
            counted += COUNT.get() - before;
        }
    }
    assert!(regions > frames as usize, "the pictures show something");
    counted
}

#[test]
fn after_the_first_frame_nothing_is_allocated() {
    assert!(
        {
            let before = COUNT.get();
            drop(std::hint::black_box(vec![1u8; 10]));
            COUNT.get() > before
        },
        "the counter counts"
    );
    let elements = [
        Element::Rectangle {
            width_px: 81,
            height_px: 81,
        },
        Element::Octagon { diameter_px: 81 },
    ];
    let thresholds = [
        Threshold::Fixed { level: 40 },
        Threshold::Otsu { floor: 20 },
        Threshold::Hysteresis { low: 30, high: 80 },
    ];
    for level in Level::available() {
        for element in elements {
            for threshold in thresholds {
                let plan = Plan {
                    width_px: WIDTH,
                    height_px: HEIGHT,
                    polarity: Polarity::Bright,
                    element,
                    threshold,
                    fill_below_px: 30,
                    speck_below_px: 4,
                };
                assert_eq!(allocations(&plan, level, 20), 0, "{plan:?} at {level:?}");
            }
        }
    }
}
