//! Answers questions about the gray stage, so that a script in another language can hold it against other programs.
//!
//! One JSON object a line on standard input, until it ends; for each, one JSON line on standard output, followed by the
//! bytes that its `blobs` list names and counts. A request names an `op` of [`OPS`]; a gray picture comes as the path of
//! a raw file with `width`, `height` and optionally `stride`. What goes wrong comes back as `{"error": ...}`.

mod whole_frame;

use std::io::{BufRead, Write};
use std::time::Instant;

use beltwright::frames::Gray;
use beltwright::shape::Judged;
use beltwright::stage::{
    Element, Level, Plan, Polarity, Region, Stage, Steps, Threshold, TopHat, dilation, erosion,
};
use serde::Deserialize;
use serde_json::{Value, json};
use whole_frame::WholeFrame;

/// A JSON answer and the named bytes that follow it.
type Answer = anyhow::Result<(Value, Vec<(&'static str, Vec<u8>)>)>;

/// What answers a request; `time` keeps what it made for the next one.
type Op = fn(&Request, &mut Option<Timed>) -> Answer;

/// Every question that is understood.
const OPS: &[(&str, Op)] = &[
    ("levels", levels),
    ("erosion", |request, _| eroded(request, erosion)),
    ("dilation", |request, _| eroded(request, dilation)),
    ("top_hat", top_hat),
    ("stage", stage),
    ("whole_frame", whole_frame),
    ("time", time),
];

/// A line of standard input.
#[derive(Deserialize, Clone, PartialEq)]
#[serde(deny_unknown_fields)]
struct Request {
    op: String,
    /// What `time` measures.
    work: Option<String>,
    /// How often.
    repeat: Option<usize>,
    level: Option<String>,
    picture: Option<String>,
    width: Option<usize>,
    height: Option<usize>,
    stride: Option<usize>,
    /// Bytes before the first pixel.
    #[serde(default)]
    offset: usize,
    #[serde(default)]
    dark: bool,
    /// `[width, height]` of a rectangle, or `[diameter]` of an octagon.
    #[serde(default)]
    element: Vec<usize>,
    /// `["fixed", level]`, `["otsu", floor]` or `["hysteresis", low, high]`.
    threshold: Option<Value>,
    #[serde(default)]
    fill: u64,
    #[serde(default)]
    speck: u64,
    /// A raw mask file of the taught shape, with its row length.
    taught: Option<String>,
    taught_width: Option<usize>,
}

fn main() -> anyhow::Result<()> {
    let mut timed = None;
    for line in std::io::stdin().lock().lines() {
        let (mut answer, blobs) = respond(&line?, &mut timed)
            .unwrap_or_else(|error| (json!({"error": format!("{error:#}")}), vec![]));
        let sizes: Vec<_> = blobs
            .iter()
            .map(|(name, bytes)| json!([name, bytes.len()]))
            .collect();
        answer["blobs"] = json!(sizes);
        let mut out = std::io::stdout().lock();
        writeln!(out, "{answer}")?;
        for (_, bytes) in &blobs {
            out.write_all(bytes)?;
        }
        out.flush()?;
    }
    Ok(())
}

fn respond(line: &str, timed: &mut Option<Timed>) -> Answer {
    let request: Request = serde_json::from_str(line)?;
    let op = OPS.iter().find(|(name, _)| *name == request.op);
    let (_, run) = op.ok_or_else(|| anyhow::anyhow!("no op `{}`", request.op))?;
    run(&request, timed)
}

/// A picture read from a raw file.
struct Picture {
    pixels: Vec<u8>,
    width: usize,
    height: usize,
    stride: usize,
    offset: usize,
}

impl Picture {
    fn gray(&self) -> Gray<'_> {
        Gray {
            pixels: &self.pixels[self.offset..],
            width_px: self.width,
            height_px: self.height,
            stride_px: self.stride,
        }
    }
}

impl Request {
    fn level(&self) -> anyhow::Result<Level> {
        Ok(match &self.level {
            Some(name) => Level::named(name)?,
            None => Level::choose()?,
        })
    }

    fn picture(&self) -> anyhow::Result<Picture> {
        let (Some(path), Some(width), Some(height)) = (&self.picture, self.width, self.height)
        else {
            anyhow::bail!("picture, width and height are needed");
        };
        let pixels = std::fs::read(path)?;
        let stride = self.stride.unwrap_or(width);
        anyhow::ensure!(
            pixels.len() >= self.offset + stride * height,
            "{path} is too short"
        );
        Ok(Picture {
            pixels,
            width,
            height,
            stride,
            offset: self.offset,
        })
    }

    fn element(&self) -> anyhow::Result<Element> {
        match self.element[..] {
            [width_px, height_px] => Ok(Element::Rectangle {
                width_px,
                height_px,
            }),
            [diameter_px] => Ok(Element::Octagon { diameter_px }),
            _ => anyhow::bail!("element takes [width, height] or [diameter]"),
        }
    }

    fn threshold(&self) -> anyhow::Result<Threshold> {
        let value = self
            .threshold
            .clone()
            .unwrap_or_else(|| json!(["fixed", 255]));
        if let Ok((name, level)) = serde_json::from_value::<(String, u8)>(value.clone()) {
            match name.as_str() {
                "fixed" => return Ok(Threshold::Fixed { level }),
                "otsu" => return Ok(Threshold::Otsu { floor: level }),
                _ => {}
            }
        }
        let (name, low, high) = serde_json::from_value::<(String, u8, u8)>(value)?;
        anyhow::ensure!(name == "hysteresis", "no threshold `{name}`");
        Ok(Threshold::Hysteresis { low, high })
    }

    fn plan(&self, picture: &Picture) -> anyhow::Result<Plan> {
        Ok(Plan {
            width_px: picture.width,
            height_px: picture.height,
            polarity: if self.dark {
                Polarity::Dark
            } else {
                Polarity::Bright
            },
            element: self.element()?,
            threshold: self.threshold()?,
            fill_below_px: self.fill,
            speck_below_px: self.speck,
        })
    }
}

fn levels(_: &Request, _: &mut Option<Timed>) -> Answer {
    let names: Vec<_> = Level::available().map(Level::name).collect();
    let chosen = Level::choose()?.name();
    let answer = json!({"levels": names, "chosen": chosen, "built_in": Level::built_in()});
    Ok((answer, vec![]))
}

fn eroded(request: &Request, of: fn(Gray<'_>, Element, Level) -> Vec<u8>) -> Answer {
    let picture = request.picture()?;
    let pixels = of(picture.gray(), request.element()?, request.level()?);
    Ok((json!({}), vec![("pixels", pixels)]))
}

fn top_hat(request: &Request, _: &mut Option<Timed>) -> Answer {
    let picture = request.picture()?;
    let mut pixels = vec![0; picture.width * picture.height];
    TopHat::new(&request.plan(&picture)?, request.level()?).picture(picture.gray(), &mut pixels);
    Ok((json!({}), vec![("pixels", pixels)]))
}

fn stage(request: &Request, _: &mut Option<Timed>) -> Answer {
    let picture = request.picture()?;
    let mut stage = Stage::new(&request.plan(&picture)?, request.level()?);
    let Steps {
        top_hat,
        binary,
        filled,
        level,
    } = stage.steps(picture.gray());
    let scene = stage.run(picture.gray());
    let regions: Vec<_> = scene.regions.iter().map(region).collect();
    let runs = scene
        .runs
        .iter()
        .flat_map(|r| [r.y, r.x0, r.x1])
        .flat_map(u32::to_le_bytes)
        .collect();
    let answer = json!({"level": level, "specks": scene.specks, "regions": regions});
    let blobs = vec![
        ("top_hat", top_hat),
        ("binary", binary),
        ("filled", filled),
        ("runs", runs),
    ];
    Ok((answer, blobs))
}

impl Request {
    fn whole_frame(&self, picture: &Picture) -> anyhow::Result<WholeFrame> {
        let (Some(taught), Some(width)) = (&self.taught, self.taught_width) else {
            anyhow::bail!("taught and taught_width are needed");
        };
        let stage = Stage::new(&self.plan(picture)?, self.level()?);
        WholeFrame::new(stage, &std::fs::read(taught)?, width)
    }
}

fn whole_frame(request: &Request, _: &mut Option<Timed>) -> Answer {
    let picture = request.picture()?;
    let mut frame = request.whole_frame(&picture)?;
    let part = |(found, judged): &(Region, Judged)| {
        let mut part = region(found);
        part["missing"] = json!(judged.missing.px);
        part["excess"] = json!(judged.excess.px);
        part["angle_deg"] = json!(judged.pose.angle_deg);
        part["fit"] = json!(judged.fit);
        part
    };
    let parts: Vec<_> = frame.run(picture.gray()).iter().map(part).collect();
    Ok((json!({"parts": parts}), vec![]))
}

fn region(r: &Region) -> Value {
    json!({
        "area": r.area_px,
        "box": [r.y_min, r.x_min, r.y_max, r.x_max],
        "centroid": [r.centroid_y, r.centroid_x],
        "mu": [r.mu20, r.mu11, r.mu02],
        "runs": [r.runs.start, r.runs.end],
    })
}

/// Something to measure, ready to run, and the request that it was made for.
struct Timed {
    request: Request,
    run: Box<dyn FnMut()>,
}

/// Runs `work` `repeat` times; everything is made beforehand, and kept for the same request.
fn time(request: &Request, timed: &mut Option<Timed>) -> Answer {
    let job = match timed {
        Some(job) if job.request == *request => job,
        _ => timed.insert(Timed {
            request: request.clone(),
            run: work(request)?,
        }),
    };
    let ms: Vec<f64> = (0..request.repeat.unwrap_or(1))
        .map(|_| {
            let start = Instant::now();
            (job.run)();
            start.elapsed().as_secs_f64() * 1e3
        })
        .collect();
    Ok((json!({"ms": ms}), vec![]))
}

fn work(request: &Request) -> anyhow::Result<Box<dyn FnMut()>> {
    let picture = request.picture()?;
    let mut out = vec![0; picture.width * picture.height];
    Ok(match request.work.as_deref() {
        Some("copy") => Box::new(move || {
            out.copy_from_slice(&picture.pixels);
            std::hint::black_box(&mut out);
        }),
        Some("top_hat") => {
            let mut top_hat = TopHat::new(&request.plan(&picture)?, request.level()?);
            Box::new(move || top_hat.picture(picture.gray(), std::hint::black_box(&mut out)))
        }
        Some("stage") => {
            let mut stage = Stage::new(&request.plan(&picture)?, request.level()?);
            Box::new(move || {
                std::hint::black_box(stage.run(picture.gray()));
            })
        }
        Some("whole_frame") => {
            let mut frame = request.whole_frame(&picture)?;
            Box::new(move || {
                std::hint::black_box(frame.run(picture.gray()));
            })
        }
        Some("fast_morphology") => other_top_hat(request, picture, out)?,
        Some("imageproc") => open_with_imageproc(request, picture)?,
        other => anyhow::bail!("no work {other:?}"),
    })
}

/// The top-hat of the crate `fast_morphology`, on one thread.
fn other_top_hat(
    request: &Request,
    picture: Picture,
    mut out: Vec<u8>,
) -> anyhow::Result<Box<dyn FnMut()>> {
    use fast_morphology as fm;
    let Element::Rectangle {
        width_px,
        height_px,
    } = request.element()?
    else {
        anyhow::bail!("a rectangle is needed");
    };
    let element = vec![1; width_px * height_px];
    let run = move || {
        fm::morphology(
            &picture.pixels,
            &mut out,
            fm::MorphExOp::TopHat,
            fm::ImageSize::new(picture.width, picture.height),
            &element,
            fm::KernelShape::new(width_px, height_px),
            fm::BorderMode::Clamp,
            fm::MorphScalar::default(),
            fm::MorphologyThreadingPolicy::Single,
        )
        .expect("the crate takes this picture");
    };
    Ok(Box::new(run))
}

/// The opening of the crate `imageproc` with the same square.
fn open_with_imageproc(request: &Request, picture: Picture) -> anyhow::Result<Box<dyn FnMut()>> {
    use imageproc::morphology::{Mask, grayscale_open};
    let Element::Rectangle { width_px, .. } = request.element()? else {
        anyhow::bail!("a square is needed");
    };
    let mask = Mask::square(u8::try_from(width_px / 2)?);
    let (width, height) = (picture.width as u32, picture.height as u32);
    let image = image::GrayImage::from_raw(width, height, picture.pixels);
    let image = image.ok_or_else(|| anyhow::anyhow!("the picture must have no padding"))?;
    Ok(Box::new(move || {
        std::hint::black_box(grayscale_open(&image, &mask));
    }))
}
