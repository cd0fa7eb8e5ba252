//! Marks over the photograph of a part, as lines and hatchings that stay sharp at every size.

use std::fmt::Write;

use maud::{Markup, html};

use super::chart::n;
use super::picture::{Crop, Picture};
use crate::shape::{Bitmap, Drawing};

/// A figure's worst point.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Flaw {
    /// `bite` or `burr`.
    pub name: &'static str,
    /// The pixel of the region of interest.
    pub at: Option<(i32, i32)>,
    /// How deep or how far.
    pub mm: f64,
    /// Its limit.
    pub limit_mm: f64,
}

/// Hatchings come in these sizes, in camera pixels; the page defines them once.
pub const HATCH_PX: [usize; 4] = [1, 2, 4, 8];

/// `photo` shows `crop`; outline and hatchings come from `drawing`, a ring with its figure for each flaw that uses up more
/// than half of its limit.
pub fn overlay(
    name: &str,
    photo: &Picture,
    crop: Crop,
    drawing: Option<&Drawing>,
    flaws: &[Flaw],
) -> Markup {
    let (width, height) = (crop.width_px, crop.height_px);
    let size = width.max(height);
    // Text of a 22nd of the picture, hatchings of a 45th.
    let text = format!("font-size:{}px", n(size as f64 / 22.0));
    let hatch = HATCH_PX
        .into_iter()
        .find(|px| px * 180 >= size)
        .unwrap_or(8);
    let large = flaws.iter().filter(|flaw| flaw.mm > flaw.limit_mm / 2.0);
    html! {
        svg.photo viewBox={ "0 0 " (width) " " (height) } role="img" aria-label=(name) {
            image href=(photo.uri) width=(width) height=(height) {}
            @if let Some(drawing) = drawing {
                g transform={ "translate(" (drawing.origin.0 - crop.left_px as i32) " " (drawing.origin.1 - crop.top_px as i32) ")" } {
                    path fill={ "url(#missing-" (hatch) ")" } d=(area(&drawing.missing)) {}
                    path fill={ "url(#excess-" (hatch) ")" } d=(area(&drawing.excess)) {}
                    path.outline d=(outline(&drawing.taught)) {}
                }
            }
            @for flaw in large {
                @if let Some((x, y)) = flaw.at {
                    (ring(flaw, (x - crop.left_px as i32, y - crop.top_px as i32), crop, &text))
                }
            }
        }
    }
}

/// A ring, and the figure on the side that has more room.
fn ring(flaw: &Flaw, at: (i32, i32), crop: Crop, text: &str) -> Markup {
    let (x, y) = (f64::from(at.0) + 0.5, f64::from(at.1) + 0.5);
    let radius = crop.width_px.max(crop.height_px) as f64 / 32.0;
    let to_the_left = x > crop.width_px as f64 / 2.0;
    let (class, shift) = if to_the_left {
        ("end", -1.5)
    } else {
        ("start", 1.5)
    };
    html! {
        circle class=(flaw.name) cx=(n(x)) cy=(n(y)) r=(n(radius)) {}
        text class=(class) style=(text) x=(n(x + shift * radius)) y=(n(y)) dy="0.35em" {
            (flaw.name) " " (format!("{:.2}", flaw.mm))
        }
    }
}

/// Every run of `set` as a rectangle of one row.
fn area(set: &Bitmap) -> String {
    let mut path = String::new();
    for y in 0..set.height_px() {
        for (x0, x1) in spans(set.width_px(), |x| set.has(x as i32, y as i32)) {
            let _ = write!(path, "M{x0} {y}h{}v1h-{0}z", x1 - x0);
        }
    }
    path
}

/// Lines between pixels of which just one belongs to `set`: along the rows, then along the columns.
fn outline(set: &Bitmap) -> String {
    let (width, height) = (set.width_px(), set.height_px());
    let has = |x: usize, y: usize| set.has(x as i32, y as i32);
    let mut path = String::new();
    for y in 0..=height {
        let differs = |x: usize| has(x, y) != (y > 0 && has(x, y - 1));
        for (x0, x1) in spans(width, differs) {
            let _ = write!(path, "M{x0} {y}h{}", x1 - x0);
        }
    }
    for x in 0..=width {
        let differs = |y: usize| has(x, y) != (x > 0 && has(x - 1, y));
        for (y0, y1) in spans(height, differs) {
            let _ = write!(path, "M{x} {y0}v{}", y1 - y0);
        }
    }
    path
}

/// Stretches of `0..length` in which `is` holds.
fn spans(length: usize, is: impl Fn(usize) -> bool) -> Vec<(usize, usize)> {
    let mut spans: Vec<(usize, usize)> = Vec::new();
    for k in (0..length).filter(|&k| is(k)) {
        match spans.last_mut() {
            Some((_, end)) if *end == k => *end = k + 1,
            _ => spans.push((k, k + 1)),
        }
    }
    spans
}

#[cfg(test)]
mod tests {
    use super::*;

    /// ```text
    /// .##
    /// ##.
    /// ```
    fn set() -> Bitmap {
        Bitmap::from_gray(&[0, 255, 255, 255, 255, 0], 3, 2)
    }

    #[test]
    fn areas_are_runs_and_outlines_are_edges() {
        assert_eq!(area(&set()), "M1 0h2v1h-2zM0 1h2v1h-2z");
        assert_eq!(
            outline(&set()),
            "M1 0h2M0 1h1M2 1h1M0 2h2M0 1v1M1 0v1M2 1v1M3 0v1"
        );
    }
}
