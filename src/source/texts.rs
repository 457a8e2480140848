//! Reading files. A text is decoded here, once per file whatever the number of paths that lead to it, and whatever is
//! wrong with its bytes is said here.
//!
//! Bytes that are no UTF-8 are read as Latin-1: old sources carry such characters in comments, and one byte more or less
//! must not lose a file. Spans refer to the decoded text.

use std::collections::{BTreeSet, HashMap};
use std::path::{Path, PathBuf};
use std::sync::Arc;

use super::regions::{self, Region};
use super::{FileId, SourceSet, Span};
use crate::diagnostic::{Diagnostic, Kind};
use crate::input::{Input, InputRole};

/// A file above this size is no RTL; spans are 32 bits wide.
const MAX_FILE_BYTES: u64 = 256 << 20;

/// The source set while it is read.
#[derive(Default)]
pub struct Texts {
    pub set: SourceSet,
    /// One per file, in the order of reading.
    pub inputs: Vec<Input>,
    /// Text of each file with the switched-off regions blanked.
    blanked: Vec<Arc<str>>,
    pub regions: Vec<Region>,
    pub diagnostics: Vec<Diagnostic>,
    /// Which canonical path has which id; only looked up, never iterated.
    known: HashMap<PathBuf, FileId>,
    /// Files whose bytes cannot be used.
    unusable: Vec<bool>,
    /// Files that are units already.
    claimed: BTreeSet<FileId>,
    /// Texts that stand for those of files, by canonical path.
    instead: Vec<(PathBuf, String)>,
}

impl Texts {
    /// With these texts in place of those of the files.
    pub fn new(instead: &[(PathBuf, String)]) -> Self {
        let instead = instead.iter().map(|(path, text)| (canonical(path), text.clone())).collect();
        Self { instead, ..Self::default() }
    }

    /// The id of a file, read on first use. `None` when it cannot be used, which has been reported.
    pub fn read(&mut self, path: &Path) -> Option<FileId> {
        let canonical = canonical(path);
        let id = match self.known.get(&canonical) {
            Some(&id) => id,
            None => {
                let id = self.read_new(path);
                self.known.insert(canonical, id);
                id
            }
        };
        (!self.unusable[id.index()]).then_some(id)
    }

    /// Makes a file a unit; `false` when it is one already.
    pub fn claim(&mut self, id: FileId) -> bool {
        self.claimed.insert(id)
    }

    /// The text that is preprocessed: the original one with its switched-off regions blanked.
    pub fn blanked(&self, id: FileId) -> Arc<str> {
        self.blanked[id.index()].clone()
    }

    fn read_new(&mut self, path: &Path) -> FileId {
        let given = self.instead.iter().find(|(given, _)| *given == canonical(path));
        let bytes = given.map_or_else(|| read_bytes(path), |(_, text)| Ok(text.clone().into_bytes()));
        let (text, problem) = match bytes {
            Ok(bytes) => {
                self.inputs.push(Input::read(InputRole::Source, path, &bytes));
                let text = decode(bytes);
                let problem = text.find('\0').map(|at| {
                    let message = format!("`{}` contains a NUL byte, so it is no Verilog text", path.display());
                    (at, message, "if it is UTF-16, convert it to UTF-8; if it is binary, leave it out")
                });
                (text, problem)
            }
            Err(error) => {
                self.inputs.push(Input::unreadable(InputRole::Source, path));
                let message = format!("`{}` cannot be read: {error}", path.display());
                (String::new(), Some((0, message, "check that it is a readable text file")))
            }
        };
        let id = self.set.add(path, text);
        let text = self.set.file(id).text.clone();
        self.unusable.push(problem.is_some());
        if let Some((at, message, help)) = problem {
            let end = (at + 1).min(text.len());
            let at = Span { file: id, start: at as u32, end: end as u32 };
            self.diagnostics.push(Diagnostic::new(Kind::Incomplete, "file", message, Some(at)).with_help(help));
        }
        let (blanked, regions) = regions::blank(&text, id);
        self.blanked.push(match blanked {
            std::borrow::Cow::Borrowed(_) => text.clone(),
            std::borrow::Cow::Owned(blanked) => blanked.into(),
        });
        for region in regions {
            if !region.closed {
                let message = "this region is switched off to the end of the file: no `translate_on` follows";
                let diagnostic = Diagnostic::new(Kind::Note, "translate_off", message, Some(region.at));
                self.diagnostics.push(diagnostic.with_help("close it with a comment `// synthesis translate_on`"));
            }
            self.regions.push(region);
        }
        id
    }
}

fn canonical(path: &Path) -> PathBuf {
    path.canonicalize().unwrap_or_else(|_| path.to_path_buf())
}

fn read_bytes(path: &Path) -> std::io::Result<Vec<u8>> {
    let metadata = std::fs::metadata(path)?;
    if !metadata.is_file() {
        return Err(std::io::Error::other("it is no regular file"));
    }
    if metadata.len() > MAX_FILE_BYTES {
        return Err(std::io::Error::other(format!("it is larger than {} MiB", MAX_FILE_BYTES >> 20)));
    }
    std::fs::read(path)
}

/// UTF-8 where it is valid, Latin-1 where it is not; a byte order mark is dropped.
fn decode(bytes: Vec<u8>) -> String {
    let text = match String::from_utf8(bytes) {
        Ok(text) => text,
        Err(error) => {
            let bytes = error.into_bytes();
            let mut text = String::with_capacity(bytes.len() + 16);
            for chunk in bytes.utf8_chunks() {
                text.push_str(chunk.valid());
                text.extend(chunk.invalid().iter().map(|&byte| byte as char));
            }
            text
        }
    };
    match text.strip_prefix('\u{feff}') {
        Some(rest) => rest.to_string(),
        None => text,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn latin_1_bytes_are_kept_as_characters() {
        assert_eq!(decode(b"// f\xfcr\nx \xc3\xa4".to_vec()), "// für\nx ä");
        assert_eq!(decode(b"\xef\xbb\xbfmodule".to_vec()), "module");
    }
}
