//! What a sweep has finished so far, a line each, so that it can be stopped and taken up again.
//!
//! The first line says which sweep it is. The last line may be torn: whoever wrote it was killed.

use std::collections::BTreeMap;
use std::fs::{File, OpenOptions};
use std::io::{self, Read, Seek, SeekFrom, Write};
use std::path::{Path, PathBuf};

use serde::{Deserialize, Serialize};
use thiserror::Error;

use super::trial::Tried;

/// Why a journal cannot be used.
#[derive(Debug, Error)]
pub enum JournalError {
    /// The operating system did not let us.
    #[error("{}: {source}", file.display())]
    Io {
        /// The journal.
        file: PathBuf,
        /// What it said.
        source: io::Error,
    },
    /// It is no journal, or something is wrong in the middle of it.
    #[error("{}:{line}: expected a line of a sweep's journal; remove the file or name another", file.display())]
    Line {
        /// The journal.
        file: PathBuf,
        /// The line, from 1.
        line: usize,
    },
    /// It belongs to another sweep.
    #[error("{}: belongs to another sweep (recording, labels, settings, shapes, or what is varied); remove the file or name another", file.display())]
    Other {
        /// The journal.
        file: PathBuf,
    },
}

#[derive(Debug, PartialEq, Serialize, Deserialize)]
struct Head {
    sweep: String,
}

/// One finished run.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Finished {
    /// Which point.
    pub point: usize,
    /// How the recording was changed for it.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub shift: Option<String>,
    /// What came of it.
    pub tried: Tried,
}

/// Finished runs, in memory and in a file if there is one.
#[derive(Debug, Default)]
pub struct Journal {
    file: Option<(PathBuf, File)>,
    runs: BTreeMap<(usize, Option<String>), Tried>,
}

impl Journal {
    /// Opens the journal `file` of the sweep that `name` stands for, or begins it.
    ///
    /// # Errors
    /// It cannot be read or written, or is another's.
    pub fn open(file: &Path, name: &str) -> Result<Self, JournalError> {
        let io = |source| JournalError::Io {
            file: file.to_owned(),
            source,
        };
        let mut options = OpenOptions::new();
        let mut opened = options
            .read(true)
            .write(true)
            .create(true)
            .truncate(false)
            .open(file)
            .map_err(io)?;
        let mut bytes = Vec::new();
        opened.read_to_end(&mut bytes).map_err(io)?;
        let mut journal = Self::default();
        let whole = journal.read(file, &bytes, name)?;
        // A torn last line is written over.
        opened.set_len(whole as u64).map_err(io)?;
        opened.seek(SeekFrom::End(0)).map_err(io)?;
        if whole == 0 {
            let head = Head {
                sweep: name.to_owned(),
            };
            write_line(&mut opened, &head).map_err(io)?;
        }
        journal.file = Some((file.to_owned(), opened));
        Ok(journal)
    }

    /// Takes in what another part of the same sweep has finished.
    ///
    /// # Errors
    /// It cannot be read, or is another's.
    pub fn join(&mut self, file: &Path, name: &str) -> Result<(), JournalError> {
        let bytes = std::fs::read(file).map_err(|source| JournalError::Io {
            file: file.to_owned(),
            source,
        })?;
        self.read(file, &bytes, name).map(|_| ())
    }

    /// Reads whole lines; gives how many bytes they are.
    fn read(&mut self, file: &Path, bytes: &[u8], name: &str) -> Result<usize, JournalError> {
        let mut whole = 0;
        for (k, line) in bytes.split_inclusive(|&byte| byte == b'\n').enumerate() {
            let bad = || JournalError::Line {
                file: file.to_owned(),
                line: k + 1,
            };
            if line.last() != Some(&b'\n') {
                // Torn. Of a first line nothing can be told, unless it is no journal at all.
                return if k > 0 || line.starts_with(b"{") {
                    Ok(whole)
                } else {
                    Err(bad())
                };
            }
            if k == 0 {
                let head: Head = serde_json::from_slice(line).map_err(|_| bad())?;
                if head.sweep != name {
                    return Err(JournalError::Other {
                        file: file.to_owned(),
                    });
                }
            } else {
                let run: Finished = serde_json::from_slice(line).map_err(|_| bad())?;
                self.runs.insert((run.point, run.shift), run.tried);
            }
            whole += line.len();
        }
        Ok(whole)
    }

    /// Notes finished runs; they are on the disk when this returns.
    ///
    /// # Errors
    /// They cannot be written.
    pub fn add(&mut self, runs: Vec<Finished>) -> Result<(), JournalError> {
        for run in &runs {
            if let Some((path, file)) = &mut self.file {
                write_line(file, run).map_err(|source| JournalError::Io {
                    file: path.clone(),
                    source,
                })?;
            }
        }
        if let Some((path, file)) = &mut self.file {
            file.sync_data().map_err(|source| JournalError::Io {
                file: path.clone(),
                source,
            })?;
        }
        self.runs.extend(
            runs.into_iter()
                .map(|run| ((run.point, run.shift), run.tried)),
        );
        Ok(())
    }

    /// What came of a run, if it is finished.
    pub fn find(&self, point: usize, shift: Option<&str>) -> Option<&Tried> {
        self.runs.get(&(point, shift.map(str::to_owned)))
    }
}

fn write_line(file: &mut File, line: &impl Serialize) -> io::Result<()> {
    let mut bytes = serde_json::to_vec(line)?;
    bytes.push(b'\n');
    file.write_all(&bytes)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn run(point: usize) -> Finished {
        Finished {
            point,
            shift: (point == 2).then(|| "dimmer".to_owned()),
            tried: Tried {
                bad: 3,
                good: 9,
                misses: 1,
                false_rejects: point,
                not_found: 0,
                stray: 0,
                room_percent: 12.34,
                given_up_after: (point == 1).then_some(40),
            },
        }
    }

    #[test]
    fn a_torn_last_line_is_forgotten_and_written_over() {
        let folder = tempfile::tempdir().unwrap();
        let file = folder.path().join("j");
        let mut journal = Journal::open(&file, "abc").unwrap();
        journal.add(vec![run(0), run(1), run(2)]).unwrap();
        let whole = std::fs::read(&file).unwrap();
        for cut in 1..whole.len() {
            std::fs::write(&file, &whole[..cut]).unwrap();
            let mut again = Journal::open(&file, "abc").unwrap();
            let missing = (0..3).filter(|&k| again.find(k, run(k).shift.as_deref()).is_none());
            let missing: Vec<_> = missing.map(run).collect();
            again.add(missing).unwrap();
            assert_eq!(std::fs::read(&file).unwrap(), whole, "cut at {cut}");
            assert_eq!(again.find(1, None), Some(&run(1).tried));
            assert_eq!(again.find(2, None), None);
        }
    }

    #[test]
    fn another_sweep_and_other_files_are_refused() {
        let folder = tempfile::tempdir().unwrap();
        let file = folder.path().join("j");
        Journal::open(&file, "abc")
            .unwrap()
            .add(vec![run(0)])
            .unwrap();
        assert!(matches!(
            Journal::open(&file, "xyz"),
            Err(JournalError::Other { .. })
        ));
        std::fs::write(&file, "my notes\nof today").unwrap();
        assert!(matches!(
            Journal::open(&file, "abc"),
            Err(JournalError::Line { line: 1, .. })
        ));
        assert_eq!(
            std::fs::read_to_string(&file).unwrap(),
            "my notes\nof today",
            "untouched"
        );
    }
}
