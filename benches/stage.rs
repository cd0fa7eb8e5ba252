//! The stage and its parts on one drawn frame. `cargo bench --bench stage`; as a test on a small one.

use beltwright::frames::{Frame, Gray};
use beltwright::stage::{Element, Level, Plan, Polarity, Stage, Threshold, TopHat};
use criterion::{BenchmarkId, Criterion, Throughput, criterion_group, criterion_main};

/// Discs with holes on a belt that is brighter in the middle, with grain.
fn draw(width: usize, height: usize) -> Frame {
    let mut state = 1u32;
    let mut pixels = Vec::with_capacity(width * height);
    for i in 0..width * height {
        let (x, y) = (i % width, i / width);
        state = state.wrapping_mul(1_664_525).wrapping_add(1_013_904_223);
        let (dx, dy) = ((x % 128) as i64 - 64, (y % 128) as i64 - 64);
        let part = (16..1_000).contains(&(dx * dx + dy * dy));
        let light = 30 + 40 * x.min(width - x) / width;
        pixels.push(light as u8 + if part { 90 } else { 0 } + (state >> 29) as u8);
    }
    Frame {
        width_px: width as u32,
        height_px: height as u32,
        pixels,
        ..Frame::default()
    }
}

fn plan(picture: Gray<'_>, element: Element, threshold: Threshold) -> Plan {
    Plan {
        width_px: picture.width_px,
        height_px: picture.height_px,
        polarity: Polarity::Bright,
        element,
        threshold,
        fill_below_px: 100,
        speck_below_px: 20,
    }
}

fn square(size: usize) -> Element {
    Element::Rectangle {
        width_px: size,
        height_px: size,
    }
}

/// The frame of the benchmark, or a small one when it only runs as a test.
fn frame() -> Frame {
    match std::env::args().any(|argument| argument == "--test") {
        true => draw(200, 150),
        false => draw(1280, 1024),
    }
}

fn top_hats(c: &mut Criterion) {
    let frame = frame();
    let mut group = c.benchmark_group("top_hat");
    group.throughput(Throughput::Elements(frame.pixels.len() as u64));
    let elements = [15, 41, 81, 161, 241].map(square);
    let octagon = Element::Octagon { diameter_px: 41 };
    for level in Level::available() {
        for element in elements.into_iter().chain([octagon]) {
            let plan = plan(frame.gray(), element, Threshold::Fixed { level: 40 });
            let mut top_hat = TopHat::new(&plan, level);
            let mut out = vec![0; frame.pixels.len()];
            let name = BenchmarkId::new(level.name(), format!("{element:?}"));
            group.bench_function(name, |b| b.iter(|| top_hat.picture(frame.gray(), &mut out)));
        }
    }
}

fn stages(c: &mut Criterion) {
    let frame = frame();
    let mut group = c.benchmark_group("stage");
    let thresholds = [
        Threshold::Fixed { level: 40 },
        Threshold::Otsu { floor: 20 },
        Threshold::Hysteresis { low: 30, high: 60 },
    ];
    for level in Level::available() {
        for threshold in thresholds {
            let mut stage = Stage::new(&plan(frame.gray(), square(81), threshold), level);
            let name = BenchmarkId::new(level.name(), format!("{threshold:?}"));
            group.bench_function(name, |b| b.iter(|| stage.run(frame.gray()).regions.len()));
        }
    }
}

criterion_group!(benches, top_hats, stages);
criterion_main!(benches);
