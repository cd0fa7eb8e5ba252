//! From a file to checked settings.

use std::fs::File;
use std::io::Read;
use std::path::{Path, PathBuf};

use super::between;
use super::fields::Settings;
use super::part::{self, PartSize};
use super::problem::{Problem, Problems, SettingsError};
use super::schema::schema;
use super::source::{Source, line_at};
use super::walk::walk;

/// The most that is read of a settings file.
const LIMIT_BYTES: u64 = 1 << 20;

/// Checked settings, and where each key stands in its file.
#[derive(Clone, Debug)]
pub struct Loaded {
    /// The settings.
    pub settings: Settings,
    source: Source,
}

impl Loaded {
    /// The settings file.
    pub fn file(&self) -> &Path {
        self.source.file()
    }

    /// A problem at `key`, such as `picture.element_mm` or `shape[0].file`, in the same form as the loader's own.
    pub fn problem(&self, key: &str, message: impl Into<String>) -> Problem {
        self.source.problem(key, message)
    }

    /// Where the taught shape of `settings.shapes[shape]` lies: a relative path starts at the settings file's folder.
    ///
    /// # Panics
    /// If there is no such shape.
    pub fn shape_path(&self, shape: usize) -> PathBuf {
        let folder = self.file().parent().unwrap_or(Path::new(""));
        folder.join(&self.settings.shapes[shape].file)
    }

    /// What the settings get wrong about a part of `settings.shapes[shape]`, once its size is known.
    ///
    /// # Panics
    /// If there is no such shape.
    pub fn part_problems(&self, shape: usize, size: &PartSize) -> Vec<Problem> {
        part::against(&self.settings, shape, size)
            .into_iter()
            .map(|finding| self.problem(&finding.key, finding.message))
            .collect()
    }
}

/// Reads and checks the settings in `file`.
///
/// # Errors
/// When the file cannot be read, or with everything that is wrong in it.
pub fn load(file: &Path) -> Result<Loaded, SettingsError> {
    let unreadable = |source| SettingsError::Unreadable {
        file: file.to_owned(),
        source,
    };
    let mut bytes = Vec::new();
    File::open(file)
        .and_then(|opened| opened.take(LIMIT_BYTES + 1).read_to_end(&mut bytes))
        .map_err(unreadable)?;
    if bytes.len() as u64 > LIMIT_BYTES {
        return Err(SettingsError::TooLarge {
            file: file.to_owned(),
            limit_bytes: LIMIT_BYTES,
        });
    }
    let text = String::from_utf8(bytes).map_err(|error| {
        let valid = error.utf8_error().valid_up_to();
        SettingsError::NotText {
            file: file.to_owned(),
            line: line_at(&String::from_utf8_lossy(error.as_bytes()), valid),
        }
    })?;
    parse(file, &text)
}

/// Checks settings that were read from `file`.
///
/// # Errors
/// With everything that is wrong: first all keys by themselves; only when each is right, the keys against each other.
pub fn parse(file: &Path, text: &str) -> Result<Loaded, SettingsError> {
    let bad = |problems| SettingsError::Bad(Problems::sorted(problems));
    let source = Source::parse(file, text).map_err(|problem| bad(vec![problem]))?;
    let problems = walk(&source, &schema());
    if !problems.is_empty() {
        return Err(bad(problems));
    }
    let settings: Settings = toml::from_str(text).map_err(|error| {
        let offset = error.span().map_or(0, |span| span.start);
        let mut problem = source.problem("", error.message());
        problem.line = line_at(text, offset);
        bad(vec![problem])
    })?;
    let findings = between::check(&settings);
    if !findings.is_empty() {
        let problem = |finding: between::Finding| source.problem(&finding.key, finding.message);
        return Err(bad(findings.into_iter().map(problem).collect()));
    }
    Ok(Loaded { settings, source })
}
