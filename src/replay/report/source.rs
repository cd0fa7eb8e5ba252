//! What a report is about, so that it can be told from any other: files with their digests, and the settings as typed.

use std::fs;
use std::io;
use std::path::{Path, PathBuf};

use maud::{Markup, html};
use sha2::{Digest, Sha256};

/// A file that decided what came out.
#[derive(Clone, Debug, PartialEq)]
pub struct SourceFile {
    /// Where it was read.
    pub path: PathBuf,
    /// SHA-256 in hexadecimal digits, as `sha256sum` prints it.
    pub sha256: String,
    /// Its text; `None` if it is none.
    pub text: Option<String>,
}

impl SourceFile {
    /// Reads a file once more for the record.
    ///
    /// # Errors
    /// Those of the file system.
    pub fn read(path: &Path) -> io::Result<Self> {
        let bytes = fs::read(path)?;
        Ok(Self {
            path: path.to_owned(),
            sha256: hex(&Sha256::digest(&bytes)),
            text: String::from_utf8(bytes).ok(),
        })
    }
}

fn hex(bytes: &[u8]) -> String {
    bytes.iter().map(|byte| format!("{byte:02x}")).collect()
}

/// The section: the settings file first, then the taught shapes.
pub fn settings(sources: &[SourceFile]) -> Markup {
    html! {
        p { "The files that decided what came out, with their SHA-256:" }
        ul.files {
            @for source in sources { li { (source.path.display()) br; code { (source.sha256) } } }
        }
        @if let Some(text) = sources.first().and_then(|source| source.text.as_ref()) {
            pre { (text) }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// FIPS 180-4's example of a message of three letters (from memory; every SHA-256 document prints it).
    #[test]
    fn digests_are_the_published_ones() {
        let folder = tempfile::tempdir().unwrap();
        let file = folder.path().join("abc");
        fs::write(&file, "abc").unwrap();
        assert_eq!(
            SourceFile::read(&file).unwrap().sha256,
            "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"
        );
    }
}
