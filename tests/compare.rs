//! `compare`: exactly the parts that a change of settings turns over.

mod bench_belt;

use std::fs;
use std::path::Path;

use bench_belt::{Bench, beltwright, done, table};

#[test]
fn a_limit_moved_by_a_tenth_lists_exactly_the_parts_between() {
    let bench = Bench::new("120", "11");
    let (belt, a) = (bench.text("belt"), bench.text("a.toml"));
    let parts = bench.path("parts.csv");
    done(&[
        "replay",
        &belt,
        "--settings",
        &a,
        "--parts",
        &bench.text("parts.csv"),
        "--quiet",
    ]);
    let figures: Vec<f64> = table(&parts)
        .iter()
        .filter_map(|row| row["missing_mm"].parse().ok())
        .collect();
    // A tenth of a millimetre that some figures fall into, and one that none do.
    let tenth = |k: i32| f64::from(k) / 10.0;
    let inside = |k: i32| {
        let between = |figure: &&f64| tenth(k) < **figure && **figure <= tenth(k + 1);
        figures.iter().filter(between).count()
    };
    let busy = (5..80).find(|&k| inside(k) >= 1).expect("figures spread");
    let empty = (5..80)
        .find(|&k| inside(k) == 0)
        .expect("figures leave gaps");
    for k in [busy, empty] {
        let limit = |mm: f64| format!("missing_mm = {mm:.1}");
        let low = bench.changed("low.toml", &[("missing_mm =", &limit(tenth(k)))]);
        let high = bench.changed("high.toml", &[("missing_mm =", &limit(tenth(k + 1)))]);
        let csv = bench.text("changes.csv");
        done(&[
            "compare",
            &belt,
            "--settings",
            &low,
            "--against",
            &high,
            "--csv",
            &csv,
        ]);
        // What must be listed follows from two replays: rejected for missing below, not above.
        let places = |settings: &str| -> Vec<String> {
            done(&[
                "replay",
                &belt,
                "--settings",
                settings,
                "--parts",
                &bench.text("p.csv"),
                "--quiet",
            ]);
            let rows = table(&bench.path("p.csv"));
            let low = rows.iter().filter(|row| row["reasons"].contains("missing"));
            low.map(|row| row["along_mm"].clone()).collect()
        };
        let (at_low, at_high) = (places(&low), places(&high));
        let expected: Vec<_> = at_low
            .iter()
            .filter(|mm| !at_high.contains(mm))
            .cloned()
            .collect();
        let rows = table(Path::new(&csv));
        let listed: Vec<_> = rows.iter().map(|row| row["along_mm"].clone()).collect();
        assert_eq!(
            listed,
            expected,
            "missing_mm from {} to {}",
            tenth(k),
            tenth(k + 1)
        );
        for row in &rows {
            let figure: f64 = row["missing_mm"].parse().unwrap();
            assert!(tenth(k) < figure && figure <= tenth(k + 1), "{row:?}");
            assert!(row["differs"].contains("reasons"), "{row:?}");
        }
        assert_eq!(
            rows.len(),
            inside(k),
            "every figure between the limits, and no other"
        );
    }
}

#[test]
fn the_same_settings_are_the_same_and_others_end_with_one() {
    let bench = Bench::new("40", "3");
    let (belt, a) = (bench.text("belt"), bench.text("a.toml"));
    let same = beltwright(&[
        "compare",
        &belt,
        "--settings",
        &a,
        "--against",
        &a,
        "--expect-same",
    ]);
    assert_eq!(same.status.code(), Some(0));
    let all = bench.changed("b.toml", &[("missing_mm =", "missing_mm = 0.5")]);
    let (csv, html) = (bench.text("c.csv"), bench.text("c.html"));
    let other = beltwright(&[
        "compare",
        &belt,
        "--settings",
        &a,
        "--against",
        &all,
        "--expect-same",
        "--csv",
        &csv,
        "--report",
        &html,
        "--margin",
        "0.5",
    ]);
    assert_eq!(
        other.status.code(),
        Some(1),
        "{}",
        String::from_utf8_lossy(&other.stderr)
    );
    let rows = table(Path::new(&csv));
    let differing = rows.iter().filter(|row| !row["differs"].is_empty()).count();
    assert!(differing > 0, "next to no bite is allowed any more");
    for row in rows.iter().filter(|row| row["differs"].is_empty()) {
        assert!(
            row["flips_after_mm"].parse::<f64>().unwrap() <= 0.5,
            "{row:?}"
        );
    }
    let page = fs::read_to_string(html).unwrap();
    assert!(page.starts_with("<!DOCTYPE html>") && page.contains("data:image/"));
    assert!(!page.contains("<script") && !page.contains("http"));
}

#[test]
fn frames_of_another_size_are_refused() {
    let bench = Bench::new("10", "3");
    let small = bench.changed("b.toml", &[("height_px =", "height_px = 400")]);
    let a = bench.text("a.toml");
    let output = beltwright(&[
        "compare",
        &bench.text("belt"),
        "--settings",
        &a,
        "--against",
        &small,
    ]);
    assert_eq!(output.status.code(), Some(2));
    let error = String::from_utf8_lossy(&output.stderr);
    assert!(
        error.contains("640 x 400") && error.contains("640 x 480"),
        "{error}"
    );
}
