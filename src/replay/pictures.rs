//! One picture per part: what the camera saw, the outline of the taught shape, what is missing and what is too much.
//!
//! The marks differ by pattern as well as by colour, so that they can be told apart in print and by colour-blind readers:
//! the outline is a thin line, missing areas are hatched one way, excess areas the other way, the worst point of either
//! is a ring.

use std::convert::Infallible;

use embedded_graphics::mono_font::MonoTextStyle;
use embedded_graphics::mono_font::ascii::FONT_9X15;
use embedded_graphics::pixelcolor::Rgb888;
use embedded_graphics::prelude::*;
use embedded_graphics::primitives::{Circle, Line, PrimitiveStyle, Rectangle};
use embedded_graphics::text::{Baseline, Text};
use image::{Rgb, RgbImage};

use crate::frames::Gray;
use crate::shape::{Bitmap, Depth, Drawing};
use crate::units::Scale;

/// Picture pixels for one camera pixel.
const ZOOM: usize = 4;
/// Belt shown around the part.
const AROUND_PX: usize = 12;
/// Height of a line of text.
const LINE_PX: usize = 18;
/// So that the words fit beside small parts.
const LEAST_WIDTH_PX: usize = 460;

const OUTLINE: Rgb888 = Rgb888::new(0x00, 0xd0, 0xff);
const MISSING: Rgb888 = Rgb888::new(0x2a, 0x6f, 0xff);
const EXCESS: Rgb888 = Rgb888::new(0xff, 0x8c, 0x1a);
const INK: Rgb888 = Rgb888::new(0x14, 0x18, 0x1c);
const PAPER: Rgb<u8> = Rgb([0xf7, 0xf7, 0xf4]);

/// A canvas that `embedded-graphics` can draw on.
struct Canvas(RgbImage);

impl OriginDimensions for Canvas {
    fn size(&self) -> Size {
        Size::new(self.0.width(), self.0.height())
    }
}

impl DrawTarget for Canvas {
    type Color = Rgb888;
    type Error = Infallible;

    fn draw_iter<I>(&mut self, pixels: I) -> Result<(), Self::Error>
    where
        I: IntoIterator<Item = Pixel<Self::Color>>,
    {
        for Pixel(at, colour) in pixels {
            let (Ok(x), Ok(y)) = (u32::try_from(at.x), u32::try_from(at.y)) else {
                continue;
            };
            if let Some(pixel) = self.0.get_pixel_mut_checked(x, y) {
                *pixel = Rgb([colour.r(), colour.g(), colour.b()]);
            }
        }
        Ok(())
    }
}

/// What can be drawn on without failing.
trait Sheet: DrawTarget<Color = Rgb888, Error = Infallible> {}

impl<T: DrawTarget<Color = Rgb888, Error = Infallible>> Sheet for T {}

/// What is marked on a part.
#[derive(Clone, Copy)]
pub struct Marks<'a> {
    /// Pixel by pixel.
    pub drawing: &'a Drawing,
    /// The deepest bite.
    pub missing: Depth,
    /// The farthest burr.
    pub excess: Depth,
}

/// What is drawn of one part.
pub struct Sketch<'a> {
    /// The region of interest of the frame.
    pub picture: Gray<'a>,
    /// Box of the part in it: left, top, right, bottom (the last two exclusive).
    pub part_px: [usize; 4],
    /// Taught outline and flaws with the worst of each; `None` for a part that was never seen whole.
    pub marks: Option<Marks<'a>>,
    /// Size of a camera pixel.
    pub scale: Scale,
    /// Lines of text below.
    pub words: &'a [String],
}

/// Draws `sketch`. Sizes follow from the part; nothing is cut off that is inside the region of interest.
pub fn draw_part(sketch: &Sketch<'_>) -> RgbImage {
    let [left, top, right, bottom] = shown_px(sketch);
    let (width, height) = ((right - left) * ZOOM, (bottom - top) * ZOOM);
    let below = (sketch.words.len() + 2) * LINE_PX + 8;
    let sheet = RgbImage::from_pixel(
        width.max(LEAST_WIDTH_PX) as u32,
        (height + below) as u32,
        PAPER,
    );
    let mut canvas = Canvas(sheet);
    enlarge(&mut canvas.0, sketch.picture, left, top, width, height);
    if let Some(marks) = sketch.marks {
        let shown = Rectangle::new(Point::zero(), Size::new(width as u32, height as u32));
        draw_marks(&mut canvas.clipped(&shown), marks, left, top);
    }
    write_words(&mut canvas, sketch, width, height);
    canvas.0
}

/// The part and the taught shape with some belt around them, inside the picture: left, top, right, bottom.
fn shown_px(sketch: &Sketch<'_>) -> [usize; 4] {
    let [mut left, mut top, mut right, mut bottom] = sketch.part_px;
    if let Some(Marks { drawing, .. }) = sketch.marks {
        let start = |at: i32| at.max(0) as usize;
        left = left.min(start(drawing.origin.0));
        top = top.min(start(drawing.origin.1));
        right = right.max(start(drawing.origin.0) + drawing.taught.width_px());
        bottom = bottom.max(start(drawing.origin.1) + drawing.taught.height_px());
    }
    let picture = &sketch.picture;
    [
        left.saturating_sub(AROUND_PX),
        top.saturating_sub(AROUND_PX),
        (right + AROUND_PX).min(picture.width_px),
        (bottom + AROUND_PX).min(picture.height_px),
    ]
}

fn enlarge(
    sheet: &mut RgbImage,
    picture: Gray<'_>,
    left: usize,
    top: usize,
    width: usize,
    height: usize,
) {
    for y in 0..height {
        let row = picture.row(top + y / ZOOM);
        for x in 0..width {
            let gray = row[left + x / ZOOM];
            sheet.put_pixel(x as u32, y as u32, Rgb([gray; 3]));
        }
    }
}

/// Places a drawing (camera pixels) on the enlarged crop.
struct Placed<'a> {
    drawing: &'a Drawing,
    left: i64,
    top: i64,
}

impl Placed<'_> {
    fn corner(&self, x: usize, y: usize) -> Point {
        let zoom = ZOOM as i64;
        let x = (i64::from(self.drawing.origin.0) + x as i64 - self.left) * zoom;
        let y = (i64::from(self.drawing.origin.1) + y as i64 - self.top) * zoom;
        Point::new(x as i32, y as i32)
    }

    fn middle(&self, at: (i32, i32)) -> Point {
        let zoom = ZOOM as i64;
        let x = (i64::from(at.0) - self.left) * zoom + zoom / 2;
        let y = (i64::from(at.1) - self.top) * zoom + zoom / 2;
        Point::new(x as i32, y as i32)
    }
}

fn draw_marks(canvas: &mut impl Sheet, marks: Marks<'_>, left: usize, top: usize) {
    let placed = Placed {
        drawing: marks.drawing,
        left: left as i64,
        top: top as i64,
    };
    hatch(canvas, &placed, &marks.drawing.missing, MISSING, 1);
    hatch(canvas, &placed, &marks.drawing.excess, EXCESS, -1);
    outline(canvas, &placed);
    for (depth, colour) in [(marks.missing, MISSING), (marks.excess, EXCESS)] {
        if let Some(at) = depth.at {
            ring(canvas, placed.middle(at), colour);
        }
    }
}

/// Slanted lines over every pixel of `set`; `slant` is 1 or -1.
fn hatch(canvas: &mut impl Sheet, placed: &Placed<'_>, set: &Bitmap, colour: Rgb888, slant: i32) {
    for (x, y) in set.pixels() {
        let corner = placed.corner(x, y);
        for step in 0..(ZOOM * ZOOM) as i32 {
            let point = corner + Point::new(step % ZOOM as i32, step / ZOOM as i32);
            if (point.x + slant * point.y).rem_euclid(5) < 2 {
                let Ok(()) = Pixel(point, colour).draw(canvas);
            }
        }
    }
}

/// Lines between pixels of which just one belongs to the taught shape.
fn outline(canvas: &mut impl Sheet, placed: &Placed<'_>) {
    let taught = &placed.drawing.taught;
    let has = |x: usize, y: usize| taught.has(x as i32, y as i32);
    let style = PrimitiveStyle::with_stroke(OUTLINE, 1);
    for y in 0..=taught.height_px() {
        for x in 0..=taught.width_px() {
            if has(x, y) != (x > 0 && has(x - 1, y)) {
                let line = Line::new(placed.corner(x, y), placed.corner(x, y + 1));
                let Ok(()) = line.into_styled(style).draw(canvas);
            }
            if has(x, y) != (y > 0 && has(x, y - 1)) {
                let line = Line::new(placed.corner(x, y), placed.corner(x + 1, y));
                let Ok(()) = line.into_styled(style).draw(canvas);
            }
        }
    }
}

fn ring(canvas: &mut impl Sheet, at: Point, colour: Rgb888) {
    for (diameter, colour, width) in [(24, INK, 5), (24, colour, 3)] {
        let style = PrimitiveStyle::with_stroke(colour, width);
        let Ok(()) = Circle::with_center(at, diameter)
            .into_styled(style)
            .draw(canvas);
    }
}

fn write_words(canvas: &mut impl Sheet, sketch: &Sketch<'_>, width: usize, height: usize) {
    let style = MonoTextStyle::new(&FONT_9X15, INK);
    let mut y = height as i32 + 8;
    for line in sketch.words {
        let text = Text::with_baseline(line, Point::new(8, y), style, Baseline::Top);
        let Ok(_) = text.draw(canvas);
        y += LINE_PX as i32;
    }
    let bar_mm = if sketch.scale.px(10.0) * ZOOM as f64 <= width as f64 * 0.8 {
        10.0
    } else {
        1.0
    };
    let bar_px = (sketch.scale.px(bar_mm) * ZOOM as f64).round() as i32;
    let (from, to) = (Point::new(8, y + 9), Point::new(8 + bar_px, y + 9));
    let Ok(()) = Line::new(from, to)
        .into_styled(PrimitiveStyle::with_stroke(INK, 3))
        .draw(canvas);
    let label = format!("{bar_mm} mm");
    let text = Text::with_baseline(&label, to + Point::new(8, -8), style, Baseline::Top);
    let Ok(_) = text.draw(canvas);
    legend(canvas, y + LINE_PX as i32);
}

/// What the marks mean, each beside a patch of itself.
fn legend(canvas: &mut impl Sheet, y: i32) {
    let style = MonoTextStyle::new(&FONT_9X15, INK);
    let entries = [
        ("taught", OUTLINE, 0),
        ("missing", MISSING, 1),
        ("excess", EXCESS, -1),
    ];
    let mut x = 8;
    for (word, colour, slant) in entries {
        for step in 0..16 * 12_i32 {
            let (dx, dy) = (step % 16, step / 16);
            let on = if slant == 0 {
                dy == 6
            } else {
                (dx + slant * dy).rem_euclid(5) < 2
            };
            if on {
                let Ok(()) = Pixel(Point::new(x + dx, y + dy), colour).draw(canvas);
            }
        }
        let text = Text::with_baseline(word, Point::new(x + 22, y - 1), style, Baseline::Top);
        let Ok(_) = text.draw(canvas);
        x += 34 + 9 * word.len() as i32;
    }
}
