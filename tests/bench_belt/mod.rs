//! A drawn belt with settings and a taught shape in a folder of its own, for tests of whole commands.

use std::collections::HashMap;
use std::fs;
use std::path::{Path, PathBuf};
use std::process::Output;

use assert_cmd::Command;
use tempfile::TempDir;

pub fn beltwright(args: &[&str]) -> Output {
    let mut command = Command::cargo_bin("beltwright").expect("the program");
    command.args(args).output().expect("it runs")
}

/// What a command that must succeed prints.
pub fn done(args: &[&str]) -> String {
    let output = beltwright(args);
    let errors = String::from_utf8_lossy(&output.stderr);
    assert_eq!(output.status.code(), Some(0), "{args:?}: {errors}");
    String::from_utf8(output.stdout).expect("UTF-8")
}

/// `a.toml`, `star.toml` and the recording `belt`.
pub struct Bench {
    folder: TempDir,
}

impl Bench {
    pub fn new(parts: &str, seed: &str) -> Self {
        let bench = Self {
            folder: TempDir::new().unwrap(),
        };
        let text = fs::read_to_string("config/oat-stars.toml").unwrap();
        let text = text.replace("../demo-frames/shapes/oat-star.toml", "star.toml");
        fs::write(bench.path("a.toml"), text).unwrap();
        let (settings, mask) = (bench.text("a.toml"), bench.text("star.png"));
        let belt = bench.text("belt");
        let scene = [
            "draw",
            "oat-stars",
            "--settings",
            &settings,
            "--parts",
            parts,
            "--seed",
            seed,
        ];
        done(&[&scene[..], &["--out", &belt, "--mask", &mask]].concat());
        let shape = bench.text("star.toml");
        done(&[
            "teach",
            "--mask",
            &mask,
            "--settings",
            &settings,
            "--out",
            &shape,
        ]);
        bench
    }

    pub fn path(&self, name: &str) -> PathBuf {
        self.folder.path().join(name)
    }

    pub fn text(&self, name: &str) -> String {
        self.path(name).to_str().expect("UTF-8").to_owned()
    }

    /// `a.toml` with some lines replaced, each told by how it begins, under another name.
    pub fn changed(&self, name: &str, changes: &[(&str, &str)]) -> String {
        let mut text = fs::read_to_string(self.path("a.toml")).unwrap();
        for (begin, line) in changes {
            let (mut changed, mut hits) = (String::new(), 0);
            for old in text.lines() {
                let hit = old.starts_with(begin);
                hits += usize::from(hit);
                changed.push_str(if hit { line } else { old });
                changed.push('\n');
            }
            assert_eq!(hits, 1, "{begin}");
            text = changed;
        }
        fs::write(self.path(name), text).unwrap();
        self.text(name)
    }
}

/// Rows of a table with a header, each with its columns by name.
pub fn table(file: &Path) -> Vec<HashMap<String, String>> {
    let mut reader = csv::Reader::from_path(file).unwrap();
    reader.deserialize().map(|row| row.unwrap()).collect()
}
