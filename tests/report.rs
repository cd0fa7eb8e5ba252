//! `replay --report`: one file that stands by itself and says the same as the other outputs of the run.

use std::fs;
use std::path::Path;
use std::process::Output;

use assert_cmd::Command;
use serde_json::Value;
use tempfile::TempDir;

const STARS: &str = "demo-frames/oat-stars";
const SETTINGS: &str = "config/oat-stars.toml";
const SECTIONS: [&str; 10] = [
    "counts",
    "agreement",
    "spread",
    "drift",
    "reasons",
    "belt",
    "gallery",
    "steps",
    "times",
    "settings",
];

fn replay(recording: &Path, report: &Path, more: &[&str]) -> Output {
    let mut command = Command::cargo_bin("beltwright").expect("the program");
    command
        .arg("replay")
        .arg(recording)
        .args(["--settings", SETTINGS, "--report"])
        .arg(report)
        .args(more);
    command.output().expect("it runs")
}

/// The page and the JSON of one run.
fn both(recording: &Path, more: &[&str]) -> (String, Value) {
    let folder = TempDir::new().unwrap();
    let file = folder.path().join("report.html");
    let mut args = vec!["--json"];
    args.extend(more);
    let output = replay(recording, &file, &args);
    let said = String::from_utf8_lossy(&output.stderr).into_owned();
    assert!(output.status.success(), "{said}");
    let left = fs::read_dir(folder.path()).unwrap().count();
    assert_eq!(left, 1, "nothing but the report is left");
    let json = serde_json::from_slice(&output.stdout).expect("one JSON object");
    (fs::read_to_string(file).unwrap(), json)
}

/// A copy of the demo with its files changed by `change` (name, text).
fn changed(change: impl Fn(&str, String) -> Option<String>) -> TempDir {
    let folder = TempDir::new().unwrap();
    for entry in fs::read_dir(STARS).unwrap() {
        let (path, name) = entry.map(|e| (e.path(), e.file_name())).unwrap();
        let (name, to) = (
            name.to_string_lossy().into_owned(),
            folder.path().join(&name),
        );
        if name.ends_with(".csv") {
            if let Some(text) = change(&name, fs::read_to_string(path).unwrap()) {
                fs::write(to, text).unwrap();
            }
        } else {
            fs::copy(path, to).unwrap();
        }
    }
    folder
}

fn section<'a>(page: &'a str, id: &str) -> &'a str {
    let start = page
        .find(&format!("<section id=\"{id}\">"))
        .unwrap_or_else(|| panic!("no section {id}"));
    let end = page[start..].find("</section>").expect("its end");
    &page[start..start + end]
}

/// The values of an attribute, wherever it stands.
fn values<'a>(page: &'a str, attribute: &str) -> Vec<&'a str> {
    let start = format!(" {attribute}=\"");
    let found = page.match_indices(&start);
    found
        .map(|(at, _)| {
            let rest = &page[at + start.len()..];
            &rest[..rest.find('"').expect("a closing quote")]
        })
        .collect()
}

#[test]
fn the_page_stands_by_itself_and_has_every_section() {
    let (page, _) = both(Path::new(STARS), &[]);
    for id in SECTIONS {
        assert!(section(&page, id).len() > 100, "{id}");
    }
    for word in ["<script", "http://", "https://", "@import", "javascript:"] {
        assert!(!page.contains(word), "{word}");
    }
    let sources = values(&page, "src");
    assert!(sources.len() >= 12, "pictures of each step");
    assert!(sources.iter().all(|src| src.starts_with("data:image/")));
    let links = values(&page, "href");
    let inside = |link: &&&str| link.starts_with('#') || link.starts_with("data:image/");
    assert_eq!(links.iter().filter(inside).count(), links.len());
    let urls = page.matches("url(").count();
    assert_eq!(urls, page.matches("url(#").count(), "nothing from outside");
    for link in links.iter().filter_map(|link| link.strip_prefix('#')) {
        assert!(page.contains(&format!("id=\"{link}\"")), "{link}");
    }
}

#[test]
fn figures_agree_with_the_json_of_the_same_run() {
    let (page, json) = both(Path::new(STARS), &["--check-labels"]);
    let summary = &json["summary"];
    for (name, count) in [
        ("parts", &summary["parts"]),
        ("kept", &summary["kept"]),
        ("rejected", &summary["rejected"]),
    ] {
        assert!(page.contains(&format!("<b>{count}</b>{name}")), "{name}");
    }
    let reasons = section(&page, "reasons");
    for pair in summary["reasons"].as_array().unwrap() {
        let (name, count) = (pair[0].as_str().unwrap(), &pair[1]);
        assert!(reasons.contains(&format!(">{name}<")), "{name}");
        assert!(reasons.contains(&format!(">{count}<")), "{name} {count}");
    }
    let numbered = json["parts"].as_array().unwrap().iter();
    let rejected: Vec<_> = numbered
        .filter(|part| part["verdict"] == "reject")
        .collect();
    assert!(rejected.len() > 5);
    let belt = section(&page, "belt");
    for part in &rejected {
        let title = format!(
            "part {}: reject {}",
            part["part"],
            part["reasons"].as_str().unwrap()
        );
        assert!(belt.contains(&title), "{title}");
    }
    let bad = fs::read_to_string(format!("{STARS}/labels.csv")).unwrap();
    let bad = bad.matches(",reject,").count() as i32;
    assert_eq!(json["labels"]["misses"].as_array().unwrap().len(), 0);
    // Clopper and Pearson 1934 in closed form for a count of 0, rounded up.
    let high = ((1.0 - 0.025f64.powf(1.0 / f64::from(bad))) * 1000.0).ceil() / 10.0;
    let sentence = format!("no miss in {bad} bad parts: at most {high:.1} % at 95 % confidence");
    assert!(
        section(&page, "agreement").contains(&sentence),
        "{sentence}"
    );
}

#[test]
fn a_label_that_disagrees_is_listed_and_pictured() {
    let folder = changed(|name, text| {
        Some(match name {
            "labels.csv" => text.replacen(",keep,", ",reject,<b>not</b> so good & ", 1),
            _ => text,
        })
    });
    let (page, _) = both(folder.path(), &[]);
    let agreement = section(&page, "agreement");
    assert!(agreement.contains("1 miss in "));
    assert!(agreement.contains("&lt;b&gt;not&lt;/b&gt; so good &amp; "));
    let gallery = section(&page, "gallery");
    assert_eq!(gallery.matches("class=\"tag miss\"").count(), 1);
    assert_eq!(section(&page, "belt").matches("class=\"wrong\"").count(), 1);
}

#[test]
fn without_labels_it_says_how_to_get_them() {
    let folder = changed(|name, text| (name != "labels.csv").then_some(text));
    let (page, _) = both(folder.path(), &[]);
    let agreement = section(&page, "agreement");
    assert!(
        agreement.contains("no labels") && agreement.contains("along_mm,across_mm,verdict,note")
    );
    assert!(section(&page, "spread").contains("kept parts"));
}

/// Frames come every 50 mm and show 160 mm: three missing ones leave 40 mm unseen. What lay there is rejected with it.
#[test]
fn unseen_belt_is_on_the_map() {
    let folder = changed(|name, text| {
        Some(match name {
            "frames.csv" => {
                let kept = text
                    .lines()
                    .enumerate()
                    .filter(|(row, _)| !(10..=12).contains(row));
                kept.map(|(_, line)| format!("{line}\n")).collect()
            }
            _ => text,
        })
    });
    let (page, json) = both(folder.path(), &[]);
    assert_eq!(json["unseen"].as_array().unwrap().len(), 1);
    assert!(section(&page, "belt").contains("class=\"unseen\""));
    assert!(section(&page, "counts").contains("40.0 mm in 1 stretch"));
}

#[test]
fn only_the_times_differ_from_run_to_run() {
    let still = |more: &[&str]| {
        let (page, _) = both(Path::new(STARS), more);
        page.replace(section(&page, "times"), "")
    };
    assert_eq!(still(&[]), still(&["--workers", "5"]));
}

#[test]
fn a_report_that_cannot_be_written_ends_with_2_and_leaves_nothing() {
    let folder = TempDir::new().unwrap();
    let output = replay(
        Path::new(STARS),
        &folder.path().join("no/such/report.html"),
        &[],
    );
    assert_eq!(output.status.code(), Some(2));
    assert!(String::from_utf8_lossy(&output.stderr).contains("cannot write "));
    assert_eq!(fs::read_dir(folder.path()).unwrap().count(), 0);
}
