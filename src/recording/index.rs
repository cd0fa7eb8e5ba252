//! `frames.csv`: which frames there are, when each was captured and where the belt was.

use std::path::{Component, Path, PathBuf};

use crate::units::Micros;

use super::error::shown;
use super::table::{Table, length_mm};
use super::{FRAMES_FILE, FRAMES_HEADER, LineProblem, RecordingError};

/// One row of `frames.csv`.
#[derive(Clone, Debug, PartialEq)]
pub(super) struct Entry {
    /// Path below the recording's folder.
    pub file: PathBuf,
    /// When the frame was captured.
    pub captured_us: Micros,
    /// The belt reading at that moment.
    pub belt_mm: Option<f64>,
}

/// Reads and checks all rows.
pub(super) fn read(folder: &Path) -> Result<Vec<Entry>, RecordingError> {
    let file = folder.join(FRAMES_FILE);
    let mut table = Table::open(&file, FRAMES_HEADER)?;
    let mut entries = Vec::new();
    let mut order = Order::default();
    while let Some((values, line)) = table.next()? {
        let checked = parse(values).and_then(|entry| {
            order.follow(entry.captured_us, entry.belt_mm)?;
            Ok(entry)
        });
        entries.push(checked.map_err(|problem| table.error(line, problem))?);
    }
    if entries.is_empty() {
        return Err(RecordingError::NoFrames { file });
    }
    Ok(entries)
}

/// One row, checked on its own.
pub(super) fn parse([file, captured_us, belt_mm]: [&str; 3]) -> Result<Entry, LineProblem> {
    Ok(Entry {
        file: inside(file)?,
        captured_us: moment(captured_us)?,
        belt_mm: match belt_mm {
            "" => None,
            some => Some(length_mm("belt_mm", some)?),
        },
    })
}

/// A path that stays below the folder it is joined to, on every operating system.
fn inside(came: &str) -> Result<PathBuf, LineProblem> {
    let path = PathBuf::from(came);
    let plain = path
        .components()
        .all(|part| matches!(part, Component::Normal(_)));
    // A backslash or a colon is an ordinary letter here and leads out of the folder elsewhere.
    let odd = came.contains(|letter: char| matches!(letter, '\\' | ':') || letter.is_control());
    if came.is_empty() || !plain || odd {
        return Err(LineProblem::PathOutside { came: shown(came) });
    }
    Ok(path)
}

/// Whole microseconds that a double holds exactly: up to 285 years.
fn moment(came: &str) -> Result<Micros, LineProblem> {
    const LARGEST_US: i64 = 1 << 53;
    came.parse()
        .ok()
        .filter(|us| (0..=LARGEST_US).contains(us))
        .map(Micros)
        .ok_or_else(|| LineProblem::Value {
            column: "captured_us",
            came: shown(came),
            expected: "a whole number of microseconds, 0 or more",
        })
}

/// What every frame must follow: time goes on, the belt does not go back.
#[derive(Clone, Copy, Debug, Default)]
pub(super) struct Order {
    captured_us: Option<Micros>,
    belt_mm: Option<f64>,
}

impl Order {
    /// Takes the next frame's time and reading, if they follow the ones before.
    pub(super) fn follow(
        &mut self,
        captured_us: Micros,
        belt_mm: Option<f64>,
    ) -> Result<(), LineProblem> {
        if let Some(before) = self.captured_us.filter(|&before| captured_us <= before) {
            return Err(LineProblem::TimeNotLater {
                came: captured_us.0,
                before: before.0,
            });
        }
        if let (Some(came), Some(before)) = (belt_mm, self.belt_mm)
            && came < before
        {
            return Err(LineProblem::BeltBackwards { came, before });
        }
        self.captured_us = Some(captured_us);
        self.belt_mm = belt_mm.or(self.belt_mm);
        Ok(())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn only_paths_below_the_folder_pass() {
        for good in ["000001.png", "left/000001.png", "a b.png", "..hidden.png"] {
            assert_eq!(inside(good), Ok(PathBuf::from(good)));
        }
        for bad in [
            "",
            "/etc/passwd",
            "..",
            "../x.png",
            "a/../../x.png",
            "./x.png",
            "\\\\pc\\x.png",
            "C:\\x.png",
            "C:x.png",
            "x\0.png",
            "x\n.png",
            "/",
        ] {
            assert!(inside(bad).is_err(), "{bad:?}");
        }
    }

    #[test]
    fn moments_are_whole_and_exact() {
        assert_eq!(moment("0"), Ok(Micros(0)));
        assert_eq!(moment("9007199254740992"), Ok(Micros(1 << 53)));
        for bad in [
            "",
            " 1",
            "-1",
            "1.0",
            "1e3",
            "9007199254740993",
            "NaN",
            "99999999999999999999",
        ] {
            assert!(moment(bad).is_err(), "{bad:?}");
        }
    }
}
