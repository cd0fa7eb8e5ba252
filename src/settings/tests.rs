//! Bad settings: one variant of a good file for each rule, and every key left out or mistyped.

use std::path::Path;

use proptest::prelude::*;

use super::source::{Kind, Node, Source};
use super::*;

/// A good file in which every key stands.
const GOOD: &str = r#"[camera]
width_px = 640
height_px = 480
mm_per_px = 0.25
frames_per_s = 8.0
exposure_ms = 0.4
latency_ms = 100

[belt]
speed_mm_s = 400.0
speed_tolerance_percent = 2.0
travel = "right"
part_pitch_mm = 60.0
unseen = "stop"

[picture]
parts = "bright"
region_mm = { left = 10.0, top = 10.0, width = 140.0, height = 100.0 }
element = "octagon"
element_mm = 45.0
threshold = { method = "hysteresis", low = 40, high = 80 }
fill_below_mm2 = 30.0
speck_below_mm2 = 60.0

[judge]
flaw_below_mm2 = 1.0
fit_at_least = 0.6
partial = "keep"

[[shape]]
name = "star"
file = "star.toml"
missing_mm = 2.0
excess_mm = 1.5
face_down = "keep"
outlet = "tray"
area_mm2 = [500.0, 900.0]
length_mm = [34.0, 42.0]
width_mm = [32.0, 40.0]
holes = [0, 1]
boundary_mm = [100.0, 220.0]
branches = [5, 6]
branch_above_mm = 5.0

[[shape]]
name = "ring"
file = "/shapes/ring.toml"
missing_mm = 2.5
excess_mm = 1.75

[[outlet]]
name = "nozzle"
coil = 0
distance_mm = 330.0
margin_mm = 6.0
open_delay_ms = 15.0
close_delay_ms = 20.0
max_on_ms = 1000.0

[[outlet]]
name = "tray"
coil = 1
distance_mm = 450.0
margin_mm = 8.0
open_delay_ms = 15.0
close_delay_ms = 20.0
max_on_ms = 1000.0

[reject]
outlet = "nozzle"
allow_armed = true

[line]
unit = 1
baud = 38400
parity = "none"
answer_within_ms = 50.0
"#;

fn good() -> Loaded {
    parse(Path::new("config/full.toml"), GOOD).unwrap_or_else(|error| panic!("{error}"))
}

/// What is wrong in `text`; empty when nothing is.
fn problems(text: &str) -> Vec<Problem> {
    match parse(Path::new("config/full.toml"), text) {
        Ok(_) => Vec::new(),
        Err(SettingsError::Bad(problems)) => problems.0,
        Err(other) => panic!("{other}"),
    }
}

/// `GOOD` with the first `from` replaced.
fn changed(from: &str, to: &str) -> String {
    assert!(GOOD.contains(from), "the good file has no {from:?}");
    GOOD.replacen(from, to, 1)
}

/// One edit of the good file, and what must be said about it.
struct Bad {
    /// What is replaced (its first occurrence), and by what.
    edit: (&'static str, &'static str),
    /// How the line that is pointed at begins.
    line: &'static str,
    key: &'static str,
    /// What the message must contain.
    says: &'static [&'static str],
}

/// Asserts that `bad` leads to just the one problem that it should.
fn assert_found(bad: &Bad) {
    let text = changed(bad.edit.0, bad.edit.1);
    let found = problems(&text);
    let shown = Problems(found.clone()).to_string();
    let [problem] = found.as_slice() else {
        panic!("{:?}: expected one problem, got:\n{shown}", bad.edit);
    };
    let line = text.lines().nth(problem.line - 1).unwrap_or("");
    assert_eq!(problem.key, bad.key, "{shown}");
    assert!(line.starts_with(bad.line), "line {line:?} for {shown}");
    for said in bad.says {
        assert!(problem.message.contains(said), "no {said:?} in {shown}");
    }
    assert!(
        !shown.contains('\n') && shown.starts_with("config/full.toml:"),
        "{shown}"
    );
}

macro_rules! bad {
    ($from:literal => $to:literal, $line:literal, $key:literal, [$($says:literal),+]) => {
        Bad { edit: ($from, $to), line: $line, key: $key, says: &[$($says),+] }
    };
}

#[test]
fn the_good_file_is_good() {
    let loaded = good();
    assert_eq!(loaded.settings.camera.latency_ms, 100.0);
    assert_eq!(loaded.shape_path(0), Path::new("config/star.toml"));
    assert_eq!(loaded.shape_path(1), Path::new("/shapes/ring.toml"));
}

#[test]
fn keys_by_themselves() {
    let all = [
        bad!("width_px = 640" => "width_px = 640.0", "width_px", "camera.width_px",
            ["expected a whole number from 16 to 8192 px"]),
        bad!("width_px = 640" => "width_px = -640", "width_px", "camera.width_px", ["from 16 to 8192 px"]),
        bad!("width_px = 640" => "width_px = 9223372036854775807", "width_px", "camera.width_px", ["from 16"]),
        bad!("mm_per_px = 0.25" => "mm_per_px = 10.5", "mm_per_px", "camera.mm_per_px",
            ["expected a number from 0.001 to 10 mm/px"]),
        bad!("mm_per_px = 0.25" => "mm_per_px = nan", "mm_per_px", "camera.mm_per_px", ["a number from 0.001"]),
        bad!("mm_per_px = 0.25" => "mm_per_px = \"0.25\"", "mm_per_px", "camera.mm_per_px",
            ["a number from 0.001", "without quotes"]),
        bad!("latency_ms = 100" => "latency_ms = inf", "latency_ms", "camera.latency_ms", ["from 1 to 10000 ms"]),
        bad!("latency_ms = 100" => "latency_ms = -inf", "latency_ms", "camera.latency_ms", ["from 1 to 10000 ms"]),
        bad!("latency_ms = 100\n" => "", "[camera]", "camera.latency_ms",
            ["missing; expected a number from 1 to 10000 ms"]),
        bad!("speed_tolerance_percent = 2.0" => "speed_tolerance_percent = 21", "speed_tol",
            "belt.speed_tolerance_percent", ["from 0 to 20 %"]),
        bad!("travel = \"right\"" => "travel = \"up\"", "travel", "belt.travel",
            ["expected \"right\" or \"left\""]),
        bad!("travel = \"right\"" => "travel = 1", "travel", "belt.travel", ["expected \"right\" or \"left\""]),
        bad!("unseen = \"stop\"" => "unseen = \"Stop\"", "unseen", "belt.unseen",
            ["\"reject\", \"keep\" or \"stop\""]),
        bad!("element = \"oct" => "elment = \"oct", "elment", "picture.elment",
            ["no such key; did you mean picture.element?"]),
        bad!("allow_armed = true" => "allow_armed = \"true\"", "allow_armed", "reject.allow_armed",
            ["true or false", "without quotes"]),
        bad!("unit = 1\n" => "unit = 1\nlatency_ms = 100\n", "latency_ms", "line.latency_ms",
            ["did you mean camera.latency_ms?"]),
        bad!("unit = 1\n" => "unit = 1\nstopbits_of_the_board = 1\n", "stopbits", "line.stopbits_of_the_board",
            ["no such key; expected answer_within_ms, baud, parity or unit"]),
        bad!("unit = 1\n" => "unit = 1\n\"a\\nb \\u001b\" = 1\n", "\"a", "line.a b ?", ["no such key"]),
        bad!("unit = 1\n" => "unit = 248\n", "unit", "line.unit", ["whole number from 1 to 247"]),
        bad!("[judge]" => "[judg]\n[judge]", "[judg]", "judg", ["did you mean judge?"]),
        bad!("left = 10.0, " => "", "region_mm", "picture.region_mm.left", ["missing; expected a number"]),
        bad!("left = 10.0" => "left = -1", "region_mm", "picture.region_mm.left", ["from 0 to 100000"]),
        bad!("{ left = 10.0, top = 10.0, width = 140.0, height = 100.0 }" => "160", "region_mm",
            "picture.region_mm", ["a table with left, top, width and height"]),
        bad!("method = \"hysteresis\", " => "", "threshold", "picture.threshold.method",
            ["missing; expected \"fixed\", \"otsu\" or \"hysteresis\""]),
        bad!("\"hysteresis\"" => "\"hysterese\"", "threshold", "picture.threshold.method", ["\"fixed\", \"otsu\""]),
        bad!("low = 40, " => "", "threshold", "picture.threshold.low", ["missing", "from 0 to 255"]),
        bad!("low = 40" => "low = 256", "threshold", "picture.threshold.low", ["from 0 to 255"]),
        bad!("{ method = \"hysteresis\", low = 40, high = 80 }" => "60", "threshold", "picture.threshold",
            ["a table with the key method"]),
        bad!("{ method = \"hysteresis\", low = 40, high = 80 }" => "{ method = \"otsu\", floor = 3, low = 1 }",
            "threshold", "picture.threshold.low", ["no such key"]),
        bad!("name = \"star\"" => "name = \"\"", "name", "shape[0].name", ["text of 1 to 40 characters"]),
        bad!("file = \"star.toml\"" => "file = 1", "file", "shape[0].file", ["text of 1 to 4096 characters"]),
        bad!("area_mm2 = [500.0, 900.0]" => "area_mm2 = 500.0", "area_mm2", "shape[0].area_mm2",
            ["[low, high], two numbers from 0 to 1000000 mm2"]),
        bad!("area_mm2 = [500.0, 900.0]" => "area_mm2 = [500.0]", "area_mm2", "shape[0].area_mm2", ["[low, high]"]),
        bad!("length_mm = [34.0, 42.0]" => "length_mm = [34.0,\n  nan]", "  nan", "shape[0].length_mm[1]",
            ["a number from 0 to 10000 mm"]),
        bad!("holes = [0, 1]" => "holes = [0, 1.5]", "holes", "shape[0].holes[1]", ["a whole number"]),
        bad!("holes = [0, 1]" => "holes = [0, 4294967296]", "holes", "shape[0].holes[1]", ["from 0 to 10000"]),
        bad!("excess_mm = 1.75" => "exess_mm = 1.75\nexcess_mm = 1.75", "exess_mm", "shape[1].exess_mm",
            ["did you mean shape[1].excess_mm?"]),
        bad!("missing_mm = 2.5\n" => "", "[[shape]]", "shape[1].missing_mm", ["missing;", "mm"]),
        bad!("coil = 1\n" => "coil = 1979-05-27\n", "coil", "outlet[1].coil", ["a whole number from 0 to 65535"]),
        bad!("coil = 1\n" => "coil = 1\ncoil = 2\n", "coil = 2", "", ["not TOML: duplicate key"]),
        bad!("[belt]" => "[belt", "[belt", "", ["not TOML"]),
        bad!("speed_mm_s = 400.0" => "speed_mm_s = 400 mm/s", "speed_mm_s", "", ["not TOML"]),
    ];
    all.iter().for_each(assert_found);
}

#[test]
fn keys_against_each_other() {
    let all = [
        // Picture.
        bad!("width = 140.0" => "width = 150.5", "region_mm", "picture.region_mm.width",
            ["at most 150 mm", "160.5 mm", "160 mm (640 px)"]),
        bad!("height = 100.0" => "height = 110.5", "region_mm", "picture.region_mm.height", ["at most 110 mm"]),
        bad!("height = 100.0" => "height = 3.5", "region_mm", "picture.region_mm.height",
            ["at least 4 mm", "14 px", "16 px"]),
        bad!("element_mm = 45.0" => "element_mm = 0.4", "element_mm", "picture.element_mm",
            ["more than the part's widest inside", "1 px"]),
        bad!("element_mm = 45.0" => "element_mm = 140.5", "element_mm", "picture.element_mm",
            ["at most 139.7 mm", "563 px", "560 x 400 px"]),
        bad!("low = 40" => "low = 80", "threshold", "picture.threshold.low", ["less than high = 80"]),
        bad!("high = 80" => "high = 255", "threshold", "picture.threshold.high", ["at most 254"]),
        bad!("{ method = \"hysteresis\", low = 40, high = 80 }" => "{ method = \"fixed\", level = 255 }",
            "threshold", "picture.threshold.level", ["at most 254"]),
        bad!("{ method = \"hysteresis\", low = 40, high = 80 }" => "{ method = \"otsu\", floor = 255 }",
            "threshold", "picture.threshold.floor", ["at most 254"]),
        bad!("fill_below_mm2 = 30.0" => "fill_below_mm2 = 0.06", "fill_below_mm2", "picture.fill_below_mm2",
            ["0 to switch it off", "0.0625 mm2"]),
        bad!("fill_below_mm2 = 30.0" => "fill_below_mm2 = 60.0", "fill_below_mm2", "picture.fill_below_mm2",
            ["less than speck_below_mm2 = 60"]),
        bad!("flaw_below_mm2 = 1.0" => "flaw_below_mm2 = 0.01", "flaw_below_mm2", "judge.flaw_below_mm2",
            ["0 to switch it off"]),
        bad!("area_mm2 = [500.0, 900.0]\n" => "area_mm2 = [50, 900.0]\n", "area_mm2", "shape[0].area_mm2",
            ["at least picture.speck_below_mm2 = 60", "a good part of 50 mm2"]),
        // Shapes.
        bad!("excess_mm = 1.5" => "excess_mm = 0.7", "excess_mm", "shape[0].excess_mm",
            ["more than 0.7979 mm", "0.7697 mm2", "judge.flaw_below_mm2 = 1"]),
        bad!("missing_mm = 2.0" => "missing_mm = 0.24", "missing_mm", "shape[0].missing_mm",
            ["at least 0.25 mm", "one pixel"]),
        bad!("excess_mm = 1.75" => "excess_mm = 0.2", "excess_mm", "shape[1].excess_mm", ["at least 0.25 mm"]),
        bad!("branch_above_mm = 5.0" => "branch_above_mm = 0.1", "branch_above_mm", "shape[0].branch_above_mm",
            ["at least 0.25 mm"]),
        bad!("area_mm2 = [500.0, 900.0]" => "area_mm2 = [900, 500]", "area_mm2", "shape[0].area_mm2",
            ["[low, high], that is [500, 900]"]),
        bad!("length_mm = [34.0, 42.0]" => "length_mm = [42, 34]", "length_mm", "shape[0].length_mm", ["[34, 42]"]),
        bad!("width_mm = [32.0, 40.0]" => "width_mm = [40, 32]", "width_mm", "shape[0].width_mm", ["[32, 40]"]),
        bad!("holes = [0, 1]" => "holes = [1, 0]", "holes", "shape[0].holes", ["[0, 1]"]),
        bad!("boundary_mm = [100.0, 220.0]" => "boundary_mm = [2, 1]", "boundary_mm", "shape[0].boundary_mm",
            ["[1, 2]"]),
        bad!("branches = [5, 6]" => "branches = [6, 5]", "branches", "shape[0].branches", ["[5, 6]"]),
        bad!("width_mm = [32.0, 40.0]" => "width_mm = [43.0, 50.0]", "width_mm", "shape[0].width_mm",
            ["at most 42 mm"]),
        bad!("branch_above_mm = 5.0\n" => "", "branches", "shape[0].branches", ["branch_above_mm beside it"]),
        // Names.
        bad!("name = \"ring\"" => "name = \"star\"", "name", "shape[1].name", ["shape[0].name is the same"]),
        bad!("coil = 1" => "coil = 0", "coil", "outlet[1].coil", ["outlet[0].coil is the same"]),
        bad!("outlet = \"nozzle\"" => "outlet = \"nozle\"", "outlet", "reject.outlet",
            ["one of \"nozzle\", \"tray\""]),
        bad!("outlet = \"tray\"" => "outlet = \"trays\"", "outlet", "shape[0].outlet", ["\"nozzle\", \"tray\""]),
        bad!("outlet = \"tray\"" => "outlet = \"nozzle\"", "outlet", "shape[0].outlet",
            ["another outlet", "reject.outlet"]),
        // Belt and frames.
        bad!("exposure_ms = 0.4" => "exposure_ms = 4.0", "exposure_ms", "camera.exposure_ms",
            ["at most 3.75 ms", "400 mm/s", "1.6 mm", "1.5 mm"]),
        bad!("frames_per_s = 8.0" => "frames_per_s = 2.5", "frames_per_s", "camera.frames_per_s",
            ["at least 2.92 frames/s", "163.2 mm", "140 mm"]),
        // Outlets and the line.
        bad!("distance_mm = 330.0" => "distance_mm = 200.0", "distance_mm", "outlet[0].distance_mm",
            ["at least 205.6 mm", "camera.latency_ms of at most 86.3", "191.8 mm past", "150 mm of view",
             "40.8 mm during", "6 mm of margin", "7.77 mm (19.04 ms)"]),
        bad!("distance_mm = 450.0" => "distance_mm = 100.0", "distance_mm", "outlet[1].distance_mm",
            ["at least 207.6 mm", "no latency is short enough"]),
        bad!("margin_mm = 6.0" => "margin_mm = 30.0", "margin_mm", "outlet[0].margin_mm",
            ["less than 30 mm", "60 mm of belt", "every 60 mm"]),
        bad!("margin_mm = 6.0" => "margin_mm = 3.0", "margin_mm", "outlet[0].margin_mm",
            ["at least 3.6 mm", "180 mm", "2 % off"]),
        bad!("max_on_ms = 1000.0" => "max_on_ms = 100", "max_on_ms", "outlet[0].max_on_ms",
            ["at least 110 ms", "34 mm", "6 mm"]),
        bad!("answer_within_ms = 50.0" => "answer_within_ms = 4", "answer_within_ms", "line.answer_within_ms",
            ["at least 4.05 ms", "38400 baud"]),
    ];
    all.iter().for_each(assert_found);
}

/// Rules that cannot be broken alone.
#[test]
fn all_problems_come_at_once_in_the_order_of_their_lines() {
    let all = |text: &str| Problems(problems(text)).to_string();

    let drifting = all(&changed("percent = 2.0", "percent = 20.0"));
    assert_eq!(drifting.lines().count(), 3, "{drifting}");
    assert!(drifting.starts_with(
        "config/full.toml:11: belt.speed_tolerance_percent = 20.0: expected less than 20 %: over the 150 mm of view a \
         part may then be 30 mm off, half of part_pitch_mm = 60 or more"
    ));
    assert!(
        drifting.contains(":55: outlet[0].margin_mm = 6.0: expected at least 36 mm:"),
        "{drifting}"
    );

    let slow = all(&changed("baud = 38400", "baud = 2400"));
    assert_eq!(slow.lines().count(), 2, "{slow}");
    assert!(slow.contains(
        "line.baud = 2400: expected a faster line or a larger belt.part_pitch_mm: two messages with their answers take \
         210.8 ms, but parts may follow each other every 150 ms"
    ));

    let renamed = all(&changed("name = \"tray\"", "name = \"nozzle\""));
    assert!(renamed.contains(
        "outlet[1].name = \"nozzle\": expected another name: outlet[0].name is the same"
    ));
    assert!(renamed.contains("shape[0].outlet = \"tray\": expected the name of an outlet"));

    let tiny = GOOD.replace("width = 140.0, height = 100.0", "width = 5.0, height = 4.0");
    let tiny = all(&tiny);
    assert!(tiny.contains(
        "speck_below_mm2 = 60.0: expected less than 20 mm2: that is as much as the whole region"
    ));
    let short = all(&changed("frames_per_s = 8.0", "frames_per_s = 2000"));
    assert!(short.is_empty(), "{short}");
    let long =
        all(&changed("frames_per_s = 8.0", "frames_per_s = 2000").replace("ms = 0.4", "ms = 0.6"));
    assert!(
        long.contains("camera.exposure_ms = 0.6: expected at most 0.5 ms: at 2000 frames/s"),
        "{long}"
    );

    let empty = all("");
    let missing = [
        "camera", "belt", "picture", "judge", "shape", "reject", "line",
    ];
    for (line, key) in empty.lines().zip(missing) {
        assert!(
            line.starts_with(&format!("config/full.toml:1: {key}: missing; expected ")),
            "{empty}"
        );
    }
    assert_eq!(empty.lines().count(), missing.len());
}

#[test]
fn a_table_in_single_brackets_is_told_how_to_be_a_list() {
    let text = changed("[[shape]]", "[shape]")
        .replace("[[shape]]\nname = \"ring\"", "[ring]\nname = \"ring\"");
    let shown = Problems(problems(&text)).to_string();
    let said =
        ":30: shape: expected at least one table [[shape]]; write [[shape]] with double brackets";
    assert!(shown.contains(said), "{shown}");
}

/// What is advised is accepted, so that nobody has to guess twice.
#[test]
fn advice_passes_the_check_it_came_from() {
    let advised = [
        ("exposure_ms = 0.4", "exposure_ms = 3.75"),
        ("frames_per_s = 8.0", "frames_per_s = 2.92"),
        ("distance_mm = 330.0", "distance_mm = 205.6"),
        ("margin_mm = 6.0", "margin_mm = 3.6"),
        ("max_on_ms = 1000.0", "max_on_ms = 110"),
        ("answer_within_ms = 50.0", "answer_within_ms = 4.05"),
        ("element_mm = 45.0", "element_mm = 139.7"),
        ("element_mm = 45.0", "element_mm = 0.75"),
        ("missing_mm = 2.0", "missing_mm = 0.8"),
        ("width = 140.0", "width = 150"),
        ("height = 100.0", "height = 4"),
        ("width_mm = [32.0, 40.0]", "width_mm = [42.0, 42.0]"),
    ];
    for (from, to) in advised {
        let found = problems(&changed(from, to));
        let key = from.split(' ').next().unwrap_or(from);
        assert!(
            found.iter().all(|problem| !problem.key.ends_with(key)),
            "{to}: {}",
            Problems(found)
        );
    }
    let near = changed("distance_mm = 330.0", "distance_mm = 200.0");
    assert_eq!(
        problems(&near.replace("latency_ms = 100", "latency_ms = 86.3")),
        []
    );
}

/// Every key of the file with its path; the key of a list stands before its items.
fn paths(key: &str, node: &Node, into: &mut Vec<String>) {
    let mut child = |name: String, node: &Node| {
        into.push(name.clone());
        paths(&name, node, into);
    };
    match &node.kind {
        Kind::Table(entries) if key.is_empty() => {
            entries
                .iter()
                .for_each(|(name, node)| child(name.clone(), node));
        }
        Kind::Table(entries) => {
            entries
                .iter()
                .for_each(|(name, node)| child(format!("{key}.{name}"), node));
        }
        Kind::List(items) => {
            items
                .iter()
                .enumerate()
                .for_each(|(i, node)| child(format!("{key}[{i}]"), node));
        }
        _ => {}
    }
}

fn good_paths() -> Vec<String> {
    let source = Source::parse(Path::new("x"), GOOD).unwrap_or_else(|problem| panic!("{problem}"));
    let mut all = Vec::new();
    paths("", &source.root, &mut all);
    all
}

/// The good file with `with` in the place of the value at `path`, or without it.
fn edited(path: &str, with: Option<&toml_edit::Value>) -> String {
    let mut document: toml_edit::DocumentMut = GOOD.parse().expect("good TOML");
    let (parent, last) = match path.rfind(['.', '[']) {
        Some(at) => (&path[..at], path[at + 1..].trim_end_matches(']')),
        None => ("", path),
    };
    let mut at = document.as_item_mut();
    for step in parent.split(['.', '[']).filter(|step| !step.is_empty()) {
        let step = step.trim_end_matches(']');
        at = match step.parse::<usize>() {
            Ok(index) => &mut at[index],
            Err(_) => &mut at[step],
        };
    }
    match (last.parse::<usize>(), with) {
        (Ok(index), Some(with)) if at.is_array_of_tables() => {
            // A list of tables cannot hold anything else, so it becomes a list of values.
            let _ = index;
            *at = toml_edit::value(toml_edit::Array::from_iter([with.clone()]));
        }
        (Ok(index), Some(with)) => at[index] = toml_edit::value(with.clone()),
        (Ok(index), None) => remove_item(at, index),
        (Err(_), Some(with)) => at[last] = toml_edit::value(with.clone()),
        (Err(_), None) => {
            at.as_table_like_mut().expect("a table").remove(last);
        }
    }
    document.to_string()
}

fn remove_item(list: &mut toml_edit::Item, index: usize) {
    if let Some(tables) = list.as_array_of_tables_mut() {
        tables.remove(index);
    } else if let Some(values) = list.as_array_mut() {
        values.remove(index);
    }
}

/// Keys that may be left out while all others stand.
const OPTIONAL: &[&str] = &[
    "unseen",
    "region_mm",
    "element",
    "partial",
    "face_down",
    "shape[0].outlet",
    "area_mm2",
    "length_mm",
    "width_mm",
    "holes",
    "boundary_mm",
    "branches",
    "allow_armed",
    "parity",
    "shape[1]",
];

#[test]
fn any_key_left_out_is_reported_under_its_name() {
    for path in good_paths() {
        let found = problems(&edited(&path, None));
        if OPTIONAL.iter().any(|optional| path.ends_with(optional)) {
            assert_eq!(found, [], "{path}");
            continue;
        }
        // A list that has lost an item is itself what is wrong; a name that is gone is missed where it is used.
        let list = path
            .strip_suffix(']')
            .and_then(|path| path.rsplit_once('['));
        let key = list.map_or(path.as_str(), |(list, _)| list);
        let shown = Problems(found.clone()).to_string();
        let missed = match path.as_str() {
            "outlet" | "outlet[0]" => "reject.outlet",
            "outlet[1]" | "shape[0]" => continue,
            "shape[0].branch_above_mm" => "shape[0].branches",
            _ => key,
        };
        assert!(
            found.iter().any(|problem| problem.key == missed),
            "without {path}: {shown}"
        );
    }
}

#[test]
fn any_key_mistyped_is_reported_under_its_name() {
    let wrong: Vec<toml_edit::Value> = [
        "nan",
        "-inf",
        "\"\"",
        "{}",
        "1979-05-27",
        "[[]]",
        "{ a = [{}] }",
        "-1e300",
    ]
    .iter()
    .map(|text| text.parse().expect("a TOML value"))
    .collect();
    for path in good_paths() {
        for value in &wrong {
            let found = problems(&edited(&path, Some(value)));
            let shown = Problems(found.clone()).to_string();
            let list = path
                .strip_suffix(']')
                .and_then(|path| path.rsplit_once('['));
            let key = list.map_or(path.as_str(), |(list, _)| list);
            assert!(
                found.iter().any(|problem| problem.key.starts_with(key)),
                "{path} = {value}: {shown}"
            );
        }
    }
}

/// The walk knows every form that the schema takes, so that nothing in it goes unchecked.
#[test]
fn the_schema_has_only_forms_that_the_walk_checks() {
    fn assert_known(rule: &serde_json::Value, at: &str) {
        const KNOWN: &[&str] = &[
            "$ref",
            "description",
            "default",
            "type",
            "format",
            "minimum",
            "maximum",
            "minLength",
            "maxLength",
            "items",
            "minItems",
            "maxItems",
            "properties",
            "required",
            "additionalProperties",
            "oneOf",
            "const",
            "$schema",
            "title",
            "$defs",
        ];
        for word in rule.as_object().expect("a schema is an object").keys() {
            assert!(KNOWN.contains(&word.as_str()), "{at}: {word}");
        }
        match rule["type"].as_str() {
            Some("number" | "integer") => {
                assert!(
                    rule["minimum"].is_number() && rule["maximum"].is_number(),
                    "{at}: no range"
                );
            }
            Some("string") if rule.get("const").is_none() => {
                assert!(
                    rule["minLength"].is_number() && rule["maxLength"].is_number(),
                    "{at}: no length"
                );
            }
            Some("object") => assert_eq!(rule["additionalProperties"], false, "{at}"),
            Some("array" | "boolean" | "string") => {}
            None => assert!(
                rule.get("$ref").is_some() || rule.get("oneOf").is_some(),
                "{at}: no type"
            ),
            Some(other) => panic!("{at}: {other}"),
        }
        for part in ["properties", "$defs"] {
            for (name, rule) in rule[part].as_object().into_iter().flatten() {
                assert_known(rule, &format!("{at}.{name}"));
            }
        }
        for rule in rule["oneOf"]
            .as_array()
            .into_iter()
            .flatten()
            .chain(rule.get("items"))
        {
            assert_known(rule, at);
        }
    }
    assert_known(&schema(), "");
}

/// The copy that editors read. `BELTWRIGHT_REWRITE=1` writes it anew.
#[test]
fn the_committed_schema_is_the_present_one() {
    let file = Path::new(env!("CARGO_MANIFEST_DIR")).join("config/settings.schema.json");
    if std::env::var_os("BELTWRIGHT_REWRITE").is_some() {
        std::fs::write(&file, schema_text()).expect("the schema can be written");
    }
    let committed = std::fs::read_to_string(&file).unwrap_or_default();
    assert!(
        committed == schema_text(),
        "out of date; run this test with BELTWRIGHT_REWRITE=1"
    );
}

#[test]
fn the_example_files_are_good_and_point_at_the_schema() {
    for name in ["oat-stars", "gaskets"] {
        let file = Path::new(env!("CARGO_MANIFEST_DIR")).join(format!("config/{name}.toml"));
        load(&file).unwrap_or_else(|error| panic!("{error}"));
        let text = std::fs::read_to_string(&file).expect("it was just read");
        assert!(
            text.starts_with("#:schema ./settings.schema.json\n"),
            "{name}"
        );
    }
}

/// Every key that stands in the example files, in a comment or not, is a key of the schema.
#[test]
fn the_example_files_show_only_keys_that_exist() {
    let known = schema().to_string();
    for text in [
        include_str!("../../config/oat-stars.toml"),
        include_str!("../../config/gaskets.toml"),
    ] {
        for line in text
            .lines()
            .filter_map(|line| line.trim_start_matches("# ").split_once(" = "))
        {
            let (key, _) = line;
            if key
                .chars()
                .all(|letter| letter.is_ascii_lowercase() || letter == '_')
            {
                assert!(known.contains(&format!("\"{key}\":")), "{key}");
            }
        }
    }
}

/// A part that fits these settings, and what is said when one of its sizes does not.
#[test]
fn a_part_of_known_size_is_held_against_the_settings() {
    let fits = PartSize {
        longest_mm: 40.0,
        narrowest_mm: 36.0,
        inside_mm: 28.0,
        area_mm2: 700.0,
        smallest_hole_mm2: Some(110.0),
    };
    let loaded = good();
    let keys = |size: PartSize| -> Vec<String> {
        let problems = loaded.part_problems(0, &size);
        problems.into_iter().map(|problem| problem.key).collect()
    };
    assert_eq!(loaded.part_problems(0, &fits), []);
    assert_eq!(
        keys(PartSize {
            inside_mm: 45.5,
            ..fits
        }),
        ["picture.element_mm"]
    );
    assert_eq!(
        keys(PartSize {
            area_mm2: 59.0,
            ..fits
        }),
        ["picture.speck_below_mm2"]
    );
    assert_eq!(
        keys(PartSize {
            smallest_hole_mm2: Some(30.0),
            ..fits
        }),
        ["picture.fill_below_mm2"]
    );
    assert_eq!(
        keys(PartSize {
            longest_mm: 100.0,
            ..fits
        }),
        ["picture.region_mm", "camera.frames_per_s"]
    );
    assert_eq!(
        keys(PartSize {
            longest_mm: 92.0,
            ..fits
        }),
        ["camera.frames_per_s"]
    );
    assert_eq!(
        keys(PartSize {
            narrowest_mm: 53.0,
            longest_mm: 53.0,
            ..fits
        }),
        ["outlet[1].margin_mm"]
    );
    let eaten = &loaded.part_problems(
        0,
        &PartSize {
            inside_mm: 45.5,
            ..fits
        },
    )[0];
    assert_eq!(
        eaten.to_string(),
        "config/full.toml:20: picture.element_mm = 45.0: expected at least 46 mm: an element of 45.25 mm fits inside a \
         part of shape \"star\", whose widest inside is 45.5 mm, and the top-hat would remove the part"
    );
}

#[test]
fn an_outlet_held_open_too_long_or_too_short_by_a_known_part_is_found() {
    let size = PartSize {
        longest_mm: 40.0,
        narrowest_mm: 4.0,
        inside_mm: 3.0,
        area_mm2: 100.0,
        smallest_hole_mm2: None,
    };
    let text = changed("max_on_ms = 1000.0", "max_on_ms = 120.0")
        .replace("close_delay_ms = 20.0", "close_delay_ms = 70.0");
    let loaded = parse(Path::new("x.toml"), &text).unwrap_or_else(|error| panic!("{error}"));
    let shown = Problems(loaded.part_problems(1, &size)).to_string();
    // (40 + 2 * 6) mm at 400 mm/s = 130 ms, less 70 - 15 ms: 75 ms, within 120. (4 + 12) / 400 = 40 ms, less 55.
    assert!(
        shown.contains("outlet[0].close_delay_ms = 70.0: expected less than 55 ms"),
        "{shown}"
    );
    let text = text.replace("close_delay_ms = 70.0", "close_delay_ms = 20.0");
    let loaded = parse(Path::new("x.toml"), &text).unwrap_or_else(|error| panic!("{error}"));
    let shown = Problems(loaded.part_problems(1, &size)).to_string();
    assert!(
        shown.contains("outlet[0].max_on_ms = 120.0: expected at least 125 ms"),
        "{shown}"
    );
}

proptest! {
    /// Whatever stands in a file, it is settings or a list of problems.
    #[test]
    fn damaged_files_never_panic(at in 0..GOOD.len(), cut in 0_usize..40, put in "[ -~\n]{0,12}") {
        let end = (at + cut).min(GOOD.len());
        let text = format!("{}{put}{}", &GOOD[..at], &GOOD[end..]);
        for problem in problems(&text) {
            prop_assert!(problem.line >= 1 && problem.line <= text.lines().count() + 1);
            prop_assert!(!problem.to_string().contains('\n'));
        }
    }
}
