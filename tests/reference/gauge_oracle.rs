//! Answers the questions of `gauge.py`, one JSON object per line: masks are strings of `0` and `1`, row by row.

use std::io::{BufRead, Write};

use beltwright::shape::{Bitmap, Depth, DistanceTransform, Measurer, gauge_masks, skeleton};
use serde::Deserialize;
use serde_json::{Value, json};

#[derive(Deserialize)]
#[serde(tag = "op", rename_all = "snake_case")]
enum Question {
    /// Squared distances to the background (outside included) and to the foreground.
    Distances { width: usize, mask: String },
    /// Both figures of `a` against `t`.
    Gauge { width: usize, t: String, a: String },
    /// Both figures of `a` against `t` moved to every place in it.
    Shifts {
        width: usize,
        a: String,
        t_width: usize,
        t: String,
    },
    /// All measures.
    Measures {
        width: usize,
        mask: String,
        branch_above_px: f64,
    },
    /// The skeleton.
    Thin { width: usize, mask: String },
}

fn bitmap(width: usize, mask: &str) -> Bitmap {
    let mut set = Bitmap::new(width, mask.len() / width);
    for (i, _) in mask.bytes().enumerate().filter(|&(_, byte)| byte == b'1') {
        set.insert(i % width, i / width);
    }
    set
}

fn mask(set: &Bitmap) -> String {
    let (width, height) = (set.width_px(), set.height_px());
    let digit = |i: usize| {
        if set.has((i % width) as i32, (i / width) as i32) {
            '1'
        } else {
            '0'
        }
    };
    (0..width * height).map(digit).collect()
}

fn depth(depth: Depth) -> Value {
    json!({"px": depth.px, "at": depth.at.map(|(x, y)| [x, y])})
}

/// `t` with its upper left pixel at (x, y) of a picture of the size of `a`; what does not fit in is left out.
fn shifted(t: &Bitmap, a: &Bitmap, (x, y): (usize, usize)) -> Bitmap {
    let mut moved = Bitmap::new(a.width_px(), a.height_px());
    for row in 0..t.height_px() {
        for (x0, x1) in t.runs(row) {
            moved.insert_run(row + y, x0 + x, x1 + x);
        }
    }
    moved
}

fn answer(question: Question) -> Value {
    match question {
        Question::Distances { width, mask } => {
            let set = bitmap(width, &mask);
            let mut transform = DistanceTransform::default();
            json!({
                "to_background": transform.to_background(&set).to_vec(),
                "to_foreground": transform.to_foreground(&set).to_vec(),
            })
        }
        Question::Gauge { width, t, a } => {
            let (missing, excess) = gauge_masks(&bitmap(width, &t), &bitmap(width, &a));
            json!({"missing": depth(missing), "excess": depth(excess)})
        }
        Question::Shifts {
            width,
            a,
            t_width,
            t,
        } => {
            let (a, t) = (bitmap(width, &a), bitmap(t_width, &t));
            let (columns, rows) = (
                a.width_px() - t.width_px() + 1,
                a.height_px() - t.height_px() + 1,
            );
            let places = (0..columns * rows).map(|i| (i % columns, i / columns));
            let figures = places.map(|place| {
                let (missing, excess) = gauge_masks(&shifted(&t, &a, place), &a);
                [missing.px, excess.px]
            });
            json!(figures.collect::<Vec<_>>())
        }
        Question::Measures {
            width,
            mask,
            branch_above_px,
        } => match bitmap(width, &mask).to_region() {
            None => Value::Null,
            Some((region, runs)) => {
                let found = Measurer::default().all(&region, &runs, branch_above_px);
                json!({
                    "area_px": found.area_px,
                    "length_px": found.length_px,
                    "width_px": found.width_px,
                    "holes": found.holes,
                    "boundary_px": found.boundary_px,
                    "branches": found.branches,
                })
            }
        },
        Question::Thin { width, mask: text } => json!(mask(&skeleton(&bitmap(width, &text)))),
    }
}

fn main() -> Result<(), Box<dyn std::error::Error>> {
    let mut out = std::io::stdout().lock();
    for line in std::io::stdin().lock().lines() {
        let question = serde_json::from_str(&line?)?;
        writeln!(out, "{}", answer(question))?;
        out.flush()?;
    }
    Ok(())
}
