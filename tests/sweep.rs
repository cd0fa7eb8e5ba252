//! `sweep`: the same counts as replays, stopped and taken up again, in parts, and written back.

mod bench_belt;

use std::fs;
use std::process::{Command, Stdio};
use std::time::{Duration, Instant};

use bench_belt::{Bench, beltwright, done, table};

const FIXED: (&str, &str) = (
    "threshold =",
    "threshold = { method = \"fixed\", level = 40 }",
);

/// What `replay --check-labels` counts: missed, rejected wrongly, not found.
fn replayed(belt: &str, settings: &str) -> [String; 3] {
    let output = beltwright(&[
        "replay",
        belt,
        "--settings",
        settings,
        "--check-labels",
        "--json",
    ]);
    let json: serde_json::Value = serde_json::from_slice(&output.stdout).expect("JSON");
    ["misses", "false_rejects", "not_found"].map(|list| {
        json["labels"][list]
            .as_array()
            .expect(list)
            .len()
            .to_string()
    })
}

#[test]
fn every_point_counts_what_a_replay_with_its_settings_counts() {
    let bench = Bench::new("40", "7");
    let belt = bench.text("belt");
    let settings = bench.changed("fixed.toml", &[FIXED]);
    let csv = bench.text("points.csv");
    done(&[
        "sweep",
        &belt,
        "--settings",
        &settings,
        "--to-the-end",
        "--csv",
        &csv,
        "--vary",
        "picture.threshold.level=30,60",
        "--vary",
        "shape[0].missing_mm=1.0,4.0",
        "--vary",
        "picture.element_mm=30,45",
    ]);
    let rows = table(csv.as_ref());
    assert_eq!(rows.len(), 9, "the settings as they are, and eight points");
    let mut different = std::collections::BTreeSet::new();
    for row in &rows {
        let level = format!(
            "threshold = {{ method = \"fixed\", level = {} }}",
            row["picture.threshold.level"]
        );
        let missing = format!(
            "missing_mm = {:.1}",
            row["shape[0].missing_mm"].parse::<f64>().unwrap()
        );
        let element = format!(
            "element_mm = {:.1}",
            row["picture.element_mm"].parse::<f64>().unwrap()
        );
        let alone = bench.changed(
            "alone.toml",
            &[
                (FIXED.0, &level),
                ("missing_mm =", &missing),
                ("element_mm =", &element),
            ],
        );
        let counted = ["misses", "false_rejects", "not_found"].map(|column| row[column].clone());
        assert_eq!(counted, replayed(&belt, &alone), "{row:?}");
        different.insert(counted);
    }
    assert!(different.len() > 2, "the points must differ: {different:?}");
}

#[test]
fn killed_in_the_middle_it_goes_on_to_the_same_table() {
    let bench = Bench::new("60", "7");
    let belt = bench.text("belt");
    let settings = bench.changed("fixed.toml", &[FIXED]);
    let args = |csv: &str, journal: &str| -> Vec<String> {
        [
            "sweep",
            &belt,
            "--settings",
            &settings,
            "--vary",
            "picture.threshold.level=26..65:1",
            "--vary",
            "shape[0].missing_mm=1.8,2.0",
            "--shift",
            "3",
            "--csv",
            &bench.text(csv),
            "--journal",
            &bench.text(journal),
        ]
        .map(str::to_owned)
        .to_vec()
    };
    let run = |args: &[String]| done(&args.iter().map(String::as_str).collect::<Vec<_>>());
    let whole = run(&args("whole.csv", "whole.journal"));

    let journal = bench.path("cut.journal");
    let mut child = Command::new(assert_cmd::cargo::cargo_bin("beltwright"))
        .args(args("cut.csv", "cut.journal"))
        .stdout(Stdio::null())
        .stderr(Stdio::null())
        .spawn()
        .unwrap();
    let lines = || {
        fs::read(&journal).map_or(0, |bytes| {
            bytes.iter().filter(|&&byte| byte == b'\n').count()
        })
    };
    let patience = Instant::now();
    while lines() < 10 && child.try_wait().unwrap().is_none() {
        assert!(patience.elapsed() < Duration::from_secs(300));
        std::thread::sleep(Duration::from_millis(5));
    }
    child.kill().unwrap();
    child.wait().unwrap();
    assert!(
        !bench.path("cut.csv").exists(),
        "it was killed before the end"
    );
    let first = lines();
    assert!(first >= 10, "something was finished");
    // As if it had been killed while it wrote a line.
    let bytes = fs::read(&journal).unwrap();
    fs::write(&journal, &bytes[..bytes.len() - 7]).unwrap();

    let resumed = run(&args("cut.csv", "cut.journal"));
    assert_eq!(
        fs::read(bench.path("cut.csv")).unwrap(),
        fs::read(bench.path("whole.csv")).unwrap()
    );
    assert_eq!(resumed, whole);

    // A third time there is nothing left to do, and another sweep is refused.
    assert_eq!(run(&args("again.csv", "cut.journal")), whole);
    let cut = bench.text("cut.journal");
    let other = beltwright(&[
        "sweep",
        &belt,
        "--settings",
        &settings,
        "--vary",
        "picture.threshold.level=30,31",
        "--journal",
        &cut,
    ]);
    assert_eq!(other.status.code(), Some(2));
    assert!(String::from_utf8_lossy(&other.stderr).contains("another sweep"));
}

#[test]
fn parts_are_joined_to_the_same_table_and_values_written_back() {
    let bench = Bench::new("40", "9");
    let belt = bench.text("belt");
    let spoilt = bench.changed(
        "spoilt.toml",
        &[("missing_mm =", "missing_mm = 9.0 # spoilt")],
    );
    let vary = [
        "sweep",
        &belt,
        "--settings",
        &spoilt,
        "--vary",
        "shape[0].missing_mm=1.0..5.0:0.5",
        "--vary",
        "belt.part_pitch_mm=50,0.5",
    ];
    let (whole, joined, page) = (
        bench.text("whole.csv"),
        bench.text("joined.csv"),
        bench.text("page.html"),
    );
    done(&[&vary[..], &["--csv", &whole]].concat());
    let journals = ["j1", "j2", "j3"].map(|name| bench.text(name));
    for (journal, part) in journals.iter().zip(["1/3", "2/3", "3/3"]) {
        done(&[&vary[..], &["--part", part, "--journal", journal]].concat());
    }
    fs::create_dir(bench.path("out")).unwrap();
    let out = bench.text("out/chosen.toml");
    let [a, b, c] = &journals;
    let told = done(
        &[
            &vary[..],
            &[
                "--csv", &joined, "--report", &page, "--write", &out, "--join", a, b, c,
            ],
        ]
        .concat(),
    );
    assert_eq!(fs::read(&joined).unwrap(), fs::read(&whole).unwrap());

    let rows = table(whole.as_ref());
    let invalid: Vec<_> = rows
        .iter()
        .filter(|row| !row["problem"].is_empty())
        .collect();
    assert_eq!(
        invalid.len(),
        9,
        "a pitch of half a millimetre is out of range"
    );
    assert!(
        invalid
            .iter()
            .all(|row| row["misses"].is_empty() && row["problem"].contains("part_pitch_mm"))
    );
    let chosen = rows
        .iter()
        .find(|row| row["chosen"] == "yes")
        .expect("one is chosen");
    assert_eq!(
        (chosen["misses"].as_str(), chosen["false_rejects"].as_str()),
        ("0", "0"),
        "{told}"
    );

    let text = fs::read_to_string(&out).unwrap();
    let value: f64 = chosen["shape[0].missing_mm"].parse().unwrap();
    let line = format!("missing_mm = {value:.1} # spoilt");
    assert!(text.contains(&line), "comments stay: {line}");
    assert!(
        text.contains("file = \"../star.toml\""),
        "the shape is found from the new folder"
    );
    assert_eq!(replayed(&belt, &out)[..2], ["0", "0"]);
    let page = fs::read_to_string(page).unwrap();
    assert!(
        page.starts_with("<!DOCTYPE html>") && page.contains("<svg") && !page.contains("<script")
    );
}

#[test]
fn mistakes_in_the_command_are_one_sentence() {
    let bench = Bench::new("10", "9");
    let (belt, settings) = (bench.text("belt"), bench.text("a.toml"));
    let fails = |more: &[&str]| {
        let output = beltwright(&[&["sweep", &belt, "--settings", &settings], more].concat());
        assert_eq!(output.status.code(), Some(2), "{more:?}");
        String::from_utf8_lossy(&output.stderr).into_owned()
    };
    assert!(fails(&["--vary", "pictur.element_mm=1..2:1"]).contains("pictur"));
    assert!(fails(&["--vary", "shape[0].missing_mm=0..9:0.001"]).contains("9001 points"));
    fs::remove_file(bench.path("belt/labels.csv")).unwrap();
    assert!(fails(&["--vary", "shape[0].missing_mm=1,2"]).contains("no labels.csv"));
}
