//! `pace` as a person runs it. Times differ from PC to PC: what is checked is that they are there and hang together.

use std::fs;
use std::process::Output;

use assert_cmd::Command;
use serde_json::Value;

fn pace(args: &[&str]) -> Output {
    let mut command = Command::cargo_bin("beltwright").expect("the program");
    command.arg("pace").args(args);
    if !args.contains(&"--frames") {
        command.args(["--frames", "20"]);
    }
    command.output().expect("it runs")
}

fn report(args: &[&str]) -> (Value, Option<i32>) {
    let run = pace(&[args, &["--json"]].concat());
    assert!(run.stderr.is_empty(), "{run:?}");
    let report = serde_json::from_slice(&run.stdout).expect("one JSON object");
    (report, run.status.code())
}

fn number(value: &Value) -> f64 {
    value.as_f64().expect("a number")
}

fn step<'a>(report: &'a Value, name: &str) -> &'a Value {
    let steps = report["steps"].as_array().expect("a list");
    let found = steps.iter().find(|step| step["step"] == name);
    found.unwrap_or_else(|| panic!("{name} in {report}"))
}

const STEPS: [&str; 6] = [
    "top-hat",
    "threshold",
    "fill",
    "regions",
    "pose and gauge of a part",
    "whole frame",
];

/// Every step has figures in order, and the whole frame takes longer than its steps' halves.
fn check(report: &Value) {
    let mut sum_ms = 0.0;
    for name in STEPS {
        let times = step(report, name);
        let [p50, p99, max] = ["p50_ms", "p99_ms", "max_ms"].map(|key| number(&times[key]));
        assert!(0.0 < p50 && p50 <= p99 && p99 <= max, "{times}");
        if !name.contains(' ') {
            sum_ms += p50;
        }
    }
    let whole = step(report, "whole frame");
    assert!(number(&whole["max_ms"]) >= sum_ms, "{report}");
    assert!(number(&report["parts_per_frame"]) > 1.0, "{report}");
    assert_eq!(report["frames"], 20);

    let p99_ms = number(&whole["p99_ms"]);
    let fits = p99_ms <= number(&report["latency_ms"]);
    let highest = if fits { 1e3 / p99_ms } else { 0.0 };
    assert!((number(&report["highest_frames_per_s"]) - highest).abs() < 1e-6);
    let margin = highest / number(&report["frames_per_s"]);
    assert!((number(&report["margin"]) - margin).abs() < 1e-6);
    assert_eq!(report["keeps_up"], fits && margin >= 1.0);

    let savings = report["savings"].as_array().expect("a list");
    let saves: Vec<f64> = savings.iter().map(|s| number(&s["saves_ms"])).collect();
    assert!(saves.is_sorted_by(|a, b| a >= b), "{saves:?}");
    assert_eq!(report["costs_most"], savings[0]["instead"]);
}

#[test]
fn a_drawn_belt_is_timed_step_by_step() {
    for name in ["oat-stars", "gaskets"] {
        let (report, code) = report(&["--settings", &format!("config/{name}.toml")]);
        check(&report);
        assert_eq!(report["source"], format!("drawn {name}"));
        let keeps_up = report["keeps_up"].as_bool().expect("yes or no");
        assert_eq!(code, Some(i32::from(!keeps_up)));
    }
}

#[test]
fn a_recording_is_decoded_and_timed() {
    let recording = "demo-frames/oat-stars";
    let args = ["--settings", "config/oat-stars.toml", recording];
    let (report, _) = report(&args);
    check(&report);
    assert_eq!(report["source"], recording);
    assert!(number(&step(&report, "decode")["p50_ms"]) > 0.0);

    let run = pace(&args);
    let shown = String::from_utf8(run.stdout).expect("UTF-8");
    for name in ["decode"].iter().chain(&STEPS) {
        let found = shown
            .lines()
            .any(|line| line.trim_start().starts_with(name));
        assert!(found, "{name} in {shown}");
    }
    assert!(
        shown.starts_with("config/oat-stars.toml: this PC "),
        "{shown}"
    );
    assert!(shown.contains("half as many parts in view"), "{shown}");
}

/// The example settings with some lines changed, beside the shapes that they name.
fn altered(changes: &[(&str, &str)]) -> (tempfile::TempDir, String) {
    let mut text = fs::read_to_string("config/oat-stars.toml").expect("the example");
    for (from, to) in changes {
        assert!(text.contains(from), "{from}");
        text = text.replacen(from, to, 1);
    }
    let shape = fs::canonicalize("demo-frames/shapes/oat-star.toml").expect("the shape");
    let text = text.replacen(
        "../demo-frames/shapes/oat-star.toml",
        shape.to_str().expect("UTF-8"),
        1,
    );
    let folder = tempfile::tempdir().expect("a temporary folder");
    let file = folder.path().join("x.toml");
    fs::write(&file, text).expect("a new file");
    let name = file.to_str().expect("UTF-8").to_owned();
    (folder, name)
}

/// No PC does 1300 x 900 pixels with their parts in half a millisecond, unoptimised or not.
#[test]
fn a_pc_that_does_not_keep_up_is_exit_code_1() {
    let (_folder, file) = altered(&[
        ("width_px = 640", "width_px = 1300"),
        ("height_px = 480", "height_px = 900"),
        ("frames_per_s = 8.0", "frames_per_s = 2000.0"),
        ("distance_mm = 330.0", "distance_mm = 400.0"),
    ]);
    let (report, code) = report(&["--settings", &file]);
    assert_eq!((code, &report["keeps_up"]), (Some(1), &Value::Bool(false)));
    let run = pace(&["--settings", &file]);
    let shown = String::from_utf8(run.stdout).expect("UTF-8");
    assert!(shown.contains("does not keep up"), "{shown}");
    assert!(
        shown.contains("the next frame comes after 0.50 ms"),
        "{shown}"
    );
}

#[test]
fn bad_input_is_one_sentence_and_exit_code_2() {
    let stars = ["--settings", "config/oat-stars.toml"];
    let (_folder, wide) = altered(&[("missing_mm = 2.0", "missing_mm = 9.0")]);
    for (args, says) in [
        (&["--settings", "no/such.toml"][..], "no/such.toml"),
        (&[stars[0], stars[1], "no/such"][..], "no/such"),
        (
            &[stars[0], stars[1], "demo-frames/oat-stars", "--frames", "3"][..],
            "3",
        ),
        (&[][..], "--settings"),
        (&["--settings", &wide][..], "or name a recording"),
    ] {
        let run = pace(args);
        let error = String::from_utf8(run.stderr).expect("UTF-8");
        assert_eq!(run.status.code(), Some(2), "{args:?}: {error}");
        assert!(error.contains(says), "{args:?}: {error}");
        assert!(run.stdout.is_empty());
    }
}
