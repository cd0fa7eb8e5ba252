//! `judge` and `teach` as a person runs them.

use std::fs;
use std::path::Path;
use std::process::Output;

use assert_cmd::Command;
use image::{GrayImage, Luma};
use serde_json::Value;
use tempfile::TempDir;

fn beltwright(args: &[&str]) -> Output {
    let mut command = Command::cargo_bin("beltwright").expect("the program");
    command.args(args).output().expect("it runs")
}

fn text(bytes: &[u8]) -> &str {
    std::str::from_utf8(bytes).expect("UTF-8")
}

fn picture(folder: &TempDir, name: &str, white: impl Fn(u32, u32) -> bool) -> String {
    let file = folder.path().join(name);
    let value = |x, y| Luma([if white(x, y) { 255 } else { 0 }]);
    GrayImage::from_fn(60, 50, value)
        .save(&file)
        .expect("a picture");
    file.to_str().expect("UTF-8").to_owned()
}

fn square(x: u32, y: u32) -> bool {
    (10..40).contains(&x) && (10..40).contains(&y)
}

/// By hand: a bite of 5 rows into a square's edge has its deepest pixel 5 px from the nearest pixel outside; a burr of 7
/// columns has its farthest pixel 7 px from the square.
#[test]
fn the_gauge_by_itself_measures_between_pixel_centres() {
    let folder = TempDir::new().unwrap();
    let shape = picture(&folder, "t.png", square);
    let part = picture(&folder, "p.png", |x, y| {
        let bite = (20..30).contains(&x) && (10..15).contains(&y);
        let burr = (40..47).contains(&x) && y == 25;
        square(x, y) && !bite || burr
    });
    let args = [
        "judge",
        "--shape",
        &shape,
        "--part",
        &part,
        "--fixed-pose",
        "--json",
    ];
    let run = beltwright(&args);
    assert_eq!(run.status.code(), Some(0), "{}", text(&run.stderr));
    let shown: Value = serde_json::from_slice(&run.stdout).unwrap();
    assert_eq!(
        (shown["missing_px"].as_f64(), shown["excess_px"].as_f64()),
        (Some(5.0), Some(7.0))
    );
    assert_eq!(shown["excess_at"], serde_json::json!([46, 25]));
}

#[test]
fn pictures_that_cannot_be_gauged_are_one_sentence_and_exit_code_2() {
    let folder = TempDir::new().unwrap();
    let shape = picture(&folder, "t.png", square);
    let small = folder.path().join("small.png");
    GrayImage::new(20, 20).save(&small).unwrap();
    let colour = folder.path().join("colour.png");
    image::RgbImage::new(60, 50).save(&colour).unwrap();
    let refused = |part: &Path, says: &str| {
        let part = part.to_str().unwrap();
        let run = beltwright(&["judge", "--shape", &shape, "--part", part, "--fixed-pose"]);
        assert_eq!(run.status.code(), Some(2));
        assert!(text(&run.stderr).contains(says), "{}", text(&run.stderr));
    };
    refused(&small, "expected 60 x 50 px");
    refused(&colour, "expected an 8-bit gray PNG");
    refused(&folder.path().join("none.png"), "none.png");
}

#[test]
fn single_pictures_are_judged_like_frames() {
    let settings = "config/oat-stars.toml";
    let run = beltwright(&[
        "judge",
        "demo-frames/oat-stars/000005.png",
        "--settings",
        settings,
        "--json",
    ]);
    assert_eq!(run.status.code(), Some(0), "{}", text(&run.stderr));
    let shown: Value = serde_json::from_slice(&run.stdout).unwrap();
    let parts = shown["pictures"][0]["parts"].as_array().unwrap();
    assert!(parts.len() >= 4, "{parts:?}");
    assert!(parts.iter().any(|part| part["judged"]["verdict"] == "keep"));
    assert!(
        parts
            .iter()
            .all(|part| part["cut_by_edge"] == true || part["judged"].is_object())
    );
}

/// What is taught from the demo's good parts lies close to the nominal shape that the demo ships.
#[test]
fn a_shape_taught_from_a_recording_is_the_one_that_was_drawn() {
    let folder = TempDir::new().unwrap();
    let file = folder.path().join("star.toml");
    let out = file.to_str().unwrap();
    let args = [
        "teach",
        "demo-frames/oat-stars",
        "--settings",
        "config/oat-stars.toml",
        "--out",
        out,
    ];
    let run = beltwright(&args);
    assert_eq!(run.status.code(), Some(0), "{}", text(&run.stderr));
    let area = |file: &Path| -> f64 {
        let note: toml::Table = fs::read_to_string(file).unwrap().parse().unwrap();
        note["figures"]["area_mm2"].as_float().unwrap()
    };
    let (taught, drawn) = (
        area(&file),
        area(Path::new("demo-frames/shapes/oat-star.toml")),
    );
    assert!(
        (taught / drawn - 1.0).abs() < 0.03,
        "{taught} and {drawn} mm2"
    );
    let again = beltwright(&args);
    assert_eq!(again.status.code(), Some(2), "nothing is replaced unasked");
    assert!(
        text(&again.stderr).contains("--replace"),
        "{}",
        text(&again.stderr)
    );
}
