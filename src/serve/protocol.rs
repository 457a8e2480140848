//! The parts of the protocol (Language Server Protocol 3.17) that are read, and the way between its places and ours. Its
//! columns count units of UTF-16 from 0.

use std::path::{Component, Path, PathBuf};

use serde::Deserialize;
use serde_json::{Value, json};

use crate::source::{SourceFile, SourceSet, Span};

/// `DiagnosticSeverity`, and `MessageType` likewise.
#[derive(Clone, Copy)]
pub(super) enum Severity {
    Error = 1,
    Warning = 2,
    Information = 3,
}

#[derive(Deserialize)]
#[serde(rename_all = "camelCase")]
pub(super) struct InitializeParams {
    #[serde(default)]
    root_uri: Option<String>,
    #[serde(default)]
    workspace_folders: Option<Vec<WorkspaceFolder>>,
    #[serde(default)]
    capabilities: Value,
}

#[derive(Deserialize)]
struct WorkspaceFolder {
    uri: String,
}

impl InitializeParams {
    /// The folder that is open.
    pub(super) fn root(&self) -> Option<PathBuf> {
        let folders = self.workspace_folders.iter().flatten().map(|folder| &folder.uri);
        folders.chain(&self.root_uri).find_map(|uri| path(uri))
    }

    /// Whether the client fetches the edit of a code action when it is chosen.
    pub(super) fn resolves_edits(&self) -> bool {
        let known = &self.capabilities["textDocument"]["codeAction"]["resolveSupport"]["properties"];
        known.as_array().is_some_and(|known| known.iter().any(|property| property == "edit"))
    }
}

#[derive(Deserialize)]
#[serde(rename_all = "camelCase")]
pub(super) struct TextDocumentParams {
    pub(super) text_document: TextDocument,
    #[serde(default)]
    pub(super) content_changes: Vec<Change>,
}

#[derive(Deserialize)]
pub(super) struct TextDocument {
    pub(super) uri: String,
    #[serde(default)]
    pub(super) text: Option<String>,
}

#[derive(Deserialize)]
pub(super) struct Change {
    pub(super) text: String,
}

#[derive(Deserialize)]
#[serde(rename_all = "camelCase")]
pub(super) struct HoverParams {
    pub(super) text_document: TextDocument,
    pub(super) position: Position,
}

#[derive(Deserialize)]
#[serde(rename_all = "camelCase")]
pub(super) struct CodeActionParams {
    pub(super) text_document: TextDocument,
    pub(super) range: Range,
}

#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Deserialize)]
pub(super) struct Position {
    pub(super) line: u32,
    pub(super) character: u32,
}

#[derive(Clone, Copy, Deserialize)]
pub(super) struct Range {
    pub(super) start: Position,
    pub(super) end: Position,
}

impl Range {
    pub(super) fn of(sources: &SourceSet, span: Span) -> Self {
        let file = sources.file(span.file);
        Self { start: position(file, span.start), end: position(file, span.end.max(span.start)) }
    }

    /// Whether they touch.
    pub(super) fn meets(self, other: Range) -> bool {
        self.start <= other.end && other.start <= self.end
    }

    pub(super) fn json(self) -> Value {
        let place = |place: Position| json!({ "line": place.line, "character": place.character });
        json!({ "start": place(self.start), "end": place(self.end) })
    }
}

/// The place of a byte.
fn position(file: &SourceFile, offset: u32) -> Position {
    let line = file.line_column(offset).0;
    let start = file.line_range(line).start;
    let before = file.text.get(start..(offset as usize).min(file.text.len())).unwrap_or_default();
    Position { line: line as u32 - 1, character: before.encode_utf16().count() as u32 }
}

/// The path of a `file:` URI (RFC 8089), absolute.
pub(super) fn path(uri: &str) -> Option<PathBuf> {
    let rest = uri.strip_prefix("file://")?;
    let path = rest.strip_prefix("localhost").unwrap_or(rest);
    let mut bytes = Vec::with_capacity(path.len());
    let mut rest = path.bytes();
    while let Some(byte) = rest.next() {
        bytes.push(match byte {
            b'%' => {
                let mut digit = || char::from(rest.next()?).to_digit(16);
                (digit()? * 16 + digit()?) as u8
            }
            byte => byte,
        });
    }
    let path = PathBuf::from(String::from_utf8(bytes).ok()?);
    path.is_absolute().then(|| plain(&path))
}

/// The `file:` URI of a path that begins at `current` if it is relative.
pub(super) fn uri(current: &Path, path: &Path) -> String {
    let mut uri = "file://".to_string();
    for byte in absolute(current, path).to_string_lossy().bytes() {
        match byte {
            b'a'..=b'z' | b'A'..=b'Z' | b'0'..=b'9' | b'/' | b'-' | b'_' | b'.' | b'~' => uri.push(char::from(byte)),
            byte => uri += &format!("%{byte:02X}"),
        }
    }
    uri
}

pub(super) fn absolute(current: &Path, path: &Path) -> PathBuf {
    plain(&current.join(path))
}

/// Without `.` and `..`, which an editor's URI does not have.
fn plain(path: &Path) -> PathBuf {
    let mut plain = PathBuf::new();
    for part in path.components() {
        match part {
            Component::CurDir => {}
            Component::ParentDir => {
                plain.pop();
            }
            part => plain.push(part),
        }
    }
    plain
}

#[cfg(test)]
mod tests {
    use super::*;

    /// The examples of RFC 8089, appendix B, and a name that needs escaping.
    #[test]
    fn uris_and_paths() {
        assert_eq!(path("file:///path/to/file"), Some(PathBuf::from("/path/to/file")));
        assert_eq!(path("file://localhost/path/to/file"), Some(PathBuf::from("/path/to/file")));
        assert_eq!(path("http://host/path"), None);
        assert_eq!(path("file:///a%2"), None);
        let odd = Path::new("/a b/ü#%.v");
        assert_eq!(uri(Path::new("/"), odd), "file:///a%20b/%C3%BC%23%25.v");
        assert_eq!(path(&uri(Path::new("/"), odd)).as_deref(), Some(odd));
        assert_eq!(uri(Path::new("/work/x"), Path::new("../rtl/./a.v")), "file:///work/rtl/a.v");
    }

    #[test]
    fn columns_count_units_of_utf_16() {
        let mut sources = SourceSet::default();
        let file = sources.add("a.v", "x\n𝄞ä y");
        let at = sources.file(file).text.find('y').unwrap_or_default() as u32;
        let range = Range::of(&sources, Span { file, start: at, end: at + 1 });
        assert_eq!((range.start.line, range.start.character, range.end.character), (1, 4, 5));
    }
}
