//! The program on recordings: what it prints, what it writes, how it ends.

use std::fs;
use std::path::{Path, PathBuf};
use std::process::Output;

use assert_cmd::Command;
use serde_json::Value;
use tempfile::TempDir;

const STARS: &str = "demo-frames/oat-stars";
const STAR_SETTINGS: &str = "config/oat-stars.toml";

fn beltwright(args: &[&str]) -> Output {
    let mut command = Command::cargo_bin("beltwright").expect("the program");
    command.args(args).output().expect("it runs")
}

fn stderr(output: &Output) -> String {
    String::from_utf8_lossy(&output.stderr).into_owned()
}

fn stdout(output: &Output) -> String {
    String::from_utf8_lossy(&output.stdout).into_owned()
}

fn path(path: &Path) -> &str {
    path.to_str().expect("a path in UTF-8")
}

/// Replays with both tables written; gives their bytes.
fn tables(recording: &str, more: &[&str]) -> (Vec<u8>, Vec<u8>) {
    let folder = TempDir::new().unwrap();
    let (parts, signals) = (
        folder.path().join("parts.csv"),
        folder.path().join("signals.csv"),
    );
    let mut args = vec!["replay", recording, "--settings", STAR_SETTINGS];
    args.extend([
        "--parts",
        path(&parts),
        "--signals",
        path(&signals),
        "--quiet",
    ]);
    args.extend(more);
    let output = beltwright(&args);
    assert_eq!(output.status.code(), Some(0), "{}", stderr(&output));
    (fs::read(parts).unwrap(), fs::read(signals).unwrap())
}

fn json(recording: &str) -> Value {
    let output = beltwright(&["replay", recording, "--settings", STAR_SETTINGS, "--json"]);
    assert_eq!(output.status.code(), Some(0), "{}", stderr(&output));
    serde_json::from_slice(&output.stdout).expect("one JSON object")
}

/// The demo without the frames that `drop` names (counted from 0).
fn without(drop: &[usize]) -> TempDir {
    let folder = TempDir::new().unwrap();
    let table = fs::read_to_string(format!("{STARS}/frames.csv")).unwrap();
    let mut kept = String::new();
    for (row, line) in table.lines().enumerate() {
        if row == 0 || !drop.contains(&(row - 1)) {
            kept.push_str(line);
            kept.push('\n');
        }
        if row > 0 {
            let file = line.split(',').next().unwrap();
            fs::copy(format!("{STARS}/{file}"), folder.path().join(file)).unwrap();
        }
    }
    fs::write(folder.path().join("frames.csv"), kept).unwrap();
    folder
}

#[test]
fn both_demos_agree_with_their_labels() {
    for demo in ["oat-stars", "gaskets"] {
        let (recording, settings) = (format!("demo-frames/{demo}"), format!("config/{demo}.toml"));
        let output = beltwright(&[
            "replay",
            &recording,
            "--settings",
            &settings,
            "--check-labels",
        ]);
        assert_eq!(
            output.status.code(),
            Some(0),
            "{}{}",
            stdout(&output),
            stderr(&output)
        );
        assert!(
            stdout(&output).contains(" 0 missed;"),
            "{}",
            stdout(&output)
        );
        assert!(
            stdout(&output).contains("dry run: nothing was sent"),
            "{}",
            stdout(&output)
        );
    }
}

#[test]
fn every_run_gives_the_same_bytes() {
    let first = tables(STARS, &[]);
    assert!(
        first.0.len() > 2000 && first.1.len() > 500,
        "both tables have rows"
    );
    assert_eq!(first, tables(STARS, &[]), "again");
    assert_eq!(first, tables(STARS, &["--workers", "1"]), "one worker");
    assert_eq!(first, tables(STARS, &["--workers", "5"]), "five workers");
    assert_eq!(first, tables(STARS, &["--paced"]), "in real time");
}

#[test]
fn tables_have_the_documented_columns() {
    let (parts, signals) = tables(STARS, &[]);
    let head = |bytes: &[u8]| {
        String::from_utf8_lossy(bytes)
            .lines()
            .next()
            .unwrap()
            .to_owned()
    };
    assert_eq!(
        head(&parts),
        "part,along_mm,across_mm,first_us,decided_us,views,shape,angle_deg,flipped,missing_mm,excess_mm,area_mm2,\
         verdict,reasons"
    );
    assert_eq!(head(&signals), "due_us,sent_us,outlet,state,bytes_hex,mode");
    let signals = String::from_utf8(signals).unwrap();
    // FC05 for coil 0 of unit 1, ON and OFF: MODBUS Application Protocol V1.1b3, CRC after the serial line guide V1.02.
    assert!(
        signals.contains(",on,01 05 00 00 FF 00 8C 3A,dry-run"),
        "{signals}"
    );
    assert!(
        signals.contains(",off,01 05 00 00 00 00 CD CA,dry-run"),
        "{signals}"
    );
}

/// Frames come every 50 mm and show 160 mm, so three in a row must go missing before belt is unseen: 40 mm.
#[test]
fn belt_that_no_frame_shows_is_unseen_and_rejected_and_nothing_else_changes() {
    let whole = json(STARS);
    assert_eq!(whole["unseen"].as_array().unwrap().len(), 0);
    let gap = [9, 10, 11];
    let cut = json(path(without(&gap).path()));
    let unseen = cut["unseen"].as_array().unwrap();
    assert_eq!(unseen.len(), 1, "{unseen:?}");
    let (from, to) = (
        unseen[0]["from_mm"].as_f64().unwrap(),
        unseen[0]["to_mm"].as_f64().unwrap(),
    );
    assert!((to - from - 40.0).abs() < 0.01, "{from} to {to}");
    let parts = |run: &Value| -> Vec<Value> {
        let all = run["parts"].as_array().unwrap().iter();
        // Parts that lie wholly outside the belt that only the missing frames showed whole.
        let outside = |part: &&Value| {
            let along: f64 = part["along_mm"].as_str().unwrap().parse().unwrap();
            !(from - 110.0..=to + 110.0).contains(&along)
        };
        all.filter(outside)
            .map(|part| {
                // A part may have been seen in one of the missing frames too; what it is does not change.
                let mut part = part.clone();
                for key in ["part", "views", "first_us"] {
                    part[key] = Value::Null;
                }
                part
            })
            .collect()
    };
    assert!(parts(&whole).len() > 10);
    assert_eq!(parts(&whole), parts(&cut));
    let open_over_gap = !cut["signals"].as_array().unwrap().is_empty();
    assert!(open_over_gap && cut["summary"]["unseen_mm"].as_f64().unwrap() > 39.9);
}

#[test]
fn pictures_show_each_part() {
    let folder = TempDir::new().unwrap();
    let out: PathBuf = folder.path().join("pictures");
    let output = beltwright(&[
        "replay",
        STARS,
        "--settings",
        STAR_SETTINGS,
        "--pictures",
        path(&out),
    ]);
    assert_eq!(output.status.code(), Some(0), "{}", stderr(&output));
    let parts = json(STARS)["parts"].as_array().unwrap().len();
    assert_eq!(fs::read_dir(&out).unwrap().count(), parts);
    for entry in fs::read_dir(&out).unwrap() {
        image::open(entry.unwrap().path()).expect("a picture");
    }
}

#[test]
fn disagreement_with_labels_is_listed_and_ends_with_1() {
    let folder = without(&[]);
    let labels = fs::read_to_string(format!("{STARS}/labels.csv")).unwrap();
    let wrong = labels.replacen(",keep,", ",reject,", 1);
    assert_ne!(labels, wrong);
    fs::write(folder.path().join("labels.csv"), wrong).unwrap();
    let args = [
        "replay",
        path(folder.path()),
        "--settings",
        STAR_SETTINGS,
        "--check-labels",
    ];
    let output = beltwright(&args);
    assert_eq!(output.status.code(), Some(1), "{}", stderr(&output));
    assert_eq!(
        stdout(&output)
            .matches("missed (should be rejected")
            .count(),
        1,
        "{}",
        stdout(&output)
    );
}

/// Each of these must be refused with one sentence and exit code 2, before anything is written.
#[test]
fn bad_input_ends_with_2_and_writes_nothing() {
    let folder = without(&[]);
    let parts = folder.path().join("parts.csv");
    let refused = |args: &[&str], says: &str| {
        let mut all = vec!["replay"];
        all.extend(args);
        all.extend(["--parts", path(&parts)]);
        let output = beltwright(&all);
        assert_eq!(
            output.status.code(),
            Some(2),
            "{args:?}: {}",
            stderr(&output)
        );
        assert!(
            stderr(&output).contains(says),
            "{args:?}: {}",
            stderr(&output)
        );
        assert!(!parts.exists(), "{args:?}");
    };
    refused(
        &["no/such/recording", "--settings", STAR_SETTINGS],
        "frames.csv",
    );
    refused(&[STARS, "--settings", "no/such.toml"], "no/such.toml");
    refused(
        &["demo-frames/gaskets", "--settings", "Cargo.toml"],
        "Cargo.toml",
    );
    refused(
        &[STARS, "--settings", STAR_SETTINGS, "--line", "/dev/null"],
        "--armed",
    );
    refused(
        &[
            path(folder.path()),
            "--settings",
            STAR_SETTINGS,
            "--check-labels",
        ],
        "no labels.csv",
    );
    let truncated = fs::read_dir(folder.path())
        .unwrap()
        .map(|entry| entry.unwrap().path());
    let mut pictures: Vec<_> = truncated
        .filter(|file| file.extension().is_some_and(|e| e == "png"))
        .collect();
    pictures.sort();
    let bytes = fs::read(&pictures[5]).unwrap();
    fs::write(&pictures[5], &bytes[..bytes.len() / 2]).unwrap();
    refused(
        &[path(folder.path()), "--settings", STAR_SETTINGS],
        path(&pictures[5]),
    );
}

#[test]
fn nothing_is_armed_unless_the_settings_allow_it() {
    let args = [
        "replay",
        STARS,
        "--settings",
        STAR_SETTINGS,
        "--line",
        "/dev/null",
        "--armed",
    ];
    let output = beltwright(&args);
    assert_eq!(output.status.code(), Some(2));
    assert!(
        stderr(&output).contains("reject.allow_armed is false"),
        "{}",
        stderr(&output)
    );
}
