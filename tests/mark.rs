//! `mark`: proposals that a person corrects, and that stay corrected.

mod bench_belt;

use std::fs;

use bench_belt::{Bench, beltwright, done, table};

#[test]
fn what_a_person_changed_stays() {
    let bench = Bench::new("30", "5");
    let (belt, settings) = (bench.text("belt"), bench.text("a.toml"));
    let labels = bench.path("belt/labels.csv");
    fs::remove_file(&labels).unwrap();
    done(&["mark", &belt, "--settings", &settings]);
    let first = table(&labels);
    assert!(first.len() > 20);
    // The present verdicts are what is proposed, so nothing disagrees.
    done(&[
        "replay",
        &belt,
        "--settings",
        &settings,
        "--check-labels",
        "--quiet",
    ]);
    // The doubtful ones stand first: what is left is not less further down.
    let left = |note: &str| -> Option<f64> {
        let words: Vec<_> = note.split_whitespace().collect();
        let mm = words.iter().position(|word| *word == "mm")?;
        words[mm - 1].parse().ok()
    };
    let order: Vec<f64> = first
        .iter()
        .map(|row| left(&row["note"]).unwrap_or(f64::INFINITY))
        .collect();
    assert!(order.is_sorted() && order[0].is_finite(), "{order:?}");
    let page = fs::read_to_string(bench.path("belt/labels.html")).unwrap();
    assert!(
        page.starts_with("<!DOCTYPE html>") && page.matches("class=\"tag\"").count() == first.len()
    );
    assert!(!page.contains("<script"));

    // Turn over the first proposal, in the way an editor would.
    let text = fs::read_to_string(&labels).unwrap();
    let line = text.lines().nth(1).unwrap();
    let other = match line.contains(",keep,") {
        true => line.replace(",keep,", ",reject,"),
        false => line.replace(",reject,", ",keep,"),
    };
    fs::write(&labels, text.replacen(line, &other, 1)).unwrap();
    let sheet = bench.text("sheet.html");
    let lenient = bench.changed("b.toml", &[("missing_mm =", "missing_mm = 6.0")]);
    for settings in [&settings, &lenient] {
        done(&[
            "mark",
            &belt,
            "--settings",
            settings,
            "--sheet",
            &sheet,
            "--pictures",
            "3",
        ]);
        let text = fs::read_to_string(&labels).unwrap();
        assert!(text.lines().any(|kept| kept == other), "{other} must stay");
        assert_eq!(text.lines().count(), first.len() + 1, "nothing twice");
    }
    let rejects = |rows: &[std::collections::HashMap<String, String>]| {
        let ours = |note: &str| note.starts_with("proposed reject");
        rows.iter()
            .filter(|row| row["verdict"] == "reject" && ours(&row["note"]))
            .count()
    };
    // The one that was turned over may have been a reject.
    assert!(
        rejects(&table(&labels)) + 1 < rejects(&first),
        "lenient settings propose fewer rejects"
    );
    assert_eq!(
        fs::read_to_string(&sheet)
            .unwrap()
            .matches("class=\"tag\"")
            .count(),
        3
    );
}

#[test]
fn bad_labels_are_left_alone() {
    let bench = Bench::new("10", "5");
    let (belt, settings) = (bench.text("belt"), bench.text("a.toml"));
    let labels = bench.path("belt/labels.csv");
    fs::write(&labels, "along_mm,across_mm,verdict,note\n1,2,maybe,\n").unwrap();
    let before = fs::read(&labels).unwrap();
    let output = beltwright(&["mark", &belt, "--settings", &settings]);
    assert_eq!(output.status.code(), Some(2));
    assert!(String::from_utf8_lossy(&output.stderr).contains("keep or reject"));
    assert_eq!(fs::read(&labels).unwrap(), before);
    assert!(!bench.path("belt/labels.html").exists());
}
