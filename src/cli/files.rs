//! Output files that are whole or not there.

use std::fs;
use std::io::Write;
use std::path::Path;

use anyhow::Context;

/// Writes `bytes` to `file`: into a neighbour first, so that a full disk or a pulled plug leaves no half of it.
pub(super) fn write_whole(file: &Path, bytes: &[u8]) -> anyhow::Result<()> {
    let mut part = file.as_os_str().to_owned();
    part.push(".part");
    let part = Path::new(&part);
    let write = || {
        let mut open = fs::File::create(part)?;
        open.write_all(bytes)?;
        open.sync_all()?;
        fs::rename(part, file)
    };
    write().with_context(|| {
        format!(
            "cannot write {}: check the folder and the space left",
            file.display()
        )
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_file_that_cannot_be_written_is_one_sentence() {
        let folder = tempfile::tempdir().unwrap();
        let good = folder.path().join("parts.csv");
        write_whole(&good, b"a,b\n").unwrap();
        assert_eq!(fs::read(&good).unwrap(), b"a,b\n");
        assert_eq!(
            fs::read_dir(folder.path()).unwrap().count(),
            1,
            "no .part is left"
        );
        let error = write_whole(&folder.path().join("no/such/parts.csv"), b"").unwrap_err();
        assert!(
            format!("{error:#}").starts_with("cannot write "),
            "{error:#}"
        );
    }
}
