//! What is wrong with a settings file, one line per problem.

use std::fmt;
use std::io;
use std::path::PathBuf;

use serde::Serialize;
use thiserror::Error;

/// One thing that is wrong, and where.
#[derive(Clone, Debug, PartialEq, Eq, Serialize)]
pub struct Problem {
    /// The settings file.
    pub file: PathBuf,
    /// The line in it, from 1.
    pub line: usize,
    /// The key, such as `picture.element_mm` or `shape[0].file`; empty when the file is no TOML.
    pub key: String,
    /// What stands there, as it was typed; `None` when nothing does, or when it is a whole table.
    pub came: Option<String>,
    /// What was expected, or what to do.
    pub message: String,
}

impl fmt::Display for Problem {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}:{}: ", self.file.display(), self.line)?;
        if !self.key.is_empty() {
            write!(f, "{}", self.key)?;
            if let Some(came) = &self.came {
                write!(f, " = {came}")?;
            }
            f.write_str(": ")?;
        }
        f.write_str(&self.message)
    }
}

/// All problems of one file in the order of their lines; printed one to a line.
#[derive(Clone, Debug, Default, PartialEq, Eq, Serialize)]
#[serde(transparent)]
pub struct Problems(pub Vec<Problem>);

impl Problems {
    /// In the order of their lines.
    pub fn sorted(mut problems: Vec<Problem>) -> Self {
        problems.sort_by_key(|problem| problem.line);
        Self(problems)
    }
}

impl fmt::Display for Problems {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        for (i, problem) in self.0.iter().enumerate() {
            if i > 0 {
                f.write_str("\n")?;
            }
            write!(f, "{problem}")?;
        }
        Ok(())
    }
}

/// Why a settings file cannot be used.
#[derive(Debug, Error)]
pub enum SettingsError {
    /// The operating system did not give it.
    #[error("{}: cannot be read: {source}", file.display())]
    Unreadable {
        /// The settings file.
        file: PathBuf,
        /// What the operating system said.
        source: io::Error,
    },
    /// Far larger than any settings file.
    #[error("{}: larger than {limit_bytes} bytes; expected a settings file", file.display())]
    TooLarge {
        /// The settings file.
        file: PathBuf,
        /// The most that is read.
        limit_bytes: u64,
    },
    /// Not UTF-8.
    #[error("{}:{line}: not UTF-8 text; expected a settings file in TOML", file.display())]
    NotText {
        /// The settings file.
        file: PathBuf,
        /// The line with the first byte that is not.
        line: usize,
    },
    /// Something is wrong with what stands in it; never empty.
    #[error("{0}")]
    Bad(Problems),
}
