//! `check` as a person runs it.

use std::fs;
use std::path::Path;

use assert_cmd::Command;
use serde_json::Value;

fn beltwright(folder: &Path, arguments: &[&str]) -> std::process::Output {
    let mut command = Command::cargo_bin("beltwright").expect("the program was built");
    let run = command.current_dir(folder).args(arguments).output();
    run.expect("the program starts")
}

/// The example settings in an empty folder, with the first `from` replaced.
fn example(from: &str, to: &str) -> tempfile::TempDir {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let text = include_str!("../config/oat-stars.toml");
    assert!(text.contains(from));
    fs::create_dir(folder.path().join("config")).expect("a new folder");
    let file = folder.path().join("config/x.toml");
    fs::write(file, text.replacen(from, to, 1)).expect("a new file");
    let shapes = folder.path().join("demo-frames/shapes");
    fs::create_dir_all(&shapes).expect("a new folder");
    for name in ["oat-star.toml", "oat-star.png"] {
        let from = Path::new(env!("CARGO_MANIFEST_DIR")).join("demo-frames/shapes");
        fs::copy(from.join(name), shapes.join(name)).expect("the taught shape");
    }
    folder
}

fn text(bytes: &[u8]) -> &str {
    std::str::from_utf8(bytes).expect("UTF-8")
}

fn json(bytes: &[u8]) -> Value {
    serde_json::from_slice(bytes).expect("one JSON object")
}

const CHECK: &[&str] = &["check", "--settings", "config/x.toml"];

#[test]
fn good_settings_are_shown_as_an_aligned_table() {
    let run = beltwright(example("", "").path(), CHECK);
    assert_eq!(run.status.code(), Some(0));
    let expected = "\
config/x.toml: no problems
  picture            160.0 x 120.0 mm at 0.25 mm/px
  motion blur        0.16 mm = 0.64 px
  region             640 x 480 px from column 0, row 0
  element            121 px
";
    let shown = text(&run.stdout);
    assert!(shown.starts_with(expected), "{shown}");
    assert!(
        shown.contains("\n  message            2292 us for 8 bytes\n"),
        "{shown}"
    );
    assert!(run.stderr.is_empty());
}

#[test]
fn good_settings_as_json() {
    let folder = example("", "");
    let run = beltwright(folder.path(), &[CHECK, &["--json"]].concat());
    assert_eq!(run.status.code(), Some(0));
    let shown = json(&run.stdout);
    assert_eq!(shown["ok"], true);
    assert_eq!(shown["region"]["width_px"], 640);
    assert_eq!(shown["element_px"], 121);
    assert_eq!(shown["decision_mm"], 201.8);
    assert_eq!(shown["t3_5_us"], 1750);
    assert_eq!(shown["outlets"][0]["name"], "air-nozzle");
}

#[test]
fn every_problem_is_one_line_and_the_exit_code_is_2() {
    let folder = example("element_mm = 30.0", "element_mm = 0.0");
    let file = folder.path().join("config/x.toml");
    let more = fs::read_to_string(&file)
        .expect("readable")
        .replace("baud = 38400", "boud = 38400");
    fs::write(&file, more).expect("writable");
    let run = beltwright(folder.path(), CHECK);
    assert_eq!(run.status.code(), Some(2));
    assert!(run.stdout.is_empty());
    let lines: Vec<_> = text(&run.stderr).lines().collect();
    let ends = [
        ": picture.element_mm = 0.0: expected a number from 0.001 to 10000 mm",
        ": line.baud: missing; expected a whole number from 1200 to 921600",
        ": line.boud = 38400: no such key; did you mean line.baud?",
    ];
    assert_eq!(lines.len(), ends.len(), "{lines:#?}");
    for (line, end) in lines.iter().zip(ends) {
        assert!(
            line.starts_with("config/x.toml:") && line.ends_with(end),
            "{line}"
        );
    }
}

#[test]
fn problems_as_json() {
    let folder = example("outlet = \"air-nozzle\"", "outlet = \"flap\"");
    let run = beltwright(folder.path(), &[CHECK, &["--json"]].concat());
    assert_eq!(run.status.code(), Some(2));
    let shown = json(&run.stdout);
    assert_eq!(shown["ok"], false);
    let problem = &shown["problems"][0];
    assert_eq!(problem["key"], "reject.outlet");
    assert_eq!(problem["came"], "\"flap\"");
    assert_eq!(problem["file"], "config/x.toml");
    let line = problem["line"].as_u64().expect("a number") as usize;
    let file = fs::read_to_string(folder.path().join("config/x.toml")).expect("readable");
    assert_eq!(file.lines().nth(line - 1), Some("outlet = \"flap\""));
}

#[test]
fn files_that_are_no_settings_are_one_sentence() {
    let folder = example("", "");
    let write =
        |name: &str, bytes: &[u8]| fs::write(folder.path().join(name), bytes).expect("writable");
    write("latin.toml", b"[camera]\n# \xb5m\n");
    write("large.toml", &vec![b'#'; (1 << 20) + 1]);
    write("picture.toml", b"\x89PNG\r\n\x1a\n\0\0\0");
    let sentences = [
        ("none.toml", "none.toml: cannot be read: "),
        ("config", "config: cannot be read: "),
        (
            "latin.toml",
            "latin.toml:2: not UTF-8 text; expected a settings file in TOML\n",
        ),
        (
            "large.toml",
            "large.toml: larger than 1048576 bytes; expected a settings file\n",
        ),
        ("picture.toml", "picture.toml:1: not UTF-8 text"),
    ];
    for (file, sentence) in sentences {
        let run = beltwright(folder.path(), &["check", "--settings", file]);
        assert_eq!(run.status.code(), Some(2), "{file}");
        let shown = text(&run.stderr);
        assert!(
            shown.starts_with(sentence) && shown.lines().count() == 1,
            "{shown}"
        );
    }
}

#[test]
fn the_schema_is_the_committed_one() {
    let run = beltwright(Path::new("."), &["check", "--schema"]);
    assert_eq!(run.status.code(), Some(0));
    assert_eq!(
        text(&run.stdout),
        include_str!("../config/settings.schema.json")
    );
}

#[test]
fn wrong_arguments_are_bad_input() {
    for arguments in [
        &["check"][..],
        &["chekc"],
        &[],
        &["check", "--settings"],
        &["check", "--schema", "--json"],
    ] {
        let run = beltwright(Path::new("."), arguments);
        assert_eq!(run.status.code(), Some(2), "{arguments:?}");
        assert!(
            run.stdout.is_empty() && !run.stderr.is_empty(),
            "{arguments:?}"
        );
    }
    assert_eq!(
        beltwright(Path::new("."), &["check", "--help"])
            .status
            .code(),
        Some(0)
    );
}

/// What only the taught shape can tell stands in the same list.
#[test]
fn settings_that_do_not_fit_the_taught_shape_are_problems_too() {
    let run = beltwright(
        example("element_mm = 30.0", "element_mm = 15.0").path(),
        CHECK,
    );
    assert_eq!(run.status.code(), Some(2));
    let said = text(&run.stderr);
    assert!(
        said.contains("picture.element_mm = 15.0: expected at least 19."),
        "{said}"
    );
    let folder = example("", "");
    fs::remove_file(folder.path().join("demo-frames/shapes/oat-star.png")).expect("it was there");
    let run = beltwright(folder.path(), CHECK);
    assert_eq!(run.status.code(), Some(2));
    assert!(
        text(&run.stderr).contains("shape[0].file"),
        "{}",
        text(&run.stderr)
    );
}
